//! Static noise margins of cells from their solved transfer curves, at their own rails and between rails.

use serde::{Deserialize, Serialize};

use super::curve::{Curve, CurvePoint};
use super::error::AwakeError;
use super::square::{Butterfly, butterfly_of, refine};
use crate::cell::posed::Posed;
use crate::cell::{BoundCell, CellError, Levels, Role, State};
use crate::circuit::network::Node;
use crate::circuit::newton::SolveOptions;

/// A way through a cell: one input moves one output while the others stand still.
#[derive(Debug, Clone, PartialEq)]
pub struct Path {
    /// Input port.
    pub input: String,
    /// Output port.
    pub output: String,
    /// The other inputs, such as `B=1`; empty when there are none.
    pub others: String,
    /// Whether the output falls where the input rises.
    pub inverts: bool,
    input_node: Node,
    output_node: Node,
    /// The state with the input at zero.
    low: State,
}

/// Every way through a cell that does not depend on what it stores.
///
/// # Errors
/// Too many inputs to list.
pub fn paths(cell: &BoundCell) -> Result<Vec<Path>, AwakeError> {
    let inputs = cell.input_nodes();
    let names: Vec<&str> = cell.cell.ports_of(Role::Input).map(|i| &*cell.cell.ports[i]).collect();
    if inputs.len() > crate::cell::bound::MAX_INPUTS {
        return Err(CellError::TooMany {
            cell: cell.cell.name.to_string(),
            what: "inputs",
            count: inputs.len(),
            limit: crate::cell::bound::MAX_INPUTS,
        }
        .into());
    }
    let mut out = Vec::new();
    for code in 0..1usize << inputs.len() {
        let bits: Vec<bool> = (0..inputs.len()).map(|i| code >> i & 1 == 1).collect();
        let [low] = &cell.states_with(&bits)?[..] else { continue };
        for i in (0..inputs.len()).filter(|&i| !bits[i]) {
            let mut up = bits.clone();
            up[i] = true;
            let [high] = &cell.states_with(&up)?[..] else { continue };
            for o in cell.cell.ports_of(Role::Output) {
                let n = cell.cell.port_nodes[o];
                let (Some(a), Some(b)) = (low.logic[n].bit(), high.logic[n].bit()) else { continue };
                if a == b {
                    continue;
                }
                let others: Vec<String> = (0..inputs.len())
                    .filter(|&k| k != i)
                    .map(|k| format!("{}={}", names[k], u8::from(bits[k])))
                    .collect();
                out.push(Path {
                    input: names[i].to_owned(),
                    output: cell.cell.ports[o].to_string(),
                    others: others.join(" "),
                    inverts: a,
                    input_node: inputs[i],
                    output_node: n,
                    low: low.clone(),
                });
            }
        }
    }
    Ok(out)
}

/// Solves points of a transfer curve. A curve that rises is mirrored in the middle of the range given, so that every curve
/// falls.
pub struct Tracer<'a> {
    posed: Posed<'a>,
    input: Node,
    output: Node,
    /// Sum of the ends of the range where the curve is mirrored.
    mirror: Option<f64>,
    what: String,
}

impl<'a> Tracer<'a> {
    /// Traces a path of a cell over inputs between `lo` and `hi`.
    pub fn of_path(
        cell: &'a BoundCell,
        path: &Path,
        levels: &Levels,
        (lo, hi): (f64, f64),
        options: &'a SolveOptions,
    ) -> Self {
        Self {
            posed: Posed::new(cell, &path.low, levels, None, &[], options),
            input: path.input_node,
            output: path.output_node,
            mirror: (!path.inverts).then_some(lo + hi),
            what: format!("cell `{}` from {} to {}", cell.cell.name, path.input, path.output),
        }
    }

    /// Traces half a loop: from the gates on `from` to the net `to`.
    pub fn of_loop(
        cell: &'a BoundCell,
        state: &State,
        levels: &Levels,
        (from, to): (Node, Node),
        options: &'a SolveOptions,
    ) -> Self {
        let posed = Posed::new(cell, state, levels, Some(from), &[], options);
        let names = &cell.cell.nodes;
        let what = format!("cell `{}` from {} to {}", cell.cell.name, names[from], names[to]);
        Self { input: posed.probe(), output: to, mirror: None, what, posed }
    }

