//! `cargo xtask test`: every check a change must pass, cheap to dear.

use std::process::Command;

use crate::child;
use crate::extension;
use crate::place::Place;
use crate::problem::Problem;
use crate::setup;
use crate::steps::{Outcome, Steps};
use crate::venv::Venv;

/// Steps that need the environment, and no more than that.
const SOURCE_CHECKS: [(&str, &[&str]); 3] = [
    ("python format", &["ruff", "format", "--check", "python", "tests"]),
    ("python lint", &["ruff", "check", "python", "tests"]),
    ("python types", &["mypy", "--strict", "python", "tests"]),
];

/// Steps that need the built package as well.
const PACKAGE_CHECKS: [(&str, &[&str]); 3] = [
    ("stubs", &["mypy.stubtest", "--mypy-config-file", "pyproject.toml", "hushrail._core"]),
    ("python tests", &["pytest"]),
    ("demo", &["hushrail.demo"]),
];

/// Differences between stub and module that stubtest shall accept, should there be any.
const STUB_EXCEPTIONS: &str = "tests/stubtest-allow.txt";

/// Runs all steps; the value is the exit status.
pub fn run(place: &Place) -> u8 {
    let mut steps = Steps::default();
    rust_checks(place, &mut steps);
    python_checks(place, &mut steps);
    println!("\n{}", steps.summary());
    u8::from(!steps.all_passed())
}

fn rust_checks(place: &Place, steps: &mut Steps) {
    let cargo = |args: &[&str]| {
        let mut cargo = child::cargo(place);
        cargo.args(args);
        cargo
    };
    steps.run("format", || {
        component(&mut cargo(&["fmt", "--version"]), "rustfmt")?;
        passes(&mut cargo(&["fmt", "--all", "--check"]))
    });
    steps.run("clippy", || {
        component(&mut cargo(&["clippy", "--version"]), "clippy")?;
        let whole =
            ["clippy", "--workspace", "--all-targets", "--locked", "--keep-going", "--", "-D", "warnings"];
        passes(&mut cargo(&whole))
    });
    steps.run("rust tests", || passes(&mut cargo(&["test", "--workspace", "--locked", "--no-fail-fast"])));
    steps.run("rust docs", || {
        passes(cargo(&["doc", "--no-deps", "--workspace", "--locked"]).env("RUSTDOCFLAGS", "-D warnings"))
    });
    if !child::succeeds(&mut cargo(&["deny", "--version"])) {
        steps.leave_out("dependencies", Outcome::Skipped, "cargo-deny is not installed");
    } else if !place.root().join(".cargo").join("deny.toml").is_file() {
        steps.leave_out("dependencies", Outcome::Skipped, "there is no .cargo/deny.toml to judge by");
    } else {
        let judged = ["deny", "--offline", "check", "bans", "licenses", "sources"];
        steps.run("dependencies", || passes(&mut cargo(&judged)));
    }
}

fn python_checks(place: &Place, steps: &mut Steps) {
    let venv = steps.run("set-up", || setup::set_up(place));
    let Some(venv) = venv else {
        let rest = SOURCE_CHECKS.iter().chain(&PACKAGE_CHECKS).map(|(name, _)| *name);
        for name in ["extension"].into_iter().chain(rest) {
            steps.leave_out(name, Outcome::NotRun, "needs set-up");
        }
        return;
    };
    let built = steps.run("extension", || extension::build(place, &venv));
    for (name, words) in SOURCE_CHECKS {
        steps.run(name, || passes(&mut tool(&venv, words)));
    }
    for (name, words) in PACKAGE_CHECKS {
        if built.is_none() {
            steps.leave_out(name, Outcome::NotRun, "needs extension");
            continue;
        }
        let mut command = tool(&venv, words);
        if name == "stubs" && place.root().join(STUB_EXCEPTIONS).is_file() {
            command.args(["--allowlist", STUB_EXCEPTIONS]);
        }
        steps.run(name, || passes(command.env("MPLBACKEND", "Agg")));
    }
}

fn tool(venv: &Venv, words: &[&str]) -> Command {
    let mut command = venv.module(words[0]);
    command.args(&words[1..]);
    command
}

/// A part of the Rust installation that minimal ones lack.
fn component(ask: &mut Command, name: &'static str) -> Result<(), Problem> {
    if child::succeeds(ask) { Ok(()) } else { Err(Problem::NoComponent(name)) }
}

fn passes(command: &mut Command) -> Result<(), Problem> {
    let words: Vec<String> = command.get_args().map(|word| word.display().to_string()).collect();
    let program = command.get_program().display().to_string();
    match child::status_of(command)? {
        0 => Ok(()),
        code => Err(Problem::Check { line: format!("{program} {}", words.join(" ")), code }),
    }
}
