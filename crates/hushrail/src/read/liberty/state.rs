//! States of a cell by its pins and stored values, and the leakage a library has for each.

use super::library::{Library, LibraryCell, PgPin, Pin, Storage};
use crate::read::condition::Condition;

/// Inputs and stored values together that states are listed for.
const MOST_BITS: usize = 16;

/// One state of a cell.
#[derive(Debug, Clone, PartialEq)]
pub struct CellState {
    /// Values of inputs and stored variables by name.
    pub bits: Vec<(String, bool)>,
    /// Pins that follow, with what they are known to be.
    pub outputs: Vec<(String, Option<bool>)>,
    /// Power drawn from every supply, in the library's unit; `None` when the library has nothing for this state.
    pub power: Option<f64>,
    /// Current over the library's unit of power: each supply's power over its own voltage, 1/V; `None` as for the power, or
    /// where a voltage is not known.
    pub over_v: Option<f64>,
    /// Where the value comes from; the weakest when there are several supplies.
    pub basis: Basis,
}

impl CellState {
    /// Value of a pin or stored variable.
    pub fn bit(&self, name: &str) -> Option<bool> {
        let own = self.bits.iter().find(|(n, _)| n == name).map(|(_, b)| Some(*b));
        own.or_else(|| self.outputs.iter().find(|(n, _)| n == name).map(|(_, b)| *b)).flatten()
    }
}

/// Where the leakage of a state comes from, strongest first.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Basis {
    /// A group whose condition holds.
    State,
    /// A group without condition, for what no other has.
    Plain,
    /// `cell_leakage_power`.
    Cell,
    /// `default_cell_leakage_power`, or the default density times the area.
    Default,
    /// Nothing.
    Nothing,
}

/// States that cannot be listed.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum StateError {
    /// No such cell.
    #[error("library `{library}` has no cell `{cell}`{}", crate::read::source::hint(.nearest.as_ref()))]
    NoCell {
        /// Library.
        library: String,
        /// What was asked for.
        cell: String,
        /// The nearest name.
        nearest: Option<String>,
    },
    /// Too many.
    #[error("cell `{cell}` has {bits} inputs and stored values; states are listed for up to {MOST_BITS}")]
    Many {
        /// Cell.
        cell: String,
        /// Inputs and stored values.
        bits: usize,
    },
}

/// The rules of one stored variable.
struct Kept {
    name: String,
    /// The inverted twin of `ff` and `latch`.
    inverse: Option<String>,
    /// While it holds, the value is that of the data.
    follows: Option<(Condition, Condition)>,
    clear: Option<Condition>,
    preset: Option<Condition>,
    /// Value when clear and preset are both on, of the variable and of its twin: `L`, `H`, or anything else for unknown.
    both: (Option<bool>, Option<bool>),
}

fn rules(s: &Storage) -> Vec<Kept> {
    let get = |k: &str| s.attributes.get(k).and_then(|t| Condition::parse(t).ok());
    let level = |k: &str| match s.attributes.get(k).map(String::as_str) {
        Some("L") => Some(false),
        Some("H") => Some(true),
        _ => None,
    };
    let names = s.names();
    if s.kind == "statetable" {
        let free = |n: &&str| Kept {
            name: (*n).to_owned(),
            inverse: None,
            follows: None,
            clear: None,
            preset: None,
            both: (None, None),
        };
        return names.iter().map(free).collect();
    }
    let Some(first) = names.first() else { return Vec::new() };
    let follows = if s.kind.starts_with("latch") { get("enable").zip(get("data_in")) } else { None };
    vec![Kept {
        name: (*first).to_owned(),
        inverse: names.get(1).map(|n| (*n).to_owned()),
        follows,
        clear: get("clear"),
        preset: get("preset"),
        both: (level("clear_preset_var1"), level("clear_preset_var2")),
    }]
}

/// A leakage group ready to be asked; `bits` when it is a product over known variables.
struct Posed {
    value: f64,
    condition: Condition,
    bits: Option<(u64, u64)>,
}

/// The groups of one supply.
struct Supply {
    groups: Vec<Posed>,
    plain: Option<f64>,
    voltage_v: Option<f64>,
}

impl Library {
    /// A cell by name.
    ///
    /// # Errors
    /// No such cell, with the nearest name.
    pub fn cell(&self, name: &str) -> Result<&LibraryCell, StateError> {
        self.cells.get(name).ok_or_else(|| StateError::NoCell {
            library: self.name.clone(),
            cell: name.to_owned(),
            nearest: crate::read::source::nearest(name, self.cells.keys().map(String::as_str)),
        })
    }

