//! A process at one corner: decks of cards from which transistors and diodes are made.

use std::sync::Arc;

use indexmap::IndexMap;
use rustc_hash::FxHashMap;

use super::bsim4::layout::{self, Diffusions};
use super::bsim4::limits::Limits;
use super::bsim4::material::Material;
use super::bsim4::prepare::Prepared;
use super::bsim4::table::{Id, ROWS};
use super::bsim4::threshold::Threshold;
use super::bsim4::values::{Card, Values};
use super::bsim4::{Bsim4, mobility, table};
use super::diode::Diode;
use super::spec::DeviceModel;
use super::{Bias, Device, Geometry};
use crate::physics::Kelvin;
use crate::read::deck::{Deck, DeckScope, Element, ModelText, Note, Subckt};
use crate::read::expression::Expr;
use crate::read::source::{Place, ReadError, Source, nearest};
use crate::read::spice::{DeckOptions, read_deck};

/// Relative slack at the edges of bins: sizes written in micrometres do not always survive the conversion to metres.
const BIN_SLACK: f64 = 1e-9;

/// Mobility over its low-field value from which the published form is continued by a hyperbola (denominator below 0.2).
const MOBILITY_FOLD: f64 = 5.0;

/// Cards and corner files of one technology at one process corner.
#[derive(Debug, Clone)]
pub struct Process {
    /// Name used in reports, such as `tt`.
    pub name: String,
    /// The cards.
    pub deck: Deck,
    /// Names netlists use for a model, to the names of the deck; both in lower case.
    pub aliases: IndexMap<String, String>,
    /// Compact, generic and tabulated devices by lower-case name; they come before cards of the same name.
    pub own: IndexMap<String, DeviceModel>,
    families: FxHashMap<(Option<Arc<str>>, String), Vec<Bin>>,
}

/// One `.model` of a family, and its limits where they are plain numbers: lmin, lmax, wmin, wmax.
#[derive(Debug, Clone, Copy)]
struct Bin {
    model: usize,
    limits: [Limit; 4],
}

#[derive(Debug, Clone, Copy)]
enum Limit {
    Absent,
    Number(f64),
    Expression,
}

const LIMITS: [&str; 4] = ["lmin", "lmax", "wmin", "wmax"];

fn index_families(deck: &Deck) -> FxHashMap<(Option<Arc<str>>, String), Vec<Bin>> {
    let mut out: FxHashMap<(Option<Arc<str>>, String), Vec<Bin>> = FxHashMap::default();
    let mut add = |scope: Option<&Arc<str>>, models: &[ModelText]| {
        for (model, m) in models.iter().enumerate() {
            let limits = LIMITS.map(|n| match m.get(n).map(|d| &d.expr) {
                None => Limit::Absent,
                Some(Expr::Num(v)) => Limit::Number(*v),
                Some(_) => Limit::Expression,
            });
            let bin = Bin { model, limits };
            out.entry((scope.cloned(), m.family().to_owned())).or_default().push(bin);
            if m.family() != &*m.name {
                out.entry((scope.cloned(), m.name.to_string())).or_default().push(bin);
            }
        }
    };
    add(None, &deck.models);
    for (key, sub) in &deck.subckts {
        add(Some(key), &sub.models);
    }
    out
}

/// A request for one device, as a netlist states it: SI units, names in lower case.
#[derive(Debug, Clone)]
pub struct Request {
    /// Model or wrapper subcircuit.
    pub model: Arc<str>,
    /// Instance parameters.
    pub params: Vec<(Arc<str>, f64)>,
    /// Where it stands, for messages.
    pub at: Place,
}

/// A transistor and how many stand in parallel.
#[derive(Debug, Clone)]
pub struct Transistor {
    /// One device.
    pub device: Arc<dyn Device>,
    /// Number in parallel.
    pub count: f64,
    /// Drawn geometry.
    pub geometry: Geometry,
}

