//! Compact and tabulated devices.

use std::collections::HashMap;
use std::path::Path;
use std::sync::Arc;

use hushrail::batch::compare::{CompareRequest, LoadedTable};
use hushrail::circuit::newton::SolveOptions;
use hushrail::device::compact::{CompactCard, CompactError, Param, generic, params};
use hushrail::device::sensitivity::Varied;
use hushrail::device::spec::{DeviceModel, DeviceSpec};
use hushrail::device::table::{TableError, TableOptions};
use hushrail::device::{Geometry, Polarity};
use hushrail::physics::Kelvin;
use hushrail::read::{Place, ReadError, Source};
use indexmap::IndexMap;
use numpy::ndarray::{Array2, Array3};
use numpy::{IntoPyArray, PyArray2, PyArray3, PyReadonlyArray1};
use pyo3::prelude::*;
use serde::Deserialize;

use crate::device::{Device, Points};
use crate::error;
use crate::run::run;

fn compact(e: CompactError) -> PyErr {
    error::range(e.to_string())
}

fn polarity(letter: &str) -> PyResult<Polarity> {
    match letter {
        "n" | "N" => Ok(Polarity::N),
        "p" | "P" => Ok(Polarity::P),
        other => Err(error::range(format!("polarity is `{other}`; want `n` or `p`"))),
    }
}

/// A transistor as a caller states it: SI units.
#[derive(FromPyObject)]
#[pyo3(from_item_all)]
pub struct Size {
    w_m: f64,
    l_m: f64,
    ad_m2: f64,
    as_m2: f64,
    pd_m: f64,
    ps_m: f64,
}

impl Size {
    fn geometry(&self) -> Geometry {
        Geometry {
            ad_m2: self.ad_m2,
            as_m2: self.as_m2,
            pd_m: self.pd_m,
            ps_m: self.ps_m,
            ..Geometry::new(self.w_m, self.l_m)
        }
    }
}

fn device(model: &DeviceModel, label: &str, size: &Size, temp_c: f64, m: f64) -> PyResult<Device> {
    let temp = Kelvin::from_celsius(temp_c).map_err(error::temperature)?;
    if !(m > 0.0 && m.is_finite()) {
        return Err(error::range(format!("m is {m}; want a number of devices above zero")));
    }
    let geometry = size.geometry();
    let (inner, varied): (Arc<dyn hushrail::device::Device>, _) = match model {
        DeviceModel::Compact(card) => {
            let device = card.device(&geometry, temp).map_err(compact)?;
            (Arc::new(device), Some(Varied::compact(card, &geometry, temp, m)))
        }
        DeviceModel::Table(table) => {
            let device =
                table.device(&geometry, temp).map_err(|e: TableError| error::range(e.to_string()))?;
            (Arc::new(device), None)
        }
    };
    Ok(Device { inner, count: m, temp_c, model: label.to_owned(), notes: Vec::new(), varied })
}

/// The `[device]` tables of a study.
#[derive(Deserialize)]
struct Named {
    device: IndexMap<String, DeviceSpec>,
}

/// A compact device without size and temperature.
#[pyclass(module = "hushrail", frozen)]
pub struct CompactModel {
    pub card: CompactCard,
}

#[pymethods]
impl CompactModel {
    /// From its numbers.
    #[new]
    #[pyo3(signature = (letter, numbers, *, gidl_follows_gap=true))]
    fn new(letter: &str, numbers: IndexMap<String, f64>, gidl_follows_gap: bool) -> PyResult<Self> {
        let numbers = numbers.iter().map(|(n, v)| (n.as_str(), *v));
        let card =
            CompactCard::from_numbers(polarity(letter)?, numbers, gidl_follows_gap).map_err(compact)?;
        Ok(Self { card })
    }

    /// A generic technology.
    #[staticmethod]
    fn generic(name: &str) -> PyResult<Self> {
        Ok(Self { card: CompactCard::generic(name).map_err(compact)? })
    }

