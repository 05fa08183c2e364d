//! A row of named steps: each is announced, timed and remembered, and a failed one does not stop the others.

use std::fmt::{self, Write as _};
use std::time::Instant;

use crate::problem::Problem;

/// How a step ended.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Outcome {
    /// Done and content.
    Passed,
    /// Done and not content, or could not be done.
    Failed,
    /// Left out with a reason that is nobody's fault.
    Skipped,
    /// Left out because an earlier step, which it needs, did not pass.
    NotRun,
}

impl fmt::Display for Outcome {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(match self {
            Self::Passed => "ok",
            Self::Failed => "FAILED",
            Self::Skipped => "skipped",
            Self::NotRun => "not run",
        })
    }
}

struct Done {
    name: &'static str,
    outcome: Outcome,
    seconds: f64,
}

/// The steps so far.
#[derive(Default)]
pub struct Steps {
    done: Vec<Done>,
}

impl Steps {
    /// Runs one step; the work's value is kept for later steps when it passed.
    pub fn run<T>(&mut self, name: &'static str, work: impl FnOnce() -> Result<T, Problem>) -> Option<T> {
        println!("\n== {name}");
        let start = Instant::now();
        let result = work();
        let seconds = start.elapsed().as_secs_f64();
        let (outcome, value) = match result {
            Ok(value) => (Outcome::Passed, Some(value)),
            Err(problem) => {
                println!("{problem}");
                (Outcome::Failed, None)
            }
        };
        println!("== {name}: {outcome}, {seconds:.1} s");
        self.done.push(Done { name, outcome, seconds });
        value
    }

    /// Leaves a step out, with the reason.
    pub fn leave_out(&mut self, name: &'static str, outcome: Outcome, why: &str) {
        println!("\n== {name}: {outcome}: {why}");
        self.done.push(Done { name, outcome, seconds: 0.0 });
    }

    /// Whether nothing failed.
    pub fn all_passed(&self) -> bool {
        self.count(Outcome::Failed) == 0
    }

    fn count(&self, outcome: Outcome) -> usize {
        self.done.iter().filter(|done| done.outcome == outcome).count()
    }

    /// The table at the end, and one line of counts.
    pub fn summary(&self) -> String {
        let width = self.done.iter().map(|done| done.name.len()).max().unwrap_or(0).max("step".len());
        let mut text = format!("{:width$}  {:8}  {:>7}\n", "step", "result", "seconds");
        for Done { name, outcome, seconds } in &self.done {
            // writing to a string cannot fail
            let _ = writeln!(text, "{name:width$}  {outcome:8}  {seconds:7.1}");
        }
        let left_out = self.count(Outcome::Skipped) + self.count(Outcome::NotRun);
        let (passed, failed) = (self.count(Outcome::Passed), self.count(Outcome::Failed));
        let _ = write!(text, "\nsteps: {passed} passed, {failed} failed, {left_out} skipped");
        text
    }
}

#[cfg(test)]
mod tests {
    use super::{Outcome, Steps};
    use crate::problem::Problem;

    #[test]
    fn failure_is_remembered_and_later_steps_still_run() {
        let mut steps = Steps::default();
        let none: Option<()> = steps.run("first", || Err(Problem::Pip { code: 1 }));
        assert_eq!(none, None);
        assert_eq!(steps.run("second", || Ok(5)), Some(5));
        steps.leave_out("third", Outcome::NotRun, "needs first");
        assert!(!steps.all_passed());
        let text = steps.summary();
        assert!(text.contains("first   FAILED"), "{text}");
        assert!(text.contains("third   not run"), "{text}");
        assert!(text.ends_with("steps: 1 passed, 1 failed, 1 skipped"), "{text}");
    }

    #[test]
    fn skipping_is_no_failure() {
        let mut steps = Steps::default();
        steps.leave_out("optional", Outcome::Skipped, "a tool is not installed");
        assert!(steps.all_passed());
    }
}
