//! The books of a domain at rest: every current to its supply, its mechanism and its path.

use super::rest::{Asleep, Domain, PathShare, SupplyCurrent};
use super::scheme::WellTie;
use crate::block::current::{BlockCurrents, gidl_note, total};
use crate::device::{Mechanism, Terminal};
use crate::read::deck::Note;

/// Books every current to its supply, mechanism and path.
pub(super) fn account(d: &Domain<'_>, c: BlockCurrents, supply: f64, ground: f64, residual: f64) -> Asleep {
    let s = d.scheme;
    let mut supplies: Vec<SupplyCurrent> = Vec::new();
    let mut book = |name: &str, v: f64, i: f64| match supplies.iter_mut().find(|x| x.supply == name) {
        Some(x) => {
            x.current_a += i;
            x.power_w += i * v;
        }
        None => {
            supplies.push(SupplyCurrent { supply: name.into(), voltage_v: v, current_a: i, power_w: i * v });
        }
    };
    let mut paths: Vec<PathShare> = Vec::new();
    let mut way = |path: &str, m: Mechanism, i: f64| {
        if i != 0.0 {
            paths.push(PathShare { path: path.into(), mechanism: m, current_a: i });
        }
    };
    let vdd = d.vdd_v;
    let mut oxide = (0.0f64, 0.0f64);
    let mut switch_mechanisms = [0.0; 5];
    let mut power_by = c.power_w;
    let mut notes = Vec::new();

    book("vdd", vdd, s.overhead_a);
    book("ground", 0.0, 0.0);
    for (sw, rail, name, v) in [(&d.header, "vdd", "header", supply), (&d.footer, "ground", "footer", ground)]
    {
        let Some(sw) = sw else { continue };
        let b = sw.branches(v);
        let t = b.terminals();
        book(rail, sw.rail_v, t[Terminal::Source as usize]);
        let spec = if name == "header" { s.header.as_ref() } else { s.footer.as_ref() };
        let (over, bias) = spec.map_or((0.0, 0.0), |x| (x.overdrive_v, x.well_bias_v));
        let on_vdd = sw.gate_v > 0.5 * vdd;
        let gate_supply =
            if over == 0.0 { if on_vdd { "vdd" } else { "ground" }.into() } else { format!("{name}_gate") };
        book(&gate_supply, sw.gate_v, t[Terminal::Gate as usize]);
        let body_supply =
            if bias == 0.0 { if on_vdd { "vdd" } else { "ground" }.into() } else { format!("{name}_well") };
        book(&body_supply, sw.body_v, t[Terminal::Body as usize]);
        let sign = if name == "header" { -1.0 } else { 1.0 };
        for m in Mechanism::ALL {
            let of = b.terminals_of(m);
            if name == "header" || d.header.is_none() {
                switch_mechanisms[m as usize] = sign * of[Terminal::Drain as usize];
            }
            let at = [v, sw.gate_v, sw.rail_v, sw.body_v];
            power_by[m as usize] += of.iter().zip(at).map(|(i, x)| i * x).sum::<f64>();
            let from_real = of[Terminal::Source as usize] * if name == "header" { 1.0 } else { -1.0 };
            match m {
                Mechanism::Channel => way(&format!("{name} channel"), m, from_real),
                Mechanism::Gate => {
                    way(&format!("{name} gate"), m, sign * of[Terminal::Drain as usize]);
                }
                _ => way(&format!("{name} body"), m, sign * of[Terminal::Drain as usize]),
            }
        }
        let ox = sw.oxide_v(v);
        if ox > oxide.0 {
            oxide = (ox, ox / sw.device.oxide_m());
        }
        super::stress::caution().add_once(&mut notes);
        if over > 0.0 && !sw.device.has_gidl() {
            notes.push(gidl_note(&format!("the {name} switch")));
        }
        if spec.is_some_and(|x| x.diffusion_m.is_none()) {
            notes.push(Note::new(
                "switch-without-junctions",
                format!("the {name} has no `diffusion_m`: its drain and source junctions are not counted"),
            ));
        }
        if over > 0.0 {
            notes.push(Note::new(
                "past-the-rail",
                format!(
                    "the {name}'s gate is driven past its rail: cards are usually extracted between the rails, so currents \
                     there, GIDL above all, extrapolate the card's equations; ask the foundry before relying on an optimum"
                ),
            ));
        }
    }
    for (clamp, rail, name, v, sign) in [
        (&d.clamps.header, "vdd", "header", supply, -1.0),
        (&d.clamps.footer, "ground", "footer", ground, 1.0),
    ] {
        let Some(clamp) = clamp else { continue };
        let b = clamp.branches(v);
        let t = b.terminals();
        book(rail, clamp.rail_v(), t[Terminal::Source as usize]);
        let gate_v = clamp.gate_at(v);
        let supply_at = |level: f64, other: &str| -> String {
            if level == vdd {
                "vdd".into()
            } else if level == 0.0 {
                "ground".into()
            } else {
                format!("{name}_{other}")
            }
        };
        if !clamp.gate_moves() {
            book(&supply_at(gate_v, "clamp_gate"), gate_v, t[Terminal::Gate as usize]);
        }
        book(&supply_at(clamp.body_v(), "clamp_well"), clamp.body_v(), t[Terminal::Body as usize]);
        for m in Mechanism::ALL {
            let of = b.terminals_of(m);
            let at = [v, gate_v, clamp.rail_v(), clamp.body_v()];
            power_by[m as usize] += of.iter().zip(at).map(|(i, x)| i * x).sum::<f64>();
            way(&format!("{name} clamp"), m, sign * of[Terminal::Drain as usize]);
        }
        let all = if name == "header" { d.header_gives(v) } else { d.footer_takes(v) };
        if b.channel_ds.abs() <= 0.01 * all {
            let text = format!(
                "the {name} clamp hardly conducts where the rail rests ({v:.3} V): it holds nothing there"
            );
            notes.push(Note::new("clamp-idle", text));
        }
    }
    // a second supply gives what switch and clamp do not
    let held = |gives: f64, needs: f64| needs - gives;
    let on = d.on_rails([&c.supply, &c.ground, &c.nwell, &c.pwell].map(total));
    if let Some(v) = s.held_supply_v {
        let i = held(d.header_gives(supply), on.0);
        book("held_supply", v, i);
        way("held supply", Mechanism::Channel, i);
    }
    if let Some(v) = s.held_ground_v {
        let i = held(d.footer_takes(ground), on.1);
        book("held_ground", v, -i);
    }
    // what stays on the real rails whatever is switched
    for (name, v, currents) in [("vdd", vdd, &c.real_supply), ("ground", 0.0, &c.real_ground)] {
        if currents.iter().any(|i| *i != 0.0) {
            book(name, v, total(currents));
            for (m, i) in Mechanism::ALL.iter().zip(currents) {
                if name == "vdd" {
                    way("powered cells", *m, *i);
                }
            }
        }
    }
    // the block's rails: real ones are booked, virtual ones are inside
    if d.header.is_none() {
        book("vdd", vdd, total(&c.supply));
        for (m, i) in Mechanism::ALL.iter().zip(c.supply) {
            way("block", *m, i);
        }
    }
    if d.footer.is_none() {
        book("ground", 0.0, total(&c.ground));
    }
    let levels = d.levels(supply, ground);
    for (well, tie, bias, switched, currents, rail) in [
        ("nwell", s.nwell, s.nwell_bias_v, d.header.is_some(), &c.nwell, "vdd"),
        ("pwell", s.pwell, s.pwell_bias_v, d.footer.is_some(), &c.pwell, "ground"),
    ] {
        let inside = tie == WellTie::Virtual && switched && bias == 0.0;
        if inside {
            continue;
        }
        let v = if well == "nwell" { levels.nwell_v } else { levels.pwell_v };
        let name = if bias == 0.0 { rail } else { well };
        book(name, v, total(currents));
        for (m, i) in Mechanism::ALL.iter().zip(currents) {
            way("block wells", *m, *i);
        }
    }
    if s.overhead_a > 0.0 {
        way("overhead", Mechanism::Channel, s.overhead_a);
    }
    let mut overhead_w = s.overhead_a * vdd;
    if let Some(e) = s.pump_efficiency {
        let beyond = supplies.iter().filter(|x| x.voltage_v > vdd || x.voltage_v < 0.0);
        let made: f64 = beyond.map(|x| x.power_w.max(0.0)).sum();
        let lost = made * (1.0 / e - 1.0);
        overhead_w += lost;
        if let Some(x) = supplies.iter_mut().find(|x| x.supply == "vdd") {
            x.current_a += lost / vdd;
            x.power_w += lost;
        }
        paths.push(PathShare {
            path: "pump loss".into(),
            mechanism: Mechanism::Channel,
            current_a: lost / vdd,
        });
    }
    let current_a = supplies.iter().filter(|x| x.voltage_v > 0.0).map(|x| x.current_a).sum();
    let power_w = supplies.iter().map(|x| x.power_w).sum();
    if c.unstable > 0 {
        notes.push(Note::new(
            "state-lost",
            format!(
                "{} states of cells are not stable at the rest point: what they stored may be lost",
                c.unstable
            ),
        ));
    }
    Asleep {
        virtual_supply_v: supply,
        virtual_ground_v: ground,
        supplies,
        current_a,
        power_w,
        mechanisms: power_by.map(|p| p / vdd),
        switch_mechanisms,
        paths,
        oxide_v: oxide.0,
        oxide_field_v_m: oxide.1,
        block: c,
        evaluations: d.evaluations,
        residual,
        overhead_w,
        notes,
    }
}