    /// Names of the generic technologies.
    #[staticmethod]
    fn generic_names() -> Vec<&'static str> {
        generic::NAMES.to_vec()
    }

    /// What is known of each number: name, unit, meaning, low, high, spread, spans decades, may be fitted.
    #[staticmethod]
    fn parameter_table() -> Vec<(&'static str, &'static str, &'static str, f64, f64, f64, bool, bool)> {
        let row =
            |r: &params::Row| (r.name, r.unit, r.meaning, r.low, r.high, r.spread, r.logarithmic, r.fitted);
        params::ROWS.iter().map(row).collect()
    }

    /// From a `[device.NAME]` table; the only one when no name is given.
    #[staticmethod]
    #[pyo3(signature = (text, name=None))]
    fn from_toml(text: &str, name: Option<&str>) -> PyResult<Self> {
        let named: Named =
            toml::from_str(text).map_err(|e| error::range(format!("not a table of a study: {e}")))?;
        let found = match name {
            Some(name) => named.device.get_key_value(name),
            None if named.device.len() == 1 => named.device.first(),
            None => None,
        };
        let Some((name, spec)) = found else {
            let there: Vec<&str> = named.device.keys().map(String::as_str).collect();
            let wanted = name.map_or("one [device.NAME] table, or its name".into(), |n| format!("`{n}`"));
            return Err(error::range(format!("the text has `{}`; want {wanted}", there.join("`, `"))));
        };
        let at = Place::new(&Arc::from(format!("device `{name}`")), 1, 1);
        match spec.load(Path::new(""), &at).map_err(|e: ReadError| error::read(&e))? {
            DeviceModel::Compact(card) => Ok(Self { card: *card }),
            DeviceModel::Table(_) => Err(error::range(format!("device `{name}` is a table of points"))),
        }
    }

    /// Channel type.
    #[getter]
    fn polarity(&self) -> &'static str {
        if self.card.polarity == Polarity::N { "n" } else { "p" }
    }

    /// Whether the GIDL field follows the band gap.
    #[getter]
    fn gidl_follows_gap(&self) -> bool {
        self.card.gidl_follows_gap
    }

    /// Numbers that are given, or have a value of their own.
    #[getter]
    fn numbers(&self) -> IndexMap<&'static str, f64> {
        Param::ALL.iter().filter_map(|p| Some((p.row().name, self.card.get(*p)?))).collect()
    }

    /// Least slope factor of its depletion layer, and the slopes of that to body coefficient and surface potential.
    #[getter]
    fn least_slope(&self) -> (f64, f64, f64) {
        self.card.least_slope()
    }

    /// A transistor at a temperature.
    fn device(&self, size: Size, temp_c: f64, m: f64) -> PyResult<Device> {
        device(&DeviceModel::Compact(Box::new(self.card.clone())), "compact", &size, temp_c, m)
    }

    /// Currents of shape (N, 4), A, and their slopes to K numbers, of shape (N, K, 4).
    #[expect(clippy::too_many_arguments, reason = "four terminals beside what is asked for")]
    fn slopes<'py>(
        &self,
        py: Python<'py>,
        free: Vec<String>,
        size: Size,
        temp_c: f64,
        vd: PyReadonlyArray1<'py, f64>,
        vg: PyReadonlyArray1<'py, f64>,
        vs: PyReadonlyArray1<'py, f64>,
        vb: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<(Bound<'py, PyArray2<f64>>, Bound<'py, PyArray3<f64>>)> {
        let temp = Kelvin::from_celsius(temp_c).map_err(error::temperature)?;
        let free = free.iter().map(|n| Param::find(n)).collect::<Result<Vec<_>, _>>().map_err(compact)?;
        let at = Points::new([&vd, &vg, &vs, &vb])?;
        let (n, k) = (at.n, free.len());
        let biases: Vec<_> = (0..n).map(|i| at.bias(i)).collect();
        let out = py.detach(|| self.card.slopes(&free, &size.geometry(), temp, &biases)).map_err(compact)?;
        let currents = Array2::from_shape_fn((n, 4), |(i, t)| out.currents[i][t]);
        let slopes = Array3::from_shape_fn((n, k, 4), |(i, j, t)| out.slopes[i * k + j][t]);
        Ok((currents.into_pyarray(py), slopes.into_pyarray(py)))
    }

    fn __repr__(&self) -> String {
        format!("CompactModel({}-channel, vt0 {} V)", self.polarity(), self.card.vt0_v)
    }
}

/// A device of points without temperature.
#[pyclass(module = "hushrail", frozen)]
pub struct TableModel {
    inner: Arc<hushrail::device::table::TableModel>,
}

#[pymethods]
impl TableModel {
    /// Reads points.
    #[staticmethod]
    #[pyo3(signature = (path, letter, w_m, oxide_m, *, l_m=None, extrapolate=false))]
    fn read(
        py: Python<'_>,
        path: &str,
        letter: &str,
        w_m: f64,
        oxide_m: f64,
        l_m: Option<f64>,
        extrapolate: bool,
    ) -> PyResult<Self> {
        let polarity = polarity(letter)?;
        let options = TableOptions { polarity, width_m: w_m, length_m: l_m, oxide_m, extrapolate };
        let model = py
            .detach(|| hushrail::device::table::TableModel::read(&Source::open(Path::new(path))?, options))
            .map_err(|e: ReadError| error::read(&e))?;
        Ok(Self { inner: Arc::new(model) })
    }

