//! Finding an interpreter that will do.

use std::ffi::OsString;
use std::process::Command;

use crate::child;
use crate::place;
use crate::problem::Problem;

/// Oldest version accepted; `requires-python` in `pyproject.toml` says the same.
const OLDEST: (u32, u32) = (3, 10);

/// Must run under any Python, 2.7 included, so that an old one can say what it is.
const PROBE: &str = "\
import sys
print(getattr(getattr(sys, 'implementation', None), 'name', 'python'))
print('.'.join(str(n) for n in sys.version_info[:3]))
print(getattr(sys, 'base_prefix', sys.prefix))
try:
    import venv, ensurepip
    print('venv')
except ImportError:
    print('bare')
";

/// What an interpreter says of itself.
#[derive(Debug, PartialEq)]
pub struct Interpreter {
    /// Version in three parts, such as `3.12.1`.
    pub version: String,
    /// Where the installation is, also when asked from within an environment made of it.
    pub base: String,
    implementation: String,
    makes_venvs: bool,
}

impl Interpreter {
    /// Asks the program; the error says why there is no answer.
    pub fn ask(program: &mut Command) -> Result<Self, String> {
        let output = child::output_of(program.args(["-c", PROBE]))
            .map_err(|_| "not found, or does not start".to_string())?;
        let text = String::from_utf8_lossy(&output.stdout);
        if !output.status.success() {
            let said = child::said(&output);
            return Err(format!("does not run: {}", said.lines().last().unwrap_or("it said nothing")));
        }
        Self::read(&text).ok_or_else(|| "is not a Python interpreter".to_string())
    }

    fn read(text: &str) -> Option<Self> {
        let mut lines = text.lines().map(str::trim);
        Some(Self {
            implementation: lines.next()?.to_string(),
            version: lines.next()?.to_string(),
            base: lines.next()?.to_string(),
            makes_venvs: lines.next()? == "venv",
        })
    }

    /// Why this interpreter will not do, or nothing.
    pub fn refusal(&self) -> Option<String> {
        let Self { version, implementation, .. } = self;
        let mut parts = version.split('.').map(|part| part.parse::<u32>().unwrap_or(0));
        let have = (parts.next().unwrap_or(0), parts.next().unwrap_or(0));
        if have < OLDEST {
            return Some(format!("it is Python {version}, needed is {}.{} or newer", OLDEST.0, OLDEST.1));
        }
        if implementation != "cpython" {
            return Some(format!("it is {implementation} {version}, needed is CPython"));
        }
        if !self.makes_venvs {
            return Some(format!(
                "it is Python {version} without the modules `venv` and `ensurepip`; \
                 on Debian and Ubuntu they come with: apt install python3-venv"
            ));
        }
        None
    }
}

/// A program that starts an interpreter, with the arguments it needs.
pub struct Found {
    program: OsString,
    leading: &'static [&'static str],
}

impl Found {
    /// Starts building a command line for this interpreter.
    pub fn command(&self) -> Command {
        let mut command = child::command(&self.program);
        command.args(self.leading);
        command
    }

    /// How a person would type it.
    pub fn name(&self) -> String {
        let mut name = self.program.display().to_string();
        for argument in self.leading {
            name.push(' ');
            name.push_str(argument);
        }
        name
    }
}

/// The interpreter named in `HUSHRAIL_PYTHON`, when there is one.
pub fn named_by_user() -> Option<Found> {
    place::named_interpreter().map(|program| Found { program, leading: &[] })
}

/// The first interpreter that will do.
pub fn find() -> Result<(Found, Interpreter), Problem> {
    let chosen = named_by_user();
    let chosen_by_user = chosen.is_some();
    let candidates = chosen.map_or_else(usual_names, |found| vec![found]);
    let mut tried = Vec::new();
    for found in candidates {
        match Interpreter::ask(&mut found.command()) {
            Ok(interpreter) => match interpreter.refusal() {
                None => return Ok((found, interpreter)),
                Some(why) => tried.push((found.name(), why)),
            },
            Err(why) => tried.push((found.name(), why)),
        }
    }
    Err(Problem::NoPython { tried, chosen_by_user })
}

fn usual_names() -> Vec<Found> {
    let names: [(&str, &[&str]); 3] = [("python3", &[]), ("python", &[]), ("py", &["-3"])];
    names.into_iter().map(|(program, leading)| Found { program: program.into(), leading }).collect()
}

#[cfg(test)]
mod tests {
    use super::Interpreter;

    fn interpreter(text: &str) -> Interpreter {
        Interpreter::read(text).expect("four lines")
    }

    #[test]
    fn new_enough_cpython_is_taken() {
        assert_eq!(interpreter("cpython\n3.10.0\n/usr\nvenv\n").refusal(), None);
        assert_eq!(interpreter("cpython\r\n3.13.0\r\nC:\\Python\r\nvenv\r\n").refusal(), None);
    }

    #[test]
    fn version_parts_compare_as_numbers() {
        let why = interpreter("cpython\n3.9.18\n/usr\nvenv\n").refusal().expect("3.9 is older than 3.10");
        assert!(why.contains("3.9.18"), "{why}");
    }

    #[test]
    fn other_implementations_and_bare_installations_are_refused() {
        let why = interpreter("pypy\n3.11.1\n/usr\nvenv\n").refusal().expect("no binary for it");
        assert!(why.contains("needed is CPython"), "{why}");
        let why = interpreter("cpython\n3.11.2\n/usr\nbare\n").refusal().expect("cannot make environments");
        assert!(why.contains("apt install python3-venv"), "{why}");
    }

    #[test]
    fn text_of_another_program_is_not_an_interpreter() {
        assert_eq!(Interpreter::read("hello\n"), None);
    }
}
