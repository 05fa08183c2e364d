#![allow(warnings)]
use hushrail::batch::load_study;
use hushrail::batch::study::read_study;
use hushrail::cell::*;
use hushrail::circuit::newton::*;
use hushrail::physics::Kelvin;
use hushrail::read::*;
use std::path::Path;
fn main() {
    let a: Vec<String> = std::env::args().collect();
    let source = Source::open(Path::new(&a[1])).unwrap();
    let study = read_study(&source).unwrap();
    let loaded = load_study(&study, &source.path, &source.folder).unwrap();
    let p = &loaded.processes[a[2].as_str()];
    let t = Kelvin::from_celsius(a[3].parse().unwrap()).unwrap();
    let n = |i: usize| a[i].parse::<f64>().unwrap();
    let levels =
        Levels { supply_v: n(4), ground_v: n(5), nwell_v: n(6), pwell_v: n(7), high_v: n(4), low_v: n(5) };
    let filter = a.get(8).cloned().unwrap_or_default();
    let mut w = Workspace::default();
    let mut total = Effort::default();
    let mut states = 0;
    let t0 = std::time::Instant::now();
    let mut bad = 0;
    let mut bind_t = std::time::Duration::ZERO;
    let mut st_t = std::time::Duration::ZERO;
    for c in &loaded.domains[0].block.cells {
        if !c.master.contains(&filter) {
            continue;
        }
        let mut shelf = DeviceShelf::default();
        let q = std::time::Instant::now();
        let b = BoundCell::new(&c.cell, p, t, 0.0, &mut shelf).unwrap();
        bind_t += q.elapsed();
        let q = std::time::Instant::now();
        let _ = b.states();
        st_t += q.elapsed();
        for s in b.states().unwrap() {
            states += 1;
            match b.solve(&s, &levels, &SolveOptions::default(), &mut w) {
                Ok(r) => {
                    total.steps += r.effort.steps;
                    total.transient += r.effort.transient;
                    total.bisection += r.effort.bisection;
                    total.joint += r.effort.joint;
                    if a.len() > 9 {
                        println!("{} {} {:?}", c.master, s.label, r.effort);
                        for (n, v) in c.cell.nodes.iter().zip(&r.node_v) {
                            println!("   {n} {v:.6e}");
                        }
                    }
                }
                Err(e) => {
                    bad += 1;
                    if bad < 12 {
                        println!("{e}");
                    }
                }
            }
        }
    }
    println!("bind {bind_t:?} states {st_t:?}");
    println!("{states} states, {bad} bad, {total:?}, {:?}", t0.elapsed());
}