    /// Channel type.
    #[getter]
    fn polarity(&self) -> &'static str {
        if self.inner.options().polarity == Polarity::N { "n" } else { "p" }
    }

    /// Width of the points' transistor, m.
    #[getter]
    fn w_m(&self) -> f64 {
        self.inner.options().width_m
    }

    /// Its length, m, if it was stated.
    #[getter]
    fn l_m(&self) -> Option<f64> {
        self.inner.options().length_m
    }

    /// Lowest and highest gate, drain and body voltage, as for an n-channel device, V.
    #[getter]
    fn range_v(&self) -> [(f64, f64); 3] {
        self.inner.range_v()
    }

    /// A transistor at a temperature.
    fn device(&self, size: Size, temp_c: f64, m: f64) -> PyResult<Device> {
        device(&DeviceModel::Table(Arc::clone(&self.inner)), "table", &size, temp_c, m)
    }

    fn __repr__(&self) -> String {
        format!("TableModel({}-channel, w {} m)", self.polarity(), self.w_m())
    }
}

/// Either kind.
#[derive(FromPyObject)]
pub enum OwnModel {
    /// Compact.
    Compact(Py<CompactModel>),
    /// Tabulated.
    Table(Py<TableModel>),
}

impl OwnModel {
    /// The core's form.
    pub fn model(&self) -> DeviceModel {
        match self {
            Self::Compact(c) => DeviceModel::Compact(Box::new(c.get().card.clone())),
            Self::Table(t) => DeviceModel::Table(Arc::clone(&t.get().inner)),
        }
    }
}

/// A published leakage table with its cells, to be predicted with one set of compact devices after the other.
#[pyclass(module = "hushrail", frozen)]
pub struct CellTable {
    inner: LoadedTable,
}

fn cards(devices: &IndexMap<String, Py<CompactModel>>) -> IndexMap<String, CompactCard> {
    devices.iter().map(|(n, m)| (n.clone(), m.get().card.clone())).collect()
}

#[pymethods]
impl CellTable {
    /// Reads everything.
    #[new]
    #[pyo3(signature = (study, table, devices, *, corners=None, prefix="", floor_s=0.0))]
    fn new(
        py: Python<'_>,
        study: &str,
        table: &str,
        devices: IndexMap<String, Py<CompactModel>>,
        corners: Option<String>,
        prefix: &str,
        floor_s: f64,
    ) -> PyResult<Self> {
        let request = CompareRequest {
            study: study.into(),
            table: table.into(),
            corners: corners.map(Into::into),
            prefix: prefix.to_owned(),
            floor_s,
            ..CompareRequest::default()
        };
        let cards = cards(&devices);
        let inner = py.detach(|| LoadedTable::read(&request, &cards)).map_err(|e| error::read(&e))?;
        Ok(Self { inner })
    }

    /// Rows as cell, corner, condition and W.
    fn rows(&self) -> Vec<(String, String, String, f64)> {
        let rows = self.inner.rows.iter();
        rows.map(|r| (r.cell.clone(), r.corner.clone(), r.when.clone(), r.power_w)).collect()
    }

    /// A prediction in W for each row, or the reason why there is none.
    #[pyo3(signature = (devices, *, progress=None))]
    fn predict(
        &self,
        py: Python<'_>,
        devices: IndexMap<String, Py<CompactModel>>,
        progress: Option<Py<PyAny>>,
    ) -> PyResult<Vec<(Option<f64>, String)>> {
        let cards = cards(&devices);
        let options = SolveOptions::default();
        let found = run(py, progress.as_ref(), |p| self.inner.predict(&cards, &options, p))?
            .map_err(|e| error::read(&e))?;
        // rows of one cell stand together in the answer, not as in the table
        let mut by_key = HashMap::new();
        for r in &found.rows {
            by_key.insert((&*r.cell, &*r.corner, &*r.when), (Some(r.predicted_nw * 1e-9), String::new()));
        }
        for u in &found.unmatched {
            let lost = self.inner.cells_lost.get(&u.cell).unwrap_or(&u.reason);
            by_key.insert((&*u.cell, &*u.corner, &*u.when), (None, lost.clone()));
        }
        let missing = || (None, "stopped".to_owned());
        let of = |r: &hushrail::check::compare::PublishedRow| {
            by_key.get(&(&*r.cell, &*r.corner, &*r.when)).cloned().unwrap_or_else(missing)
        };
        Ok(self.inner.rows.iter().map(of).collect())
    }
}
