//! What is missing, zero or contradictory in a library, as notes.

use indexmap::IndexMap;

use super::library::{LeakageGroup, Library, LibraryCell, Nominal, PgPin};
use super::reader::{LibertyOptions, Notes};
use crate::read::condition::Condition;

/// Values that agree to this share are the same: tables are printed with six digits.
const SAME: f64 = 1e-5;

/// The same for an average against states with fewer digits.
const COARSE: f64 = 1e-3;

/// Pairs of conditions that are compared in one cell before the search for overlaps gives up.
const MOST_PAIRS: usize = 2_000_000;

/// Pins over which conditions that are no products are compared value by value.
const MOST_PINS: usize = 12;

fn differ(a: f64, b: f64) -> bool {
    (a - b).abs() > SAME * a.abs().max(b.abs())
}

/// Looks through a cell.
pub(super) fn cell(path: &str, name: &str, cell: &LibraryCell, notes: &mut Notes) {
    let at = |line: u32| format!("{path}:{line}: cell `{name}`");
    let mut supplies: IndexMap<Option<&str>, Vec<&LeakageGroup>> = IndexMap::new();
    for g in &cell.leakage {
        supplies.entry(g.supply.as_deref()).or_default().push(g);
        if let Some(pin) = &g.supply
            && !cell.pg_pins.is_empty()
            && !cell.pg_pins.contains_key(pin)
        {
            notes.add("unknown-supply", || format!("{}: the cell has no supply pin `{pin}`", at(g.line)));
        }
        let ground = g.supply.as_ref().and_then(|s| cell.pg_pins.get(s)).is_some_and(PgPin::is_ground);
        if ground && g.value != 0.0 {
            notes.add("ground-power", || {
                format!("{}: {} drawn from a ground pin is not counted", at(g.line), g.value)
            });
        } else if !ground && g.value <= 0.0 {
            let what = if g.value == 0.0 { "zero" } else { "negative" };
            notes.add(what, || {
                let state = if g.when.is_empty() { "every state" } else { &g.when };
                format!("{}: leakage of `{state}` is {}", at(g.line), g.value)
            });
        }
    }
    if let Some(x) = cell.cell_leakage_power {
        if x <= 0.0 {
            let what = if x == 0.0 { "zero" } else { "negative" };
            notes.add(what, || format!("{}: `cell_leakage_power` is {x}", at(cell.line)));
        }
        if let [(_, groups)] = supplies.iter().collect::<Vec<_>>()[..] {
            let least = groups.iter().map(|g| g.value).fold(f64::INFINITY, f64::min);
            let most = groups.iter().map(|g| g.value).fold(0.0, f64::max);
            // states are printed with as few as four digits
            if x < least * (1.0 - COARSE) || x > most * (1.0 + COARSE) {
                notes.add("contradiction", || {
                    format!(
                        "{}: `cell_leakage_power` is {x}, its states lie from {least} to {most}",
                        at(cell.line)
                    )
                });
            }
        }
    } else if cell.leakage.is_empty() {
        notes.add("no-leakage", || {
            format!("{}: neither leakage groups nor `cell_leakage_power`", at(cell.line))
        });
    }
    let known = |p: &str| cell.pins.contains_key(p) || cell.stored_names().any(|s| s == p);
    for groups in supplies.values() {
        conditions(&at, groups, &known, !cell.pins.is_empty(), notes);
    }
    for (pin, p) in &cell.pins {
        for text in [&p.function, &p.three_state].into_iter().flatten() {
            if let Err(e) = Condition::parse(text) {
                notes.add("function", || format!("{}: function of pin `{pin}`: {e}", at(cell.line)));
            }
        }
    }
}

/// A condition as bits of the pins it fixes and their values, when it is a product.
struct Posed<'a> {
    group: &'a LeakageGroup,
    condition: Condition,
    product: Option<(u64, u64)>,
}

fn conditions(
    at: &dyn Fn(u32) -> String,
    groups: &[&LeakageGroup],
    known: &dyn Fn(&str) -> bool,
    has_pins: bool,
    notes: &mut Notes,
) {
    let mut pins: IndexMap<String, ()> = IndexMap::new();
    let mut posed: Vec<Posed<'_>> = Vec::new();
    let mut plain: Option<&LeakageGroup> = None;
    for g in groups {
        if g.when.is_empty() {
            if let Some(first) = plain.filter(|f| differ(f.value, g.value)) {
                notes.add("contradiction", || {
                    let (a, b) = (first.value, g.value);
                    format!("{}: two values without condition, {a} and {b}; the first counts", at(g.line))
                });
            }
            plain = plain.or(Some(g));
            continue;
        }
        let Ok(condition) = Condition::parse(&g.when) else { continue };
        for p in condition.pins() {
            pins.entry(p.to_owned()).or_default();
            if has_pins && !known(p) {
                notes.add("unknown-pin", || {
                    format!("{}: `{}`: the cell has no pin `{p}`", at(g.line), g.when)
                });
            }
        }
        posed.push(Posed { group: g, condition, product: None });
    }
    if pins.len() > 64 || posed.len() * posed.len() / 2 > MOST_PAIRS {
        notes.add("not-compared", || {
            let line = groups.first().map_or(0, |g| g.line);
            format!(
                "{}: {} conditions over {} pins are not searched for overlaps",
                at(line),
                posed.len(),
                pins.len()
            )
        });
        return;
    }
    for p in &mut posed {
        p.product = p.condition.product().map(|list| {
            list.iter().fold((0, 0), |(care, value), (pin, high)| {
                let bit = pins.get_index_of(*pin).unwrap_or(0);
                (care | 1 << bit, value | u64::from(*high) << bit)
            })
        });
    }
    for (i, b) in posed.iter().enumerate() {
        for a in &posed[..i] {
            if !differ(a.group.value, b.group.value) || !overlap(a, b) {
                continue;
            }
            let (x, y) = (a.group.value, b.group.value);
            if a.product.is_some() && a.product == b.product {
                notes.add("duplicate-when", || {
                    format!("{}: `{}` is {x} and {y}; the first counts", at(b.group.line), b.group.when)
                });
            } else {
                notes.add("overlap", || {
                    let (v, w) = (&a.group.when, &b.group.when);
                    format!(
                        "{}: `{v}` is {x} and `{w}` is {y}, and both may hold; the first counts",
                        at(b.group.line)
                    )
                });
            }
        }
    }
}

