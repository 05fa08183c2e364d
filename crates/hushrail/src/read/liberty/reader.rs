//! From statements to a [`Library`].

use std::borrow::Cow;

use indexmap::IndexMap;

use super::check;
use super::library::{LeakageGroup, Library, LibraryCell, Nominal, PgPin, Storage};
use super::parse::{Attribute, Event, Head, Parser};
use super::unit::unit;
use crate::read::condition::Condition;
use crate::read::deck::Note;
use crate::read::source::{ReadError, Source, nearest};

/// What a file leaves open.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct LibertyOptions {
    /// W per unit of leakage, where the file does not say.
    pub leakage_unit_w: Option<f64>,
    /// Supply, V, where the file does not say.
    pub voltage_v: Option<f64>,
    /// Temperature, degrees Celsius, where the file does not say.
    pub temp_c: Option<f64>,
}

/// Notes of one sort that are written out; of the others only the number is told.
const NOTES_OF_A_SORT: usize = 25;

/// Attributes of cells that say what they are for.
const CELL_ATTRIBUTES: [&str; 18] = [
    "always_on",
    "clock_gating_integrated_cell",
    "input_voltage_range",
    "is_clock_isolation_cell",
    "is_isolation_cell",
    "is_level_shifter",
    "is_macro_cell",
    "is_pad",
    "level_shifter_type",
    "output_voltage_range",
    "pad_cell",
    "power_cell_type",
    "power_gating_cell",
    "retention_cell",
    "retention_condition",
    "sensitive_cell",
    "switch_cell_type",
    "user_function_class",
];

/// Attributes of `leakage_power` groups.
const LEAKAGE_ATTRIBUTES: [&str; 6] = ["mode", "power_level", "related_pg_pin", "value", "values", "when"];

/// Attributes of `pg_pin` groups.
const PG_ATTRIBUTES: [&str; 12] = [
    "direction",
    "is_insulated",
    "permit_power_down",
    "pg_function",
    "pg_type",
    "physical_connection",
    "related_bias_pin",
    "std_cell_main_rail",
    "switch_function",
    "tap_type",
    "user_pg_type",
    "voltage_name",
];

pub(super) struct Reader<'a> {
    pub(super) p: Parser<'a>,
    pub(super) library: Library,
    /// Bits of bus types by name, first to last.
    pub(super) types: IndexMap<String, (i64, i64)>,
    notes: Notes,
}

/// Notes with a bound on how many of a sort are written out.
#[derive(Default)]
pub(super) struct Notes {
    list: Vec<Note>,
    counts: IndexMap<&'static str, usize>,
}

impl Notes {
    /// Whether the next note of this sort will be written out.
    pub(super) fn wants(&self, code: &str) -> bool {
        self.counts.get(code).is_none_or(|n| *n < NOTES_OF_A_SORT)
    }

    pub(super) fn add(&mut self, code: &'static str, text: impl FnOnce() -> String) {
        let wanted = self.wants(code);
        *self.counts.entry(code).or_default() += 1;
        if wanted {
            self.list.push(Note::new(code, text()));
        }
    }

    fn finish(mut self) -> Vec<Note> {
        for (code, n) in self.counts {
            if n > NOTES_OF_A_SORT {
                let more = n - NOTES_OF_A_SORT;
                self.list.push(Note::new(code, format!("and {more} more of this sort")));
            }
        }
        self.list
    }
}

