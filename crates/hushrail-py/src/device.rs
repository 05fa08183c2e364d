//! Processes and devices.

use std::path::Path;
use std::sync::Arc;

use hushrail::batch::load::load_process;
use hushrail::batch::study::ProcessSpec;
use hushrail::device::process::Request;
use hushrail::device::sensitivity::{KNOBS, Varied};
use hushrail::device::{Bias, Branches, Mechanism, Polarity, per_terminal};
use hushrail::physics::Kelvin;
use hushrail::read::Place;
use indexmap::IndexMap;
use numpy::ndarray::{Array2, Array3, ArrayView1};
use numpy::{IntoPyArray, PyArray2, PyArray3, PyReadonlyArray1};
use pyo3::prelude::*;

use crate::error;
use crate::own::OwnModel;

/// Cards of one process corner.
#[pyclass(module = "hushrail", frozen)]
pub struct Process {
    pub inner: Arc<hushrail::device::process::Process>,
}

fn request(model: &str, params: IndexMap<String, f64>) -> Request {
    let at = Place::new(&Arc::from("request"), 1, 1);
    let params = params.into_iter().map(|(n, v)| (Arc::from(n.to_lowercase()), v)).collect();
    Request { model: model.to_lowercase().into(), params, at }
}

#[pymethods]
impl Process {
    /// Reads cards.
    #[staticmethod]
    #[pyo3(signature = (name, files, *, section=None, skip_includes=Vec::new(), scale_m=None, models=IndexMap::new()))]
    fn read(
        py: Python<'_>,
        name: &str,
        files: Vec<String>,
        section: Option<String>,
        skip_includes: Vec<String>,
        scale_m: Option<f64>,
        models: IndexMap<String, String>,
    ) -> PyResult<Self> {
        let spec = ProcessSpec { files, section, skip_includes, scale_m, ..ProcessSpec::default() };
        let p = py
            .detach(|| load_process(name, &spec, &models, &IndexMap::new(), Path::new("")))
            .map_err(|e| error::read(&e))?;
        Ok(Self { inner: Arc::new(p) })
    }

    /// A process of compact and tabulated devices.
    #[staticmethod]
    fn of_devices(name: &str, devices: IndexMap<String, OwnModel>) -> Self {
        let empty = hushrail::device::process::Process::empty(name);
        let p = devices.iter().fold(empty, |p, (n, m)| p.device(n, m.model()));
        Self { inner: Arc::new(p) }
    }

    /// The same process with devices in the place of what it has under their names.
    fn with_devices(&self, devices: IndexMap<String, OwnModel>) -> Self {
        let p = devices.iter().fold((*self.inner).clone(), |p, (n, m)| p.replace(n, m.model()));
        Self { inner: Arc::new(p) }
    }

    /// Name of the process.
    #[getter]
    fn name(&self) -> &str {
        &self.inner.name
    }

    /// Names of models and wrappers.
    fn model_names(&self) -> Vec<String> {
        self.inner.model_names()
    }

    /// Remarks of the reader as (code, text).
    fn notes(&self) -> Vec<(String, String)> {
        self.inner.deck.notes.iter().map(|n| (n.code.clone(), n.text.clone())).collect()
    }

    /// Parameters of a card at a geometry, bins added.
    fn effective(&self, model: &str, params: IndexMap<String, f64>) -> PyResult<IndexMap<&'static str, f64>> {
        self.inner.effective(&request(model, params)).map_err(|e| error::read(&e))
    }

    /// Makes a transistor at a temperature.
    fn transistor(&self, model: &str, params: IndexMap<String, f64>, temp_c: f64) -> PyResult<Device> {
        let temp = Kelvin::from_celsius(temp_c).map_err(error::temperature)?;
        let mut notes = Vec::new();
        let request = request(model, params);
        let t = self.inner.transistor(&request, temp, &mut notes).map_err(|e| error::read(&e))?;
        // a table of points has none; whatever else is wrong was said above
        let varied = self.inner.varied(&request, temp, &mut Vec::new()).ok();
        let notes = notes.into_iter().map(|n| (n.code, n.text)).collect();
        Ok(Device { inner: t.device, count: t.count, temp_c, model: model.to_owned(), notes, varied })
    }

    fn __repr__(&self) -> String {
        format!("Process({:?}, {} models)", self.inner.name, self.inner.model_names().len())
    }
}

/// A transistor at one temperature.
#[pyclass(module = "hushrail", frozen)]
pub struct Device {
    pub inner: Arc<dyn hushrail::device::Device>,
    pub count: f64,
    pub temp_c: f64,
    pub model: String,
    pub notes: Vec<(String, String)>,
    /// The same device with derivatives to what makes it; none for a table of points.
    pub varied: Option<Varied>,
}

