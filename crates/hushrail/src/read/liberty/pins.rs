//! Pins of a cell, buses and bundles taken apart.

use indexmap::IndexMap;

use super::library::Pin;
use super::parse::{Attribute, Event, Head};
use super::reader::Reader;
use crate::read::source::ReadError;

/// Attributes of pins that say what they are for.
const PIN_ATTRIBUTES: [&str; 24] = [
    "always_on",
    "clock",
    "clock_gate_clock_pin",
    "clock_gate_enable_pin",
    "clock_gate_out_pin",
    "input_signal_level",
    "internal_node",
    "is_isolated",
    "isolation_cell_data_pin",
    "isolation_cell_enable_pin",
    "isolation_enable_condition",
    "level_shifter_data_pin",
    "level_shifter_enable_pin",
    "map_to_logic",
    "nextstate_type",
    "output_signal_level",
    "power_down_function",
    "power_gating_pin",
    "related_bias_pin",
    "restore_condition",
    "retention_pin",
    "save_condition",
    "switch_pin",
    "test_output_only",
];

/// Bits a bus may have.
const WIDEST: i64 = 4096;

/// Names of a pin group: `A`, `A[3:0]` as four.
fn names(arg: &str) -> Vec<String> {
    let range = arg.strip_suffix(']').and_then(|a| a.rsplit_once('['));
    if let Some((base, range)) = range
        && let Some((from, to)) = range.split_once(':')
        && let (Ok(from), Ok(to)) = (from.trim().parse::<i64>(), to.trim().parse::<i64>())
        && from.abs_diff(to) < WIDEST.unsigned_abs()
    {
        return bits(base, from, to);
    }
    vec![arg.to_owned()]
}

fn bits(base: &str, from: i64, to: i64) -> Vec<String> {
    let name = |i: i64| format!("{base}[{i}]");
    if from <= to { (from..=to).map(name).collect() } else { (to..=from).rev().map(name).collect() }
}

impl Reader<'_> {
    /// A `type` group: how many bits a bus has.
    pub(super) fn bus_type(&mut self, h: &Head<'_>) -> Result<(), ReadError> {
        let (mut from, mut to) = (None, None);
        loop {
            match self.p.step()? {
                Some(Event::Open(_)) => self.p.skip()?,
                Some(Event::Attribute(a)) => match a.name {
                    "bit_from" => from = Some(self.bit(&a)?),
                    "bit_to" => to = Some(self.bit(&a)?),
                    _ => {}
                },
                Some(Event::Close) | None => break,
            }
        }
        if let (Some(from), Some(to)) = (from, to) {
            if from.abs_diff(to) >= WIDEST.unsigned_abs() {
                let found = format!("bits {from} to {to} of `{}`", h.arg());
                return Err(self.p.lexer.wrong(h.at, found, format!("want at most {WIDEST} bits")));
            }
            self.types.insert(h.arg().to_owned(), (from, to));
        }
        Ok(())
    }

    fn bit(&mut self, a: &Attribute<'_>) -> Result<i64, ReadError> {
        let found = a.text().parse::<i32>();
        found.map(i64::from).map_err(|_| {
            let found = format!("`{}` of `{}`", a.joined(), a.name);
            self.p.lexer.wrong(a.value_at, found, "want a whole number")
        })
    }

    /// A `pin`, `bus` or `bundle` group.
    pub(super) fn pins(&mut self, h: &Head<'_>, pins: &mut IndexMap<String, Pin>) -> Result<(), ReadError> {
        let mut list: Vec<String> = Vec::new();
        if h.name == "pin" {
            list.extend(h.args.iter().flat_map(|a| names(a.trim())));
        }
        let mut inner: IndexMap<String, Pin> = IndexMap::new();
        let mut pin = Pin::default();
        loop {
            match self.p.step()? {
                Some(Event::Open(g)) if g.name == "pin" && h.name != "pin" => self.pins(&g, &mut inner)?,
                Some(Event::Open(_)) => self.p.skip()?,
                Some(Event::Attribute(a)) => match a.name {
                    "bus_type" => {
                        if let Some(&(from, to)) = self.types.get(a.text()) {
                            list = bits(h.arg(), from, to);
                        } else {
                            let (bus, kind) = (h.arg(), a.text());
                            self.note_at("bus-type", a.at, || {
                                format!("bus `{bus}`: type `{kind}` is not defined")
                            });
                        }
                    }
                    "members" => list = a.values.iter().map(|v| v.trim().to_owned()).collect(),
                    "direction" => a.text().clone_into(&mut pin.direction),
                    "function" => pin.function = Some(a.text().to_owned()),
                    "state_function" => {
                        pin.function.get_or_insert_with(|| a.text().to_owned());
                    }
                    "three_state" => pin.three_state = Some(a.text().to_owned()),
                    "related_power_pin" => pin.related_power_pin = Some(a.text().to_owned()),
                    "related_ground_pin" => pin.related_ground_pin = Some(a.text().to_owned()),
                    n if PIN_ATTRIBUTES.contains(&n) => {
                        pin.attributes.insert(n.to_owned(), a.joined());
                    }
                    _ => {}
                },
                Some(Event::Close) | None => break,
            }
        }
        for name in list {
            if pins.contains_key(&name) {
                self.note_at("duplicate-pin", h.at, || format!("pin `{name}` stands twice; the last counts"));
            }
            pins.insert(name, pin.clone());
        }
        for (name, mut own) in inner {
            // what a bit leaves open, its bus says
            if own.direction.is_empty() {
                own.direction.clone_from(&pin.direction);
            }
            own.function = own.function.or_else(|| pin.function.clone());
            own.three_state = own.three_state.or_else(|| pin.three_state.clone());
            own.related_power_pin = own.related_power_pin.or_else(|| pin.related_power_pin.clone());
            own.related_ground_pin = own.related_ground_pin.or_else(|| pin.related_ground_pin.clone());
            for (k, v) in &pin.attributes {
                own.attributes.entry(k.clone()).or_insert_with(|| v.clone());
            }
            pins.insert(name, own);
        }
        Ok(())
    }
}
