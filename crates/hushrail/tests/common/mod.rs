//! Devices and a small invented process for the tests.
#![allow(dead_code, reason = "every test file uses its own part")]

use std::sync::Arc;

use hushrail::cell::cell::Part;
use hushrail::cell::{BoundCell, Cell, Role};
use hushrail::circuit::network::{Element, Network, Placed, Volt};
use hushrail::circuit::newton::{SolveOptions, Solver, Workspace};
use hushrail::circuit::plan::Plan;
use hushrail::device::dual::Real;
use hushrail::device::process::{Process, Request};
use hushrail::device::{Bias, Branches, Device, Polarity};
use hushrail::physics::Kelvin;
use hushrail::read::{DeckOptions, Place, Source};

/// A device that is its channel and nothing else: the type, its polarity, its thermal voltage; `law` gives the currents.
macro_rules! channel_device {
    ($name:ty, $polarity:expr, $vt:expr) => {
        impl hushrail::device::Device for $name {
            fn polarity(&self) -> hushrail::device::Polarity {
                let of: fn(&Self) -> hushrail::device::Polarity = $polarity;
                of(self)
            }
            fn branches(&self, b: hushrail::device::Bias<f64>) -> hushrail::device::Branches<f64> {
                self.law(b)
            }
            fn branches_dual(
                &self,
                b: hushrail::device::Bias<hushrail::device::dual::Dual<3>>,
            ) -> hushrail::device::Branches<hushrail::device::dual::Dual<3>> {
                self.law(b)
            }
            fn has_gate_current(&self) -> bool {
                false
            }
            fn has_gidl(&self) -> bool {
                false
            }
            fn oxide_m(&self) -> f64 {
                2e-9
            }
            fn thermal_voltage(&self) -> f64 {
                let of: fn(&Self) -> f64 = $vt;
                of(self)
            }
        }
    };
}
#[allow(unused_imports, reason = "not every test brings a device of its own")]
pub(crate) use channel_device;

/// The engineering subthreshold law that the stack literature uses:
/// `I = I0·W·exp((Vgs − Vt0 − kg·Vsb + η·Vds)/(n·vT))·(1 − exp(−Vds/vT))` for `Vds ≥ 0`.
#[derive(Debug, Clone)]
pub struct Ideal {
    pub i0_a: f64,
    pub n: f64,
    pub eta: f64,
    pub kg: f64,
    pub vt0_v: f64,
    pub width: f64,
    pub vt_v: f64,
}

/// Reference device R1 of the check values: 1e-7 A/um, n 1.4, eta 0.1, kg 0.2, Vt0 0.35 V, 300 K.
pub fn r1() -> Ideal {
    Ideal { i0_a: 1e-7, n: 1.4, eta: 0.1, kg: 0.2, vt0_v: 0.35, width: 1.0, vt_v: 25.851999786e-3 }
}

impl Ideal {
    fn law<R: Real>(&self, b: Bias<R>) -> Branches<R> {
        let forward = |vgs: R, vds: R, vbs: R| {
            let x = (vgs + vbs * self.kg + vds * self.eta - self.vt0_v) / (self.n * self.vt_v);
            x.exp() * -(-(vds / self.vt_v)).exp_m1() * (self.i0_a * self.width)
        };
        let i = if b.vds.val() >= 0.0 {
            forward(b.vgs, b.vds, b.vbs)
        } else {
            -forward(b.vgs - b.vds, -b.vds, b.vbs - b.vds)
        };
        Branches { channel_ds: i, ..Branches::zero() }
    }
}

channel_device!(Ideal, |_| Polarity::N, |d| d.vt_v);

/// Bulk-referred symmetric law `I = I0·exp(Vgb/(n·vT))·(exp(−Vsb/vT) − exp(−Vdb/vT))`: with it N off devices in series leak
/// exactly 1/N of one.
#[derive(Debug, Clone)]
pub struct Symmetric {
    pub i0_a: f64,
    pub n: f64,
    pub vt_v: f64,
    pub polarity: Polarity,
    /// Conductance from drain and source to body, S.
    pub leak_s: f64,
}

