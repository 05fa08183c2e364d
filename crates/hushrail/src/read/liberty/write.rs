//! Liberty text from a [`Library`]: what [`read_liberty`](super::read_liberty) reads back unchanged.

use std::fmt::Write as _;

use super::library::{Library, LibraryCell, Nominal};
use super::unit::unit_text;

/// Names with brackets or other signs stand in quotes.
fn name(text: &str) -> String {
    let plain = |c: char| c.is_ascii_alphanumeric() || c == '_';
    if !text.is_empty() && text.chars().all(plain) && !text.starts_with(|c: char| c.is_ascii_digit()) {
        text.to_owned()
    } else {
        quoted(text)
    }
}

fn quoted(text: &str) -> String {
    format!("\"{}\"", text.replace('\\', "\\\\").replace('"', "\\\""))
}

/// The shortest decimal that reads back as the same number.
fn number(x: f64) -> String {
    let size = x.abs();
    if x == 0.0 || (1e-3..1e6).contains(&size) { format!("{x}") } else { format!("{x:e}") }
}

struct Text(String);

impl Text {
    fn line(&mut self, depth: usize, text: std::fmt::Arguments<'_>) {
        // writing into a string does not fail
        let _ = writeln!(self.0, "{:1$}{text}", "", 2 * depth);
    }

    fn value(&mut self, depth: usize, key: &str, value: Option<f64>) {
        if let Some(v) = value {
            self.line(depth, format_args!("{key} : {};", number(v)));
        }
    }

    fn string(&mut self, depth: usize, key: &str, value: Option<&String>) {
        if let Some(v) = value {
            self.line(depth, format_args!("{key} : {};", quoted(v)));
        }
    }

    fn nominal(&mut self, depth: usize, keys: [&str; 3], n: &Nominal, volt: f64) {
        self.value(depth, keys[0], n.process);
        self.value(depth, keys[1], n.voltage_v.map(|v| v / volt));
        self.value(depth, keys[2], n.temp_c);
    }
}

/// Writes a library. What it does not know is left out, and the reader of the file will say so.
pub fn write_liberty(library: &Library) -> String {
    let mut t = Text(String::new());
    let volt = library.units.voltage_v.unwrap_or(1.0);
    t.line(0, format_args!("library ({}) {{", name(&library.name)));
    if let Some(w) = library.units.leakage_w {
        t.line(1, format_args!("leakage_power_unit : {};", quoted(&unit_text(w, 'W'))));
    }
    if let Some(v) = library.units.voltage_v {
        t.line(1, format_args!("voltage_unit : {};", quoted(&unit_text(v, 'V'))));
    }
    t.nominal(1, ["nom_process", "nom_voltage", "nom_temperature"], &library.nominal, volt);
    for (n, v) in &library.voltage_map {
        t.line(1, format_args!("voltage_map ({}, {});", name(n), number(v / volt)));
    }
    for (n, c) in &library.conditions {
        t.line(1, format_args!("operating_conditions ({}) {{", name(n)));
        t.nominal(2, ["process", "voltage", "temperature"], c, volt);
        t.line(1, format_args!("}}"));
    }
    t.string(1, "default_operating_conditions", library.default_conditions.as_ref());
    t.value(1, "default_cell_leakage_power", library.default_cell_leakage_power);
    t.value(1, "default_leakage_power_density", library.default_leakage_power_density);
    for (n, c) in &library.cells {
        cell(&mut t, n, c);
    }
    t.line(0, format_args!("}}"));
    t.0
}

fn cell(t: &mut Text, n: &str, c: &LibraryCell) {
    t.line(1, format_args!("cell ({}) {{", name(n)));
    t.value(2, "area", c.area);
    t.value(2, "cell_leakage_power", c.cell_leakage_power);
    for (k, v) in &c.attributes {
        t.line(2, format_args!("{k} : {};", quoted(v)));
    }
    for (p, pin) in &c.pg_pins {
        t.line(2, format_args!("pg_pin ({}) {{", name(p)));
        if !pin.kind.is_empty() {
            t.line(3, format_args!("pg_type : {};", name(&pin.kind)));
        }
        t.string(3, "voltage_name", pin.voltage_name.as_ref());
        for (k, v) in &pin.attributes {
            t.line(3, format_args!("{k} : {};", quoted(v)));
        }
        t.line(2, format_args!("}}"));
    }
    for g in &c.leakage {
        t.line(2, format_args!("leakage_power () {{"));
        if !g.when.is_empty() {
            t.line(3, format_args!("when : {};", quoted(&g.when)));
        }
        t.line(3, format_args!("value : {};", number(g.value)));
        t.string(3, "related_pg_pin", g.supply.as_ref());
        t.line(2, format_args!("}}"));
    }
    for s in &c.storage {
        let args: Vec<String> = s.args.iter().map(|a| quoted(a)).collect();
        t.line(2, format_args!("{} ({}) {{", s.kind, args.join(", ")));
        for (k, v) in &s.attributes {
            t.line(3, format_args!("{k} : {};", quoted(v)));
        }
        t.line(2, format_args!("}}"));
    }
    for (p, pin) in &c.pins {
        t.line(2, format_args!("pin ({}) {{", name(p)));
        if !pin.direction.is_empty() {
            t.line(3, format_args!("direction : {};", quoted(&pin.direction)));
        }
        for (k, v) in [
            ("function", &pin.function),
            ("three_state", &pin.three_state),
            ("related_power_pin", &pin.related_power_pin),
            ("related_ground_pin", &pin.related_ground_pin),
        ] {
            t.string(3, k, v.as_ref());
        }
        for (k, v) in &pin.attributes {
            t.line(3, format_args!("{k} : {};", quoted(v)));
        }
        t.line(2, format_args!("}}"));
    }
    t.line(1, format_args!("}}"));
}
