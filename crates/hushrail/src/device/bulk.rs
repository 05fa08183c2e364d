//! Many bias points of one device at once.

use pulp::{Arch, Scalar, Simd, WithSimd};

use super::lanes::Lanes;
use super::{Bias, Branches};

/// Equations that can be evaluated on rows of points.
pub(super) trait RowLaw: Sync {
    /// Branch currents at a row of biases.
    fn row<S: Simd>(&self, bias: Bias<Lanes<S>>) -> Branches<Lanes<S>>;
}

/// Which vectors to use.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Width {
    /// The widest of this machine.
    Machine,
    /// AVX-512, eight points; AVX2 where there is none.
    Avx512,
    /// AVX2, four points; the machine's own vectors where there is none.
    Avx2,
    /// One point at a time, on any machine.
    Portable,
}

struct Sweep<'a, L> {
    law: &'a L,
    biases: &'a [Bias<f64>],
    out: &'a mut [Branches<f64>],
}

/// Most points of one vector.
const MOST: usize = 8;

impl<L: RowLaw> WithSimd for Sweep<'_, L> {
    type Output = ();

    #[inline(always)]
    fn with_simd<S: Simd>(self, simd: S) {
        let n = Lanes::<S>::COUNT;
        for (some, out) in self.biases.chunks(n).zip(self.out.chunks_mut(n)) {
            // the last points of an array go with copies of themselves through the same code
            let last = some[some.len() - 1];
            let mut columns = [[0.0; MOST]; 3];
            for k in 0..n {
                let b = some.get(k).copied().unwrap_or(last);
                columns[0][k] = b.vgs;
                columns[1][k] = b.vds;
                columns[2][k] = b.vbs;
            }
            let [vgs, vds, vbs] = &columns;
            let row = self.law.row(Bias {
                vgs: Lanes::load(simd, &vgs[..n]),
                vds: Lanes::load(simd, &vds[..n]),
                vbs: Lanes::load(simd, &vbs[..n]),
            });
            let mut currents = [[0.0; MOST]; 10];
            for (to, from) in currents.iter_mut().zip(row.into_array()) {
                from.store(&mut to[..n]);
            }
            for (k, out) in out.iter_mut().enumerate() {
                *out = Branches::from_array(std::array::from_fn(|i| currents[i][k]));
            }
        }
    }
}

/// Evaluates a law at every bias, with the vectors asked for.
///
/// # Panics
/// When `out` is not as long as `biases`.
pub(super) fn sweep<L: RowLaw>(law: &L, biases: &[Bias<f64>], out: &mut [Branches<f64>], width: Width) {
    assert_eq!(biases.len(), out.len(), "one result for each bias");
    let op = Sweep { law, biases, out };
    match width {
        Width::Portable => Scalar.vectorize(op),
        Width::Avx2 => narrow(op),
        Width::Machine | Width::Avx512 => Arch::new().dispatch(op),
    }
}

#[cfg(any(target_arch = "x86", target_arch = "x86_64"))]
fn narrow<L: RowLaw>(op: Sweep<'_, L>) {
    match pulp::x86::V3::try_new() {
        Some(simd) => Simd::vectorize(simd, op),
        None => Scalar.vectorize(op),
    }
}

#[cfg(not(any(target_arch = "x86", target_arch = "x86_64")))]
fn narrow<L: RowLaw>(op: Sweep<'_, L>) {
    Arch::new().dispatch(op);
}