impl Symmetric {
    fn law<R: Real>(&self, b: Bias<R>) -> Branches<R> {
        let s = self.polarity.sign();
        let (vgs, vds, vbs) = (b.vgs * s, b.vds * s, b.vbs * s);
        // exp(−Vsb)·(1 − exp(−Vds)) keeps the digits at small Vds
        let i = ((vgs - vbs) / (self.n * self.vt_v) + vbs / self.vt_v).exp()
            * -(-(vds / self.vt_v)).exp_m1()
            * self.i0_a;
        Branches {
            channel_ds: i * s,
            junction_db: (b.vds - b.vbs) * self.leak_s,
            junction_sb: -b.vbs * self.leak_s,
            ..Branches::zero()
        }
    }
}

channel_device!(Symmetric, |d| d.polarity, |d| d.vt_v);

/// Solves a chain of devices from `vdd` (first) to 0 V (last), all bodies at 0 V; returns node voltages from the rail up and
/// the current.
pub fn chain(devices: Vec<Arc<dyn Device>>, gates: &[Gate], vdd: f64, vt: f64) -> (Vec<f64>, f64) {
    let n = devices.len();
    // nodes: 0 ground, 1..n−1 inner from the bottom, n supply, then one node a fixed gate
    let mut net = Network { n_nodes: n + 1, ..Network::default() };
    let mut v = vec![Volt::held(0.0); n + 1];
    v[n] = Volt::held(vdd);
    let mut held = vec![false; n + 1];
    held[0] = true;
    held[n] = true;
    for (k, device) in devices.into_iter().enumerate() {
        let (drain, source) = (n - k, n - k - 1);
        let gate = match gates[k] {
            Gate::At(g) => {
                v.push(Volt::held(g));
                held.push(true);
                net.n_nodes += 1;
                net.n_nodes - 1
            }
            Gate::OnSource => source,
        };
        net.elements.push(Element::Transistor(Placed {
            device,
            count: 1.0,
            nodes: [drain, gate, source, 0],
        }));
    }
    for x in &mut v[1..n] {
        *x = Volt { rail: 0.0, offset: 1.5 * vt };
    }
    let plan = Plan::new(&net, &held);
    let options = SolveOptions::default();
    let rails: Vec<f64> = v.iter().zip(&held).filter(|(_, h)| **h).map(|(x, _)| x.rail).collect();
    Solver::new(&net, &plan, &options, vt, &rails).solve(&mut v, &mut Workspace::default()).expect("balance");
    let i = net.stamp(&net.elements[0], &v).current[0];
    (v[1..n].iter().map(|x| x.get()).collect(), i)
}

/// All-region interpolation after Enz, Krummenacher and Vittoz (AICSP 8 (1995) 83): bulk-referred and symmetric.
/// `I = Is·(F((Vp − Vs)/vT) − F((Vp − Vd)/vT))`, `F(v) = ln²(1 + exp(v/2))`, `Vp = (Vg − Vt0)/n`.
#[derive(Debug, Clone)]
pub struct AllRegion {
    pub is_a: f64,
    pub n: f64,
    pub vt0_v: f64,
    pub vt_v: f64,
    pub polarity: Polarity,
    /// Conductance from drain and source to body, S.
    pub leak_s: f64,
}

impl AllRegion {
    fn law<R: Real>(&self, b: Bias<R>) -> Branches<R> {
        let s = self.polarity.sign();
        let (vgb, vsb, vds) = ((b.vgs - b.vbs) * s, -(b.vbs * s), b.vds * s);
        let vp = (vgb - self.vt0_v) / self.n;
        let (x, y) = ((vp - vsb) / (2.0 * self.vt_v), (vp - vsb - vds) / (2.0 * self.vt_v));
        // softplus(x) − softplus(y) without cancellation, larger argument first
        let d = if vds.val() >= 0.0 {
            (x.exp() * -(-(vds / (2.0 * self.vt_v))).exp_m1() / (y.exp() + 1.0)).ln_1p()
        } else {
            -(y.exp() * -(vds / (2.0 * self.vt_v)).exp_m1() / (x.exp() + 1.0)).ln_1p()
        };
        Branches {
            channel_ds: d * (x.softplus() + y.softplus()) * self.is_a * s,
            junction_db: (b.vds - b.vbs) * self.leak_s,
            junction_sb: -b.vbs * self.leak_s,
            ..Branches::zero()
        }
    }
}

