//! Domains of a study that are taken from power intent.

use std::path::Path;
use std::sync::Arc;

use indexmap::IndexMap;

use super::study::{DomainSpec, IntentSpec, Study};
use crate::read::Input;
use crate::read::deck::Note;
use crate::read::intent::{DomainMap, IntentOptions, MappedDomain, MappedSwitch, read_intent, resolve};
use crate::read::source::{Place, ReadError, Source};
use crate::read::verilog::connect::{ConnectOptions, connect};
use crate::standby::Scheme;

/// Netlists with the intent mapped onto them, each read once.
#[derive(Debug, Default)]
pub(super) struct Designs {
    maps: IndexMap<(Vec<String>, Option<String>), DomainMap>,
}

impl Designs {
    /// What the intent says of a domain; nothing for a domain that is not taken from it.
    pub(super) fn domain(
        &mut self,
        study: &Study,
        d: &DomainSpec,
        origin: &str,
        folder: &Path,
        notes: &mut Vec<Note>,
    ) -> Result<Option<MappedDomain>, ReadError> {
        let (Some(name), Some(spec)) = (&d.intent, &study.intent) else { return Ok(None) };
        let files = if d.verilog.is_empty() { &spec.verilog } else { &d.verilog };
        let top = d.top.as_ref().or(spec.top.as_ref());
        let key = (files.clone(), top.cloned());
        if !self.maps.contains_key(&key) {
            let map = read(spec, files, top.map(String::as_str), folder, notes)?;
            self.maps.insert(key.clone(), map);
        }
        let at = Place::new(&Arc::from(origin), 1, 1);
        let mapped = self.maps[&key].domain_or(name, &at)?.clone();
        for scheme in study.scheme.iter().filter(|s| s.applies_to(&d.name)) {
            if let Some(text) = against(scheme, &d.name, &mapped) {
                Note::new("scheme-against-intent", text).add_once(notes);
            }
        }
        Ok(Some(mapped))
    }
}

fn read(
    spec: &IntentSpec,
    files: &[String],
    top: Option<&str>,
    folder: &Path,
    notes: &mut Vec<Note>,
) -> Result<DomainMap, ReadError> {
    let mut inputs: Vec<Input> = files.iter().map(|f| Input::file(&folder.join(f))).collect();
    let net = connect(&mut inputs, top, &(), &ConnectOptions::default())?;
    let sources = spec.files.iter().map(|f| Source::open(&folder.join(f))).collect::<Result<Vec<_>, _>>()?;
    let env = spec.env.iter().map(|(k, v)| (k.clone(), v.clone())).collect();
    let intent = read_intent(&sources, &IntentOptions::default().env(env).design(&net))?;
    let map = resolve(&intent, &net)?;
    notes.extend(intent.notes);
    notes.extend(map.notes.iter().cloned());
    Ok(map)
}

/// Where a scheme and the intent differ about the switch.
fn against(scheme: &Scheme, domain: &str, mapped: &MappedDomain) -> Option<String> {
    let name = &scheme.name;
    let said = |switches: &[MappedSwitch], kind: &str| {
        switches.first().map(|s| format!("the intent's switch `{}` ({}) is a {kind}", s.name, s.at))
    };
    let intent = said(&mapped.headers, "header").or_else(|| said(&mapped.footers, "footer"));
    let (header, footer) = (scheme.header.is_some(), scheme.footer.is_some());
    if !header && !footer {
        return None;
    }
    let Some(intent) = intent else {
        return Some(format!(
            "scheme `{name}` switches domain `{domain}`, which the intent's `{}` leaves always on",
            mapped.name
        ));
    };
    let same = header == !mapped.headers.is_empty() && footer == !mapped.footers.is_empty();
    let has = match (header, footer) {
        (true, true) => "header and footer",
        (true, false) => "a header",
        _ => "a footer",
    };
    (!same).then(|| format!("scheme `{name}` gives domain `{domain}` {has}; {intent}"))
}
