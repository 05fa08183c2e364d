//! The Python side's tools, in an environment of our own: a system Python that refuses `pip install` is left alone.

use std::fs;
use std::io::IsTerminal;

use crate::child;
use crate::place::Place;
use crate::problem::Problem;
use crate::python::{self, Interpreter};
use crate::stamp::{Stamp, fnv1a};
use crate::venv::Venv;

/// Prints what `pyproject.toml` asks for, extras included, one requirement a line. Reads with the standard library, or
/// under Python 3.10 with the reader that pip carries.
const REQUIREMENTS: &str = "\
import sys
try:
    import tomllib
except ImportError:
    from pip._vendor import tomli as tomllib
with open(sys.argv[1], 'rb') as file:
    project = tomllib.load(file)['project']
wanted = list(project['dependencies'])
for extra in project['optional-dependencies'].values():
    wanted += [each for each in extra if not each.startswith(project['name'] + '[')]
print('\\n'.join(dict.fromkeys(wanted)))
";

/// Makes the environment unless it is there and right, and installs what `pyproject.toml` asks for unless that has
/// been done. Without anything to do it needs no network.
pub fn set_up(place: &Place) -> Result<Venv, Problem> {
    let venv = Venv::of(place);
    let mut stamp = match Stamp::read(venv.dir()) {
        Some(stamp) if is_usable(&venv, &stamp) => stamp,
        _ => make(&venv)?,
    };
    let path = place.pyproject();
    let wanted = fs::read(&path).map_err(|source| Problem::File { path, source })?;
    let wanted = fnv1a(&wanted);
    if stamp.installed != Some(wanted) {
        stamp.installed = None;
        stamp.write(venv.dir())?;
        install(place, &venv)?;
        stamp.installed = Some(wanted);
        stamp.write(venv.dir())?;
    }
    Ok(venv)
}

/// Made here, by an interpreter that still answers and has its pip, and by the one the user names if any is named.
fn is_usable(venv: &Venv, stamp: &Stamp) -> bool {
    let Ok(ours) = Interpreter::ask(&mut venv.python()) else { return false };
    let as_named = python::named_by_user().is_none_or(|named| {
        Interpreter::ask(&mut named.command())
            .is_ok_and(|named| named.base == ours.base && named.version == ours.version)
    });
    as_named
        && stamp.made_at == made_at(venv)
        && ours.refusal().is_none()
        && child::succeeds(venv.module("pip").arg("--version"))
}

fn made_at(venv: &Venv) -> String {
    venv.dir().display().to_string()
}

fn make(venv: &Venv) -> Result<Stamp, Problem> {
    let (found, interpreter) = python::find()?;
    println!("making target/venv with {} (Python {})", found.name(), interpreter.version);
    let output = child::output_of(found.command().args(["-m", "venv", "--clear"]).arg(venv.dir()))?;
    if !output.status.success() {
        let (dir, said) = (venv.dir().to_path_buf(), child::said(&output));
        return Err(Problem::NoVenv { dir, python: found.name(), said });
    }
    let stamp = Stamp { made_at: made_at(venv), installed: None };
    stamp.write(venv.dir())?;
    Ok(stamp)
}

fn install(place: &Place, venv: &Venv) -> Result<(), Problem> {
    let output = child::output_of(venv.python().args(["-c", REQUIREMENTS]).arg(place.pyproject()))?;
    if !output.status.success() {
        return Err(Problem::NoRequirements { said: child::said(&output) });
    }
    let text = String::from_utf8_lossy(&output.stdout);
    let wanted: Vec<&str> = text.lines().map(str::trim).filter(|line| !line.is_empty()).collect();
    println!(
        "installing {} development packages into target/venv (once; what is missing comes over the network)",
        wanted.len()
    );
    let mut pip = venv.module("pip");
    pip.args(["install", "--disable-pip-version-check", "--no-input"]);
    if !std::io::stdout().is_terminal() {
        pip.arg("--quiet");
    }
    match child::status_of(pip.args(wanted))? {
        0 => Ok(()),
        code => Err(Problem::Pip { code }),
    }
}
