//! Small dense systems: elimination without cancellation for conductance matrices, and pivoting for the rest.

/// Solves `A·x = b` in place for a matrix given by its off-diagonal entries (all ≤ 0 in exact arithmetic) and the sum of
/// each column, its excess: conductance to held nodes.
///
/// The diagonal is rebuilt from the excess and the off-diagonals by adding only (after Grassmann, Taksar and Heyman,
/// Oper. Res. 33 (1985) 1107), so a pair of nodes joined by an on device between two off ones keeps full accuracy although
/// its own conductance is 1e15 times what holds it. Returns `false` when a node is held by nothing.
///
/// `a` is row-major n×n, its diagonal ignored; `a`, `excess` and `b` are overwritten; the solution is in `b`.
pub fn solve_excess(n: usize, a: &mut [f64], excess: &mut [f64], b: &mut [f64]) -> bool {
    let mut pivots = vec![0.0; n];
    for p in 0..n {
        let mut d = excess[p];
        for k in p + 1..n {
            d -= a[k * n + p];
        }
        // column p of the nodes already eliminated is folded into the excess
        if !(d > 0.0) || !d.is_finite() {
            return false;
        }
        pivots[p] = d;
        for k in p + 1..n {
            let f = -a[k * n + p] / d;
            if f != 0.0 {
                for j in p + 1..n {
                    if j != k {
                        a[k * n + j] += f * a[p * n + j];
                    }
                }
                b[k] += f * b[p];
            }
        }
        for j in p + 1..n {
            excess[j] -= excess[p] / d * a[p * n + j];
        }
    }
    for p in (0..n).rev() {
        let mut s = b[p];
        for j in p + 1..n {
            s -= a[p * n + j] * b[j];
        }
        b[p] = s / pivots[p];
    }
    true
}

/// Solves `A·x = b` in place with row scaling and partial pivoting; returns the sign of the determinant, or zero when the
/// matrix is singular. `a` is row-major n×n with its diagonal.
pub fn solve_pivoting(n: usize, a: &mut [f64], b: &mut [f64]) -> f64 {
    let mut sign = 1.0;
    for i in 0..n {
        let top = a[i * n..(i + 1) * n].iter().fold(0.0f64, |m, x| m.max(x.abs()));
        if !(top > 0.0) || !top.is_finite() {
            return 0.0;
        }
        for j in 0..n {
            a[i * n + j] /= top;
        }
        b[i] /= top;
    }
    for p in 0..n {
        let mut best = p;
        for k in p + 1..n {
            if a[k * n + p].abs() > a[best * n + p].abs() {
                best = k;
            }
        }
        let d = a[best * n + p];
        if d == 0.0 || !d.is_finite() {
            return 0.0;
        }
        if best != p {
            for j in 0..n {
                a.swap(p * n + j, best * n + j);
            }
            b.swap(p, best);
            sign = -sign;
        }
        sign *= d.signum();
        for k in p + 1..n {
            let f = a[k * n + p] / d;
            if f != 0.0 {
                for j in p + 1..n {
                    a[k * n + j] -= f * a[p * n + j];
                }
                b[k] -= f * b[p];
            }
        }
    }
    for p in (0..n).rev() {
        let mut s = b[p];
        for j in p + 1..n {
            s -= a[p * n + j] * b[j];
        }
        b[p] = s / a[p * n + p];
    }
    sign
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn both_solve_a_small_system() {
        // conductances: 0-1: 2, 1-2: 3, 0 to rail: 1, 2 to rail: 4
        let full = [3.0, -2.0, 0.0, -2.0, 5.0, -3.0, 0.0, -3.0, 7.0];
        let want = [1.0, -2.0, 0.5];
        let rhs: Vec<f64> = (0..3).map(|i| (0..3).map(|j| full[i * 3 + j] * want[j]).sum()).collect();
        let (mut a, mut e, mut b) = (full, [1.0, 0.0, 4.0], rhs.clone());
        assert!(solve_excess(3, &mut a, &mut e, &mut b));
        let (mut a2, mut b2) = (full, rhs);
        assert_eq!(solve_pivoting(3, &mut a2, &mut b2), 1.0);
        for i in 0..3 {
            assert!((b[i] - want[i]).abs() < 1e-14);
            assert!((b2[i] - want[i]).abs() < 1e-14);
        }
    }

    #[test]
    fn a_floating_pair_keeps_its_digits() {
        // nodes joined by 1e-4 S, held by 1e-19 S and 3e-19 S; a current of 4e-19 A into the first moves both by 1 V
        let (mut a, mut e, mut b) = ([0.0, -1e-4, -1e-4, 0.0], [1e-19, 3e-19], [4e-19, 0.0]);
        assert!(solve_excess(2, &mut a, &mut e, &mut b));
        assert!((b[0] - 1.0).abs() < 1e-12 && (b[1] - 1.0).abs() < 1e-12, "{b:?}");
    }

    #[test]
    fn a_node_held_by_nothing_is_reported() {
        assert!(!solve_excess(1, &mut [0.0], &mut [0.0], &mut [1.0]));
        assert_eq!(solve_pivoting(1, &mut [0.0], &mut [1.0]), 0.0);
    }
}
