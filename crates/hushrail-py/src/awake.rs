//! Awake domains and kept state: requests and answers cross the border as JSON text in the core's own form.

use std::sync::Arc;

use hushrail::awake::AwakeError;
use hushrail::awake::droop::{Load, resistor, settle_droop};
use hushrail::awake::network::{Rail, Tie, solve_rail};
use hushrail::awake::resistance::merit_figure;
use hushrail::batch::awake::awake_study;
use hushrail::batch::keep::{keep_study, margin_study};
use hushrail::cell::DeviceShelf;
use hushrail::circuit::newton::SolveOptions;
use hushrail::physics::Kelvin;
use hushrail::standby::SwitchSpec;
use hushrail::standby::switch::{Side, Switch};
use pyo3::prelude::*;
use serde::Deserialize;
use serde::de::DeserializeOwned;

use crate::device::Process;
use crate::error;
use crate::run::run;
use crate::study::text;

/// What is asked, or nothing: then a table of the study says it.
fn maybe<T: DeserializeOwned>(json: Option<&str>) -> PyResult<Option<T>> {
    json.map(request).transpose()
}

fn request<T: DeserializeOwned>(json: &str) -> PyResult<T> {
    serde_json::from_str(json).map_err(|e| error::range(format!("request: {e}")))
}

fn raised(e: &AwakeError) -> PyErr {
    match e {
        AwakeError::Read(e) => error::read(e),
        AwakeError::Range { .. } => error::range(e.to_string()),
        _ => error::solve(e.to_string()),
    }
}

/// Domains of a study awake; JSON.
#[pyfunction]
#[pyo3(signature = (path, json=None, *, progress=None))]
pub fn awake_domains(
    py: Python<'_>,
    path: &str,
    json: Option<&str>,
    progress: Option<Py<PyAny>>,
) -> PyResult<String> {
    let r = maybe(json)?;
    let found = run(py, progress.as_ref(), |p| awake_study(path, r.as_ref(), &SolveOptions::default(), p))?;
    text(&found.map_err(|e| error::read(&e))?)
}

/// Lowest spans that keep state; JSON.
#[pyfunction]
#[pyo3(signature = (path, json=None, *, progress=None))]
pub fn awake_keep(
    py: Python<'_>,
    path: &str,
    json: Option<&str>,
    progress: Option<Py<PyAny>>,
) -> PyResult<String> {
    let r = maybe(json)?;
    let found = run(py, progress.as_ref(), |p| keep_study(path, r.as_ref(), &SolveOptions::default(), p))?;
    text(&found.map_err(|e| error::read(&e))?)
}

/// Noise margins between cells; JSON.
#[pyfunction]
#[pyo3(signature = (path, json, *, progress=None))]
pub fn awake_margins(
    py: Python<'_>,
    path: &str,
    json: &str,
    progress: Option<Py<PyAny>>,
) -> PyResult<String> {
    let r = request(json)?;
    let found = run(py, progress.as_ref(), |p| margin_study(path, &r, &SolveOptions::default(), p))?;
    text(&found.map_err(|e| raised(&e))?)
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Candidate {
    switch: SwitchSpec,
    header: bool,
}

impl Candidate {
    fn side(&self) -> Side {
        if self.header { Side::Header } else { Side::Footer }
    }
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Figure {
    candidates: Vec<Candidate>,
    overdrive_v: Vec<f64>,
    boost_v: Vec<f64>,
    droop_v: f64,
    vdd_v: f64,
    temp_c: f64,
}

/// On-resistance times off current of switches over overdrive and boost; JSON.
#[pyfunction]
pub fn awake_figure(py: Python<'_>, process: &Process, json: &str) -> PyResult<String> {
    let f: Figure = request(json)?;
    let temp = Kelvin::from_celsius(f.temp_c).map_err(error::temperature)?;
    let inner = Arc::clone(&process.inner);
    let found = py.detach(|| {
        let list: Vec<_> = f.candidates.iter().map(|c| (c.switch.clone(), c.side())).collect();
        merit_figure(&list, &f.overdrive_v, &f.boost_v, f.droop_v, &inner, temp, f.vdd_v, &"request".into())
    });
    text(&found.map_err(|e| raised(&e))?)
}

/// Droop of a load behind a resistance; JSON.
#[pyfunction]
pub fn awake_droop(json: &str, vdd_v: f64, ohm: f64) -> PyResult<String> {
    let load: Load = request(json)?;
    if !(ohm > 0.0 && ohm.is_finite()) {
        return Err(error::range(format!("resistance is {ohm} ohm; want a finite number above zero")));
    }
    text(&settle_droop(&load, vdd_v, &resistor(ohm)).map_err(|e| raised(&e))?)
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Row {
    columns: usize,
    rows: usize,
    along_ohm: f64,
    across_ohm: f64,
    vdd_v: f64,
    /// Nodes with a switch.
    nodes: Vec<usize>,
    /// Their resistance, when they are resistances.
    ohm: Option<f64>,
    /// The switch, when they are devices, and its temperature.
    switch: Option<Candidate>,
    temp_c: f64,
    loads: Vec<Load>,
}

/// Local droop along a rail; JSON.
#[pyfunction]
#[pyo3(signature = (json, process=None))]
pub fn awake_rail(py: Python<'_>, json: &str, process: Option<&Process>) -> PyResult<String> {
    let r: Row = request(json)?;
    let tie = match (r.ohm, &r.switch, process) {
        (Some(ohm), None, _) => Tie::Ohm(ohm),
        (None, Some(c), Some(p)) => {
            let temp = Kelvin::from_celsius(r.temp_c).map_err(error::temperature)?;
            c.switch
                .check("switch")
                .map_err(|(what, value, wanted)| error::range(format!("{what} is {value}; {wanted}")))?;
            let shelf = &mut DeviceShelf::default();
            let made = Switch::new(&c.switch, c.side(), &p.inner, temp, r.vdd_v, shelf, &"request".into());
            Tie::Switch(made.map_err(|e| error::read(&e))?)
        }
        _ => return Err(error::range("want either a resistance, or a switch and its process".into())),
    };
    let solved = py.detach(|| {
        let rail = Rail::grid(r.columns, r.rows, r.along_ohm, r.across_ohm)?;
        let ties: Vec<_> = r.nodes.iter().map(|&n| (n, tie.clone())).collect();
        let loads: Vec<_> = r.loads.iter().cloned().enumerate().collect();
        solve_rail(&rail, &ties, &loads, r.vdd_v)
    });
    text(&solved.map_err(|e| raised(&e))?)
}