    /// One point.
    ///
    /// # Errors
    /// No balance, or a singular one.
    pub fn at(&mut self, in_v: f64) -> Result<CurvePoint, AwakeError> {
        self.posed.set(self.input, in_v);
        self.posed.solve()?;
        let slope = self.posed.answer_of(self.output).map(|a| self.posed.to_node(&a, self.input));
        let Some(slope) = slope.filter(|s| s.is_finite()) else {
            return Err(AwakeError::Curve {
                what: self.what.clone(),
                reason: format!("no slope at {in_v:.4} V in: the conductance matrix is singular"),
            });
        };
        let out_v = self.posed.voltage(self.output);
        Ok(match self.mirror {
            Some(sum) => CurvePoint { in_v, out_v: sum - out_v, slope: -slope },
            None => CurvePoint { in_v, out_v, slope },
        })
    }

    /// Slopes of the output to the threshold of every element at an input, and the curve's own slope there.
    pub(super) fn thresholds_at(&mut self, in_v: f64) -> Result<(Vec<f64>, f64), AwakeError> {
        let p = self.at(in_v)?;
        let to = self.posed.answer_of(self.output).map(|a| self.posed.to_thresholds(&a));
        Ok((to.unwrap_or_default(), p.slope))
    }

    /// Samples the curve over a range and checks that it can carry a square.
    pub(super) fn curve(&mut self, lo: f64, hi: f64) -> Result<Curve, AwakeError> {
        let c = Curve::sample(lo, hi, &mut |x| self.at(x))?;
        let falls = |w: &[CurvePoint]| w[1].out_v - w[1].in_v < w[0].out_v - w[0].in_v;
        match c.points.windows(2).find(|w| !falls(w)) {
            Some(w) => Err(AwakeError::Curve {
                what: self.what.clone(),
                reason: format!(
                    "it rises from {:.4} to {:.4} V as its input goes from {:.4} to {:.4} V; only curves of one direction \
                     carry squares",
                    w[0].out_v, w[1].out_v, w[0].in_v, w[1].in_v
                ),
            }),
            None => Ok(c),
        }
    }
}

/// Where the gain is one.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct UnityGain {
    /// Highest input still taken as zero, V.
    pub vil_v: f64,
    /// Lowest input taken as one, V.
    pub vih_v: f64,
    /// Output at zero, V.
    pub vol_v: f64,
    /// Output at one, V.
    pub voh_v: f64,
    /// `VIL − VOL`, V.
    pub nml_v: f64,
    /// `VOH − VIH`, V.
    pub nmh_v: f64,
}

/// One transfer curve of a cell.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct PathMargin {
    /// The cell.
    pub cell: String,
    /// Input that moves.
    pub input: String,
    /// Output that follows.
    pub output: String,
    /// The other inputs.
    pub others: String,
    /// Whether the output falls where the input rises.
    pub inverts: bool,
    /// Unity-gain margins; `None` where the gain never reaches one: the cell restores nothing.
    pub unity: Option<UnityGain>,
}

/// Largest squares of the worst pair of curves.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct PairMargin {
    /// Side of the smaller square, V; zero when the pair would hold nothing.
    pub margin_v: f64,
    /// The first curve, as `cell input→output (others)`.
    pub first: String,
    /// The second.
    pub second: String,
    /// The curves and squares, mirrored where both rise.
    pub butterfly: Butterfly,
}

/// Margins of a cell, or between two.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Margins {
    /// Every curve.
    pub paths: Vec<PathMargin>,
    /// Smallest `VIL` of any receiver less largest `VOL` of any driver, V, over every pair of curves.
    pub nml_v: Option<f64>,
    /// Smallest `VOH` of any driver less largest `VIH` of any receiver, V.
    pub nmh_v: Option<f64>,
    /// Largest squares of the worst pair of curves of one direction; `None` when there is no such pair.
    pub square: Option<PairMargin>,
}

fn name(cell: &BoundCell, p: &Path) -> String {
    let others = if p.others.is_empty() { String::new() } else { format!(" ({})", p.others) };
    format!("{} {}→{}{others}", cell.cell.name, p.input, p.output)
}

/// A cell at its rails.
#[derive(Debug, Clone, Copy)]
pub struct AtRails<'a> {
    /// The cell.
    pub cell: &'a BoundCell,
    /// Its rails; other inputs stand at its `high_v` and `low_v`.
    pub levels: Levels,
}

struct Traced<'a> {
    tracer: Tracer<'a>,
    path: Path,
    curve: Curve,
    name: String,
    unity: Option<UnityGain>,
}

