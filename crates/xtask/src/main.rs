//! The tasks of this workspace: `cargo xtask help` lists them.
//!
//! Nothing but the standard library. What a task needs beyond cargo and a Python interpreter it sets up itself,
//! under `target/`.
#![expect(clippy::print_stdout, reason = "a command-line tool prints")]

mod accuracy;
mod child;
mod extension;
mod gate;
mod place;
mod problem;
mod python;
mod setup;
mod stamp;
mod steps;
mod venv;

use std::env;
use std::ffi::OsString;
use std::process::ExitCode;

use place::Place;
use problem::Problem;

const HELP: &str = "\
cargo xtask demo [ARGS]            build the Python package and show what it does
cargo xtask test                   every check a change must pass
cargo xtask bench [ARGS]           the benchmarks, and device evaluations against NumPy; with ARGS only `cargo bench ARGS`
cargo xtask accuracy [DIR] [ARGS]  our currents against published ones; DIR is ../shared/data/sky130 when left out,
                                   ARGS (such as --json FILE) go to the example `accuracy`
cargo xtask help                   this text

demo and test need CPython 3.10 or newer. They make a virtual environment in target/venv, once, with the network;
later runs work without. HUSHRAIL_PYTHON names the interpreter when the one found first is not the one you want.

Exit status: 0 done, 1 a check or a task failed, 2 could not run.";

fn main() -> ExitCode {
    let mut args = env::args_os().skip(1);
    let task = args.next().unwrap_or_else(|| "help".into());
    let rest: Vec<OsString> = args.collect();
    match run(&task, &rest) {
        Ok(status) => ExitCode::from(status),
        Err(problem) => {
            eprintln!("{problem}");
            ExitCode::from(2)
        }
    }
}

/// Runs one task; the value is its exit status.
fn run(task: &OsString, args: &[OsString]) -> Result<u8, Problem> {
    let place = Place::of_this_workspace();
    match task.to_str() {
        Some("demo") => demo(&place, args),
        Some("test") if args.is_empty() => Ok(gate::run(&place)),
        Some("bench") => bench(&place, args),
        Some("accuracy") => accuracy::run(&place, args),
        Some("help" | "--help" | "-h") => {
            println!("{HELP}");
            Ok(0)
        }
        Some("test") => Err(Problem::UnknownTask(format!("test {}", args[0].display()))),
        _ => Err(Problem::UnknownTask(task.display().to_string())),
    }
}

fn demo(place: &Place, args: &[OsString]) -> Result<u8, Problem> {
    let venv = setup::set_up(place)?;
    extension::build(place, &venv)?;
    child::status_of(venv.module("hushrail.demo").args(args))
}

/// The benchmarks, and unless something was asked of them, a comparison with NumPy in the same run.
fn bench(place: &Place, args: &[OsString]) -> Result<u8, Problem> {
    let code = child::status_of(child::cargo(place).args(["bench", "--package", "hushrail"]).args(args))?;
    if code != 0 || !args.is_empty() {
        return Ok(code);
    }
    let venv = setup::set_up(place)?;
    extension::build(place, &venv)?;
    let mut python = venv.module("baselines.speed");
    python
        .arg(env::var_os("CARGO").unwrap_or_else(|| "cargo".into()))
        .current_dir(place.root().join("tests"));
    child::status_of(&mut python)
}
