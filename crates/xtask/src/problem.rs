//! What can stop a task, each as one calm block: what happened, then what to do.

use std::fmt;
use std::io;
use std::path::PathBuf;

/// A reason why a task could not go on.
#[derive(Debug)]
pub enum Problem {
    /// No such task.
    UnknownTask(String),
    /// A program did not start.
    NoStart { program: String, source: io::Error },
    /// No interpreter among the tried ones will do; each with the reason.
    NoPython { tried: Vec<(String, String)>, chosen_by_user: bool },
    /// `python -m venv` failed.
    NoVenv { dir: PathBuf, python: String, said: String },
    /// A file of ours could not be read or written.
    File { path: PathBuf, source: io::Error },
    /// The dependencies in `pyproject.toml` could not be read.
    NoRequirements { said: String },
    /// pip failed; its own words stand above.
    Pip { code: u8 },
    /// A part of the Rust installation is missing.
    NoComponent(&'static str),
    /// A check is not content; its own words stand above.
    Check { line: String, code: u8 },
    /// maturin failed; its own words stand above.
    Extension { code: u8 },
}

impl fmt::Display for Problem {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::UnknownTask(task) => {
                write!(f, "there is no task `{task}`; `cargo xtask help` lists what there is")
            }
            Self::NoStart { program, source } => {
                write!(f, "`{program}` did not start: {source}\nIs it installed and on the PATH?")
            }
            Self::NoPython { tried, chosen_by_user } => no_python(f, tried, *chosen_by_user),
            Self::NoVenv { dir, python, said } => write!(
                f,
                "set-up stopped: `{python} -m venv` could not make {}; it said\n{}\n\
                 Is the disk full, or the folder somebody else's? Remove it and run the task again, or name another \
                 interpreter in HUSHRAIL_PYTHON.",
                dir.display(),
                indented(said)
            ),
            Self::File { path, source } => write!(f, "{}: {source}", path.display()),
            Self::NoRequirements { said } => {
                write!(
                    f,
                    "set-up stopped: pyproject.toml: dependencies not understood; Python said\n{}",
                    indented(said)
                )
            }
            Self::Pip { code } => write!(
                f,
                "set-up stopped: pip could not install the development packages into target/venv (exit status {code}).\n\
                 Its own words stand above. What usually helps:\n\
                 - no connection: this step needs the network once, later runs do not\n\
                 - behind a proxy or a mirror: set HTTPS_PROXY, or PIP_INDEX_URL and PIP_CERT\n\
                 - no wheel for this interpreter: name another CPython, 3.10 or newer, in HUSHRAIL_PYTHON\n\
                 - disk full: the environment takes about 0.7 GB\n\
                 Then run the task again; what was made so far is kept."
            ),
            Self::NoComponent(name) => {
                write!(f, "{name} is not installed; it comes with: rustup component add {name}")
            }
            Self::Check { line, code } => write!(f, "exit status {code} from: {line}"),
            Self::Extension { code } => write!(
                f,
                "the extension module was not built (maturin's exit status {code}); the reason stands above.\n\
                 A compiler error there is ours to mend; a missing linker means: install gcc or clang \
                 (Debian, Ubuntu: apt install build-essential)."
            ),
        }
    }
}

fn no_python(f: &mut fmt::Formatter<'_>, tried: &[(String, String)], chosen_by_user: bool) -> fmt::Result {
    if chosen_by_user {
        write!(f, "set-up stopped: the interpreter named in HUSHRAIL_PYTHON will not do:")?;
    } else {
        write!(f, "set-up stopped: no CPython 3.10 or newer that can make virtual environments. Tried:")?;
    }
    for (name, why) in tried {
        write!(f, "\n- {name}: {why}")?;
    }
    write!(
        f,
        "\nInstall one and run the task again:\n\
         - Debian, Ubuntu: apt install python3 python3-venv\n\
         - Fedora: dnf install python3;  macOS: brew install python\n\
         - Windows: winget install Python.Python.3.13\n\
         or name one that is there already: HUSHRAIL_PYTHON=/path/to/python3 cargo xtask …"
    )
}

fn indented(text: &str) -> String {
    let lines: Vec<String> = text.trim().lines().map(|line| format!("    {line}")).collect();
    if lines.is_empty() { "    (nothing)".into() } else { lines.join("\n") }
}

#[cfg(test)]
mod tests {
    use super::Problem;

    #[test]
    fn missing_python_says_what_was_tried_and_what_to_install() {
        let tried = vec![("python3".to_string(), "it is Python 3.8.18".to_string())];
        let text = Problem::NoPython { tried, chosen_by_user: false }.to_string();
        assert!(text.contains("- python3: it is Python 3.8.18"), "{text}");
        assert!(text.contains("apt install python3 python3-venv"), "{text}");
    }

    #[test]
    fn silent_failure_of_venv_still_reads_well() {
        let text =
            Problem::NoVenv { dir: "target/venv".into(), python: "python3".into(), said: String::new() }
                .to_string();
        assert!(text.contains("    (nothing)"), "{text}");
    }
}