/// Reads a library, or a fragment that holds cell groups only.
///
/// # Errors
/// Text that does not follow the format, a number that is none, a condition that cannot be understood, a second library in the
/// file, or a file without cells and library: with file, line and column.
pub fn read_liberty(source: &Source, options: &LibertyOptions) -> Result<Library, ReadError> {
    let mut r = Reader {
        p: Parser::new(source),
        library: Library { path: source.path.to_string(), ..Library::default() },
        types: IndexMap::new(),
        notes: Notes::default(),
    };
    let mut is_library = false;
    while let Some(event) = r.p.step()? {
        match event {
            Event::Open(h) if h.name == "library" => {
                if is_library || !r.library.cells.is_empty() {
                    let wanted = "want one library in a file, or cells only";
                    return Err(r.p.lexer.wrong(h.at, "a second `library` group", wanted));
                }
                is_library = true;
                h.arg().clone_into(&mut r.library.name);
                if h.arg().is_empty() {
                    r.note_at("no-name", h.at, || "the library has no name".into());
                }
                r.library_group()?;
            }
            Event::Open(h) if h.name == "cell" && !is_library => r.cell(&h)?,
            Event::Open(h) => {
                let near = nearest(h.name, ["library", "cell"]);
                return Err(r.unknown(h.at, "group", h.name, near));
            }
            Event::Attribute(a) if matches!(a.name, "define" | "define_group" | "include_file") => {
                r.library_attribute(&a)?;
            }
            Event::Attribute(a) => {
                let found = format!("`{}` outside of a library", a.name);
                return Err(r.p.lexer.wrong(a.at, found, "want `library (NAME) {` or `cell (NAME) {`"));
            }
            Event::Close => {}
        }
    }
    if !is_library && r.library.cells.is_empty() {
        return Err(source.nothing("library or cell"));
    }
    let Reader { mut library, mut notes, .. } = r;
    if !is_library {
        notes
            .add("fragment", || format!("{}: a fragment: cells without a library around them", library.path));
    }
    check::finish(&mut library, options, &mut notes);
    library.notes = notes.finish();
    Ok(library)
}

