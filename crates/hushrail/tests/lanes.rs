//! Many points at once give what one point at a time gives: within 1e-12, and with the same bits on every kind of vector, at
//! every place of an array, beside any neighbours.

mod common;

use std::path::PathBuf;
use std::sync::Arc;

use common::{Ideal, process, r1, uniform};
use hushrail::device::bsim4::Bsim4;
use hushrail::device::bsim4::limits::Limits;
use hushrail::device::bsim4::prepare::Prepared;
use hushrail::device::bsim4::values::Values;
use hushrail::device::bulk::Width;
use hushrail::device::compact::{Compact, CompactCard, generic};
use hushrail::device::process::{Process, Request};
use hushrail::device::{Bias, Branches, Device, Geometry};
use hushrail::physics::Kelvin;
use hushrail::read::{DeckOptions, Place, Source};

const TEMPS_C: [f64; 4] = [-55.0, 25.0, 100.0, 175.0];

fn at_c(temp_c: f64) -> Kelvin {
    Kelvin::from_celsius(temp_c).expect("in range")
}

/// Points all over ±`reach`, among them ties, small differences and zeros.
fn biases(count: u64, reach: f64) -> Vec<Bias<f64>> {
    let some = |k: u64, i: u64| reach * (2.0 * uniform(23, 4 * k + i) - 1.0);
    let mut all: Vec<_> =
        (0..count).map(|k| Bias { vgs: some(k, 0), vds: some(k, 1), vbs: some(k, 2) }).collect();
    for b in all.iter_mut().skip(3).step_by(7) {
        b.vds *= 1e-9;
    }
    for b in all.iter_mut().skip(5).step_by(11) {
        b.vbs = 0.0;
    }
    all.push(Bias { vgs: 0.0, vds: 0.0, vbs: 0.0 });
    all.push(Bias { vgs: 0.0, vds: -0.0, vbs: reach });
    all.push(Bias { vgs: reach, vds: 0.0, vbs: -reach });
    all
}

/// Below one electron in five thousand years (1e-30 A) the two paths need not agree: there terms that cancel are left with
/// the rounding of what they cancelled from.
const FLOOR_A: f64 = 1e-30;

/// The worst difference in units of what is allowed.
fn compare(what: &str, device: &dyn Device, points: &[Bias<f64>]) -> f64 {
    let mut many = vec![Branches::zero(); points.len()];
    device.branches_many(points, &mut many);
    let mut worst = 0.0f64;
    for (b, many) in points.iter().zip(many) {
        let one = device.branches(*b);
        for (i, (got, want)) in many.into_array().into_iter().zip(one.into_array()).enumerate() {
            if got.to_bits() == want.to_bits() {
                continue;
            }
            let off = (got - want).abs() / (1e-12 * want.abs() + FLOOR_A);
            assert!(off <= 1.0, "{what}, branch {i} at {b:?}: {got:e} in lanes, {want:e} alone");
            worst = worst.max(off);
        }
    }
    worst
}

fn request(model: &str, w: f64, l: f64, junctions: bool) -> Request {
    let mut params = vec![("w", w), ("l", l)];
    if junctions {
        params.extend([("ad", w * 0.12e-6), ("as", w * 0.1e-6), ("pd", w + 0.24e-6), ("ps", w + 0.2e-6)]);
    }
    Request {
        model: model.into(),
        params: params.into_iter().map(|(n, v)| (Arc::from(n), v)).collect(),
        at: Place::new(&Arc::from("test"), 1, 1),
    }
}

fn compact(name: &str, temp_c: f64) -> Compact {
    let card = CompactCard::generic(name).expect(name);
    let g =
        Geometry { ad_m2: 0.2e-12, as_m2: 0.1e-12, pd_m: 2.4e-6, ps_m: 1.2e-6, ..Geometry::new(1e-6, 60e-9) };
    card.device(&g, at_c(temp_c)).expect(name)
}

#[test]
fn compact_devices_agree_with_the_scalar_path() {
    let mut worst = 0.0f64;
    for name in generic::NAMES {
        for temp_c in TEMPS_C {
            worst =
                worst.max(compare(&format!("{name} {temp_c}"), &compact(name, temp_c), &biases(4000, 1.4)));
        }
    }
    println!("compact: worst difference {:.1e}", worst * 1e-12);
    assert!(worst > 0.0, "two paths that never differ are one path");
}

