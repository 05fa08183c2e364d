//! Study files: one run described in TOML. Unknown keys are refused with the nearest known one.

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::awake::AwakeRequest;
use super::keep::KeepRequest;
use super::optimum::{ChoiceSpec, OptimumSpec};
use super::transition::TransitionSpec;
use crate::block::{Policy, StateWeights};
use crate::cell::RailNames;
use crate::corner::Corner;
use crate::device::spec::DeviceSpec;
use crate::read::source::{Place, ReadError, Source, nearest};
use crate::standby::Scheme;
use crate::states::Parking;

/// One run: domains × schemes × corners. Paths are relative to the study file.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Study {
    /// Heading of reports.
    #[serde(default)]
    pub title: String,
    /// Cards of each process corner.
    pub process: IndexMap<String, ProcessSpec>,
    /// Names netlists use for models → names in the cards.
    #[serde(default)]
    pub models: IndexMap<String, String>,
    /// Compact, generic and tabulated devices of every process, by the name netlists use.
    #[serde(default)]
    pub device: IndexMap<String, DeviceSpec>,
    /// Transistor netlists of the cells.
    #[serde(default)]
    pub cells: CellsSpec,
    /// Liberty libraries, for masters whose policy is `liberty`.
    #[serde(default)]
    pub liberty: Vec<LibertySpec>,
    /// Corners one by one.
    #[serde(default)]
    pub corner: Vec<Corner>,
    /// Corners as all combinations.
    #[serde(default)]
    pub grid: Option<Grid>,
    /// Power intent, which domains may be taken from.
    #[serde(default)]
    pub intent: Option<IntentSpec>,
    /// Domains.
    #[serde(default)]
    pub domain: Vec<DomainSpec>,
    /// Schemes; every one is tried on every domain, or on those it names.
    #[serde(default)]
    pub scheme: Vec<Scheme>,
    /// Limits.
    #[serde(default)]
    pub limits: Limits,
    /// What is asked of awake domains.
    #[serde(default)]
    pub awake: Option<AwakeRequest>,
    /// What is asked of cells that keep state.
    #[serde(default)]
    pub keep: Option<KeepRequest>,
    /// What is asked of falling asleep and waking.
    #[serde(default)]
    pub transition: Option<TransitionSpec>,
    /// Optima asked for.
    #[serde(default)]
    pub optimum: Vec<OptimumSpec>,
    /// Choices asked for.
    #[serde(default)]
    pub choice: Vec<ChoiceSpec>,
}

/// Where the cards of one process corner are.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ProcessSpec {
    /// SPICE files, read in order; may be left out where every model is a `device`.
    #[serde(default)]
    pub files: Vec<String>,
    /// Devices of this process; they come before those of the study.
    #[serde(default)]
    pub device: IndexMap<String, DeviceSpec>,
    /// `.lib` section to take.
    #[serde(default)]
    pub section: Option<String>,
    /// `.include` paths to skip, as the files write them.
    #[serde(default)]
    pub skip_includes: Vec<String>,
    /// Metres per unit of length, when the files have no `.option scale`.
    #[serde(default)]
    pub scale_m: Option<f64>,
}

/// Where the cells are.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CellsSpec {
    /// SPICE or CDL files; may be left out where every master is known by tables.
    #[serde(default)]
    pub netlists: Vec<String>,
    /// Metres per unit of length, when the files have no `.option scale`.
    #[serde(default)]
    pub scale_m: Option<f64>,
    /// Names of rails and wells.
    #[serde(default)]
    pub rails: RailNames,
}

/// Liberty libraries of some processes.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct LibertySpec {
    /// Files, plain or gzip; each a library of one corner.
    pub files: Vec<String>,
    /// Processes they speak for; every one when left out.
    #[serde(default)]
    pub process: Vec<String>,
    /// W per unit of leakage, for files that do not say.
    #[serde(default)]
    pub leakage_unit_w: Option<f64>,
    /// Supply, V, for files that do not say.
    #[serde(default)]
    pub vdd_v: Option<f64>,
    /// Temperature, degrees Celsius, for files that do not say.
    #[serde(default)]
    pub temp_c: Option<f64>,
}

/// All combinations of these.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Grid {
    /// Processes.
    pub process: Vec<String>,
    /// Supplies, V.
    pub vdd_v: Vec<f64>,
    /// Temperatures, degrees Celsius.
    pub temp_c: Vec<f64>,
}

/// Where the power intent is, and the netlist it is about.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct IntentSpec {
    /// Files of IEEE 1801 commands, read in order.
    pub files: Vec<String>,
    /// Structural Verilog files; a domain may name its own.
    #[serde(default)]
    pub verilog: Vec<String>,
    /// Top module, when it is not the only one.
    #[serde(default)]
    pub top: Option<String>,
    /// What the scripts find in `::env`.
    #[serde(default)]
    pub env: IndexMap<String, String>,
}