    /// Every state of a cell: all values of its inputs and of what it stores that can stand together.
    ///
    /// # Errors
    /// No such cell, or one with too many inputs.
    pub fn states(&self, name: &str) -> Result<Vec<CellState>, StateError> {
        let cell = self.cell(name)?;
        let kept: Vec<Kept> = cell.storage.iter().flat_map(rules).collect();
        let mut vars: Vec<String> = Vec::new();
        let is_input = |d: &str| matches!(d, "input" | "inout");
        vars.extend(cell.pins.iter().filter(|(_, p)| is_input(&p.direction)).map(|(n, _)| n.clone()));
        if cell.pins.is_empty() {
            // a library without pins still has conditions
            for g in &cell.leakage {
                let Ok(c) = Condition::parse(&g.when) else { continue };
                for p in c.pins() {
                    if !vars.iter().any(|v| v == p) {
                        vars.push(p.to_owned());
                    }
                }
            }
        }
        let inputs = vars.len();
        vars.extend(kept.iter().map(|k| k.name.clone()));
        // an output without function is free where conditions name it; what no condition has of it does not exist
        let mut named: Vec<String> = Vec::new();
        for g in &cell.leakage {
            let condition = Condition::parse(&g.when).ok();
            named.extend(condition.iter().flat_map(Condition::pins).map(str::to_owned));
        }
        let told = |p: &Pin| p.function.as_deref().is_some_and(|f| Condition::parse(f).is_ok());
        let stored = vars.len();
        let unknown = cell.pins.iter().filter(|(n, p)| !vars.contains(n) && !told(p) && named.contains(n));
        let unknown: Vec<String> = unknown.map(|(n, _)| n.clone()).collect();
        vars.extend(unknown);
        let free = vars.len();
        if free > MOST_BITS {
            return Err(StateError::Many { cell: name.to_owned(), bits: free });
        }
        vars.extend(kept.iter().filter_map(|k| k.inverse.clone()));
        let twins = vars.len();
        let mut functions: Vec<(Option<Condition>, Option<Condition>)> = Vec::new();
        for (n, p) in &cell.pins {
            if !vars.contains(n) {
                vars.push(n.clone());
                let parsed = |t: &Option<String>| t.as_deref().and_then(|t| Condition::parse(t).ok());
                functions.push((parsed(&p.function), parsed(&p.three_state)));
            }
        }
        let index = |n: &str| vars.iter().position(|v| v == n);
        let supplies = self.supplies(cell, &index);
        let mut out = Vec::new();
        for k in 0..1usize << free {
            let mut values: Vec<Option<bool>> = vec![None; vars.len()];
            for (i, v) in values[..free].iter_mut().enumerate() {
                *v = Some(k >> (free - 1 - i) & 1 == 1);
            }
            if !settle(&kept, &functions, &mut values, [inputs, free, twins], &index) {
                continue;
            }
            let (power, over_v, basis) = self.power(cell, &supplies, &values, &index);
            if free > stored && basis != Basis::State {
                continue;
            }
            let bits = vars[..free].iter().zip(&values).map(|(n, v)| (n.clone(), *v == Some(true))).collect();
            let outputs = vars[free..].iter().zip(&values[free..]).map(|(n, v)| (n.clone(), *v)).collect();
            out.push(CellState { bits, outputs, power, over_v, basis });
        }
        Ok(out)
    }

    fn supplies(&self, cell: &LibraryCell, index: &dyn Fn(&str) -> Option<usize>) -> Vec<Supply> {
        let mut out: indexmap::IndexMap<Option<&str>, Supply> = indexmap::IndexMap::new();
        for g in &cell.leakage {
            let pin = g.supply.as_deref();
            if pin.and_then(|p| cell.pg_pins.get(p)).is_some_and(PgPin::is_ground) {
                continue;
            }
            let empty = || Supply { groups: Vec::new(), plain: None, voltage_v: self.supply_v(cell, pin) };
            let s = out.entry(pin).or_insert_with(empty);
            if g.when.is_empty() {
                s.plain = s.plain.or(Some(g.value));
            } else if let Ok(condition) = Condition::parse(&g.when) {
                let bits = condition.product().and_then(|list| {
                    list.iter().try_fold((0, 0), |(care, value), (pin, high)| {
                        let bit = index(pin).filter(|b| *b < 64)?;
                        Some((care | 1 << bit, value | u64::from(*high) << bit))
                    })
                });
                s.groups.push(Posed { value: g.value, condition, bits });
            }
        }
        out.into_values().collect()
    }

