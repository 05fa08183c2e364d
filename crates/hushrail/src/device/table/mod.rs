//! The table model: a transistor known by measured or simulated points.
//!
//! A CSV file holds the currents into drain, gate and body over gate, drain and body voltage and temperature, the source at
//! 0 V, for one transistor of known width ([`read`]). Between the points the currents are interpolated shape-preserving in
//! their logarithms ([`spline`]); at the points they are met.
//!
//! **What is interpolated.** The device is symmetric, so at `Vds = 0` both ends leak alike, and what the source end leaks does
//! not depend on the drain. With currents positive into the terminals:
//!
//! ```text
//! Es  = Id(Vg, 0, Vb)                      leak of the source end, to gate and body
//! Ich = Es + Id + Ig + Ib = Es − Is        channel, G·(1 − exp(−Vds/UT))
//! Ed  = Id − Ich                           leak of the drain end, to gate and body
//! ```
//!
//! `ln G` is interpolated, so the channel current vanishes with Vds, keeps its digits there, and rises with Vds wherever G
//! does. G at `Vds = 0`, where the points say nothing, is extrapolated along the drain axis with three points, held between
//! the value that makes the first step ohmic and that of the first point: give a first drain voltage of 10 to 25 mV where
//! the resistance of an on device matters. `Ed` changes sign; it is interpolated in `asinh(I/2f)`, a signed logarithm above
//! `f` and linear below, with `f` the current that nine tenths of its points at a temperature exceed. What `Ed` shares between gate and body
//! follows from Ig and Ib, interpolated as the logarithm of their ratio. Where both would have to flow round against each
//! other, the smaller is current from gate to body and is interpolated by itself.
//!
//! Over temperature `ln G` and the logarithms of the shares are interpolated in 1/T when a device is made.
//!
//! **Negative Vds.** Drain and source change places and the same table is used. The channel current is continuous in value and
//! slope there; the leaks of the ends in value, in slope as far as the points are those of a symmetric device.
//!
//! **Digits of the file.** Where GIDL or junction dominates, the channel current is a small difference of large numbers. What
//! is below the digits the file is written with is continued from higher gate voltages along the subthreshold line.
//!
//! **Outside the points.** Numbers continue along the tangent of the logarithms, so that a solver may pass through. Unless
//! `extrapolate` is set, that is not an answer: ask [`TableModel::covers`] beforehand, or [`TableDevice::used_outside`] or
//! [`TableDevice::covers`] afterwards.

pub mod read;
pub mod spline;
mod split;

use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, PoisonError};

use super::dual::{Dual, Number, Real};
use super::range::{Basis as RangeBasis, Outside};
use super::{Bias, Branches, Device, Geometry, Polarity};
use crate::physics::{CELSIUS_ZERO_K, Kelvin};
use crate::read::source::{Place, ReadError, Source};
use read::Points;
use spline::{Basis, Field};

/// What the points of a table belong to.
#[derive(Debug, Clone, PartialEq)]
pub struct TableOptions {
    /// Channel type; the file has the signs of its own kind.
    pub polarity: Polarity,
    /// Width of the transistor of the table, m; currents of a device go with its width.
    pub width_m: f64,
    /// Length of that transistor, m; with it a device of another length is refused.
    pub length_m: Option<f64>,
    /// Electrical oxide thickness, m, for the stress of a driven gate.
    pub oxide_m: f64,
    /// Whether numbers outside the points are wanted.
    pub extrapolate: bool,
}

/// A device that a table cannot give.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("`{name}` is {value}; {wanted}")]
pub struct TableError {
    /// The quantity.
    pub name: String,
    /// What was found, with unit.
    pub value: String,
    /// What would be right.
    pub wanted: String,
}

fn wrong(name: &str, value: String, wanted: impl Into<String>) -> TableError {
    TableError { name: name.into(), value, wanted: wanted.into() }
}

