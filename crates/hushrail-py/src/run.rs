//! The one door for long work: the interpreter is let go, progress and Ctrl-C are looked after on the calling thread.

use std::ops::ControlFlow;

use pyo3::prelude::*;

/// Runs `work` without the interpreter lock. `progress`, when given, is called with points done and points in all; an
/// exception it raises, or Ctrl-C, stops the work and is raised here.
pub fn run<T: Send>(
    py: Python<'_>,
    progress: Option<&Py<PyAny>>,
    work: impl FnOnce(&mut dyn FnMut(usize, usize) -> ControlFlow<()>) -> T + Send,
) -> PyResult<T> {
    let mut raised = None;
    let out = py.detach(|| {
        work(&mut |done, total| {
            if raised.is_some() {
                return ControlFlow::Break(());
            }
            let ok = Python::attach(|py| {
                py.check_signals()?;
                if let Some(f) = progress {
                    f.call1(py, (done, total))?;
                }
                Ok::<(), PyErr>(())
            });
            match ok {
                Ok(()) => ControlFlow::Continue(()),
                Err(e) => {
                    raised = Some(e);
                    ControlFlow::Break(())
                }
            }
        })
    });
    match raised {
        Some(e) => Err(e),
        None => Ok(out),
    }
}