    fn power(
        &self,
        cell: &LibraryCell,
        supplies: &[Supply],
        values: &[Option<bool>],
        index: &dyn Fn(&str) -> Option<usize>,
    ) -> (Option<f64>, Option<f64>, Basis) {
        let word = values.iter().take(64).enumerate().fold((0u64, 0u64), |(known, ones), (i, v)| {
            (known | u64::from(v.is_some()) << i, ones | u64::from(*v == Some(true)) << i)
        });
        let mut sum = (0.0, Some(0.0));
        let mut basis = Basis::State;
        let mut lost = supplies.is_empty();
        for s in supplies {
            let holds = |g: &&Posed| match g.bits {
                Some((care, ones)) => care & !word.0 == 0 && (word.1 ^ ones) & care == 0,
                None => g.condition.value(&mut |p| index(p).and_then(|i| values[i])) == Some(true),
            };
            let found = s.groups.iter().find(holds).map(|g| (g.value, Basis::State));
            match found.or_else(|| s.plain.map(|v| (v, Basis::Plain))) {
                Some((value, from)) => {
                    basis = basis.max(from);
                    sum.0 += value;
                    sum.1 = sum.1.zip(s.voltage_v).map(|(a, v)| a + value / v);
                }
                None => lost = true,
            }
        }
        if !lost {
            return (Some(sum.0), sum.1, basis);
        }
        let whole = |v: f64, from: Basis| {
            let over = self.supply_v(cell, None).map(|u| v / u);
            (Some(v), over, from)
        };
        let density = self.default_leakage_power_density.zip(cell.area).map(|(d, a)| d * a);
        match (cell.cell_leakage_power, self.default_cell_leakage_power.or(density)) {
            (Some(v), _) => whole(v, Basis::Cell),
            (None, Some(v)) => whole(v, Basis::Default),
            (None, None) => (None, None, Basis::Nothing),
        }
    }
}

/// Works out what follows from inputs and stored values; false when they cannot stand together.
fn settle(
    kept: &[Kept],
    functions: &[(Option<Condition>, Option<Condition>)],
    values: &mut [Option<bool>],
    [inputs, free, twins]: [usize; 3],
    index: &dyn Fn(&str) -> Option<usize>,
) -> bool {
    let mut twin = free;
    for (i, k) in kept.iter().enumerate() {
        if k.inverse.is_some() {
            values[twin] = values[inputs + i].map(|b| !b);
            twin += 1;
        }
    }
    follow(functions, values, twins, index);
    let mut changed = false;
    let mut twin = free;
    for (i, k) in kept.iter().enumerate() {
        let value = |c: &Option<Condition>| {
            c.as_ref().is_some_and(|c| c.value(&mut |p| index(p).and_then(|i| values[i])) == Some(true))
        };
        let (clear, preset) = (value(&k.clear), value(&k.preset));
        let own = values[inputs + i];
        let mut forced = None;
        let mut other = None;
        if clear && preset {
            (forced, other) = k.both;
        } else if clear || preset {
            forced = Some(preset);
        } else if let Some((enable, data)) = &k.follows {
            let mut pin = |p: &str| index(p).and_then(|i| values[i]);
            if enable.value(&mut pin) == Some(true) {
                forced = data.value(&mut pin);
            }
        }
        if forced.is_some() && forced != own {
            return false;
        }
        if k.inverse.is_some() {
            if clear && preset && other != values[twin] {
                (values[twin], changed) = (other, true);
            }
            twin += 1;
        }
    }
    if changed {
        follow(functions, values, twins, index);
    }
    true
}

/// Works out the outputs; they may feed each other, and as many rounds as there are outputs settle them.
fn follow(
    functions: &[(Option<Condition>, Option<Condition>)],
    values: &mut [Option<bool>],
    twins: usize,
    index: &dyn Fn(&str) -> Option<usize>,
) {
    for _ in 0..functions.len() {
        let before = values.to_vec();
        for (j, (function, three_state)) in functions.iter().enumerate() {
            let mut pin = |p: &str| index(p).and_then(|i| before[i]);
            let off = three_state.as_ref().map_or(Some(false), |t| t.value(&mut pin));
            let value = function.as_ref().and_then(|f| f.value(&mut pin));
            values[twins + j] = if off == Some(false) { value } else { None };
        }
        if *values == *before {
            break;
        }
    }
}