/// A domain and where its instance counts come from: `verilog` (with `top`, `path`), `counts`, or `intent`.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct DomainSpec {
    /// Name in reports.
    pub name: String,
    /// Structural Verilog files.
    #[serde(default)]
    pub verilog: Vec<String>,
    /// Top module, when it is not the only one.
    #[serde(default)]
    pub top: Option<String>,
    /// Instance path of the domain below the top; the whole top when empty.
    #[serde(default)]
    pub path: String,
    /// CSV file with `cell,count`.
    #[serde(default)]
    pub counts: Option<String>,
    /// Power domain of the study's power intent, by its whole name.
    #[serde(default)]
    pub intent: Option<String>,
    /// Masters without netlist: pattern → policy.
    #[serde(default)]
    pub policy: IndexMap<String, Policy>,
    /// State weights: cell → condition → weight. They win over what `parked` gives.
    #[serde(default)]
    pub states: IndexMap<String, IndexMap<String, f64>>,
    /// What inputs and registers hold while parked: the states of all instances follow from the connections.
    #[serde(default)]
    pub parked: Option<Parking>,
}

impl DomainSpec {
    /// Weights in the form blocks take.
    pub fn weights(&self) -> IndexMap<String, StateWeights> {
        self.states.iter().map(|(k, v)| (k.clone(), StateWeights::Given(v.clone()))).collect()
    }
}

/// Limits that results are held against.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Limits {
    /// Largest gate-to-drain or gate-to-source voltage of a switch, V; the foundry's number.
    #[serde(default)]
    pub oxide_v: Option<f64>,
    /// Largest standby current of any domain, A.
    #[serde(default)]
    pub standby_a: Option<f64>,
}

/// Reads a study.
///
/// # Errors
/// Text that is not TOML, an unknown or missing key, a value of the wrong kind: with line, column and the nearest key.
pub fn read_study(source: &Source) -> Result<Study, ReadError> {
    if source.text.trim().is_empty() {
        return Err(source.nothing("study"));
    }
    let study: Study = toml::from_str(&source.text).map_err(|e| {
        let at = Place::of_offset(&source.path, &source.text, e.span().map_or(0, |s| s.start));
        let message = e.message().replace('\n', "; ");
        if let Some(rest) = message.strip_prefix("unknown field `") {
            let name = rest.split('`').next().unwrap_or("").to_owned();
            let known: Vec<&str> = rest.split('`').skip(2).step_by(2).collect();
            let near = nearest(&name, known.iter().copied()).or_else(|| Some(known.join("`, `")));
            return ReadError::Unknown { at, kind: "key", name, nearest: near };
        }
        if let Some(rest) = message.strip_prefix("unknown variant `") {
            let name = rest.split('`').next().unwrap_or("").to_owned();
            let known: Vec<&str> = rest.split('`').skip(2).step_by(2).collect();
            let near = nearest(&name, known.iter().copied()).or_else(|| Some(known.join("`, `")));
            return ReadError::Unknown { at, kind: "value", name, nearest: near };
        }
        ReadError::Syntax { at, found: message, wanted: "see the study keys in the documentation".into() }
    })?;
    check(&study, source)?;
    Ok(study)
}

fn check(study: &Study, source: &Source) -> Result<(), ReadError> {
    let at = || Place::new(&source.path, 1, 1);
    let empty = |found: &str, wanted: &str| {
        Err(ReadError::Syntax { at: at(), found: found.into(), wanted: wanted.into() })
    };
    for c in study.corners() {
        if !study.process.contains_key(&c.process) {
            return Err(ReadError::Unknown {
                at: at(),
                kind: "process",
                name: c.process.clone(),
                nearest: nearest(&c.process, study.process.keys().map(String::as_str)),
            });
        }
        c.check().map_err(|e| ReadError::Range {
            at: at(),
            name: format!("{} of corner `{}`", e.what, e.corner),
            value: e.value,
            wanted: e.wanted,
        })?;
    }
    for s in &study.scheme {
        s.check().map_err(|e| ReadError::Range {
            at: at(),
            name: format!("{} of scheme `{}`", e.what, e.scheme),
            value: e.value,
            wanted: e.wanted,
        })?;
    }
    for l in &study.liberty {
        if let Some(name) = l.process.iter().find(|n| !study.process.contains_key(*n)) {
            return Err(ReadError::Unknown {
                at: at(),
                kind: "process",
                name: name.clone(),
                nearest: nearest(name, study.process.keys().map(String::as_str)),
            });
        }
        for (what, x) in [("leakage_unit_w", l.leakage_unit_w), ("vdd_v", l.vdd_v)] {
            if let Some(x) = x.filter(|x| !(*x > 0.0 && x.is_finite())) {
                return Err(ReadError::Range {
                    at: at(),
                    name: format!("{what} of [[liberty]]"),
                    value: x.to_string(),
                    wanted: "want more than zero".into(),
                });
            }
        }
    }
    for s in &study.scheme {
        if let Some(name) = s.domains.iter().find(|n| !study.domain.iter().any(|d| d.name == **n)) {
            return Err(ReadError::Unknown {
                at: at(),
                kind: "domain",
                name: name.clone(),
                nearest: nearest(name, study.domain.iter().map(|d| d.name.as_str())),
            });
        }
    }
    for d in &study.domain {
        if d.parked.is_some() && (d.verilog.is_empty() || d.intent.is_some()) {
            return empty(
                &format!("domain `{}` has a `parked` table without connections of its own", d.name),
                "want `verilog` with it, and `path` instead of `intent`",
            );
        }
        if d.intent.is_some() {
            let Some(intent) = &study.intent else {
                let found = format!("domain `{}` is taken from power intent", d.name);
                return empty(&found, "want a table [intent] with its files");
            };
            if d.counts.is_some() || !d.path.is_empty() {
                let found = format!("domain `{}` has `intent` beside `counts` or `path`", d.name);
                return empty(&found, "want one of them");
            }
            if d.verilog.is_empty() && intent.verilog.is_empty() {
                let found = format!("no netlist for domain `{}` of the power intent", d.name);
                return empty(&found, "want `verilog` in the table [intent] or in the domain's");
            }
            continue;
        }
        if d.verilog.is_empty() == d.counts.is_none() {
            return empty(
                &format!(
                    "domain `{}` names {} sources of counts",
                    d.name,
                    if d.counts.is_none() { "no" } else { "two" }
                ),
                "want `verilog`, `counts` or `intent`",
            );
        }
    }
    let twice = |what: &str, names: Vec<&str>| {
        for (i, n) in names.iter().enumerate() {
            if names[..i].contains(n) {
                return empty(&format!("{what} `{n}` stands twice"), "want each name once");
            }
        }
        Ok(())
    };
    twice("domain", study.domain.iter().map(|d| d.name.as_str()).collect())?;
    twice("scheme", study.scheme.iter().map(|d| d.name.as_str()).collect())?;
    let corners = study.corners();
    twice("corner", corners.iter().map(|d| d.name.as_str()).collect())
}