/// Numbers at the points, for each temperature of the file.
#[derive(Debug)]
struct Nodes {
    ln_g: Vec<Vec<f64>>,
    /// Gate to drain, A.
    to_gate: Vec<Vec<f64>>,
    /// Drain to body, A; never against the above.
    to_body: Vec<Vec<f64>>,
    /// Gate to body, A.
    bulk: Vec<Vec<f64>>,
    /// Whether any gate current is known.
    has_gate: bool,
}

/// A current of either sign: interpolant of `asinh(I/2f)`, and f, A.
#[derive(Debug)]
struct Signed {
    field: Field,
    small_a: f64,
}

/// The interpolants at one temperature.
#[derive(Debug)]
struct Fields {
    axes: [Vec<f64>; 3],
    ln_g: Field,
    /// Leak of the drain end.
    end: Option<Signed>,
    /// `ln` of its gate share over its body share.
    share: Option<Field>,
    /// Gate to body.
    bulk: Option<Signed>,
}

/// Largest logarithm of a ratio of shares: beyond it the smaller is nothing in double precision.
const ALL: f64 = 36.0;

/// Points of one transistor, ready to make devices.
#[derive(Debug)]
pub struct TableModel {
    options: TableOptions,
    axes: [Vec<f64>; 3],
    temps_k: Vec<f64>,
    nodes: Nodes,
    unresolved: usize,
    /// Interpolants made so far, by temperature: all devices of a corner share them.
    made: Mutex<Vec<(u64, Arc<Fields>)>>,
}

impl TableModel {
    /// Reads the table.
    ///
    /// # Errors
    /// A width or oxide that cannot be; the errors of [`read::read_points`]; drain and source currents that differ at
    /// `Vds = 0`; a channel current of the wrong sign.
    pub fn read(source: &Source, options: TableOptions) -> Result<Self, ReadError> {
        let range = |name: &str, v: f64| ReadError::Range {
            at: Place::new(&source.path, 1, 1),
            name: format!("{name} of the table"),
            value: format!("{v:?} m"),
            wanted: "want a size above zero and below 2 cm".into(),
        };
        let sizes = [
            ("width_m", options.width_m),
            ("oxide_m", options.oxide_m),
            ("length_m", options.length_m.unwrap_or(1e-6)),
        ];
        if let Some((name, v)) = sizes.iter().find(|(_, v)| !(*v > 0.0 && *v < 0.02)) {
            return Err(range(name, *v));
        }
        let points = read::read_points(source, options.polarity)?;
        let (nodes, unresolved) = split::split(source, &points, options.polarity)?;
        let Points { axes, temps_k, .. } = points;
        Ok(Self { options, axes, temps_k, nodes, unresolved, made: Mutex::new(Vec::new()) })
    }

    /// Points whose channel current the digits of the file do not resolve.
    pub fn unresolved(&self) -> usize {
        self.unresolved
    }

    /// What the table belongs to.
    pub fn options(&self) -> &TableOptions {
        &self.options
    }

    /// Lowest and highest gate, drain and body voltage of the points, as for an n-channel device, V.
    pub fn range_v(&self) -> [(f64, f64); 3] {
        std::array::from_fn(|k| (self.axes[k][0], self.axes[k][self.axes[k].len() - 1]))
    }

    /// Whether the points surround a bias and a temperature; drain and source are exchanged where Vds is against the channel.
    pub fn covers(&self, bias: Bias<f64>, temp: Kelvin) -> bool {
        self.covers_temp(temp) && covers(&self.axes, turned(bias, self.options.polarity).0)
    }

    fn covers_temp(&self, temp: Kelvin) -> bool {
        let (low, high) = (self.temps_k[0], self.temps_k[self.temps_k.len() - 1]);
        temp.get() >= low - 1e-3 && temp.get() <= high + 1e-3
    }

