//! Power intent: IEEE 1801 commands (UPF 1.0 to 3.1) in plain Tcl, and what they mean for a netlist.
//!
//! [`read_intent`] runs the files and keeps what they say as records with places, an [`Intent`]: domains with their
//! elements, supplies, switches, isolation, retention, level shifters, states. [`resolve`] maps that onto a connected
//! netlist, a [`DomainMap`]: which domain each leaf cell belongs to, what each domain is made of, which switch feeds it.
//!
//! * A table of commands and options drives the reading: a misspelt option, a missing value, an unknown command is an
//!   error with its place and the nearest right one. What the standard has and this job does not need is read and noted.
//! * Names start from the scope, as in the standard: an object of scope `u_a` has the whole name `u_a/name`.
//! * `-update` adds to what an earlier command made; without it a second command of one name is an error.
//! * The environment of the script is what [`IntentOptions`] gives, not that of the process.
//!
//! # Example
//! ```
//! use hushrail::read::{Input, Source};
//! use hushrail::read::intent::{IntentOptions, read_intent, resolve};
//! use hushrail::read::verilog::connect::{ConnectOptions, connect};
//! let verilog = "
//! module lamp (input a, output z); inv_1 u1 (.A(a), .Y(z)); endmodule
//! module top (input a, input sleep, output z);
//!   lamp u_lamp (.a(a), .z(m));
//!   buf_1 u_out (.A(m), .Y(z));
//! endmodule";
//! let upf = "
//! create_power_domain PD_TOP -include_scope
//! create_power_domain PD_LAMP -elements {u_lamp}
//! foreach net {VDD VDD_LAMP VSS} { create_supply_net $net }
//! set_domain_supply_net PD_TOP -primary_power_net VDD -primary_ground_net VSS
//! set_domain_supply_net PD_LAMP -primary_power_net VDD_LAMP -primary_ground_net VSS
//! create_power_switch sw -domain PD_LAMP -input_supply_port {in VDD} -output_supply_port {out VDD_LAMP} \\
//!   -control_port {ctl sleep} -on_state {ON in {!ctl}}";
//! let mut inputs = [Input::from(Source::from_text("top.v", verilog))];
//! let net = connect(&mut inputs, Some("top"), &(), &ConnectOptions::default())?;
//! let intent = read_intent(&[Source::from_text("top.upf", upf)], &IntentOptions::default())?;
//! let map = resolve(&intent, &net)?;
//! let lamp = map.domain("PD_LAMP").expect("there");
//! assert_eq!(lamp.counts.counts["inv_1"], 1);
//! assert_eq!(lamp.headers[0].name, "sw");
//! # Ok::<(), hushrail::read::ReadError>(())
//! ```

mod condition;
mod domains;
mod locate;
mod model;
mod resolve;
mod states;
mod strategies;
mod supplies;
mod switches;
mod table;
#[cfg(test)]
mod tests;

use std::collections::BTreeMap;

pub use condition::{Condition, ConditionError};
pub use model::{
    Connection, Domain, Intent, Isolation, LevelShifter, Named, PowerState, PowerSwitch, Retention,
    StateTable, SupplyNet, SupplyPort, SupplySet, SupplyState, SwitchControl, SwitchState, SwitchSupply,
    TableRow, Trigger,
};
pub use resolve::{Control, DomainMap, MappedDomain, MappedSwitch, resolve};

use super::deck::Note;
use super::source::{ReadError, Source};
use super::tcl::{Host, Interpreter, Limits, Outcome, Spot, Stop, Value, Word};
use super::verilog::connect::Connected;
use table::{Args, COMMANDS, Use, cut, take_apart};

/// How power intent is read.
#[derive(Debug, Clone, Default)]
#[non_exhaustive]
pub struct IntentOptions<'a> {
    /// What the script finds in `::env`.
    pub env: BTreeMap<String, String>,
    /// How far the script may go.
    pub limits: Limits,
    /// The netlist, which `find_objects` looks in.
    pub design: Option<&'a Connected>,
}