fn traced<'a>(
    at: AtRails<'a>,
    range: (f64, f64),
    options: &'a SolveOptions,
) -> Result<Vec<Traced<'a>>, AwakeError> {
    paths(at.cell)?
        .into_iter()
        .map(|path| {
            let mut tracer = Tracer::of_path(at.cell, &path, &at.levels, range, options);
            let curve = tracer.curve(range.0, range.1)?;
            let ends = curve.unity_gain(&mut |x| tracer.at(x))?;
            let unity = ends.map(|(a, b)| {
                let back = |v: f64| if path.inverts { v } else { range.0 + range.1 - v };
                let (at_low, at_high) = (back(a.out_v), back(b.out_v));
                let (vol_v, voh_v) = if path.inverts { (at_high, at_low) } else { (at_low, at_high) };
                let (vil_v, vih_v) = (a.in_v, b.in_v);
                UnityGain { vil_v, vih_v, vol_v, voh_v, nml_v: vil_v - vol_v, nmh_v: voh_v - vih_v }
            });
            let name = name(at.cell, &path);
            Ok(Traced { tracer, path, curve, name, unity })
        })
        .collect()
}

/// Margins of a driver that meets a receiver, each at its own rails; a cell with itself when both are the same. Worst over the
/// values of the other inputs.
///
/// # Errors
/// Too many inputs, a cell without operating point, a curve that turns back, or a cell without a path from input to output.
pub fn margins(
    driver: AtRails<'_>,
    receiver: AtRails<'_>,
    options: &SolveOptions,
) -> Result<Margins, AwakeError> {
    let (a, b) = (driver.levels, receiver.levels);
    let range = (a.ground_v.min(b.ground_v), a.supply_v.max(b.supply_v));
    let mut first = traced(driver, range, options)?;
    let mut second = traced(receiver, range, options)?;
    for (list, at) in [(&first, driver), (&second, receiver)] {
        if list.is_empty() {
            return Err(AwakeError::Curve {
                what: format!("cell `{}`", at.cell.cell.name),
                reason:
                    "no input moves an output whatever it stores; use the hold margin for cells that store"
                        .into(),
            });
        }
    }
    let same = std::ptr::eq(driver.cell, receiver.cell) && a == b;
    let mut worst: Option<(usize, usize, f64)> = None;
    for (i, f) in first.iter().enumerate() {
        for (j, g) in second.iter().enumerate() {
            if f.path.inverts != g.path.inverts || same && j < i {
                continue;
            }
            let m = butterfly_of(f.curve.clone(), g.curve.clone()).margin_v();
            if worst.is_none_or(|w| m < w.2) {
                worst = Some((i, j, m));
            }
        }
    }
    let square = worst
        .map(|(i, j, _)| {
            let (f, g) = (&mut first[i], &mut second[j]);
            let (mut tf, mut tg) = (|x| f.tracer.at(x), |x| g.tracer.at(x));
            let butterfly = refine(f.curve.clone(), g.curve.clone(), &mut tf, &mut tg)?;
            Ok::<_, AwakeError>(PairMargin {
                margin_v: butterfly.margin_v(),
                first: f.name.clone(),
                second: g.name.clone(),
                butterfly,
            })
        })
        .transpose()?;
    let least = |of: &dyn Fn(&UnityGain, &UnityGain) -> f64| {
        let mut m: Option<f64> = None;
        for d in &first {
            for r in &second {
                let v = of(d.unity.as_ref()?, r.unity.as_ref()?);
                m = Some(m.map_or(v, |m| m.min(v)));
            }
        }
        m
    };
    let (nml_v, nmh_v) = (least(&|d, r| r.vil_v - d.vol_v), least(&|d, r| d.voh_v - r.vih_v));
    let mut list = Vec::new();
    let take: Vec<(&Traced<'_>, &BoundCell)> = if same {
        first.iter().map(|t| (t, driver.cell)).collect()
    } else {
        first.iter().map(|t| (t, driver.cell)).chain(second.iter().map(|t| (t, receiver.cell))).collect()
    };
    for (t, cell) in take {
        list.push(PathMargin {
            cell: cell.cell.name.to_string(),
            input: t.path.input.clone(),
            output: t.path.output.clone(),
            others: t.path.others.clone(),
            inverts: t.path.inverts,
            unity: t.unity,
        });
    }
    Ok(Margins { paths: list, nml_v, nmh_v, square })
}