/// What is given, or else what a table of the study asks.
///
/// # Errors
/// Neither is there.
pub fn asked<T: Clone>(
    given: Option<&T>,
    own: Option<&T>,
    table: &str,
    source: &Source,
) -> Result<T, ReadError> {
    given.or(own).cloned().ok_or_else(|| ReadError::Syntax {
        at: Place::new(&source.path, 1, 1),
        found: format!("the study has no {table} table"),
        wanted: format!("want {table} with what is asked"),
    })
}

impl Study {
    /// All corners: those given one by one, then the grid.
    pub fn corners(&self) -> Vec<Corner> {
        let mut all = self.corner.clone();
        if let Some(g) = &self.grid {
            for process in &g.process {
                for &vdd_v in &g.vdd_v {
                    for &temp_c in &g.temp_c {
                        let name = format!("{process} {vdd_v:.2} V {temp_c:.0} °C");
                        all.push(Corner { name, process: process.clone(), vdd_v, temp_c });
                    }
                }
            }
        }
        all
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const GOOD: &str = r#"
title = "t"
[process.tt]
files = ["a.lib"]
[cells]
netlists = ["c.spice"]
[grid]
process = ["tt"]
vdd_v = [1.1]
temp_c = [25]
[[domain]]
name = "d"
counts = "n.csv"
[domain.policy]
"FILL*" = "zero"
"TIE" = { alias = "inv" }
[[scheme]]
name = "on"
"#;

    fn read(text: &str) -> Result<Study, ReadError> {
        read_study(&Source::from_text("s.toml", text))
    }

    #[test]
    fn a_study_reads_and_its_grid_unfolds() {
        let s = read(GOOD).expect("good");
        assert_eq!(s.corners().len(), 1);
        assert_eq!(s.domain[0].policy["TIE"], Policy::Alias("inv".into()));
    }

    #[test]
    fn mistakes_are_named_with_place_and_suggestion() {
        for (from, to, wanted) in [
            ("title", "titel", "s.toml:2:1: key `titel` is not defined; did you mean `title`?"),
            ("netlists", "netlist", "did you mean `netlists`?"),
            ("\"zero\"", "\"zer\"", "did you mean `zero`?"),
            ("temp_c = [25]", "temp_c = [2500]", "temperature of corner"),
            ("process = [\"tt\"]", "process = [\"ttt\"]", "process `ttt` is not defined; did you mean `tt`?"),
            ("counts = \"n.csv\"", "top = \"x\"", "names no sources of counts"),
            ("name = \"on\"", "nam = \"on\"", "did you mean `name`?"),
            ("counts = \"n.csv\"", "intent = \"PD\"", "want a table [intent]"),
            ("counts = \"n.csv\"", "counts = \"n.csv\"\nverilog = [\"a.v\"]", "names two sources of counts"),
            ("[[scheme]]", "[[scheme", "s.toml:"),
        ] {
            let e = read(&GOOD.replace(from, to)).expect_err(to).to_string();
            assert!(e.contains(wanted), "{to}: {e}");
        }
        assert!(read("").expect_err("empty").to_string().contains("empty"));
    }
}
