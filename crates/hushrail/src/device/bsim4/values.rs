//! From a card's text to numbers for one geometry: evaluation, defaults, bins, effective sizes.

use std::ops::Index;

use super::table::{
    COUNT, Fallback, IDS, Id, Kind, Meaning, Part, ROWS, Range, known_names, meaning, ranges_broken,
};
use crate::device::dual::Real;
use crate::device::{Geometry, Polarity};
use crate::read::deck::{Deck, DeckScope, ModelText, Note};
use crate::read::source::{ReadError, nearest};

/// The numbers of one `.model` for one instance, before length and width terms are added.
#[derive(Debug, Clone)]
pub struct Card {
    /// n- or p-channel.
    pub polarity: Polarity,
    /// Base values; defaults where the card gives none.
    pub base: Box<[f64; COUNT]>,
    /// Which base values the card gives.
    pub given: Box<[bool; COUNT]>,
    /// Length, width and product terms given.
    pub terms: Vec<(Id, Part, f64)>,
}

impl Card {
    /// Whether the card itself gives a parameter.
    pub fn has(&self, id: Id) -> bool {
        self.given[id as usize]
    }
    /// A base value.
    pub fn base(&self, id: Id) -> f64 {
        self.base[id as usize]
    }
    /// A selector as a whole number.
    pub fn flag(&self, id: Id) -> i64 {
        #[expect(clippy::cast_possible_truncation, reason = "selectors are small; checked on reading")]
        {
            self.base[id as usize] as i64
        }
    }

    /// Evaluates the parameters of `model` in `scope`.
    ///
    /// Unknown names, an unsupported level or version, and selectors outside their range are errors;
    /// parameters without static effect are listed once in `notes`.
    pub fn evaluate(
        model: &ModelText,
        deck: &Deck,
        scope: &DeckScope<'_>,
        notes: &mut Vec<Note>,
    ) -> Result<Self, ReadError> {
        let at = || model.loc.place(&deck.files);
        let polarity = match &*model.kind {
            "nmos" => Polarity::N,
            "pmos" => Polarity::P,
            other => {
                return Err(ReadError::Syntax {
                    at: at(),
                    found: format!("model `{}` is of type `{other}`", model.name),
                    wanted: "a transistor needs nmos or pmos".into(),
                });
            }
        };
        let mut base = Box::new([0.0; COUNT]);
        let mut given = Box::new([false; COUNT]);
        let mut terms = Vec::new();
        let mut no_effect = 0usize;
        for (name, def) in &model.values {
            match meaning(name) {
                Some(Meaning::Static(id, Part::Base)) => {
                    base[id as usize] = deck.eval(def, scope)?;
                    given[id as usize] = true;
                }
                Some(Meaning::Static(id, part)) => terms.push((id, part, deck.eval(def, scope)?)),
                Some(Meaning::NoEffect) => no_effect += 1,
                Some(Meaning::NotComputed) => {
                    return Err(ReadError::Syntax {
                        at: def.loc.place(&deck.files),
                        found: format!("parameter `{name}` of model `{}`", model.name),
                        wanted:
                            "it would change static currents and is not computed yet; remove it only if the \
                                 foundry says that it has no effect"
                                .into(),
                    });
                }
                None => {
                    return Err(ReadError::Unknown {
                        at: def.loc.place(&deck.files),
                        kind: "model parameter",
                        name: name.to_string(),
                        nearest: nearest(name, known_names()),
                    });
                }
            }
        }
        let known =
            |n: &Note| n.code == "no-static-effect" && n.text.contains(&format!("`{}`", model.family()));
        if no_effect > 0 && !notes.iter().any(known) {
            let text = format!(
                "model family `{}`: parameters for charge, noise and radio frequency have no effect on static currents",
                model.family()
            );
            notes.push(Note::new("no-static-effect", text));
        }
        let mut card = Self { polarity, base, given, terms };
        card.fill_defaults();
        card.check(model, deck)?;
        Ok(card)
    }