impl<'a> IntentOptions<'a> {
    /// Gives the environment of the script.
    pub fn env(self, env: BTreeMap<String, String>) -> Self {
        Self { env, ..self }
    }

    /// Limits the script.
    pub fn limits(self, limits: Limits) -> Self {
        Self { limits, ..self }
    }

    /// Gives the netlist to look in.
    pub fn design(self, design: &'a Connected) -> Self {
        Self { design: Some(design), ..self }
    }
}

/// Reads power intent from files that belong together, in order.
///
/// # Errors
/// The first thing that is wrong, with the place of the word: in the script, in a command, in a name.
pub fn read_intent(sources: &[Source], options: &IntentOptions<'_>) -> Result<Intent, ReadError> {
    let mut tcl = Interpreter::new(&options.env, options.limits);
    let mut reader = Reader {
        intent: Intent::default(),
        scope: String::new(),
        version: None,
        design: options.design,
        commands: 0,
    };
    for source in sources {
        reader.scope.clear();
        tcl.run(&mut reader, source)?;
        if !source.text.ends_with('\n') && !source.text.trim().is_empty() {
            let text = format!("{}: the last line has no end; is the file cut off?", source.path);
            Note::new("last-line-open", text).add_once(&mut reader.intent.notes);
        }
    }
    if reader.commands == 0 {
        return Err(match sources.first() {
            Some(source) => source.nothing("command of power intent"),
            None => {
                ReadError::Nothing { path: "-".into(), wanted: "file of power intent".into(), empty: true }
            }
        });
    }
    let mut intent = reader.intent;
    let mut notes = tcl.take_notes();
    notes.append(&mut intent.notes);
    intent.notes = notes;
    Ok(intent)
}

/// What is read so far, and where the script stands.
struct Reader<'a> {
    intent: Intent,
    scope: String,
    version: Option<f64>,
    design: Option<&'a Connected>,
    commands: usize,
}

impl Host for Reader<'_> {
    fn names(&self) -> Vec<&str> {
        COMMANDS.iter().map(|c| c.name).collect()
    }

    fn call(&mut self, tcl: &mut Interpreter, words: &[Word]) -> Option<Outcome> {
        let name = words.first()?.text();
        let command = COMMANDS.iter().find(|c| c.name == name)?;
        self.commands += 1;
        Some(take_apart(tcl, command, words, self.version).and_then(|args| {
            if command.usage == Use::Noted {
                tcl.note("command-without-use", args.at, &format!("`{name}` is read and has no use here"));
                return Ok(Value::at("", args.at));
            }
            self.run(tcl, name, &args)
        }))
    }
}