#[pymethods]
impl Device {
    /// "n" or "p".
    #[getter]
    fn polarity(&self) -> &'static str {
        if self.inner.polarity() == Polarity::N { "n" } else { "p" }
    }
    /// Electrical oxide thickness, m.
    #[getter]
    fn oxide_m(&self) -> f64 {
        self.inner.oxide_m()
    }
    /// Temperature, degrees Celsius.
    #[getter]
    fn temp_c(&self) -> f64 {
        self.temp_c
    }
    /// Whether GIDL is in the card.
    #[getter]
    fn has_gidl(&self) -> bool {
        self.inner.has_gidl()
    }
    /// Remarks as (code, text).
    #[getter]
    fn notes(&self) -> Vec<(String, String)> {
        self.notes.clone()
    }

    /// Currents into drain, gate, source, body at N biases: shape (N, 4), A.
    fn currents<'py>(
        &self,
        py: Python<'py>,
        vd: PyReadonlyArray1<'py, f64>,
        vg: PyReadonlyArray1<'py, f64>,
        vs: PyReadonlyArray1<'py, f64>,
        vb: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Bound<'py, PyArray2<f64>>> {
        let at = Points::new([&vd, &vg, &vs, &vb])?;
        let n = at.n;
        let out = py.detach(|| {
            let mut out = Array2::zeros((n, 4));
            at.evaluate(&*self.inner, |i, b| {
                for (k, x) in b.terminals().into_iter().enumerate() {
                    out[[i, k]] = x * self.count;
                }
            });
            out
        });
        Ok(out.into_pyarray(py))
    }

    /// The same by mechanism: shape (N, 5, 4).
    fn by_mechanism<'py>(
        &self,
        py: Python<'py>,
        vd: PyReadonlyArray1<'py, f64>,
        vg: PyReadonlyArray1<'py, f64>,
        vs: PyReadonlyArray1<'py, f64>,
        vb: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Bound<'py, PyArray3<f64>>> {
        let at = Points::new([&vd, &vg, &vs, &vb])?;
        let n = at.n;
        let out = py.detach(|| {
            let mut out = Array3::zeros((n, 5, 4));
            at.evaluate(&*self.inner, |i, b| {
                for (m, mechanism) in Mechanism::ALL.into_iter().enumerate() {
                    for (k, x) in b.terminals_of(mechanism).into_iter().enumerate() {
                        out[[i, m, k]] = x * self.count;
                    }
                }
            });
            out
        });
        Ok(out.into_pyarray(py))
    }

    /// Slopes of the terminal currents to (vd, vg, vs, vb): shape (N, 4, 4), S.
    fn conductances<'py>(
        &self,
        py: Python<'py>,
        vd: PyReadonlyArray1<'py, f64>,
        vg: PyReadonlyArray1<'py, f64>,
        vs: PyReadonlyArray1<'py, f64>,
        vb: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Bound<'py, PyArray3<f64>>> {
        let at = Points::new([&vd, &vg, &vs, &vb])?;
        let n = at.n;
        let out = py.detach(|| {
            let mut out = Array3::zeros((n, 4, 4));
            for i in 0..n {
                let t = self.inner.branches_dual(at.bias(i).dual()).terminals();
                for (k, x) in t.iter().enumerate() {
                    for (u, g) in per_terminal(x.d).into_iter().enumerate() {
                        out[[i, k, u]] = g * self.count;
                    }
                }
            }
            out
        });
        Ok(out.into_pyarray(py))
    }

    /// Derivatives of the terminal currents to threshold, length, width, temperature and oxide: shape (N, 4, 5).
    fn slopes<'py>(
        &self,
        py: Python<'py>,
        vd: PyReadonlyArray1<'py, f64>,
        vg: PyReadonlyArray1<'py, f64>,
        vs: PyReadonlyArray1<'py, f64>,
        vb: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Bound<'py, PyArray3<f64>>> {
        let Some(varied) = &self.varied else {
            let text = format!(
                "`{}` is a table of points; want a card or a compact device: points do not know what made them",
                self.model
            );
            return Err(error::range(text));
        };
        let at = Points::new([&vd, &vg, &vs, &vb])?;
        let n = at.n;
        let out = py.detach(|| {
            let mut out = Array3::zeros((n, 4, KNOBS));
            for i in 0..n {
                for (k, t) in varied.terminals(at.bias(i)).into_iter().enumerate() {
                    for (u, d) in t.d.into_iter().enumerate() {
                        out[[i, k, u]] = d;
                    }
                }
            }
            out
        });
        Ok(out.into_pyarray(py))
    }

    fn __repr__(&self) -> String {
        format!("Device({:?}, {}-channel, {} °C)", self.model, self.polarity(), self.temp_c)
    }
}

/// Terminal voltages of N points, as views of the caller's arrays.
pub struct Points<'a> {
    pub n: usize,
    terminals: [ArrayView1<'a, f64>; 4],
}

impl<'a> Points<'a> {
    /// Drain, gate, source and body, all of one length.
    pub fn new(arrays: [&'a PyReadonlyArray1<'_, f64>; 4]) -> PyResult<Self> {
        let terminals = arrays.map(PyReadonlyArray1::as_array);
        let lengths = [0, 1, 2, 3].map(|k: usize| terminals[k].len());
        if lengths.iter().all(|l| *l == lengths[0]) {
            Ok(Self { n: lengths[0], terminals })
        } else {
            Err(error::range(format!("bias arrays have lengths {lengths:?}; want one length")))
        }
    }

    /// Branch currents at every point, in blocks that stay in the cache.
    fn evaluate(&self, device: &dyn hushrail::device::Device, mut take: impl FnMut(usize, Branches<f64>)) {
        const BLOCK: usize = 256;
        let (mut biases, mut out) = (Vec::with_capacity(BLOCK), vec![Branches::zero(); BLOCK]);
        for start in (0..self.n).step_by(BLOCK) {
            biases.clear();
            biases.extend((start..self.n.min(start + BLOCK)).map(|i| self.bias(i)));
            let out = &mut out[..biases.len()];
            device.branches_many(&biases, out);
            for (i, b) in out.iter().enumerate() {
                take(start + i, *b);
            }
        }
    }

    /// One of them.
    pub fn bias(&self, i: usize) -> Bias<f64> {
        let [vd, vg, vs, vb] = &self.terminals;
        Bias::from_terminals(vd[i], vg[i], vs[i], vb[i])
    }
}
