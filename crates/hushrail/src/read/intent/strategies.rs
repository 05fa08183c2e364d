//! Isolation, retention and level shifters.

use super::super::tcl::{Interpreter, Stop, Word};
use super::model::{Isolation, LevelShifter, Named, Retention, Trigger};
use super::table::{Args, cut};
use super::{Reader, twice};

/// Checks a word against those that may stand there.
fn among(tcl: &Interpreter, word: &Word, kind: &'static str, known: &[&str]) -> Result<String, Stop> {
    if known.contains(&word.text()) {
        return Ok(word.text().to_owned());
    }
    Err(tcl.unknown(word.value.spot(), kind, word.text(), known.iter().copied()))
}

const APPLIES: [&str; 3] = ["inputs", "outputs", "both"];
const LOCATIONS: [&str; 8] =
    ["self", "other", "parent", "automatic", "fanout", "fanin", "faninout", "sibling"];
const EDGES: [&str; 4] = ["high", "low", "posedge", "negedge"];

/// Puts a value where an option gives one.
fn put<T>(slot: &mut Option<T>, new: Option<T>) {
    if new.is_some() {
        *slot = new;
    }
}

/// What every strategy has.
struct Head {
    domain: String,
    /// Its place in the list, when it is there already.
    index: Option<usize>,
}