impl Reader<'_> {
    fn run(&mut self, tcl: &mut Interpreter, name: &str, args: &Args) -> Outcome {
        match name {
            "upf_version" => self.upf_version(tcl, args)?,
            "set_scope" => return self.set_scope(tcl, args),
            "load_upf" | "load_upf_protected" => return self.load_upf(tcl, args),
            "find_objects" => return self.find_objects(tcl, args),
            "set_design_top" | "connect_logic_net" => {}
            "create_power_domain" => self.create_power_domain(tcl, args)?,
            "create_logic_net" | "create_logic_port" => {
                let name = self.whole(&args.words[0]);
                self.intent.logic_nets.push(name);
            }
            "create_supply_port" => self.create_supply_port(tcl, args)?,
            "create_supply_net" => self.create_supply_net(tcl, args)?,
            "create_supply_set" => self.create_supply_set(tcl, args)?,
            "connect_supply_net" => self.connect_supply_net(tcl, args)?,
            "connect_supply_set" => {
                self.supply_set(tcl, &args.words[0])?;
            }
            "associate_supply_set" => self.associate_supply_set(tcl, args)?,
            "set_domain_supply_net" => self.set_domain_supply_net(tcl, args)?,
            "create_power_switch" => self.create_power_switch(tcl, args)?,
            "set_isolation" | "set_isolation_control" => {
                self.set_isolation(tcl, args, name.ends_with("_control"))?;
            }
            "set_retention" | "set_retention_control" => {
                self.set_retention(tcl, args, name.ends_with("_control"))?;
            }
            "set_level_shifter" => self.set_level_shifter(tcl, args)?,
            "add_port_state" | "add_supply_state" => self.add_supply_states(tcl, args)?,
            "create_pst" => self.create_pst(tcl, args)?,
            "add_pst_state" => self.add_pst_state(tcl, args)?,
            "add_power_state" => self.add_power_state(tcl, args)?,
            _ => tcl.note("command-without-use", args.at, &format!("`{name}` is read and has no use here")),
        }
        Ok(args.words.first().map_or_else(|| Value::at("", args.at), |w| w.value.clone()))
    }

    /// A name as the scope makes it whole.
    fn whole_text(&self, name: &str) -> String {
        join(&self.scope, name)
    }

    fn whole(&self, word: &Word) -> String {
        self.whole_text(word.text())
    }

    fn named(&self, tcl: &Interpreter, value: &Value) -> Named {
        Named { path: self.whole_text(value.text()), at: tcl.place(value.spot()) }
    }

    /// The names in a list.
    fn names_in(&self, tcl: &mut Interpreter, word: Option<&Word>) -> Result<Vec<Named>, Stop> {
        let Some(word) = word else { return Ok(Vec::new()) };
        let all = tcl.list(&word.value)?;
        Ok(all.iter().map(|v| self.named(tcl, v)).collect())
    }

    /// The whole name of a domain that a word names.
    fn domain_named(&self, tcl: &Interpreter, word: &Word) -> Result<String, Stop> {
        let name = self.whole(word);
        if self.intent.domain(&name).is_some() {
            return Ok(name);
        }
        let known = self.known(self.intent.domains.iter().map(|d| d.name.as_str()));
        Err(tcl.unknown(word.value.spot(), "power domain", word.text(), known))
    }

    /// Names as one would write them in the present scope.
    fn known<'b>(&'b self, names: impl IntoIterator<Item = &'b str>) -> Vec<&'b str> {
        let inside = |n: &'b str| match self.scope.as_str() {
            "" => Some(n),
            scope => n.strip_prefix(scope).and_then(|n| n.strip_prefix('/')),
        };
        names.into_iter().filter_map(inside).collect()
    }
}

/// A path below a scope, as one path: without escapes, from the top.
fn join(scope: &str, name: &str) -> String {
    let (rooted, name) = match name.strip_prefix('/') {
        Some(rest) => (true, rest),
        None => (false, name),
    };
    let mut plain = String::with_capacity(name.len());
    let mut escaped = false;
    let mut chars = name.chars().peekable();
    while let Some(c) = chars.next() {
        match c {
            '\\' => escaped = true,
            // the blank that ends an escaped name
            ' ' if escaped && chars.peek().is_none_or(|c| matches!(c, '/' | '.' | '[')) => escaped = false,
            c => plain.push(c),
        }
    }
    let plain = plain.strip_prefix("./").unwrap_or(&plain);
    match (plain, rooted || scope.is_empty()) {
        ("." | "", true) => String::new(),
        ("." | "", false) => scope.to_owned(),
        (plain, true) => plain.to_owned(),
        (plain, false) => format!("{scope}/{plain}"),
    }
}

/// The error for a second definition of one name.
fn twice(tcl: &Interpreter, at: Spot, what: &str, word: &Word, first: &super::source::Place) -> Stop {
    tcl.wrong(
        at,
        format!("{what} `{}` is defined twice; first in {first}", cut(word.text())),
        "want another name, or `-update` to add to the first",
    )
}