/// The card that covers a request, and what the request says beside it.
#[derive(Debug, Clone)]
pub struct CardOf {
    /// The card.
    pub card: Card,
    /// Drawn geometry, diffusions filled in.
    pub geometry: Geometry,
    /// Number in parallel.
    pub count: f64,
    /// How the diffusions were filled in.
    pub diffusions: Diffusions,
}

/// Power of the length unit in an instance parameter: 1 for lengths, 2 for areas, 0 for plain numbers.
pub(crate) fn length_power(name: &str) -> Option<i32> {
    Some(match name {
        "l" | "w" | "sa" | "sb" | "sd" | "sc" | "pd" | "ps" | "pj" => 1,
        "ad" | "as" | "area" => 2,
        "nf" | "m" | "mult" | "nrd" | "nrs" | "delvto" | "mulu0" | "sca" | "scb" | "scc" | "geo"
        | "geomod" | "rgeomod" | "min" | "dtemp" => 0,
        _ => return None,
    })
}

struct Found<'a> {
    wrapper: Option<&'a Subckt>,
    element: Option<&'a Element>,
    models: &'a [ModelText],
    bins: &'a [Bin],
}

impl Process {
    /// Reads the cards of one corner.
    ///
    /// # Errors
    /// Whatever is wrong with the text; see [`ReadError`].
    pub fn read(name: &str, sources: &[Source], options: &DeckOptions) -> Result<Self, ReadError> {
        let deck = read_deck(sources, options)?;
        let families = index_families(&deck);
        Ok(Self { name: name.to_owned(), deck, aliases: IndexMap::new(), own: IndexMap::new(), families })
    }

    /// A process without cards, for compact, generic and tabulated devices.
    pub fn empty(name: &str) -> Self {
        let (aliases, own) = (IndexMap::new(), IndexMap::new());
        Self { name: name.to_owned(), deck: Deck::default(), aliases, own, families: FxHashMap::default() }
    }

    /// Adds a compact, generic or tabulated device under the name netlists use.
    #[must_use]
    pub fn device(mut self, name: &str, model: DeviceModel) -> Self {
        self.own.insert(name.to_lowercase(), model);
        self
    }

    /// Puts a device in the place of whatever netlists mean by the name, cards included.
    #[must_use]
    pub fn replace(mut self, name: &str, model: DeviceModel) -> Self {
        let name = self.resolve(name);
        self.own.insert(name, model);
        self
    }

    /// Adds a name that netlists use for a model of the deck.
    #[must_use]
    pub fn alias(mut self, netlist_name: &str, deck_name: &str) -> Self {
        self.aliases.insert(netlist_name.to_lowercase(), deck_name.to_lowercase());
        self
    }

    /// Names of all transistor families and wrappers.
    pub fn model_names(&self) -> Vec<String> {
        let mut names: Vec<String> = self.deck.subckts.keys().map(ToString::to_string).collect();
        for m in &self.deck.models {
            if !names.iter().any(|n| n == m.family()) {
                names.push(m.family().to_owned());
            }
        }
        names.extend(self.own.keys().cloned());
        names.extend(self.aliases.keys().cloned());
        names
    }

    /// Whether the deck (or an alias) defines this name.
    pub fn defines(&self, model: &str) -> bool {
        let name = self.resolve(model);
        self.own.contains_key(&name)
            || self.deck.subckts.contains_key(name.as_str())
            || self.families.contains_key(&(None, name))
    }

    fn resolve(&self, model: &str) -> String {
        let lower = model.to_lowercase();
        self.aliases.get(&lower).cloned().unwrap_or(lower)
    }

    /// The compact, generic or tabulated device a request names.
    pub(super) fn own_model(&self, request: &Request) -> Option<&DeviceModel> {
        self.own.get(&self.resolve(&request.model))
    }