    fn fill_defaults(&mut self) {
        // `Same` may point forward in the table, so look through the chain
        for (i, row) in ROWS.iter().enumerate() {
            if self.given[i] {
                continue;
            }
            let mut default = row.default;
            self.base[i] = loop {
                match default {
                    Fallback::Value(v) => break v,
                    Fallback::ByType(n, p) => break if self.polarity == Polarity::N { n } else { p },
                    Fallback::Derived => break 0.0,
                    Fallback::Same(id) if self.given[id as usize] => break self.base[id as usize],
                    Fallback::Same(id) => default = ROWS[id as usize].default,
                }
            };
        }
        if self.base[Id::Mtrlmod as usize] == 1.0 {
            // the gate stack is stated by its equivalent oxide
            self.base[Id::Toxe as usize] = self.base[Id::Eot as usize];
            self.base[Id::Epsrox as usize] = 3.9;
            if !self.given[Id::Toxm as usize] {
                self.base[Id::Toxm as usize] = self.base[Id::Toxe as usize];
            }
        }
        let mob = self.base[Id::Mobmod as usize];
        let (toxe, dtox) = (self.base[Id::Toxe as usize], self.base[Id::Dtox as usize]);
        let mut derive = |id: Id, v: f64| {
            if !self.given[id as usize] {
                self.base[id as usize] = v;
            }
        };
        derive(Id::Toxp, toxe - dtox);
        derive(Id::Ua, if mob == 2.0 { 1e-15 } else { 1e-9 });
        derive(Id::Uc, if mob == 1.0 { -0.0465 } else { -0.0465e-9 });
        derive(Id::Uc1, if mob == 1.0 { -0.056 } else { -0.056e-9 });
        // terms of a parameter whose twin is not given follow the twin too
        let own: Vec<_> = self.terms.clone();
        for (i, row) in ROWS.iter().enumerate() {
            if let (Kind::Binned, Fallback::Same(id), false) = (row.kind, row.default, self.given[i])
                && own.iter().all(|t| t.0 != IDS[i])
            {
                self.terms.extend(own.iter().filter(|t| t.0 == id).map(|t| (IDS[i], t.1, t.2)));
            }
        }
    }

    fn check(&self, model: &ModelText, deck: &Deck) -> Result<(), ReadError> {
        let place = |id: Id| {
            let name = ROWS[id as usize].name;
            model.get(name).map_or(model.loc, |d| d.loc).place(&deck.files)
        };
        let allowed: [(Id, &[f64], &str); 15] = [
            (Id::Level, &[14.0, 54.0], "only BSIM4 (level 54 or 14) is supported"),
            (Id::Binunit, &[1.0, 2.0], "want 1 (micrometres) or 2 (metres)"),
            (Id::Mobmod, &[0.0, 1.0, 2.0, 3.0, 4.0, 5.0, 6.0], "want 0 to 6"),
            (Id::Rdsmod, &[0.0, 1.0], "want 0 (inside the channel equation) or 1 (in series)"),
            (Id::Igcmod, &[0.0, 1.0, 2.0], "want 0, 1 or 2"),
            (Id::Igbmod, &[0.0, 1.0], "want 0 or 1"),
            (Id::Diomod, &[0.0, 1.0, 2.0], "want 0, 1 or 2"),
            (Id::Permod, &[0.0, 1.0], "want 0 or 1"),
            (Id::Tempmod, &[0.0, 1.0, 2.0, 3.0], "want 0 to 3"),
            (Id::Gidlmod, &[0.0, 1.0], "want 0 or 1"),
            (Id::Mtrlmod, &[0.0, 1.0], "want 0 (silicon and oxide) or 1 (described)"),
            (Id::Mtrlcompatmod, &[0.0], "only 0 is computed"),
            (Id::Geomod, &[0.0, 1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0, 9.0, 10.0], "want 0 to 10"),
            (Id::Wpemod, &[0.0, 1.0], "want 0 or 1"),
            (Id::Rgeomod, &[0.0, 1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0], "want 0 to 8"),
        ];
        for (id, values, wanted) in allowed {
            let v = self.base(id);
            if !values.contains(&v) {
                let name = ROWS[id as usize].name.to_owned();
                return Err(ReadError::Range {
                    at: place(id),
                    name,
                    value: v.to_string(),
                    wanted: wanted.into(),
                });
            }
        }
        if !self.has(Id::Level) {
            return Err(ReadError::Syntax {
                at: model.loc.place(&deck.files),
                found: format!("model `{}` has no `level`", model.name),
                wanted: "want level = 54 (BSIM4)".into(),
            });
        }
        let version = self.base(Id::Version);
        if !(4.0..4.9).contains(&version) {
            let wanted = "versions 4.0 to 4.8 are supported".into();
            let value = version.to_string();
            return Err(ReadError::Range { at: place(Id::Version), name: "version".into(), value, wanted });
        }
        // a value without bins is refused where it stands; see `Values::out_of_range` for the others
        let bins = |id: Id| self.terms.iter().any(|t| t.0 == id);
        if let Some((id, value, range)) = ranges_broken(|id| self.base(id)).find(|(id, ..)| !bins(*id)) {
            let (name, value) = (ROWS[id as usize].name.to_owned(), value.to_string());
            return Err(ReadError::Range { at: place(id), name, value, wanted: format!("want {range}") });
        }
        Ok(())
    }
}

