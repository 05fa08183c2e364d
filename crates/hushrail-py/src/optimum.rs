//! Optima and choices: requests and answers cross the border as JSON text in the core's own form.

use std::path::PathBuf;

use hushrail::batch::optimum::{
    OptimumFailure, choice_of_study, choices_of_study, optima_of_study, optimum_of_study,
};
use hushrail::circuit::newton::SolveOptions;
use hushrail::optimum::OptimumError;
use pyo3::prelude::*;
use serde::Serialize;

use crate::error;
use crate::run::run;
use crate::study::text;

fn raised(e: &OptimumFailure) -> PyErr {
    match e {
        OptimumFailure::Read(e) => error::read(e),
        OptimumFailure::Request(words) => error::range(words.clone()),
        OptimumFailure::Optimum(
            OptimumError::Range { .. } | OptimumError::NoPart { .. } | OptimumError::Scheme(_),
        ) => error::range(e.to_string()),
        _ => error::solve(e.to_string()),
    }
}

/// The optimum of a knob of a study's scheme; JSON in, JSON out.
#[pyfunction]
#[pyo3(signature = (path, spec, *, progress=None))]
pub fn optimum(py: Python<'_>, path: PathBuf, spec: &str, progress: Option<Py<PyAny>>) -> PyResult<String> {
    let spec = serde_json::from_str(spec).map_err(|e| error::range(format!("optimum: {e}")))?;
    let found = run(py, progress.as_ref(), |p| optimum_of_study(&path, &spec, &SolveOptions::default(), p))?;
    text(&found.map_err(|e| raised(&e))?)
}

/// A choice among the settings of a study's scheme; JSON in, JSON out.
#[pyfunction]
#[pyo3(signature = (path, spec, *, progress=None))]
pub fn choose(py: Python<'_>, path: PathBuf, spec: &str, progress: Option<Py<PyAny>>) -> PyResult<String> {
    let spec = serde_json::from_str(spec).map_err(|e| error::range(format!("choose: {e}")))?;
    let found = run(py, progress.as_ref(), |p| choice_of_study(&path, &spec, &SolveOptions::default(), p))?;
    text(&found.map_err(|e| raised(&e))?)
}

#[derive(Serialize)]
struct Answers<T> {
    answers: Vec<T>,
}

/// Every optimum that the tables of a study ask for; JSON.
#[pyfunction]
#[pyo3(signature = (path, *, progress=None))]
pub fn optima_asked(py: Python<'_>, path: PathBuf, progress: Option<Py<PyAny>>) -> PyResult<String> {
    let found = run(py, progress.as_ref(), |p| optima_of_study(&path, &SolveOptions::default(), p))?;
    text(&Answers { answers: found.map_err(|e| raised(&e))? })
}

/// Every choice that the tables of a study ask for; JSON.
#[pyfunction]
#[pyo3(signature = (path, *, progress=None))]
pub fn choices_asked(py: Python<'_>, path: PathBuf, progress: Option<Py<PyAny>>) -> PyResult<String> {
    let found = run(py, progress.as_ref(), |p| choices_of_study(&path, &SolveOptions::default(), p))?;
    text(&Answers { answers: found.map_err(|e| raised(&e))? })
}
