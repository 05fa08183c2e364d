//! Our currents against published ones, by the example `accuracy` of the core crate.

use std::ffi::OsString;
use std::path::{Path, PathBuf, absolute};

use crate::child;
use crate::place::Place;
use crate::problem::Problem;

/// Runs the comparison, or says what is missing for it (status 2).
pub fn run(place: &Place, args: &[OsString]) -> Result<u8, Problem> {
    let (dir, rest) = split(args);
    let dir = dir.map_or_else(|| place.open_data(), PathBuf::from);
    if !dir.is_dir() {
        println!("{}", skipped(&dir));
        return Ok(2);
    }
    let dir = absolute(&dir).map_err(|source| Problem::File { path: dir.clone(), source })?;
    let mut cargo = child::cargo(place);
    // paths among the arguments mean what they mean where the user stands
    if let Ok(here) = std::env::current_dir() {
        cargo.current_dir(here);
    }
    cargo.args(["run", "--release", "--package", "hushrail", "--example", "accuracy", "--manifest-path"]);
    child::status_of(cargo.arg(place.root().join("Cargo.toml")).arg("--").arg(dir).args(rest))
}

/// The folder, when the first argument is one, and what goes to the example.
fn split(args: &[OsString]) -> (Option<&OsString>, &[OsString]) {
    match args {
        [first, rest @ ..] if !first.as_encoded_bytes().starts_with(b"-") => (Some(first), rest),
        _ => (None, args),
    }
}

fn skipped(dir: &Path) -> String {
    format!(
        "skipped: no folder {}\n\
         Expected there is the open data to compare with: cards/, netlists/, cells.csv, corners.csv,\n\
         leakage_by_state.csv and leakage_suspects.csv. Name another folder: cargo xtask accuracy DIR",
        dir.display()
    )
}

#[cfg(test)]
mod tests {
    use super::split;
    use std::ffi::OsString;

    fn args(words: &[&str]) -> Vec<OsString> {
        words.iter().map(OsString::from).collect()
    }

    #[test]
    fn folder_comes_first_or_not_at_all() {
        let given = args(&["data", "--json", "out.json"]);
        assert_eq!(split(&given), (Some(&given[0]), &given[1..]));
        let given = args(&["--json", "out.json"]);
        assert_eq!(split(&given), (None, &given[..]));
        assert_eq!(split(&[]), (None, &[][..]));
    }
}
