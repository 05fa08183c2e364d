//! Areas and perimeters of the diffusions of a device whose netlist states none, from the card's layout rule.

use super::table::Id;
use super::values::Card;
use crate::device::Geometry;
use crate::device::dual::Real;

/// How the diffusion at one end of a device is drawn.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum End {
    /// Ends at isolation, with a contact.
    Isolated,
    /// Shared with a neighbour, with a contact.
    Shared,
    /// Shared with a neighbour, without a contact.
    Merged,
    /// One end isolated, the others shared, whatever the number of fingers.
    OneIsolated,
}

/// Layout number 0 to 10: source and drain.
///
/// Source: BSIM4.8.0 manual, section 11.2.
fn ends(geomod: i64) -> (End, End) {
    use End::{Isolated, Merged, OneIsolated, Shared};
    match geomod {
        1 => (Isolated, Shared),
        2 => (Shared, Isolated),
        3 => (Shared, Shared),
        4 => (Isolated, Merged),
        5 => (Shared, Merged),
        6 => (Merged, Isolated),
        7 => (Merged, Shared),
        8 => (Merged, Merged),
        9 => (OneIsolated, Shared),
        10 => (Shared, OneIsolated),
        _ => (Isolated, Isolated),
    }
}

/// How the diffusions of one device are drawn, as its netlist and its card say.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Diffusions {
    /// Layout number, 0 to 10.
    pub geomod: i64,
    /// Whether an even number of fingers leaves its outer ends to the drain.
    pub fewest_sources: bool,
    /// Whether the netlist states the areas of drain and source.
    pub areas: [bool; 2],
    /// Whether the netlist states the perimeters of drain and source.
    pub perimeters: [bool; 2],
}

impl Diffusions {
    /// Fills areas and perimeters that the netlist does not state.
    ///
    /// With DMCG from contact to gate and DMCI from contact to isolation, an isolated end of a finger is DMCG + DMCI long,
    /// a shared one counts DMCG for each finger, a merged one DMDG. An even number of fingers leaves both outer ends to the
    /// source, or to the drain when `min` is 1. Perimeters hold the gate edge when the card's `permod` is 1.
    ///
    /// Source: BSIM4.8.0 manual, sections 11.1 and 11.2.
    pub fn fill<P: Real>(self, card: &Card, g: &mut Geometry<P>, junction_width_m: P) {
        let w = junction_width_m;
        let back = card.base(Id::Dmcgt);
        let (dmcg, dmci, dmdg) =
            (card.base(Id::Dmcg) - back, card.base(Id::Dmci), card.base(Id::Dmdg) - back);
        let nf = g.fingers.val();
        let odd = nf % 2.0 == 1.0;
        // fingers that face an outer diffusion, for the end that has the outer ones and for the other
        let (outer, inner) = if odd { (1.0, 1.0) } else { (2.0, 0.0) };
        let (source_outer, drain_outer) = if self.fewest_sources { (inner, outer) } else { (outer, inner) };
        // perimeter and area of one finger's part: its length along the channel, and whether it ends across it
        let part = |length: f64, ends: f64| (w * ends + 2.0 * length, w * length);
        let size = |end: End, at_end: f64| {
            let (isolated, shared, merged) = (part(dmcg + dmci, 1.0), part(dmcg, 0.0), part(dmdg, 0.0));
            let sum = |n: f64, a: (P, P), b: (P, P)| (a.0 * n + b.0 * (nf - n), a.1 * n + b.1 * (nf - n));
            match end {
                End::Isolated => sum(at_end, isolated, shared),
                End::Shared => sum(nf, shared, shared),
                End::Merged => sum(at_end, merged, shared),
                End::OneIsolated => sum(1.0, isolated, shared),
            }
        };
        let gate_edge = if card.flag(Id::Permod) == 1 { w * nf } else { P::of(0.0) };
        let (source, drain) = ends(self.geomod);
        let ((ps, area_s), (pd, area_d)) = (size(source, source_outer), size(drain, drain_outer));
        let put = |given: bool, to: &mut P, v: P| {
            if !given {
                *to = if v.val() > 0.0 { v } else { P::of(0.0) };
            }
        };
        put(self.perimeters[1], &mut g.ps_m, ps + gate_edge);
        put(self.perimeters[0], &mut g.pd_m, pd + gate_edge);
        put(self.areas[1], &mut g.as_m2, area_s);
        put(self.areas[0], &mut g.ad_m2, area_d);
    }
}