/// More ways through the equations than the common card takes.
const MORE: &str = "
* invented, for tests
.model a nmos level=54 version=4.5
+ toxe=1.8n xj=50n ndep=4e18 nsd=1e20 ngate=8e19 vth0=0.33 k1=0.4 k2=-0.02 k3=2 k3b=0.3 w0=1u
+ dvt0w=0.2 dvt1w=1.2e6 dvt2=-0.03 dvt2w=-0.03 dvtp0=2n dvtp1=0.3 minv=0.1 voffl=-1e-9 a1=0.01 a2=0.9 b0=20n b1=10n
+ mobmod=1 uc=-3e-11 ud=1e14 dwg=1n dwb=2n rdsw=140 rdswmin=20 prwg=0.1 prwb=0.1 pvag=0.5 fprout=50 pscbe1=5e8 pscbe2=1e-7
+ pdits=0.05 pditsd=0.2 pditsl=1e5 pdiblcb=-0.05 alpha0=1e-8 beta0=15
+ agidl=2e-5 bgidl=1.9e9 cgidl=1e-3 egidl=0.7 agisl=1e-5 bgisl=1.7e9 cgisl=2e-3 egisl=0.6
+ igcmod=2 igbmod=1 aigc=1.2e-2 bigc=2e-3 cigc=0.05 aigs=1.2e-2 aigd=1.1e-2 bigsd=2e-3 cigsd=0.05 dlcig=8n dlcigd=12n
+ jss=2e-5 jsws=2e-12 diomod=0 bvs=9 jtss=1e-6 jtsd=2e-6 vtss=5 vtsd=3
.model b pmos level=54 version=4.5
+ toxe=2.2n ndep=2e18 vth0=-0.4 k1=0.42 k2=0.01 mobmod=2 eu=1.5 vsat=8e4 a1=-0.02 a2=0.95
+ gidlmod=1 agidl=1e-5 bgidl=2e9 rgidl=0.9 kgidl=0.2 fgidl=0.4
+ igcmod=1 igbmod=0 aigc=0.9e-2 bigc=1e-3 cigc=0.03 pigcd=1.3 jss=2e-5 diomod=1 ijthsfwd=1e-6
.model c nmos level=54 version=4.5
+ toxe=2n ndep=2e18 vth0=0.4 k1=0.42 rdsw=0 rdswmin=0 jss=1e-6 mobmod=3 eu=1.67 ucs=1.5 ud=1e14 lambda=1e-7 vtl=2e5
.model d nmos level=54 version=4.8
+ toxe=2n ndep=2e18 vth0=0.4 k1=0.42 jss=1e-6 mobmod=6 ud=1e14 tempmod=2 at=1e-3 diomod=2 xjbvs=1 bvs=1.2 ijthsrev=1e-4 ijthsfwd=1e-4
.model e pmos level=54 version=4.8
+ toxe=2n ndep=2e18 vth0=-0.4 k1=0.42 jss=1e-6 mobmod=5 rdsmod=1 rsw=80 rdw=90 dvtp0=1e-9 dvtp4=2 dvtp5=0.02
";

#[test]
fn bsim4_devices_agree_with_the_scalar_path() {
    let more = Process::read("more", &[Source::from_text("more.lib", MORE)], &DeckOptions::default())
        .expect("cards");
    let common = process();
    let mut worst = 0.0f64;
    for (process, model) in [
        (&common, "nx"),
        (&common, "px"),
        (&more, "a"),
        (&more, "b"),
        (&more, "c"),
        (&more, "d"),
        (&more, "e"),
    ] {
        for (w, l) in [(0.3e-6, 60e-9), (2e-6, 1e-6)] {
            for temp_c in TEMPS_C {
                let made = process.transistor(&request(model, w, l, l < 1e-7), at_c(temp_c), &mut Vec::new());
                let device = made.expect(model).device;
                let what = format!("{model} {w} {l} {temp_c}");
                worst = worst.max(compare(&what, &*device, &biases(2000, 1.4)));
            }
        }
    }
    println!("BSIM4: worst difference {:.1e}", worst * 1e-12);
    assert!(worst > 0.0, "two paths that never differ are one path");
}

#[test]
fn open_cards_agree_with_the_scalar_path() {
    let dir = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../../../shared/data/sky130/cards");
    if !dir.is_dir() {
        println!("skipped: the open data set is not beside the project");
        return;
    }
    let mut worst = 0.0f64;
    for file in ["continuous_tt.spice", "continuous_ff.spice"] {
        let sources = [Source::open(&dir.join(file)).expect("card file")];
        let p = Process::read(file, &sources, &DeckOptions::default()).expect(file);
        for model in ["nfet_01v8", "pfet_01v8_hvt"] {
            for (w, l) in [(0.65e-6, 0.15e-6), (1e-6, 0.15e-6)] {
                for temp_c in [-40.0, 25.0, 100.0] {
                    let r = request(&format!("sky130_fd_pr__{model}"), w, l, true);
                    let device = p.transistor(&r, at_c(temp_c), &mut Vec::new()).expect(model).device;
                    let what = format!("{file} {model} {w} {l} {temp_c}");
                    worst = worst.max(compare(&what, &*device, &biases(1000, 2.0)));
                }
            }
        }
    }
    println!("open cards: worst difference {:.1e}", worst * 1e-12);
}