    fn find(&self, request: &Request) -> Result<Found<'_>, ReadError> {
        let name = self.resolve(&request.model);
        if self.own.contains_key(&name) {
            return Err(ReadError::Syntax {
                at: request.at.clone(),
                found: format!("`{}` is a compact or tabulated transistor", request.model),
                wanted: "want the name of a foundry card here".into(),
            });
        }
        if let Some(sub) = self.deck.subckts.get(name.as_str()) {
            let inner: Vec<&Element> =
                sub.elements.iter().filter(|e| matches!(e.kind, 'M' | 'D' | 'X')).collect();
            let [element] = inner[..] else {
                return Err(ReadError::Syntax {
                    at: sub.loc.place(&self.deck.files),
                    found: format!("subcircuit `{}` wraps {} devices", sub.name, inner.len()),
                    wanted: "a device wrapper must hold exactly one transistor or diode".into(),
                });
            };
            let model = element.model.to_string();
            let local = self.families.get(&(Some(Arc::from(name.as_str())), model.clone()));
            let (models, bins) = match local {
                Some(bins) => (&sub.models[..], &bins[..]),
                None => {
                    (&self.deck.models[..], self.families.get(&(None, model)).map_or(&[][..], Vec::as_slice))
                }
            };
            if bins.is_empty() {
                let names = sub.models.iter().chain(&self.deck.models).map(ModelText::family);
                return Err(ReadError::Unknown {
                    at: element.loc.place(&self.deck.files),
                    kind: "model",
                    name: element.model.to_string(),
                    nearest: nearest(&element.model, names),
                });
            }
            return Ok(Found { wrapper: Some(sub), element: Some(element), models, bins });
        }
        let bins = self.families.get(&(None, name)).map_or(&[][..], Vec::as_slice);
        if bins.is_empty() {
            let names = self.model_names();
            return Err(ReadError::Unknown {
                at: request.at.clone(),
                kind: "model",
                name: request.model.to_string(),
                nearest: nearest(&request.model, names.iter().map(String::as_str)),
            });
        }
        Ok(Found { wrapper: None, element: None, models: &self.deck.models, bins })
    }

    /// Values of the wrapper's parameters for this instance, in the deck's own units, and the SI parameters of the
    /// transistor itself.
    fn instance(
        &self,
        found: &Found<'_>,
        request: &Request,
        temp_c: f64,
        notes: &mut Vec<Note>,
    ) -> Result<(Vec<(Arc<str>, f64)>, Vec<(Arc<str>, f64)>), ReadError> {
        let (Some(sub), Some(element)) = (found.wrapper, found.element) else {
            for (name, _) in request.params.iter().filter(|(n, _)| length_power(n).is_none()) {
                let text = format!("instance parameter `{name}` is unknown to BSIM4 and has no effect");
                let note = Note::new("instance-parameter", text);
                note.add_once(notes);
            }
            return Ok((request.params.clone(), request.params.clone()));
        };
        let scale = self.deck.scale();
        let mut values: Vec<(Arc<str>, f64)> = Vec::new();
        for (name, v) in &request.params {
            if sub.params.contains_key(name) {
                let power = length_power(name).unwrap_or(0);
                values.push((Arc::clone(name), v / scale.powi(power)));
            } else if &**name != "m" {
                let text =
                    format!("instance parameter `{name}` is unknown to `{}` and has no effect", sub.name);
                let note = Note::new("instance-parameter", text);
                note.add_once(notes);
            }
        }
        let scope = DeckScope::new(&self.deck, Some(sub), &values, temp_c);
        let mut inner = Vec::new();
        for (name, def) in &element.params {
            let power = length_power(name).ok_or_else(|| ReadError::Unknown {
                at: def.loc.place(&self.deck.files),
                kind: "instance parameter",
                name: name.to_string(),
                nearest: None,
            })?;
            inner.push((Arc::clone(name), self.deck.eval(def, &scope)? * scale.powi(power)));
        }
        if let Some((name, v)) = request.params.iter().find(|(n, _)| &**n == "m")
            && !sub.params.contains_key(name)
        {
            inner.push((Arc::clone(name), *v));
        }
        Ok((values, inner))
    }

    /// Makes a transistor.
    ///
    /// # Errors
    /// No card, no bin for the size, an impossible size, or a card that cannot be evaluated.
    pub fn transistor(
        &self,
        request: &Request,
        temp: Kelvin,
        notes: &mut Vec<Note>,
    ) -> Result<Transistor, ReadError> {
        if let Some((_, d)) = request.params.iter().find(|(n, d)| &**n == "dtemp" && *d != 0.0) {
            return Err(ReadError::Range {
                at: request.at.clone(),
                name: "dtemp".into(),
                value: format!("{d} K"),
                wanted: "a device warmer than its corner is not computed; want 0".into(),
            });
        }
        if let Some(model) = self.own_model(request) {
            let get = |name: &str| request.params.iter().rev().find(|(n, _)| &**n == name).map(|(_, v)| *v);
            let (geometry, count) = drawn(get, request)?;
            return Ok(Transistor { device: model.make(&geometry, temp, &request.at)?, count, geometry });
        }
        let CardOf { card, geometry, count, .. } = self.card(request, temp.celsius(), notes)?;
        let values = Self::values(&card, &geometry, request)?;
        let gap = Material::of(&card).gap(temp.get());
        if !(gap > 0.0) {
            return Err(ReadError::Range {
                at: request.at.clone(),
                name: format!("band gap of model `{}` at {:.1} °C", request.model, temp.celsius()),
                value: format!("{gap:.3} eV"),
                wanted: "want a gap above zero; the card does not hold at this temperature".into(),
            });
        }
        let prepared = Prepared::new(&card, &values, &geometry, temp.get());
        if !(prepared.phi > 0.0
            && prepared.vsat > 0.0
            && prepared.mobility.u0 > 0.0
            && prepared.vth0.is_finite())
        {
            return Err(ReadError::Range {
                at: request.at.clone(),
                name: format!("model `{}` at {:.1} °C", request.model, temp.celsius()),
                value: format!(
                    "surface potential {:.3} V, saturation velocity {:.3e} m/s, mobility {:.3e} m²/Vs",
                    prepared.phi, prepared.vsat, prepared.mobility.u0
                ),
                wanted: "all must be above zero; the card does not hold at this temperature".into(),
            });
        }
        let on = Threshold::at(&prepared, 1.0, 1.0, 0.0);
        if mobility::effective(&prepared, &on) > MOBILITY_FOLD * prepared.mobility.u0 {
            let text = format!(
                "model family `{}`: the mobility terms of the card nearly cancel at {:.1} °C, so that mobility would rise without \
                 limit: the card is used outside the temperatures it was made for, and on-currents are not to be trusted",
                request.model,
                temp.celsius()
            );
            Note::new("card-outside-temperature", text).add_once(notes);
        }
        let device = Bsim4 { prepared, limits: Limits::of(&card) };
        let sign = device.polarity().sign();
        for (vgs, vds, vbs) in [(1.0, 1.0, 0.0), (-0.5, 1.0, -0.5), (0.0, 0.5, 0.2)] {
            let bias = Bias { vgs: sign * vgs, vds: sign * vds, vbs: sign * vbs };
            if device.branches(bias).terminals().iter().any(|i| !i.is_finite()) {
                return Err(ReadError::Range {
                    at: request.at.clone(),
                    name: format!(
                        "current of model `{}` at vgs {vgs} V, vds {vds} V, vbs {vbs} V",
                        request.model
                    ),
                    value: "not a finite number".into(),
                    wanted: "a parameter of the card is far outside what is physical".into(),
                });
            }
        }
        Ok(Transistor { device: Arc::new(device), count, geometry })
    }

    fn values(card: &Card, g: &Geometry, request: &Request) -> Result<Values<f64>, ReadError> {
        let values = Values::at(card, g, |_, v| v).map_err(|(what, size)| ReadError::Range {
            at: request.at.clone(),
            name: format!("{what} of model `{}`", request.model),
            value: format!("{size:.3e} m"),
            wanted: "want a drawn size well above the offsets of the card".into(),
        })?;
        match values.out_of_range() {
            None => Ok(values),
            Some((id, value, range)) => Err(ReadError::Range {
                at: request.at.clone(),
                name: format!("{} of model `{}` at this size", ROWS[id as usize].name, request.model),
                value: value.to_string(),
                wanted: format!("want {range}"),
            }),
        }
    }

    /// The card that covers a request, with the drawn geometry and the number in parallel.
    ///
    /// # Errors
    /// As for [`Process::transistor`].
    pub fn card(&self, request: &Request, temp_c: f64, notes: &mut Vec<Note>) -> Result<CardOf, ReadError> {
        let found = self.find(request)?;
        let (wrapper_values, inner) = self.instance(&found, request, temp_c, notes)?;
        let get = |name: &str| inner.iter().rev().find(|(n, _)| &**n == name).map(|(_, v)| *v);
        let (g, count) = drawn(get, request)?;
        let scope = DeckScope::new(&self.deck, found.wrapper, &wrapper_values, temp_c);
        let (w, l) = (g.width_m / g.fingers, g.length_m);
        let model = self.bin(&found, w, l, &scope, request)?;
        let card = Card::evaluate(model, &self.deck, &scope, notes)?;
        let flag = |name: &str, id: Id| get(name).unwrap_or_else(|| card.base(id));
        let without = ["nrd", "nrs"].iter().any(|n| get(n).is_none());
        if card.base(Id::Rsh) > 0.0 && flag("rgeomod", Id::Rgeomod) != 0.0 && without {
            let text = format!(
                "model family `{}`: the resistance of the diffusions is not worked out from the layout (rgeomod); give nrd and \
                 nrs. On-currents are a little high, off-currents are not touched",
                model.family()
            );
            Note::new("diffusion-resistance", text).add_once(notes);
        }
        if flag("rbodymod", Id::Rbodymod) != 0.0 {
            let text = format!(
                "model family `{}`: the resistance of the body (rbodymod) is not computed; it matters only where the current of \
                 the body lifts it by more than a millivolt, as in breakdown or with a junction driven forward",
                model.family()
            );
            Note::new("body-resistance", text).add_once(notes);
        }
        if card.flag(Id::Mtrlmod) == 1
            && [Id::Leffeot, Id::Weffeot, Id::Tempeot].iter().any(|&id| card.has(id))
        {
            let text = format!(
                "model family `{}`: the physical oxide is worked out on each device's own size and temperature, not on leffeot, \
                 weffeot and tempeot; on-currents may differ by a few percent, off-currents do not",
                model.family()
            );
            Note::new("physical-oxide", text).add_once(notes);
        }
        let mut g = g;
        if let Some(distance) = get("sc").filter(|d| *d > 0.0)
            && ["sca", "scb", "scc"].iter().all(|n| get(n).is_none())
        {
            g.well_proximity = layout::well_proximity(distance, g.width_m, card.base(Id::Scref));
        }
        let geomod = get("geomod").or_else(|| get("geo")).unwrap_or_else(|| card.base(Id::Geomod));
        if !(0.0..=10.0).contains(&geomod) || geomod.fract() != 0.0 {
            return Err(ReadError::Range {
                at: request.at.clone(),
                name: "geomod".into(),
                value: geomod.to_string(),
                wanted: "want a whole number from 0 to 10".into(),
            });
        }
        #[expect(clippy::cast_possible_truncation, reason = "a whole number from 0 to 10")]
        let diffusions = Diffusions {
            geomod: geomod as i64,
            fewest_sources: get("min") == Some(1.0),
            areas: ["ad", "as"].map(|n| get(n).is_some()),
            perimeters: ["pd", "ps"].map(|n| get(n).is_some()),
        };
        let width = Self::values(&card, &g, request)?.size.weffcj;
        diffusions.fill(&card, &mut g, width);
        Ok(CardOf { card, geometry: g, count, diffusions })
    }

    /// The one bin with `lmin ≤ L < lmax` and `wmin ≤ W < wmax`; never an interpolation between bins.
    fn bin<'a>(
        &self,
        found: &Found<'a>,
        w: f64,
        l: f64,
        scope: &DeckScope<'_>,
        request: &Request,
    ) -> Result<&'a ModelText, ReadError> {
        if let [one] = found.bins
            && one.limits.iter().all(|l| matches!(l, Limit::Absent))
        {
            return Ok(&found.models[one.model]);
        }
        let limit = |bin: &Bin, which: usize, otherwise: f64| match bin.limits[which] {
            Limit::Absent => Ok(otherwise),
            Limit::Number(v) => Ok(v),
            Limit::Expression => match found.models[bin.model].get(LIMITS[which]) {
                Some(d) => self.deck.eval(d, scope),
                None => Ok(otherwise),
            },
        };
        let at_or_above = |x: f64, lo: f64| x >= lo * (1.0 - BIN_SLACK);
        let mut edge = None;
        let mut inside_of: Option<&ModelText> = None;
        let mut near: Option<(f64, [f64; 4], &ModelText)> = None;
        for bin in found.bins {
            let m = &found.models[bin.model];
            let (l0, l1) = (limit(bin, 0, 0.0)?, limit(bin, 1, 1.0)?);
            let (w0, w1) = (limit(bin, 2, 0.0)?, limit(bin, 3, 1.0)?);
            let inside = |x: f64, lo: f64, hi: f64| at_or_above(x, lo) && !at_or_above(x, hi);
            if inside(l, l0, l1) && inside(w, w0, w1) {
                if let Some(first) = inside_of {
                    return Err(ReadError::Range {
                        at: request.at.clone(),
                        name: format!("size of a `{}` transistor", request.model),
                        value: format!("L = {:.4} µm, W = {:.4} µm per finger", l * 1e6, w * 1e6),
                        wanted: format!(
                            "bins `{}` and `{}` both cover it; the cards must leave one (lmin ≤ L < lmax, wmin ≤ W < wmax)",
                            first.name, m.name
                        ),
                    });
                }
                inside_of = Some(m);
            }
            // the top edge of the whole range belongs to the last bin
            let touches = |x: f64, lo: f64, hi: f64| at_or_above(x, lo) && x <= hi * (1.0 + BIN_SLACK);
            if touches(l, l0, l1) && touches(w, w0, w1) {
                edge = Some(m);
            }
            let off = |x: f64, lo: f64, hi: f64| ((lo - x) / lo.max(1e-9)).max((x - hi) / hi).max(0.0);
            let far = off(l, l0, l1) + off(w, w0, w1);
            if near.is_none_or(|(f, ..)| far < f) {
                near = Some((far, [l0, l1, w0, w1], m));
            }
        }
        inside_of.or(edge).ok_or_else(|| {
            let nearest = near.map_or_else(String::new, |(_, limits, m)| {
                let [l0, l1, w0, w1] = limits.map(|v| v * 1e6);
                format!("; the nearest is L {l0:.4} to {l1:.4} µm, W {w0:.4} to {w1:.4} µm (`{}`)", m.name)
            });
            ReadError::Range {
                at: request.at.clone(),
                name: format!("size of a `{}` transistor", request.model),
                value: format!("L = {:.4} µm, W = {:.4} µm per finger", l * 1e6, w * 1e6),
                wanted: format!("no bin covers it{nearest}"),
            }
        })
    }

    /// Parameters of a card at a request's geometry, bins added: name and value.
    ///
    /// # Errors
    /// As for [`Process::transistor`].
    pub fn effective(&self, request: &Request) -> Result<IndexMap<&'static str, f64>, ReadError> {
        let mut notes = Vec::new();
        let CardOf { card, geometry: g, .. } = self.card(request, 25.0, &mut notes)?;
        let values = Self::values(&card, &g, request)?;
        Ok(table::IDS.iter().map(|&id: &Id| (ROWS[id as usize].name, values[id])).collect())
    }

    /// Makes a diode; `area` and `perimeter` come from the instance (`area`, `pj`), SI.
    ///
    /// # Errors
    /// No model, or one that cannot be evaluated.
    pub fn diode(
        &self,
        request: &Request,
        temp: Kelvin,
        notes: &mut Vec<Note>,
    ) -> Result<(Diode, f64), ReadError> {
        let found = self.find(request)?;
        let (wrapper_values, inner) = self.instance(&found, request, temp.celsius(), notes)?;
        let get = |name: &str| inner.iter().rev().find(|(n, _)| &**n == name).map(|(_, v)| *v);
        let (area, pj) = (get("area").or(get("a")).unwrap_or(0.0), get("pj").or(get("p")).unwrap_or(0.0));
        if !(area >= 0.0 && pj >= 0.0) {
            return Err(ReadError::Range {
                at: request.at.clone(),
                name: "diode area or perimeter".into(),
                value: format!("{area:.3e} m², {pj:.3e} m"),
                wanted: "want zero or more".into(),
            });
        }
        let scale = self.deck.scale();
        let model = &found.models[found.bins[0].model];
        let scope = DeckScope::new(&self.deck, found.wrapper, &wrapper_values, temp.celsius());
        let d =
            Diode::evaluate(model, &self.deck, &scope, area / scale.powi(2), pj / scale, temp.get(), notes)?;
        Ok((d, get("m").unwrap_or(1.0)))
    }
}