/// SCA, SCB and SCC of a device at distance `sc` from the edge of its well, all in metres.
///
/// ```text
/// SCA = SCref²/(SC·(SC + W))
/// SCB = [F(SC, 10) − F(SC + W, 10)]/W,  SCC = [F(SC, 20) − F(SC + W, 20)]/W,
/// F(x, k) = (x/k + SCref/k²)·exp(−k·x/SCref)
/// ```
///
/// Source: BSIM4.8.0 manual, section 15.2 (after the Compact Model Council's proximity model).
pub fn well_proximity(sc: f64, width: f64, reference: f64) -> (f64, f64, f64) {
    let far = sc + width;
    let f = |x: f64, k: f64| (x / k + reference / (k * k)) * (-k * x / reference).exp();
    let mean = |k: f64| (f(sc, k) - f(far, k)) / width;
    (reference.powi(2) / (sc * far), mean(10.0), mean(20.0))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::device::Polarity;
    use crate::device::bsim4::table::{COUNT, ROWS};

    fn card(values: &[(Id, f64)]) -> Card {
        let mut base = Box::new([0.0; COUNT]);
        for (id, v) in values {
            base[*id as usize] = *v;
        }
        assert_eq!(ROWS.len(), COUNT);
        Card { polarity: Polarity::N, base, given: Box::new([false; COUNT]), terms: Vec::new() }
    }
    const NONE: Diffusions =
        Diffusions { geomod: 0, fewest_sources: false, areas: [false; 2], perimeters: [false; 2] };

    /// Drawn by hand: two fingers of 1 µm, contacts 0.2 µm from the gate, 0.1 µm from isolation (geometry, no source).
    #[test]
    fn two_fingers_leave_both_ends_to_the_source() {
        let c = card(&[(Id::Dmcg, 0.2e-6), (Id::Dmci, 0.1e-6)]);
        let mut g = Geometry { fingers: 2.0, ..Geometry::new(2e-6, 0.1e-6) };
        NONE.fill(&c, &mut g, 1e-6);
        // two source ends of 0.3 × 1 µm; the drain between the gates is 0.4 × 1 µm
        assert!((g.as_m2 - 0.6e-12).abs() < 1e-24 && (g.ad_m2 - 0.4e-12).abs() < 1e-24, "{g:?}");
        assert!((g.ps_m - 2.0 * 1.6e-6).abs() < 1e-18 && (g.pd_m - 0.8e-6).abs() < 1e-18, "{g:?}");
        let mut swapped = Geometry { fingers: 2.0, ..Geometry::new(2e-6, 0.1e-6) };
        Diffusions { fewest_sources: true, ..NONE }.fill(&c, &mut swapped, 1e-6);
        assert_eq!((swapped.ad_m2, swapped.pd_m), (g.as_m2, g.ps_m));
    }

    /// The gate edge belongs to the perimeter when the card says so; what is stated stays.
    #[test]
    fn gate_edge_and_stated_values() {
        let c = card(&[(Id::Dmcg, 0.2e-6), (Id::Dmci, 0.1e-6), (Id::Permod, 1.0)]);
        let mut g = Geometry { ad_m2: 7e-13, ..Geometry::new(1e-6, 0.1e-6) };
        Diffusions { geomod: 8, areas: [true, false], ..NONE }.fill(&c, &mut g, 1e-6);
        assert!((g.ad_m2 - 7e-13).abs() < 1e-26 && g.as_m2.abs() < 1e-26);
        assert!((g.pd_m - 1e-6).abs() < 1e-18, "merged without length: the gate edge only");
    }
}