    /// The device at a width and a temperature. Of the geometry only width and length count; junctions go with the width.
    ///
    /// # Errors
    /// A temperature outside the table without `extrapolate`, or any other than that of a table of one temperature; another
    /// length than the table's; a threshold shift or a factor on mobility, which points cannot follow.
    pub fn device(&self, geometry: &Geometry, temp: Kelvin) -> Result<TableDevice, TableError> {
        let (low, high) = (self.temps_k[0], self.temps_k[self.temps_k.len() - 1]);
        let celsius = |k: f64| k - CELSIUS_ZERO_K;
        if !self.covers_temp(temp) && (!self.options.extrapolate || self.temps_k.len() == 1) {
            let wanted = if self.temps_k.len() == 1 {
                format!("the table holds at {:.1} °C alone; add points at other temperatures", celsius(low))
            } else {
                format!(
                    "the table reaches from {:.1} to {:.1} °C; add points, or set `extrapolate = true`",
                    celsius(low),
                    celsius(high)
                )
            };
            return Err(wrong("temperature", format!("{:.1} °C", temp.celsius()), wanted));
        }
        if !(geometry.width_m > 0.0 && geometry.width_m <= 0.02) {
            return Err(wrong(
                "width",
                format!("{:?} m", geometry.width_m),
                "want a size above zero and below 2 cm",
            ));
        }
        if let Some(l) = self.options.length_m
            && !((geometry.length_m / l - 1.0).abs() < 0.01)
        {
            let wanted = format!("the table holds for {l:?} m; points of another length are another table");
            return Err(wrong("length", format!("{:?} m", geometry.length_m), wanted));
        }
        if geometry.delvto_v != 0.0 {
            return Err(wrong(
                "delvto",
                format!("{} V", geometry.delvto_v),
                "a table cannot be shifted; want 0",
            ));
        }
        if geometry.mobility_factor != 1.0 {
            return Err(wrong(
                "mulu0",
                geometry.mobility_factor.to_string(),
                "a table has its mobility; want 1",
            ));
        }
        Ok(TableDevice {
            polarity: self.options.polarity,
            fields: self.fields(temp.get()),
            width_ratio: geometry.width_m / self.options.width_m,
            vt_v: temp.thermal_voltage(),
            oxide_m: self.options.oxide_m,
            extrapolate: self.options.extrapolate,
            used_outside: AtomicBool::new(false),
        })
    }

    fn fields(&self, temp_k: f64) -> Arc<Fields> {
        let mut made = self.made.lock().unwrap_or_else(PoisonError::into_inner);
        if let Some((_, f)) = made.iter().find(|(t, _)| *t == temp_k.to_bits()) {
            return Arc::clone(f);
        }
        // −1/T rises with T
        let x: Vec<f64> = self.temps_k.iter().map(|t| -1.0 / t).collect();
        let over_temp = |nodes: &[Vec<f64>], between: &dyn Fn(&[f64], &[f64], f64) -> f64| -> Vec<f64> {
            (0..nodes[0].len())
                .map(|p| between(&x, &nodes.iter().map(|n| n[p]).collect::<Vec<f64>>(), -1.0 / temp_k))
                .collect()
        };
        let axes = [&self.axes[0][..], &self.axes[1], &self.axes[2]];
        let nodes = &self.nodes;
        let some = |i: &[f64]| i.iter().any(|i| *i != 0.0);
        let to_gate = over_temp(&nodes.to_gate, &current_along);
        let to_body = over_temp(&nodes.to_body, &current_along);
        let bulk = over_temp(&nodes.bulk, &current_along);
        let end: Vec<f64> = to_body.iter().zip(&to_gate).map(|(b, g)| b - g).collect();
        let mut ratio: Vec<f64> = to_body.iter().zip(&to_gate).map(|(b, g)| log_ratio(*g, *b)).collect();
        fill(&mut ratio, self.axes[1].len() * self.axes[2].len());
        let fields = Arc::new(Fields {
            axes: self.axes.clone(),
            ln_g: Field::new(axes, &over_temp(&nodes.ln_g, &spline::along)),
            end: some(&end).then(|| Signed::new(axes, &end)),
            share: nodes.has_gate.then(|| Field::new(axes, &ratio)),
            bulk: some(&bulk).then(|| Signed::new(axes, &bulk)),
        });
        made.push((temp_k.to_bits(), Arc::clone(&fields)));
        fields
    }
}