fn bits(all: &[Branches<f64>]) -> Vec<[u64; 10]> {
    all.iter().map(|b| b.into_array().map(f64::to_bits)).collect()
}

fn swept(n: usize, sweep: impl FnOnce(&mut [Branches<f64>])) -> Vec<[u64; 10]> {
    let mut out = vec![Branches::zero(); n];
    sweep(&mut out);
    bits(&out)
}

fn bsim4(model: &str) -> Bsim4 {
    let p = process();
    let hushrail::device::process::CardOf { card, geometry: g, .. } =
        p.card(&request(model, 0.4e-6, 60e-9, true), 60.0, &mut Vec::new()).expect(model);
    let values = Values::at(&card, &g, |_, v| v).expect(model);
    Bsim4 { prepared: Prepared::new(&card, &values, &g, at_c(60.0).get()), limits: Limits::of(&card) }
}

#[test]
fn every_kind_of_vector_gives_the_same_bits() {
    let points = biases(3000, 1.4);
    let n = points.len();
    for name in ["generic 28 nm n", "generic 45 nm low power p"] {
        let dev = compact(name, 60.0);
        let portable = swept(n, |out| dev.branches_with(&points, out, Width::Portable));
        for width in [Width::Machine, Width::Avx512, Width::Avx2] {
            assert_eq!(swept(n, |out| dev.branches_with(&points, out, width)), portable, "{name} {width:?}");
        }
    }
    for model in ["nx", "px"] {
        let dev = bsim4(model);
        let portable = swept(n, |out| dev.branches_with(&points, out, Width::Portable));
        for width in [Width::Machine, Width::Avx512, Width::Avx2] {
            assert_eq!(swept(n, |out| dev.branches_with(&points, out, width)), portable, "{model} {width:?}");
        }
    }
}

#[test]
fn place_and_neighbours_do_not_matter() {
    let points = biases(200, 1.4);
    let dev = bsim4("nx");
    let whole = swept(points.len(), |out| dev.branches_many(&points, out));
    for size in [1, 2, 3, 5, 7, 8, 9, 64] {
        for (some, want) in points.chunks(size).zip(whole.chunks(size)) {
            assert_eq!(swept(some.len(), |out| dev.branches_many(some, out)), want, "{size} at a time");
        }
    }
    assert!(swept(0, |out| dev.branches_many(&[], out)).is_empty());
}

/// What is not a number stays one, and stays in its own lane.
#[test]
fn bad_values_do_not_spread() {
    let mut points = biases(21, 1.2);
    let good = points.clone();
    let dev = bsim4("nx");
    points[4].vgs = f64::NAN;
    points[9].vds = f64::INFINITY;
    let (all, clean) = (
        swept(points.len(), |out| dev.branches_many(&points, out)),
        swept(points.len(), |out| dev.branches_many(&good, out)),
    );
    for k in 0..points.len() {
        if k == 4 {
            assert!(f64::from_bits(all[k][0]).is_nan());
        } else if k != 9 {
            assert_eq!(all[k], clean[k], "{k}");
        }
    }
}

#[test]
fn no_voltage_means_exactly_no_current() {
    let zero = [Bias { vgs: 0.0, vds: 0.0, vbs: 0.0 }; 3];
    let devices: [Box<dyn Device>; 4] = [
        Box::new(bsim4("nx")),
        Box::new(bsim4("px")),
        Box::new(compact("generic 28 nm n", 125.0)),
        Box::new(compact("generic 45 nm low power p", 125.0)),
    ];
    for device in devices {
        let mut out = [Branches::zero(); 3];
        device.branches_many(&zero, &mut out);
        for b in out {
            assert_eq!(b.map(f64::abs), Branches::zero(), "{device:?}");
        }
    }
}

/// A device that says nothing about many points is asked one by one.
#[test]
fn devices_of_ones_own_need_no_lanes() {
    let dev: Ideal = r1();
    let points = biases(20, 1.0);
    let mut out = vec![Branches::zero(); points.len()];
    dev.branches_many(&points, &mut out);
    for (b, o) in points.iter().zip(out) {
        assert_eq!(o, dev.branches(*b));
    }
}
