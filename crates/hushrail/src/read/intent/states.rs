//! States of supplies, tables of them, power states.

use super::super::tcl::{Interpreter, Stop, Value};
use super::model::{PowerState, StateTable, SupplyState, TableRow};
use super::table::{Args, cut};
use super::{Reader, twice};

impl Reader<'_> {
    pub(super) fn add_supply_states(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let supply = self.supply(tcl, &args.words[0].value)?;
        for word in args.each("state") {
            let parts = tcl.list(&word.value)?;
            let (Some(name), values) = (parts.first(), parts.get(1..).unwrap_or_default()) else {
                return Err(tcl.wrong(
                    word.at,
                    "a state without a name",
                    "want `{name 0.8}` or `{name off}`",
                ));
            };
            let off = matches!(values, [one] if one.text() == "off");
            let mut volts = Vec::new();
            for value in if off { &[] } else { values } {
                match value.text().parse::<f64>() {
                    Ok(v) if v.is_finite() => volts.push(v),
                    _ => {
                        let found = format!("`{}` is no voltage", cut(value.text()));
                        return Err(tcl.wrong(value.spot(), found, "want volts, or `off`"));
                    }
                }
            }
            if (volts.is_empty() && !off) || volts.len() > 3 || !volts.is_sorted() {
                let found = format!("`{}` is no state of a supply", cut(word.text()));
                return Err(tcl.wrong(
                    word.at,
                    found,
                    "want one voltage, least and most, all three in order, or `off`",
                ));
            }
            let twice =
                self.intent.supply_states.iter().find(|s| s.supply == supply && s.name == name.text());
            if let Some(first) = twice {
                let found =
                    format!("state `{}` of `{supply}` is defined twice; first in {}", name.text(), first.at);
                return Err(tcl.wrong(name.spot(), found, "want another name"));
            }
            let at = tcl.place(name.spot());
            self.intent.supply_states.push(SupplyState {
                supply: supply.clone(),
                name: name.text().to_owned(),
                volts,
                at,
            });
        }
        Ok(())
    }

    pub(super) fn create_pst(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let word = &args.words[0];
        let name = self.whole(word);
        if let Some(first) = self.intent.state_tables.iter().find(|t| t.name == name) {
            return Err(twice(tcl, word.at, "state table", word, &first.at));
        }
        let mut supplies = Vec::new();
        if let Some(list) = args.word("supplies") {
            for value in tcl.list(&list.value)? {
                supplies.push(self.supply(tcl, &value)?);
            }
        }
        self.intent.state_tables.push(StateTable {
            name,
            supplies,
            rows: Vec::new(),
            at: tcl.place(word.at),
        });
        Ok(())
    }

    pub(super) fn add_pst_state(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let (Some(pst), Some(states)) = (args.word("pst"), args.word("state")) else { return Ok(()) };
        let name = self.whole(pst);
        let Some(index) = self.intent.state_tables.iter().position(|t| t.name == name) else {
            let known = self.known(self.intent.state_tables.iter().map(|t| t.name.as_str()));
            return Err(tcl.unknown(pst.at, "state table", pst.text(), known));
        };
        let values = tcl.list(&states.value)?;
        let wanted = self.intent.state_tables[index].supplies.len();
        if values.len() != wanted {
            let found = format!("{} states for the {wanted} supplies of `{}`", values.len(), pst.text());
            return Err(tcl.wrong(states.at, found, "want one for each"));
        }
        let known: Vec<&str> = self.intent.supply_states.iter().map(|s| s.name.as_str()).collect();
        for value in &values {
            if value.text() != "*" && !known.contains(&value.text()) {
                return Err(tcl.unknown(value.spot(), "state of a supply", value.text(), known));
            }
        }
        let row = args.words[0].text().to_owned();
        let table = &mut self.intent.state_tables[index];
        if table.rows.iter().any(|r| r.name == row) {
            let found = format!("row `{row}` of `{}` is defined twice", table.name);
            return Err(tcl.wrong(args.words[0].at, found, "want another name"));
        }
        table.rows.push(TableRow { name: row, states: values.iter().map(|v| v.text().to_owned()).collect() });
        Ok(())
    }

    pub(super) fn add_power_state(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let Some(object) = args.words.last() else { return Ok(()) };
        let object = self.whole(object);
        for words in args.groups("state") {
            let mut parts: Vec<Value> = Vec::new();
            for word in words {
                parts.extend(tcl.list(&word.value)?);
            }
            let Some((name, options)) = parts.split_first() else {
                return Err(tcl.wrong(
                    words[0].at,
                    "a state without a name",
                    "want `{name -logic_expr {…}}`",
                ));
            };
            let at = tcl.place(name.spot());
            let old =
                self.intent.power_states.iter().position(|s| s.object == object && s.name == name.text());
            let mut state = match (old, args.has("update")) {
                (Some(i), true) => self.intent.power_states[i].clone(),
                (Some(i), false) => {
                    let first = &self.intent.power_states[i].at;
                    let found =
                        format!("state `{}` of `{object}` is defined twice; first in {first}", name.text());
                    return Err(tcl.wrong(name.spot(), found, "want another name, or `-update`"));
                }
                (None, _) => PowerState {
                    object: object.clone(),
                    name: name.text().to_owned(),
                    logic: None,
                    supply: None,
                    simstate: None,
                    legal: None,
                    at,
                },
            };
            let mut rest = options.iter();
            while let Some(option) = rest.next() {
                let known = ["-logic_expr", "-supply_expr", "-power_expr", "-simstate", "-legal", "-illegal"];
                match option.text() {
                    "-legal" => state.legal = Some(true),
                    "-illegal" => state.legal = Some(false),
                    name if known.contains(&name) => {
                        let Some(value) = rest.next().filter(|v| !known.contains(&v.text())) else {
                            let found = format!("`{name}` without its value");
                            return Err(tcl.wrong(option.spot(), found, "want a value behind it"));
                        };
                        let slot = match name {
                            "-logic_expr" => &mut state.logic,
                            "-supply_expr" => &mut state.supply,
                            "-simstate" => &mut state.simstate,
                            _ => continue,
                        };
                        *slot = Some(value.text().trim().to_owned());
                    }
                    other => return Err(tcl.unknown(option.spot(), "option", other, known)),
                }
            }
            match old {
                Some(i) => self.intent.power_states[i] = state,
                None => self.intent.power_states.push(state),
            }
        }
        Ok(())
    }
}