impl Reader<'_> {
    fn head(
        &self,
        tcl: &Interpreter,
        args: &Args,
        what: (&'static str, bool),
        old: &[(&str, &str, &super::super::source::Place)],
    ) -> Result<Head, Stop> {
        let (kind, control) = what;
        let Some(word) = args.word("domain") else {
            return Err(tcl.wrong(args.at, format!("{kind} without a domain"), "want `-domain name`"));
        };
        let domain = self.domain_named(tcl, word)?;
        let name = &args.words[0];
        let index = old.iter().position(|o| o.0 == name.text() && o.1 == domain);
        match (index, args.has("update") || control) {
            (Some(i), false) => Err(twice(tcl, name.at, kind, name, old[i].2)),
            (None, true) => {
                let known = old.iter().filter(|o| o.1 == domain).map(|o| o.0);
                Err(tcl.unknown(name.at, kind, name.text(), known))
            }
            (index, _) => Ok(Head { domain, index }),
        }
    }

    fn supplies_of(
        &self,
        tcl: &mut Interpreter,
        args: &Args,
        options: [&str; 2],
    ) -> Result<Vec<String>, Stop> {
        let mut out = Vec::new();
        for option in options {
            if let Some(word) = args.word(option) {
                for set in tcl.list(&word.value)? {
                    out.push(self.supply_set(tcl, &Word { at: set.spot(), value: set })?);
                }
            }
        }
        Ok(out)
    }

    fn net_of(&self, tcl: &Interpreter, args: &Args, option: &str) -> Result<Option<String>, Stop> {
        args.word(option).map(|w| self.supply(tcl, &w.value)).transpose()
    }

    pub(super) fn set_isolation(
        &mut self,
        tcl: &mut Interpreter,
        args: &Args,
        control: bool,
    ) -> Result<(), Stop> {
        let old: Vec<_> =
            self.intent.isolations.iter().map(|i| (i.name.as_str(), i.domain.as_str(), &i.at)).collect();
        let head = self.head(tcl, args, ("isolation strategy", control), &old)?;
        let mut made = match head.index {
            Some(i) => self.intent.isolations[i].clone(),
            None => Isolation {
                name: args.words[0].text().to_owned(),
                domain: head.domain,
                elements: Vec::new(),
                exclude: Vec::new(),
                applies_to: None,
                clamp_values: Vec::new(),
                signals: Vec::new(),
                senses: Vec::new(),
                location: None,
                source: None,
                sink: None,
                supplies: Vec::new(),
                power_net: None,
                ground_net: None,
                none: false,
                at: tcl.place(args.words[0].at),
            },
        };
        made.elements.extend(self.names_in(tcl, args.word("elements"))?);
        made.exclude.extend(self.names_in(tcl, args.word("exclude_elements"))?);
        for instance in args.each("instance") {
            let parts = tcl.list(&instance.value)?;
            made.elements.extend(parts.first().map(|v| self.named(tcl, v)));
        }
        let applies = args.word("applies_to").map(|w| among(tcl, w, "side of a domain", &APPLIES));
        put(&mut made.applies_to, applies.transpose()?);
        if let Some(word) = args.word("clamp_value") {
            made.clamp_values = tcl.list(&word.value)?.iter().map(|v| v.text().to_owned()).collect();
            for value in &made.clamp_values {
                let constant = value.contains('\'') || value.bytes().all(|b| b.is_ascii_digit());
                if !constant && !["any", "latch", "z", "Z"].contains(&value.as_str()) {
                    let known = ["0", "1", "any", "Z", "latch"];
                    return Err(tcl.unknown(word.value.spot(), "clamp value", value, known));
                }
            }
        }
        let signals: Vec<Named> = self.names_in(tcl, args.word("isolation_signal"))?;
        if !signals.is_empty() {
            made.signals = signals;
        }
        if let Some(word) = args.word("isolation_sense") {
            made.senses.clear();
            for value in tcl.list(&word.value)? {
                let word = Word { at: value.spot(), value };
                made.senses.push(among(tcl, &word, "sense", &["high", "low"])?);
            }
        }
        let location = args.word("location").map(|w| among(tcl, w, "location", &LOCATIONS));
        put(&mut made.location, location.transpose()?);
        put(&mut made.source, args.word("source").map(|w| self.whole(w)));
        put(&mut made.sink, args.word("sink").map(|w| self.whole(w)));
        let supplies = self.supplies_of(tcl, args, ["isolation_supply_set", "isolation_supply"])?;
        if !supplies.is_empty() {
            made.supplies = supplies;
        }
        put(&mut made.power_net, self.net_of(tcl, args, "isolation_power_net")?);
        put(&mut made.ground_net, self.net_of(tcl, args, "isolation_ground_net")?);
        made.none |= args.has("no_isolation");
        match head.index {
            Some(i) => self.intent.isolations[i] = made,
            None => self.intent.isolations.push(made),
        }
        Ok(())
    }

    fn trigger(&self, tcl: &mut Interpreter, word: Option<&Word>) -> Result<Option<Trigger>, Stop> {
        let Some(word) = word else { return Ok(None) };
        let parts = tcl.list(&word.value)?;
        let [net, edge] = parts.as_slice() else {
            let found = format!("`{}` is no signal with its level", cut(word.text()));
            return Err(tcl.wrong(
                word.at,
                found,
                "want `{net high}`, `{net low}`, `{net posedge}` or `{net negedge}`",
            ));
        };
        let edge = among(tcl, &Word { at: edge.spot(), value: edge.clone() }, "level of a signal", &EDGES)?;
        Ok(Some(Trigger { net: self.whole_text(net.text()), edge, at: tcl.place(net.spot()) }))
    }

    pub(super) fn set_retention(
        &mut self,
        tcl: &mut Interpreter,
        args: &Args,
        control: bool,
    ) -> Result<(), Stop> {
        let old: Vec<_> =
            self.intent.retentions.iter().map(|i| (i.name.as_str(), i.domain.as_str(), &i.at)).collect();
        let head = self.head(tcl, args, ("retention strategy", control), &old)?;
        let mut made = match head.index {
            Some(i) => self.intent.retentions[i].clone(),
            None => Retention {
                name: args.words[0].text().to_owned(),
                domain: head.domain,
                elements: Vec::new(),
                exclude: Vec::new(),
                save: None,
                restore: None,
                condition: None,
                supply: None,
                power_net: None,
                ground_net: None,
                none: false,
                at: tcl.place(args.words[0].at),
            },
        };
        made.elements.extend(self.names_in(tcl, args.word("elements"))?);
        made.exclude.extend(self.names_in(tcl, args.word("exclude_elements"))?);
        put(&mut made.save, self.trigger(tcl, args.word("save_signal"))?);
        put(&mut made.restore, self.trigger(tcl, args.word("restore_signal"))?);
        put(&mut made.condition, args.word("retention_condition").map(|w| w.text().to_owned()));
        put(
            &mut made.supply,
            self.supplies_of(tcl, args, ["retention_supply_set", "retention_supply"])?.pop(),
        );
        put(&mut made.power_net, self.net_of(tcl, args, "retention_power_net")?);
        put(&mut made.ground_net, self.net_of(tcl, args, "retention_ground_net")?);
        made.none |= args.has("no_retention");
        match head.index {
            Some(i) => self.intent.retentions[i] = made,
            None => self.intent.retentions.push(made),
        }
        Ok(())
    }

    pub(super) fn set_level_shifter(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let old: Vec<_> =
            self.intent.level_shifters.iter().map(|i| (i.name.as_str(), i.domain.as_str(), &i.at)).collect();
        let head = self.head(tcl, args, ("level shifter strategy", false), &old)?;
        let mut made = match head.index {
            Some(i) => self.intent.level_shifters[i].clone(),
            None => LevelShifter {
                name: args.words[0].text().to_owned(),
                domain: head.domain,
                elements: Vec::new(),
                exclude: Vec::new(),
                applies_to: None,
                rule: None,
                location: None,
                threshold: None,
                none: false,
                at: tcl.place(args.words[0].at),
            },
        };
        made.elements.extend(self.names_in(tcl, args.word("elements"))?);
        made.exclude.extend(self.names_in(tcl, args.word("exclude_elements"))?);
        let applies = args.word("applies_to").map(|w| among(tcl, w, "side of a domain", &APPLIES));
        put(&mut made.applies_to, applies.transpose()?);
        let rules = ["low_to_high", "high_to_low", "both"];
        put(&mut made.rule, args.word("rule").map(|w| among(tcl, w, "rule", &rules)).transpose()?);
        let location = args.word("location").map(|w| among(tcl, w, "location", &LOCATIONS));
        put(&mut made.location, location.transpose()?);
        put(&mut made.threshold, args.word("threshold").map(|w| w.text().to_owned()));
        made.none |= args.has("no_shift");
        match head.index {
            Some(i) => self.intent.level_shifters[i] = made,
            None => self.intent.level_shifters.push(made),
        }
        Ok(())
    }
}