/// Drawn geometry and number in parallel from instance parameters in SI units.
fn drawn(get: impl Fn(&str) -> Option<f64>, request: &Request) -> Result<(Geometry, f64), ReadError> {
    let g = Geometry {
        width_m: get("w").unwrap_or(5e-6),
        length_m: get("l").unwrap_or(5e-6),
        fingers: get("nf").unwrap_or(1.0),
        sa_m: get("sa").unwrap_or(0.0),
        sb_m: get("sb").unwrap_or(0.0),
        sd_m: get("sd").unwrap_or(0.0),
        ad_m2: get("ad").unwrap_or(0.0),
        as_m2: get("as").unwrap_or(0.0),
        pd_m: get("pd").unwrap_or(0.0),
        ps_m: get("ps").unwrap_or(0.0),
        drain_squares: get("nrd").unwrap_or(0.0),
        source_squares: get("nrs").unwrap_or(0.0),
        well_proximity: (get("sca").unwrap_or(0.0), get("scb").unwrap_or(0.0), get("scc").unwrap_or(0.0)),
        delvto_v: get("delvto").unwrap_or(0.0),
        mobility_factor: get("mulu0").unwrap_or(1.0),
    };
    let count = get("m").unwrap_or(1.0);
    check_size(&g, count, request)?;
    Ok((g, count))
}

