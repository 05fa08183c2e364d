//! Core errors to Python exceptions, by kind.

use hushrail::batch::characterise::TableError;
use hushrail::physics::TemperatureOutOfRange;
use hushrail::read::ReadError;
use pyo3::PyErr;
use pyo3::exceptions::PyFileNotFoundError;

mod python {
    pyo3::import_exception!(hushrail.errors, ReadError);
    pyo3::import_exception!(hushrail.errors, RangeError);
    pyo3::import_exception!(hushrail.errors, SolveError);
}

/// A reader's error, with place where it has one.
pub fn read(e: &ReadError) -> PyErr {
    let text = e.to_string();
    let place = match e {
        ReadError::Io { path, missing: true, .. } => {
            return PyFileNotFoundError::new_err(format!("{path}: no such file"));
        }
        ReadError::NotText { at, .. }
        | ReadError::Syntax { at, .. }
        | ReadError::Unknown { at, .. }
        | ReadError::Range { at, .. } => Some((at.path.to_string(), at.line, at.column)),
        ReadError::Io { path, .. } | ReadError::Gzip { path, .. } | ReadError::Nothing { path, .. } => {
            Some((path.clone(), 0, 0))
        }
        _ => None,
    };
    let (path, line, column) = place.unwrap_or_default();
    python::ReadError::new_err((text, path, line, column))
}

/// A value out of range.
pub fn range(text: String) -> PyErr {
    python::RangeError::new_err(text)
}

/// A question without answer.
pub fn solve(text: String) -> PyErr {
    python::SolveError::new_err(text)
}

/// A temperature out of range.
pub fn temperature(e: TemperatureOutOfRange) -> PyErr {
    range(e.to_string())
}

/// A table that could not be made.
pub fn table(e: &TableError) -> PyErr {
    match e {
        TableError::Read(e) => read(e),
        _ => python::SolveError::new_err(e.to_string()),
    }
}