/// A bare name or number of a file, with its quotes gone.
fn owned(values: &[Cow<'_, str>]) -> Vec<String> {
    values.iter().map(|v| v.trim().to_owned()).collect()
}

impl Reader<'_> {
    pub(super) fn note_at(&mut self, code: &'static str, at: usize, text: impl FnOnce() -> String) {
        if self.notes.wants(code) {
            let place = self.p.lexer.place(at);
            self.notes.add(code, || format!("{place}: {}", text()));
        } else {
            self.notes.add(code, String::new);
        }
    }

    fn unknown(&mut self, at: usize, kind: &'static str, name: &str, nearest: Option<String>) -> ReadError {
        ReadError::Unknown { at: self.p.lexer.place(at), kind, name: name.to_owned(), nearest }
    }

    pub(super) fn number(&mut self, a: &Attribute<'_>) -> Result<f64, ReadError> {
        let found = a.text().parse::<f64>().ok().filter(|v| v.is_finite());
        match found {
            Some(v) if a.values.len() == 1 => Ok(v),
            _ => {
                let found = format!("`{}` of `{}`", a.joined(), a.name);
                Err(self.p.lexer.wrong(a.value_at, found, "want a finite number"))
            }
        }
    }

    /// Reads a condition only to know that it can be read.
    fn condition(&mut self, a: &Attribute<'_>) -> Result<(), ReadError> {
        match Condition::parse(a.text()) {
            Ok(_) => Ok(()),
            Err(e) => {
                let at = a.value_at + e.at + 1;
                Err(self.p.lexer.wrong(at, format!("`{}`: {}", a.name, e.found), e.wanted))
            }
        }
    }

    fn library_group(&mut self) -> Result<(), ReadError> {
        loop {
            match self.p.step()? {
                Some(Event::Open(h)) => match h.name {
                    "cell" => self.cell(&h)?,
                    "operating_conditions" => {
                        let found = self.operating_conditions()?;
                        self.library.conditions.insert(h.arg().to_owned(), found);
                    }
                    "type" => self.bus_type(&h)?,
                    "scaled_cell" => {
                        let name = h.joined();
                        self.note_at("scaled-cell", h.at, || {
                            format!("scaled cell `{name}` is not read; want a library of its corner")
                        });
                        self.p.skip()?;
                    }
                    _ => self.p.skip()?,
                },
                Some(Event::Attribute(a)) => self.library_attribute(&a)?,
                Some(Event::Close) | None => return Ok(()),
            }
        }
    }

    fn library_attribute(&mut self, a: &Attribute<'_>) -> Result<(), ReadError> {
        match a.name {
            "leakage_power_unit" => self.library.units.leakage_w = Some(self.unit(a, 'W')?),
            "voltage_unit" => self.library.units.voltage_v = Some(self.unit(a, 'V')?),
            "nom_process" => self.library.nominal.process = Some(self.number(a)?),
            "nom_voltage" => self.library.nominal.voltage_v = Some(self.number(a)?),
            "nom_temperature" => self.library.nominal.temp_c = Some(self.number(a)?),
            "default_cell_leakage_power" => {
                self.library.default_cell_leakage_power = Some(self.number(a)?);
            }
            "default_leakage_power_density" => {
                self.library.default_leakage_power_density = Some(self.number(a)?);
            }
            "default_operating_conditions" => {
                self.library.default_conditions = Some(a.text().to_owned());
            }
            "voltage_map" => {
                let value = a.values.get(1).and_then(|v| v.trim().parse::<f64>().ok());
                let Some(value) = value.filter(|v| v.is_finite() && a.values.len() == 2) else {
                    let found = format!("`voltage_map ({})`", a.joined());
                    return Err(self.p.lexer.wrong(
                        a.value_at,
                        found,
                        "want the name of a supply and its voltage",
                    ));
                };
                if let Some(old) = self.library.voltage_map.insert(a.text().to_owned(), value)
                    && old != value
                {
                    let name = a.text().to_owned();
                    self.note_at("contradiction", a.at, || {
                        format!("`{name}` is {old} and {value} in the voltage map; the last counts")
                    });
                }
            }
            "include_file" => {
                let name = a.joined();
                self.note_at("include", a.at, || {
                    format!("`{name}` is not included; read it as a file of its own")
                });
            }
            _ => {}
        }
        Ok(())
    }

    fn unit(&mut self, a: &Attribute<'_>, symbol: char) -> Result<f64, ReadError> {
        unit(a.text(), symbol).ok_or_else(|| {
            let found = format!("`{}` of `{}`", a.joined(), a.name);
            self.p.lexer.wrong(a.value_at, found, format!("want a unit such as 1n{symbol}"))
        })
    }

    fn operating_conditions(&mut self) -> Result<Nominal, ReadError> {
        let mut out = Nominal::default();
        loop {
            match self.p.step()? {
                Some(Event::Open(_)) => self.p.skip()?,
                Some(Event::Attribute(a)) => match a.name {
                    "process" => out.process = Some(self.number(&a)?),
                    "voltage" => out.voltage_v = Some(self.number(&a)?),
                    "temperature" => out.temp_c = Some(self.number(&a)?),
                    _ => {}
                },
                Some(Event::Close) | None => return Ok(out),
            }
        }
    }

    fn cell(&mut self, h: &Head<'_>) -> Result<(), ReadError> {
        let line = self.p.lexer.line(h.at);
        let name = h.arg().to_owned();
        if name.is_empty() || h.args.len() != 1 {
            let found = format!("a cell named `{}`", h.joined());
            return Err(self.p.lexer.wrong(h.at, found, "want one name in the brackets"));
        }
        if let Some(first) = self.library.cells.get(&name) {
            let line = first.line;
            self.note_at("duplicate-cell", h.at, || {
                format!("cell `{name}` stands twice; the first, in line {line}, counts")
            });
            return self.p.skip();
        }
        let mut cell = LibraryCell { line, ..LibraryCell::default() };
        loop {
            match self.p.step()? {
                Some(Event::Open(g)) => match g.name {
                    "leakage_power" => {
                        let group = self.leakage(&name, &g)?;
                        cell.leakage.extend(group);
                    }
                    "pg_pin" => {
                        let pin = self.pg_pin(&name)?;
                        cell.pg_pins.insert(g.arg().to_owned(), pin);
                    }
                    "type" => self.bus_type(&g)?,
                    "pin" | "bus" | "bundle" => self.pins(&g, &mut cell.pins)?,
                    "ff" | "latch" | "ff_bank" | "latch_bank" | "statetable" => {
                        let storage = self.storage(&g)?;
                        cell.storage.push(storage);
                    }
                    "leakage_current" => {
                        self.note_at("leakage-current", g.at, || {
                            format!(
                                "cell `{name}`: `leakage_current` groups are not read, `leakage_power` is"
                            )
                        });
                        self.p.skip()?;
                    }
                    _ => self.p.skip()?,
                },
                Some(Event::Attribute(a)) => match a.name {
                    "area" => cell.area = Some(self.number(&a)?),
                    "cell_leakage_power" => {
                        let value = self.number(&a)?;
                        if let Some(old) = cell.cell_leakage_power.replace(value)
                            && old != value
                        {
                            self.note_at("contradiction", a.at, || {
                                format!("cell `{name}`: `cell_leakage_power` is {old} and {value}; the last counts")
                            });
                        }
                    }
                    n if CELL_ATTRIBUTES.contains(&n) => {
                        cell.attributes.insert(n.to_owned(), a.joined());
                    }
                    _ => {}
                },
                Some(Event::Close) | None => break,
            }
        }
        check::cell(&self.library.path, &name, &cell, &mut self.notes);
        self.library.cells.insert(name, cell);
        Ok(())
    }

    fn leakage(&mut self, cell: &str, h: &Head<'_>) -> Result<Option<LeakageGroup>, ReadError> {
        let line = self.p.lexer.line(h.at);
        let mut group = LeakageGroup { line, ..LeakageGroup::default() };
        let mut value = None;
        loop {
            match self.p.step()? {
                Some(Event::Open(g)) => {
                    let name = g.name;
                    self.note_at("unknown", g.at, || {
                        format!("cell `{cell}`: group `{name}` in a leakage group is passed over")
                    });
                    self.p.skip()?;
                }
                Some(Event::Attribute(a)) => match a.name {
                    "when" => {
                        self.condition(&a)?;
                        a.text().clone_into(&mut group.when);
                    }
                    "value" => value = Some(self.number(&a)?),
                    "related_pg_pin" | "power_level" => group.supply = Some(a.joined()),
                    "mode" | "values" => {
                        let name = a.name;
                        self.note_at("unread", a.at, || {
                            format!("cell `{cell}`: `{name}` of a leakage group is not read")
                        });
                    }
                    name => {
                        let near = crate::read::source::hint(nearest(name, LEAKAGE_ATTRIBUTES).as_ref());
                        self.note_at("unknown", a.at, || {
                            format!("cell `{cell}`: `{name}` in a leakage group is not known{near}")
                        });
                    }
                },
                Some(Event::Close) | None => break,
            }
        }
        let Some(value) = value else {
            self.note_at("no-value", h.at, || {
                format!("cell `{cell}`: a leakage group without `value` is left out")
            });
            return Ok(None);
        };
        group.value = value;
        Ok(Some(group))
    }

    fn pg_pin(&mut self, cell: &str) -> Result<PgPin, ReadError> {
        let mut pin = PgPin::default();
        loop {
            match self.p.step()? {
                Some(Event::Open(_)) => self.p.skip()?,
                Some(Event::Attribute(a)) => match a.name {
                    "pg_type" => a.text().clone_into(&mut pin.kind),
                    "voltage_name" => pin.voltage_name = Some(a.text().to_owned()),
                    name => {
                        if !PG_ATTRIBUTES.contains(&name) {
                            let near = crate::read::source::hint(nearest(name, PG_ATTRIBUTES).as_ref());
                            self.note_at("unknown", a.at, || {
                                format!("cell `{cell}`: `{name}` of a supply pin is not known{near}")
                            });
                        }
                        pin.attributes.insert(name.to_owned(), a.joined());
                    }
                },
                Some(Event::Close) | None => return Ok(pin),
            }
        }
    }

    fn storage(&mut self, h: &Head<'_>) -> Result<Storage, ReadError> {
        let mut out = Storage { kind: h.name.to_owned(), args: owned(&h.args), attributes: IndexMap::new() };
        loop {
            match self.p.step()? {
                Some(Event::Open(_)) => self.p.skip()?,
                Some(Event::Attribute(a)) => {
                    out.attributes.insert(a.name.to_owned(), a.joined());
                }
                Some(Event::Close) | None => return Ok(out),
            }
        }
    }
}