fn check_size(g: &Geometry, count: f64, request: &Request) -> Result<(), ReadError> {
    let wrong = |name: &str, value: String, wanted: &str| {
        Err(ReadError::Range { at: request.at.clone(), name: name.into(), value, wanted: wanted.into() })
    };
    for (name, v) in [("width", g.width_m), ("length", g.length_m)] {
        if !(v > 0.0) {
            return wrong(name, format!("{v:.3e} m"), "want a size above zero");
        }
        if v > 0.02 {
            return wrong(
                name,
                format!("{v:.3e} m"),
                "want a transistor below 2 cm; is the scale of the netlist missing (1e-6 for micrometres)?",
            );
        }
    }
    if !(g.fingers >= 1.0) || g.fingers.fract() != 0.0 || g.fingers > 10_000.0 {
        return wrong("nf", g.fingers.to_string(), "want a whole number of fingers, 1 or more");
    }
    if !(count > 0.0) {
        return wrong("m", count.to_string(), "want a number of devices above zero");
    }
    if !(g.mobility_factor > 0.0) {
        return wrong("mulu0", g.mobility_factor.to_string(), "want a factor above zero");
    }
    for (name, v) in [
        ("sa", g.sa_m),
        ("sb", g.sb_m),
        ("sd", g.sd_m),
        ("ad", g.ad_m2),
        ("as", g.as_m2),
        ("pd", g.pd_m),
        ("ps", g.ps_m),
        ("nrd", g.drain_squares),
        ("nrs", g.source_squares),
    ] {
        if !(v >= 0.0) {
            return wrong(name, format!("{v:.3e}"), "want zero or more");
        }
    }
    Ok(())
}