channel_device!(AllRegion, |d| d.polarity, |d| d.vt_v);

/// Where a gate of [`chain`] is.
#[derive(Debug, Clone, Copy)]
pub enum Gate {
    /// At a voltage.
    At(f64),
    /// On its own source.
    OnSource,
}

/// Counter-based numbers in [0, 1): the same for every run.
pub fn uniform(seed: u64, k: u64) -> f64 {
    let mut z = seed.wrapping_mul(0x9e37_79b9_7f4a_7c15).wrapping_add(k.wrapping_mul(0xbf58_476d_1ce4_e5b9));
    z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^= z >> 31;
    (z >> 11) as f64 / (1u64 << 53) as f64
}

/// An invented card with every mechanism on; its numbers mean nothing about any technology.
pub const CARDS: &str = "
* invented, for tests
.param dv = 0.0
.model nx.0 nmos level=54 version=4.5 binunit=1
+ lmin=50n lmax=10u wmin=100n wmax=1m
+ toxe=2n xj=60n ndep=3e18 nsd=1e20 ngate=1e20 vth0={0.38+dv} k1=0.45 k2=0.01 lvth0=1e-3
+ voff=-0.1 nfactor=1.4 eta0=0.05 etab=-0.02 dsub=0.4 cdsc=1e-4 dvt0=1.2 dvt1=0.6 lpe0=20n
+ u0=0.03 ua=1e-9 ub=1e-18 vsat=9e4 a0=1 ags=0.2 keta=-0.02 rdsw=150 pclm=0.9 pdiblc1=0.3 pdiblc2=0.003
+ agidl=2e-5 bgidl=1.9e9 cgidl=1e-3 egidl=0.7
+ igcmod=1 igbmod=1 dlcig=8n aigc=1.25e-2 bigc=2e-3 cigc=0.05 aigsd=1.2e-2 bigsd=2e-3 cigsd=0.05 toxref=2n pigcd=1.2
+ jss=2e-5 jsws=2e-12 jswgs=3e-12 jtss=1e-6 jtssws=1e-13 jtsswgs=1e-13 diomod=2 bvs=9
+ kt1=-0.2 ute=-1.4 tvoff=1e-4 alpha0=1e-9 beta0=18 kvth0=5n wkvth0=0.1u saref=1u sbref=1u
.model px pmos level=54 version=4.5
+ toxe=2.1n xj=60n ndep=3e18 nsd=1e20 ngate=1e20 vth0={-0.36-dv} k1=0.42 k2=0.01
+ voff=-0.1 nfactor=1.5 eta0=0.06 etab=-0.02 dsub=0.4 cdsc=1e-4 dvt0=1.2 dvt1=0.6
+ u0=0.009 ua=1e-9 ub=1e-18 vsat=7e4 a0=1 ags=0.2 keta=-0.02 rdsw=200 pclm=0.9 pdiblc1=0.3 pdiblc2=0.003
+ agidl=1e-5 bgidl=2.0e9 cgidl=1e-3 egidl=0.7
+ igcmod=1 igbmod=1 dlcig=8n aigc=0.9e-2 bigc=1e-3 cigc=0.03 aigsd=0.9e-2 bigsd=1e-3 cigsd=0.03 toxref=2n pigcd=1.2
+ jss=2e-5 jsws=2e-12 jswgs=3e-12
+ kt1=-0.2 ute=-1.2
";

/// Cells for [`CARDS`].
pub const CELLS: &str = "
.subckt inv A Y VDD VSS VNW VPW
mn Y A VSS VPW nx w=0.4u l=60n ad=0.06p as=0.06p pd=0.9u ps=0.9u
mp Y A VDD VNW px w=0.6u l=60n ad=0.09p as=0.09p pd=1.3u ps=1.3u
.ends
.subckt nand2 A B Y VDD VSS VNW VPW
m1 Y A n1 VPW nx w=0.5u l=60n ad=0.06p as=0.03p pd=1.0u ps=0.6u
m2 n1 B VSS VPW nx w=0.5u l=60n ad=0.03p as=0.06p pd=0.6u ps=1.0u
m3 Y A VDD VNW px w=0.6u l=60n ad=0.09p as=0.09p pd=1.3u ps=1.3u
m4 Y B VDD VNW px w=0.6u l=60n ad=0.09p as=0.09p pd=1.3u ps=1.3u
.ends
.subckt latch D G Q VDD VSS VNW VPW
*.PININFO D:I G:I Q:O
xg G gn VDD VSS VNW VPW inv
mt1 D G s VPW nx w=0.4u l=60n
mt2 D gn s VNW px w=0.6u l=60n
xa s Q VDD VSS VNW VPW inv
xb Q f VDD VSS VNW VPW inv
mf1 f gn s VPW nx w=0.2u l=60n
mf2 f G s VNW px w=0.3u l=60n
.ends
";

