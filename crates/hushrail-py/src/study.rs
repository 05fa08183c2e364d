//! Studies: everything crosses the border as JSON text in the core's own form.

use std::path::{Path, PathBuf};

use hushrail::batch::characterise::{TableRequest, table_of_study};
use hushrail::batch::compare::{CompareRequest, compare_study};
use hushrail::batch::parked::{park_study, states_of_study};
use hushrail::batch::sensitivity::{SensitivityRequest, sensitivities_of_study};
use hushrail::batch::study::read_study;
use hushrail::batch::transition::{TransitionRequest, transitions_of_study};
use hushrail::batch::{estimate as core_estimate, load_study};
use hushrail::check::suspects::SuspectRules;
use hushrail::circuit::newton::SolveOptions;
use hushrail::physics::Kelvin;
use hushrail::read::instances::count_instances;
use hushrail::read::{Input, ReadError, Source};
use hushrail::standby::stress::{Area, LifetimeLaw, lifetime};
use pyo3::prelude::*;

use crate::error;
use crate::run::run;

/// A result as JSON text.
pub fn text<T: serde::Serialize>(value: &T) -> PyResult<String> {
    serde_json::to_string(value).map_err(|e| error::range(format!("result cannot be written as JSON: {e}")))
}

/// Runs a study; JSON of the estimate.
#[pyfunction]
#[pyo3(signature = (path, *, progress=None))]
pub fn estimate(py: Python<'_>, path: &str, progress: Option<Py<PyAny>>) -> PyResult<String> {
    let loaded = py
        .detach(|| {
            let source = Source::open(Path::new(path))?;
            let study = read_study(&source)?;
            load_study(&study, &source.path, &source.folder)
        })
        .map_err(|e: ReadError| error::read(&e))?;
    let result = run(py, progress.as_ref(), |p| core_estimate(&loaded, &SolveOptions::default(), p))?;
    text(&result)
}

/// Leakage table of the cells of a study; JSON.
#[pyfunction]
#[pyo3(signature = (path, *, cells=Vec::new(), floor_s=0.0, progress=None))]
pub fn cell_table(
    py: Python<'_>,
    path: &str,
    cells: Vec<String>,
    floor_s: f64,
    progress: Option<Py<PyAny>>,
) -> PyResult<String> {
    let request = TableRequest { study: path.into(), cells, floor_s };
    let result = run(py, progress.as_ref(), |p| table_of_study(&request, &SolveOptions::default(), p))?;
    text(&result.map_err(|e| error::table(&e))?)
}

/// Sensitivities of cells and blocks of a study; JSON.
#[pyfunction]
#[pyo3(signature = (path, *, cells=Vec::new(), blocks=true, progress=None))]
pub fn sensitivities(
    py: Python<'_>,
    path: &str,
    cells: Vec<String>,
    blocks: bool,
    progress: Option<Py<PyAny>>,
) -> PyResult<String> {
    let request = SensitivityRequest { study: path.into(), cells, blocks };
    let result =
        run(py, progress.as_ref(), |p| sensitivities_of_study(&request, &SolveOptions::default(), p))?;
    text(&result.map_err(|e| error::read(&e))?)
}

/// Transitions of the domains of a study, as asked or as its own table asks; JSON in, JSON out.
#[pyfunction]
#[pyo3(signature = (path, spec=None, *, progress=None))]
pub fn transitions(
    py: Python<'_>,
    path: &str,
    spec: Option<&str>,
    progress: Option<Py<PyAny>>,
) -> PyResult<String> {
    let spec = spec.map(serde_json::from_str).transpose();
    let spec = spec.map_err(|e| error::range(format!("transitions: {e}")))?;
    let request = TransitionRequest { study: path.into(), spec };
    let result = run(py, progress.as_ref(), |p| transitions_of_study(&request, &SolveOptions::default(), p))?;
    text(&result.map_err(|e| error::read(&e))?)
}

/// The parked vector of a domain that leaks least; JSON in, JSON out.
#[pyfunction]
#[pyo3(signature = (path, json, *, progress=None))]
pub fn park(py: Python<'_>, path: PathBuf, json: &str, progress: Option<Py<PyAny>>) -> PyResult<String> {
    let request = serde_json::from_str(json).map_err(|e| error::range(format!("park: {e}")))?;
    let found = run(py, progress.as_ref(), |p| park_study(&path, &request, &SolveOptions::default(), p))?;
    text(&found.map_err(|e| error::read(&e))?)
}

/// States of a domain's instances; JSON.
#[pyfunction]
#[pyo3(signature = (path, domain=None))]
pub fn domain_states(py: Python<'_>, path: PathBuf, domain: Option<&str>) -> PyResult<String> {
    let found = py.detach(|| states_of_study(&path, domain));
    text(&found.map_err(|e| error::read(&e))?)
}

/// Lifetime of an oxide under a law, s, and the caution that goes with it as (code, text).
#[pyfunction]
#[pyo3(signature = (law, voltage_v, oxide_m, temp_c, *, area=None))]
pub fn oxide_lifetime(
    law: &str,
    voltage_v: f64,
    oxide_m: f64,
    temp_c: f64,
    area: Option<&str>,
) -> PyResult<(f64, Vec<(String, String)>)> {
    let wrong = |e: serde_json::Error| error::range(format!("lifetime: {e}"));
    let law: LifetimeLaw = serde_json::from_str(law).map_err(wrong)?;
    let area: Option<Area> = area.map(serde_json::from_str).transpose().map_err(wrong)?;
    let temp = Kelvin::from_celsius(temp_c).map_err(error::temperature)?;
    let found =
        lifetime(&law, voltage_v, oxide_m, temp, area.as_ref()).map_err(|e| error::range(e.to_string()))?;
    Ok((found.lifetime_s, found.notes.into_iter().map(|n| (n.code, n.text)).collect()))
}

/// Predictions against a published table; JSON.
#[pyfunction]
#[pyo3(signature = (path, table, *, corners=None, prefix="", floor_s=0.0, same_cards=Vec::new(), progress=None))]
#[expect(clippy::too_many_arguments, reason = "keywords of a Python function")]
pub fn compare(
    py: Python<'_>,
    path: &str,
    table: &str,
    corners: Option<String>,
    prefix: &str,
    floor_s: f64,
    same_cards: Vec<Vec<String>>,
    progress: Option<Py<PyAny>>,
) -> PyResult<String> {
    let request = CompareRequest {
        study: path.into(),
        table: table.into(),
        corners: corners.map(Into::into),
        prefix: prefix.to_owned(),
        floor_s,
        rules: SuspectRules { same_cards, ..SuspectRules::default() },
    };
    let result = run(py, progress.as_ref(), |p| compare_study(&request, &SolveOptions::default(), p))?;
    text(&result.map_err(|e| error::read(&e))?)
}

/// Instance counts of structural Verilog or a DEF layout, `-` being standard input: top module and (master, count) pairs in first-seen order.
#[pyfunction]
#[pyo3(signature = (files, *, top=None, path=""))]
pub fn count(
    py: Python<'_>,
    files: Vec<String>,
    top: Option<&str>,
    path: &str,
) -> PyResult<(String, Vec<(String, u64)>)> {
    py.detach(|| {
        let mut inputs: Vec<Input> = files.iter().map(|f| Input::named(f)).collect();
        let counts = count_instances(&mut inputs, top, path)?;
        Ok((counts.top, counts.counts.into_iter().collect()))
    })
    .map_err(|e: ReadError| error::read(&e))
}