/// Voltages of an n-channel device with `Vds ≥ 0`, and whether drain and source were exchanged.
fn turned<R: Real>(bias: Bias<R>, polarity: Polarity) -> ([R; 3], bool) {
    let s = polarity.sign();
    let (vgs, vds, vbs) = (bias.vgs * s, bias.vds * s, bias.vbs * s);
    if vds.val() < 0.0 { ([vgs - vds, -vds, vbs - vds], true) } else { ([vgs, vds, vbs], false) }
}

fn covers(axes: &[Vec<f64>; 3], v: [f64; 3]) -> bool {
    axes.iter().zip(v).all(|(a, x)| Basis::at(a, x).inside)
}

/// A transistor of a table at one temperature.
#[derive(Debug)]
pub struct TableDevice {
    polarity: Polarity,
    fields: Arc<Fields>,
    width_ratio: f64,
    vt_v: f64,
    oxide_m: f64,
    extrapolate: bool,
    used_outside: AtomicBool,
}

/// A value whose derivatives go over the three voltages.
fn spread<R: Real>(v: &[R; 3], value: f64, slope: [f64; 3]) -> R {
    v[0].chain(value, slope[0]) + v[1].chain(0.0, slope[1]) + v[2].chain(0.0, slope[2])
}

/// `ln` of the ratio of two shares, within bounds; NaN when both are nothing.
fn log_ratio(gate: f64, body: f64) -> f64 {
    if gate == 0.0 && body == 0.0 { f64::NAN } else { (gate / body).abs().ln().clamp(-ALL, ALL) }
}

/// Where no current is shared (NaN), the ratio of the nearest point along the gate axis, whose points are `stride` apart.
fn fill(ratio: &mut [f64], stride: usize) {
    let known = ratio.to_vec();
    for p in 0..known.len() {
        if known[p].is_nan() {
            let line = (p % stride..known.len()).step_by(stride).filter(|&q| !known[q].is_nan());
            ratio[p] = line.min_by_key(|q| q.abs_diff(p)).map_or(0.0, |q| known[q]);
        }
    }
}

/// A current along an axis: in its logarithm where it has one sign, else in `asinh(I/2f)` with its least size for f.
fn current_along(x: &[f64], i: &[f64], at: f64) -> f64 {
    let small = i.iter().map(|i| i.abs()).filter(|i| *i > 0.0).fold(f64::INFINITY, f64::min);
    if small == f64::INFINITY {
        return 0.0;
    }
    let sign = i[0].signum();
    if i.iter().all(|i| i * sign > 0.0) {
        let logs: Vec<f64> = i.iter().map(|i| i.abs().ln()).collect();
        return sign * Number::exp(spline::along(x, &logs, at));
    }
    let y: Vec<f64> = i.iter().map(|i| (i / (2.0 * small)).asinh()).collect();
    2.0 * small * spline::along(x, &y, at).clamp(-650.0, 650.0).sinh()
}

impl Signed {
    /// From the currents at the points; f is what nine tenths of them exceed.
    fn new(axes: [&[f64]; 3], currents: &[f64]) -> Self {
        let mut sizes: Vec<f64> = currents.iter().map(|i| i.abs()).filter(|i| *i > 0.0).collect();
        sizes.sort_by(f64::total_cmp);
        // with no current at all every f will do
        let small_a = sizes.get(sizes.len() / 10).copied().unwrap_or(1.0);
        let nodes: Vec<f64> = currents.iter().map(|i| (i / (2.0 * small_a)).asinh()).collect();
        Self { field: Field::new(axes, &nodes), small_a }
    }

    fn current<R: Real>(&self, v: &[R; 3], b: &[Basis; 3]) -> R {
        let (y, slope) = self.field.at(b);
        // 2f·sinh y, along its tangent where it would overflow
        let (value, factor) = if y.abs() < 650.0 {
            let rise = y.abs().exp_m1();
            let fall = rise / (rise + 1.0);
            (self.small_a * (rise + fall) * y.signum(), self.small_a * (rise + 2.0 - fall))
        } else {
            (self.small_a * Number::exp(y.abs()) * y.signum(), self.small_a * 650f64.exp())
        };
        spread(v, value, slope.map(|s| s * factor))
    }
}