/// Whether some values of the pins fit both.
fn overlap(a: &Posed<'_>, b: &Posed<'_>) -> bool {
    if let (Some((ca, va)), Some((cb, vb))) = (a.product, b.product) {
        return (va ^ vb) & ca & cb == 0;
    }
    let mut pins = a.condition.pins();
    for p in b.condition.pins() {
        if !pins.contains(&p) {
            pins.push(p);
        }
    }
    pins.len() <= MOST_PINS
        && (0..1u32 << pins.len()).any(|bits| {
            let mut pin = |name: &str| pins.iter().position(|p| *p == name).map(|i| bits >> i & 1 == 1);
            a.condition.value(&mut pin) == Some(true) && b.condition.value(&mut pin) == Some(true)
        })
}

/// Scales what the file states in its own units, fills in what it leaves open, and says what is missing.
pub(super) fn finish(library: &mut Library, options: &LibertyOptions, notes: &mut Notes) {
    let path = library.path.clone();
    let stated = library.nominal.voltage_v.is_some() || !library.voltage_map.is_empty();
    let volt = library.units.voltage_v.unwrap_or_else(|| {
        if stated {
            notes.add("no-unit", || format!("{path}: no `voltage_unit`; voltages are read as V"));
        }
        1.0
    });
    let scale = |v: &mut f64| *v *= volt;
    library.voltage_map.values_mut().for_each(scale);
    library.conditions.values_mut().for_each(|c| c.voltage_v.iter_mut().for_each(scale));
    library.nominal.voltage_v.iter_mut().for_each(scale);

    let default = match &library.default_conditions {
        Some(name) => {
            let found = library.conditions.get(name).copied();
            if found.is_none() {
                notes.add("contradiction", || {
                    format!("{path}: `default_operating_conditions` `{name}` are not in the library")
                });
            }
            found.unwrap_or_default()
        }
        None => Nominal::default(),
    };
    for (name, unit, nominal, other, given) in [
        ("nom_voltage", "V", &mut library.nominal.voltage_v, default.voltage_v, options.voltage_v),
        ("nom_temperature", "°C", &mut library.nominal.temp_c, default.temp_c, options.temp_c),
    ] {
        match (*nominal, other) {
            (Some(a), Some(b)) if differ(a, b) => notes.add("contradiction", || {
                format!("{path}: `{name}` is {a} {unit}, the default operating conditions have {b}; the first counts")
            }),
            (None, Some(b)) => {
                notes.add("missing", || format!("{path}: no `{name}`; the default operating conditions have {b} {unit}"));
                *nominal = Some(b);
            }
            _ => {}
        }
        match (*nominal, given) {
            (Some(a), Some(b)) if differ(a, b) => notes.add("contradiction", || {
                format!("{path}: `{name}` is {a} {unit} in the file and {b} as given; the file counts")
            }),
            (None, Some(b)) => *nominal = Some(b),
            (None, None) => notes.add("missing", || format!("{path}: no `{name}`, and none is given")),
            _ => {}
        }
    }
    match (library.units.leakage_w, options.leakage_unit_w) {
        (Some(a), Some(b)) if differ(a, b) => notes.add("contradiction", || {
            format!(
                "{path}: `leakage_power_unit` is {a:e} W in the file and {b:e} W as given; the file counts"
            )
        }),
        (None, Some(b)) => library.units.leakage_w = Some(b),
        (None, None) => notes.add("no-unit", || {
            format!(
                "{path}: no `leakage_power_unit`, and none is given: leakage is known up to a factor only"
            )
        }),
        _ => {}
    }
    for (name, value) in [
        ("default_cell_leakage_power", library.default_cell_leakage_power),
        ("default_leakage_power_density", library.default_leakage_power_density),
    ] {
        if value.is_some_and(|v| v < 0.0) {
            notes.add("negative", || format!("{path}: `{name}` is {}", value.unwrap_or(0.0)));
        }
    }
}