/// Effective sizes of one finger, m.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Size<P> {
    /// Drawn length with XL.
    pub lnew: P,
    /// Drawn width of one finger with XW.
    pub wnew: P,
    /// Effective channel length.
    pub leff: P,
    /// Effective channel width of one finger.
    pub weff: P,
    /// Effective width of the junctions of one finger.
    pub weffcj: P,
}

/// All parameters at one geometry.
#[derive(Debug, Clone)]
pub struct Values<P> {
    v: Box<[P; COUNT]>,
    /// Effective sizes.
    pub size: Size<P>,
}

impl<P> Index<Id> for Values<P> {
    type Output = P;
    fn index(&self, id: Id) -> &P {
        &self.v[id as usize]
    }
}

impl<P: Real> Values<P> {
    /// Adds the length, width and product terms at a geometry.
    ///
    /// ```text
    /// Leff = L + XL − 2·dL,  Weff = W/NF + XW − 2·dW
    /// P    = P0 + lP/Leff + wP/Weff + pP/(Leff·Weff)     (lengths in µm when binunit = 1)
    /// ```
    ///
    /// `change` may replace base values (used for sensitivities). Returns `Err` with the offending size in metres when
    /// an effective size is not above 1 nm.
    ///
    /// Source: BSIM4.8.0 manual, sections 1.3 and 15.
    pub fn at(
        card: &Card,
        g: &Geometry<P>,
        change: impl Fn(Id, f64) -> P,
    ) -> Result<Self, (&'static str, f64)> {
        let base = |id: Id| change(id, card.base(id));
        let one = P::of(1.0);
        let lnew = g.length_m + base(Id::Xl);
        let wnew = g.width_m / g.fingers + base(Id::Xw);
        let power = |x: P, n: P| if n.val() == 1.0 { x } else { x.pow(n) };
        let shift = |l: Id, w: Id, wl: Id, ln: Id, wn: Id| {
            let any = [l, w, wl].iter().any(|i| card.base(*i) != 0.0);
            if !any {
                return P::of(0.0);
            }
            let (tl, tw) = (power(lnew, base(ln)), power(wnew, base(wn)));
            base(l) / tl + base(w) / tw + base(wl) / (tl * tw)
        };
        let dl = base(Id::Lint) + shift(Id::Ll, Id::Lw, Id::Lwl, Id::Lln, Id::Lwn);
        let dw = base(Id::Wint) + shift(Id::Wl, Id::Ww, Id::Wwl, Id::Wln, Id::Wwn);
        let dwj = base(Id::Dwj) + shift(Id::Wlc, Id::Wwc, Id::Wwlc, Id::Wln, Id::Wwn);
        let size =
            Size { lnew, wnew, leff: lnew - dl * 2.0, weff: wnew - dw * 2.0, weffcj: wnew - dwj * 2.0 };
        for (name, s) in [
            ("effective length", size.leff),
            ("effective width", size.weff),
            ("effective junction width", size.weffcj),
        ] {
            if s.val().is_nan() || s.val() <= 1e-9 {
                return Err((name, s.val()));
            }
        }
        let unit = if card.base(Id::Binunit) == 1.0 { 1e-6 } else { 1.0 };
        let (inv_l, inv_w) = (one / size.leff * unit, one / size.weff * unit);
        let mut v: Box<[P; COUNT]> = Box::new(std::array::from_fn(|i| base(IDS[i])));
        for &(id, part, t) in &card.terms {
            let x = &mut v[id as usize];
            *x = *x
                + match part {
                    Part::Base => P::of(0.0),
                    Part::Length => inv_l * t,
                    Part::Width => inv_w * t,
                    Part::Product => inv_l * inv_w * t,
                };
        }
        Ok(Self { v, size })
    }

    /// The first value outside its range, with the range.
    pub fn out_of_range(&self) -> Option<(Id, f64, Range)> {
        ranges_broken(|id| self[id].val()).next()
    }

    /// Replaces one value.
    pub fn set(&mut self, id: Id, value: P) {
        self.v[id as usize] = value;
    }
}
