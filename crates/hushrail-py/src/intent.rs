//! Power intent: what is read crosses the border as JSON text in the core's own form.

use std::collections::BTreeMap;
use std::path::PathBuf;

use hushrail::read::intent::{Intent, IntentOptions, read_intent as read, resolve};
use hushrail::read::verilog::connect::{ConnectOptions, Connected, connect};
use hushrail::read::{Input, ReadError, Source};
use pyo3::prelude::*;

use crate::error;
use crate::run::run;
use crate::study::text;

fn netlist(verilog: &[String], top: Option<&str>) -> Result<Option<Connected>, ReadError> {
    if verilog.is_empty() {
        return Ok(None);
    }
    let mut inputs: Vec<Input> = verilog.iter().map(|f| Input::named(f)).collect();
    connect(&mut inputs, top, &(), &ConnectOptions::default()).map(Some)
}

fn intent(
    files: &[PathBuf],
    env: BTreeMap<String, String>,
    net: Option<&Connected>,
) -> Result<Intent, ReadError> {
    let sources = files.iter().map(|f| Source::open(f)).collect::<Result<Vec<_>, _>>()?;
    let mut options = IntentOptions::default().env(env);
    options.design = net;
    read(&sources, &options)
}

/// Power intent of files that belong together; JSON.
#[pyfunction]
#[pyo3(signature = (files, env, *, verilog=Vec::new(), top=None))]
pub fn read_intent(
    py: Python<'_>,
    files: Vec<PathBuf>,
    env: BTreeMap<String, String>,
    verilog: Vec<String>,
    top: Option<&str>,
) -> PyResult<String> {
    let found = run(py, None, |_| {
        let net = netlist(&verilog, top)?;
        intent(&files, env, net.as_ref())
    })?;
    text(&found.map_err(|e: ReadError| error::read(&e))?)
}

/// Power intent mapped onto a netlist; JSON.
#[pyfunction]
#[pyo3(signature = (files, env, verilog, *, top=None))]
pub fn map_intent(
    py: Python<'_>,
    files: Vec<PathBuf>,
    env: BTreeMap<String, String>,
    verilog: Vec<String>,
    top: Option<&str>,
) -> PyResult<String> {
    if verilog.is_empty() {
        return Err(error::range("no netlist was named; want at least one Verilog file".into()));
    }
    let found = run(py, None, |_| {
        let net = netlist(&verilog, top)?;
        let Some(net) = net else { return Ok(None) };
        let mut intent = intent(&files, env, Some(&net))?;
        let mut map = resolve(&intent, &net)?;
        intent.notes.append(&mut map.notes);
        map.notes = intent.notes;
        Ok(Some(map))
    })?;
    text(&found.map_err(|e: ReadError| error::read(&e))?)
}