/// The process of [`CARDS`].
pub fn process() -> Process {
    Process::read("x", &[Source::from_text("cards.lib", CARDS)], &DeckOptions::default()).expect("test cards")
}

/// A cell of devices of one's own: ports with roles (nodes 0, 1, … in that order), inner nodes after them, transistors with their
/// drawn sizes.
pub fn own_cell(
    name: &str,
    ports: &[(&str, Role)],
    inner: &[&str],
    transistors: Vec<(Arc<dyn Device>, [usize; 4], f64, f64)>,
    temp: Kelvin,
) -> BoundCell {
    let at = Place::new(&Arc::from("test"), 1, 1);
    let names = ports.iter().map(|p| Arc::from(p.0)).collect::<Vec<Arc<str>>>();
    let nodes: Vec<Arc<str>> = names.iter().cloned().chain(inner.iter().map(|n| Arc::from(*n))).collect();
    let parts = transistors.iter().map(|(_, n, w, l)| {
        let params = vec![("w".into(), *w), ("l".into(), *l)];
        Part::Transistor(Request { model: "own".into(), params, at: at.clone() }, *n)
    });
    let cell = Cell {
        name: name.into(),
        port_nodes: (0..ports.len()).collect(),
        roles: ports.iter().map(|p| p.1).collect(),
        ports: names,
        parts: parts.collect(),
        nodes,
        at: at.clone(),
    };
    let elements = transistors
        .into_iter()
        .map(|(device, nodes, ..)| Element::Transistor(Placed { device, count: 1.0, nodes }))
        .collect();
    let net = Network { n_nodes: cell.nodes.len(), elements, floor_s: 0.0 };
    let plan = Plan::new(&net, &cell.held());
    BoundCell { cell: Arc::new(cell), net, plan, temp, has_gidl: false }
}

/// Ports of an own inverter.
pub const INVERTER: [(&str, Role); 4] =
    [("VDD", Role::Supply), ("VSS", Role::Ground), ("A", Role::Input), ("Y", Role::Output)];

/// Identical weak-inversion devices of either type: the transfer curve of reference sheet A23 at 300 K.
pub fn weak(polarity: Polarity, n: f64) -> Arc<dyn Device> {
    Arc::new(Symmetric { i0_a: 1e-9, n, vt_v: 25.851999786e-3, polarity, leak_s: 0.0 })
}

/// An inverter of two devices.
pub fn own_inverter(n: Arc<dyn Device>, p: Arc<dyn Device>, temp: Kelvin) -> BoundCell {
    let t = vec![(n, [3, 2, 1, 1], 1e-6, 1e-7), (p, [3, 2, 0, 0], 1e-6, 1e-7)];
    own_cell("inverter", &INVERTER, &[], t, temp)
}

/// Two inverters in a loop.
pub fn own_pair(n: &[Arc<dyn Device>; 2], p: &[Arc<dyn Device>; 2], temp: Kelvin) -> BoundCell {
    let ports = [("VDD", Role::Supply), ("VSS", Role::Ground), ("Q", Role::Output), ("QN", Role::Output)];
    let mut t = Vec::new();
    for (k, (from, to)) in [(2, 3), (3, 2)].into_iter().enumerate() {
        t.push((Arc::clone(&n[k]), [to, from, 1, 1], 0.2e-6, 0.1e-6));
        t.push((Arc::clone(&p[k]), [to, from, 0, 0], 0.4e-6, 0.1e-6));
    }
    own_cell("pair", &ports, &[], t, temp)
}

/// 300 K.
pub fn room() -> Kelvin {
    Kelvin::from_celsius(26.85).expect("in range")
}
