//! Liberty libraries: JSON of the core's own form, and Liberty text.

use std::path::Path;

use hushrail::batch::characterise::LeakageTable;
use hushrail::corner::Corner;
use hushrail::read::liberty::{Library, write_liberty};
use hushrail::read::{LibertyOptions, Source, read_liberty as core_read};
use pyo3::prelude::*;

use crate::error;
use crate::run::run;
use crate::study::text;

/// Reads a Liberty file; JSON of the library.
#[pyfunction]
#[pyo3(signature = (path, *, leakage_unit_w=None, vdd_v=None, temp_c=None))]
pub fn read_liberty(
    py: Python<'_>,
    path: &str,
    leakage_unit_w: Option<f64>,
    vdd_v: Option<f64>,
    temp_c: Option<f64>,
) -> PyResult<String> {
    let options = LibertyOptions { leakage_unit_w, voltage_v: vdd_v, temp_c };
    let read = run(py, None, |_| Source::open(Path::new(path)).and_then(|s| core_read(&s, &options)))?;
    text(&read.map_err(|e| error::read(&e))?)
}

/// Liberty text of a library given as JSON.
#[pyfunction]
pub fn liberty_text(py: Python<'_>, library: &str) -> PyResult<String> {
    let made =
        run(py, None, |_| serde_json::from_str::<Library>(library).map(|library| write_liberty(&library)))?;
    made.map_err(|e| error::range(format!("library: {e}")))
}

/// The library of one corner of a leakage table; JSON in, JSON out.
#[pyfunction]
pub fn liberty_of_table(py: Python<'_>, table: &str, corner: &str, name: &str) -> PyResult<String> {
    let made = run(py, None, |_| {
        let table: LeakageTable = serde_json::from_str(table)?;
        let corner: Corner = serde_json::from_str(corner)?;
        Ok::<_, serde_json::Error>(table.library(name, &corner))
    })?;
    text(&made.map_err(|e| error::range(format!("leakage table: {e}")))?)
}
