//! Child processes, started without what an outer Python environment left behind.

use std::env;
use std::ffi::OsStr;
use std::process::{Command, Output, Stdio};

use crate::place::{self, Place};
use crate::problem::Problem;

/// Variables that would make Python, pip or maturin look outside our environment.
const OUTSIDE: [&str; 11] = [
    "CONDA_DEFAULT_ENV",
    "CONDA_PREFIX",
    "CONDA_PYTHON_EXE",
    "PIP_PREFIX",
    "PIP_ROOT",
    "PIP_TARGET",
    "PYTHONHOME",
    "PYTHONPATH",
    "PYTHONSTARTUP",
    "VIRTUAL_ENV",
    "VIRTUAL_ENV_PROMPT",
];

/// A command without the outer Python environment.
pub fn command(program: impl AsRef<OsStr>) -> Command {
    let mut command = Command::new(program);
    for name in OUTSIDE {
        command.env_remove(name);
    }
    // over a `user = true` in a pip settings file; pip refuses that inside an environment
    command.env("PIP_USER", "0");
    command
}

/// The cargo that runs this task, at the root of the workspace.
pub fn cargo(place: &Place) -> Command {
    let mut cargo = command(env::var_os("CARGO").unwrap_or_else(|| "cargo".into()));
    cargo.current_dir(place.root());
    if let Some(python) = place::named_interpreter() {
        cargo.env("PYO3_PYTHON", python);
    }
    cargo
}

/// Runs with our own streams; 0 is success, and a death by signal counts as 1.
pub fn status_of(command: &mut Command) -> Result<u8, Problem> {
    let status = command.status().map_err(|source| no_start(command, source))?;
    if status.success() {
        return Ok(0);
    }
    Ok(status.code().and_then(|code| u8::try_from(code).ok()).filter(|code| *code != 0).unwrap_or(1))
}

/// Runs in silence and keeps what was said.
pub fn output_of(command: &mut Command) -> Result<Output, Problem> {
    command.stdin(Stdio::null()).output().map_err(|source| no_start(command, source))
}

/// Whether the program starts and is content; nothing is shown.
pub fn succeeds(command: &mut Command) -> bool {
    output_of(command).is_ok_and(|output| output.status.success())
}

/// Both streams of a silent run, as text.
pub fn said(output: &Output) -> String {
    let both =
        [&output.stdout, &output.stderr].map(|bytes| String::from_utf8_lossy(bytes).trim().to_string());
    both.join("\n").trim().to_string()
}

fn no_start(command: &Command, source: std::io::Error) -> Problem {
    Problem::NoStart { program: command.get_program().display().to_string(), source }
}

#[cfg(test)]
mod tests {
    use super::{cargo, command, status_of};
    use std::process::Stdio;

    use crate::place::Place;
    use crate::problem::Problem;

    #[test]
    fn outer_environment_does_not_reach_children() {
        let made = command("python3");
        let removed: Vec<_> =
            made.get_envs().filter(|(_, value)| value.is_none()).map(|(name, _)| name).collect();
        for name in ["VIRTUAL_ENV", "PYTHONPATH", "CONDA_PREFIX"] {
            assert!(removed.iter().any(|have| *have == name), "{name} would leak");
        }
    }

    #[test]
    fn failure_keeps_its_status() {
        let mut cargo = cargo(&Place::of_this_workspace());
        cargo.args(["--quiet", "no-such-command-of-cargo"]).stderr(Stdio::null());
        let status = status_of(&mut cargo).expect("cargo starts");
        assert_eq!(status, 101, "cargo's own status");
    }

    #[test]
    fn missing_program_is_a_problem_not_a_panic() {
        let problem = status_of(&mut command("no-such-program-here")).expect_err("cannot start");
        assert!(matches!(problem, Problem::NoStart { .. }), "{problem:?}");
    }
}