impl TableDevice {
    /// Whether any evaluation so far left the points. A solver may pass outside on its way to an answer inside.
    pub fn used_outside(&self) -> bool {
        self.used_outside.load(Ordering::Relaxed)
    }

    /// Whether the points surround a bias.
    pub fn covers(&self, bias: Bias<f64>) -> bool {
        covers(&self.fields.axes, turned(bias, self.polarity).0)
    }

    fn at<R: Real>(&self, bias: Bias<R>) -> Branches<R> {
        let f = &*self.fields;
        let (v, exchanged) = turned(bias, self.polarity);
        let basis: [Basis; 3] = std::array::from_fn(|k| Basis::at(&f.axes[k], v[k].val()));
        if !basis.iter().all(|b| b.inside) {
            self.used_outside.store(true, Ordering::Relaxed);
        }
        let (ln_g, slope) = f.ln_g.at(&basis);
        let open = -(-(v[1] / self.vt_v)).exp_m1();
        let mut b = Branches { channel_ds: spread(&v, ln_g, slope).exp() * open, ..Branches::zero() };
        // the source end: the same tables without drain voltage
        let still = ([v[0], R::of(0.0), v[2]], [basis[0], Basis::at(&f.axes[1], 0.0), basis[2]]);
        let ends = [&(v, basis), &still].map(|(v, basis)| {
            let leak = f.end.as_ref().map_or(R::of(0.0), |e| e.current(v, basis));
            let Some(share) = &f.share else { return (leak, R::of(0.0)) };
            let (ratio, slope) = share.at(basis);
            // bounded at the points, so that no more than their continuation needs the limit
            let body_over_gate = (-ratio).clamp(-600.0, 600.0).exp();
            let to_gate = 1.0 / (1.0 + body_over_gate);
            let to_body = body_over_gate * to_gate;
            let steep = slope.map(|s| s * to_gate * to_body);
            (leak * spread(v, to_body, steep.map(|s| -s)), -(leak * spread(v, to_gate, steep)))
        });
        [(b.gidl_db, b.gate_gd), (b.gidl_sb, b.gate_gs)] = ends;
        if let Some(s) = &f.bulk {
            b.gate_gb = s.current(&v, &basis);
        }
        if exchanged {
            b = b.exchanged(true);
        }
        let scale = self.width_ratio * self.polarity.sign();
        b.map(|i| i * scale)
    }
}

/// Body currents are booked as GIDL: points do not tell it from the junctions.
impl Device for TableDevice {
    fn polarity(&self) -> Polarity {
        self.polarity
    }
    fn branches(&self, bias: Bias<f64>) -> Branches<f64> {
        self.at(bias)
    }
    fn branches_dual(&self, bias: Bias<Dual<3>>) -> Branches<Dual<3>> {
        self.at(bias)
    }
    fn has_gate_current(&self) -> bool {
        self.fields.share.is_some()
    }
    /// Whether the points have body current at gate voltages below the source, where GIDL is.
    fn has_gidl(&self) -> bool {
        self.fields.end.is_some() && self.fields.axes[0][0] < 0.0
    }
    fn oxide_m(&self) -> f64 {
        self.oxide_m
    }
    fn thermal_voltage(&self) -> f64 {
        self.vt_v
    }
    fn outside(&self, bias: Bias<f64>) -> Option<Outside> {
        let v = turned(bias, self.polarity).0;
        let found =
            ["vgs", "vds", "vbs"].iter().zip(&self.fields.axes).zip(v).filter_map(|((name, axis), x)| {
                Outside::of(RangeBasis::Points, name, x, [axis[0], axis[axis.len() - 1]])
            });
        let worst = found.map(Some).fold(None, Outside::worse)?;
        Some(Outside { refused: !self.extrapolate, ..worst })
    }
}
