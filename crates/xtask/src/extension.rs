//! The extension module, built in release and put where Python finds it.

use crate::child;
use crate::place::Place;
use crate::problem::Problem;
use crate::venv::Venv;

/// Builds `hushrail._core` and installs the package so that edits under `python/` count at once.
pub fn build(place: &Place, venv: &Venv) -> Result<(), Problem> {
    let mut maturin = venv.module("maturin");
    maturin.args(["develop", "--release", "--locked"]).current_dir(place.root());
    // maturin has pip look at every dependency once more and say so
    maturin.env("PIP_QUIET", "1");
    match child::status_of(&mut maturin)? {
        0 => Ok(()),
        code => Err(Problem::Extension { code }),
    }
}
