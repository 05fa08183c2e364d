//! Power switches.

use super::super::tcl::{Interpreter, Spot, Stop, Value, Word};
use super::model::{PowerSwitch, SwitchControl, SwitchState, SwitchSupply};
use super::table::{Args, cut};
use super::{Condition, Reader, twice};

impl Reader<'_> {
    pub(super) fn create_power_switch(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let word = &args.words[0];
        let name = self.whole(word);
        let domain = args.word("domain").map(|w| self.domain_named(tcl, w)).transpose()?;
        let old = self.intent.switches.iter().position(|s| s.name == name);
        let mut switch = match (old, args.has("update")) {
            (Some(i), true) => self.intent.switches[i].clone(),
            (Some(i), false) => {
                let first = self.intent.switches[i].at.clone();
                return Err(twice(tcl, word.at, "power switch", word, &first));
            }
            (None, true) => {
                let known = self.known(self.intent.switches.iter().map(|s| s.name.as_str()));
                return Err(tcl.unknown(word.at, "power switch", word.text(), known));
            }
            (None, false) => {
                for option in ["output_supply_port", "input_supply_port", "control_port"] {
                    if !args.has(option) {
                        let found = format!("`create_power_switch` without `-{option}`");
                        return Err(tcl.wrong(args.at, found, "want it with its value"));
                    }
                }
                PowerSwitch {
                    name,
                    domain: None,
                    inputs: Vec::new(),
                    output: SwitchSupply { port: String::new(), net: None },
                    controls: Vec::new(),
                    acks: Vec::new(),
                    on_states: Vec::new(),
                    partial_states: Vec::new(),
                    off_states: Vec::new(),
                    error_states: Vec::new(),
                    supply_set: None,
                    instances: Vec::new(),
                    at: tcl.place(word.at),
                }
            }
        };
        switch.domain = domain.or(switch.domain);
        if let Some(output) = args.word("output_supply_port") {
            switch.output = self.switch_supply(tcl, output)?;
        }
        for input in args.each("input_supply_port") {
            let new = self.switch_supply(tcl, input)?;
            match switch.inputs.iter_mut().find(|i| i.port == new.port) {
                Some(old) => *old = new,
                None => switch.inputs.push(new),
            }
        }
        for (option, acks) in [("control_port", false), ("ack_port", true)] {
            for control in args.each(option) {
                let new = self.switch_control(tcl, control, acks)?;
                let list = if acks { &mut switch.acks } else { &mut switch.controls };
                match list.iter_mut().find(|c| c.port == new.port) {
                    Some(old) => *old = new,
                    None => list.push(new),
                }
            }
        }
        for option in ["on_state", "on_partial_state", "off_state", "error_state"] {
            for word in args.each(option) {
                let state = switch_state(tcl, &switch, word, option.starts_with("on"))?;
                let list = match option {
                    "on_state" => &mut switch.on_states,
                    "on_partial_state" => &mut switch.partial_states,
                    "off_state" => &mut switch.off_states,
                    _ => &mut switch.error_states,
                };
                match list.iter_mut().find(|s| s.name == state.name) {
                    Some(old) => *old = state,
                    None => list.push(state),
                }
            }
        }
        if let Some(set) = args.word("supply_set") {
            switch.supply_set = Some(self.supply_set(tcl, set)?);
        }
        switch.instances.extend(self.names_in(tcl, args.word("instances"))?);
        if switch.on_states.is_empty() {
            tcl.note("switch-without-on-state", word.at, "the switch does not say when it is on");
        }
        match old {
            Some(i) => self.intent.switches[i] = switch,
            None => self.intent.switches.push(switch),
        }
        Ok(())
    }

    fn switch_supply(&self, tcl: &mut Interpreter, word: &Word) -> Result<SwitchSupply, Stop> {
        let parts = tcl.list(&word.value)?;
        match parts.as_slice() {
            [port] => Ok(SwitchSupply { port: port.text().to_owned(), net: None }),
            [port, net] => {
                Ok(SwitchSupply { port: port.text().to_owned(), net: Some(self.supply(tcl, net)?) })
            }
            _ => Err(tcl.wrong(
                word.at,
                format!("`{}` is no supply port of a switch", cut(word.text())),
                "want `port` or `{port net}`",
            )),
        }
    }

    fn switch_control(&self, tcl: &mut Interpreter, word: &Word, ack: bool) -> Result<SwitchControl, Stop> {
        let parts = tcl.list(&word.value)?;
        let (port, net, condition) = match parts.as_slice() {
            [port] => (port, None, None),
            [port, net] => (port, Some(net), None),
            [port, net, condition] if ack => (port, Some(net), Some(condition)),
            _ => {
                let (what, wanted) = if ack {
                    ("acknowledge port", "want `{port net}` or `{port net {condition}}`")
                } else {
                    ("control port", "want `port` or `{port net}`")
                };
                return Err(tcl.wrong(word.at, format!("`{}` is no {what}", cut(word.text())), wanted));
            }
        };
        Ok(SwitchControl {
            port: port.text().to_owned(),
            net: net.map(|n| self.whole_text(n.text())),
            condition: condition.map(|c| condition_of(tcl, c)).transpose()?,
            at: tcl.place(net.unwrap_or(port).spot()),
        })
    }
}

/// The condition a value is.
pub(super) fn condition_of(tcl: &Interpreter, value: &Value) -> Result<Condition, Stop> {
    Condition::read(value.text()).map_err(|e| {
        tcl.wrong(tcl.spot_in(value, e.byte), format!("in the condition: {}", e.found), e.wanted)
    })
}

fn switch_state(
    tcl: &mut Interpreter,
    switch: &PowerSwitch,
    word: &Word,
    on: bool,
) -> Result<SwitchState, Stop> {
    let parts = tcl.list(&word.value)?;
    let (name, input, condition) = match (parts.as_slice(), on) {
        ([name, input, condition], true) => (name, Some(input), condition),
        ([name, condition], false) => (name, None, condition),
        _ => {
            let wanted = if on { "want `{name input {condition}}`" } else { "want `{name {condition}}`" };
            return Err(tcl.wrong(
                word.at,
                format!("`{}` is no state of a switch", cut(word.text())),
                wanted,
            ));
        }
    };
    if let Some(input) = input
        && !switch.inputs.iter().any(|i| i.port == input.text())
    {
        let known = switch.inputs.iter().map(|i| i.port.as_str());
        return Err(tcl.unknown(input.spot(), "input port of the switch", input.text(), known));
    }
    let read = condition_of(tcl, condition)?;
    for used in read.names() {
        if !switch.controls.iter().chain(&switch.acks).any(|c| c.port == used) {
            let byte = condition.text().find(used).unwrap_or(0);
            let at: Spot = tcl.spot_in(condition, byte);
            let known = switch.controls.iter().map(|c| c.port.as_str());
            return Err(tcl.unknown(at, "control port of the switch", used, known));
        }
    }
    let input = input.map(|i| i.text().to_owned());
    Ok(SwitchState { name: name.text().to_owned(), input, condition: read })
}
