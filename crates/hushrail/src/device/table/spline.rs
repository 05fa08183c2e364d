//! Shape-preserving interpolation on a grid: monotone cubics along every axis, one smooth function in between.
//!
//! Node slopes along each axis are those of the monotone cubic interpolant (weighted harmonic mean of the neighbouring
//! secants, zero at an extremum); mixed slopes are made by applying the same rule to slopes. The tensor Hermite cubic of
//! these numbers is continuous in value and gradient, goes through every node, and is monotone along every grid line where
//! the nodes are. Along lines in between it is monotone as far as slopes and secants change alike, which smooth currents do.
//!
//! Rejected: interpolating along one axis after another with fresh slopes each time is monotone on every line, but costs
//! twenty times as much and its gradient jumps where a secant changes sign.
//!
//! Source: Fritsch and Carlson, *SIAM J. Numer. Anal.* 17 (1980) 238–246; Fritsch and Butland, *SIAM J. Sci. Stat. Comput.* 5
//! (1984) 300–304 (weights and ends).

/// Slopes of the monotone cubic through `(x, y)`; zero for a single point.
pub fn slopes(x: &[f64], y: &[f64]) -> Vec<f64> {
    let n = x.len();
    if n < 2 {
        return vec![0.0; n];
    }
    let h: Vec<f64> = x.windows(2).map(|w| w[1] - w[0]).collect();
    let s: Vec<f64> = y.windows(2).zip(&h).map(|(w, h)| (w[1] - w[0]) / h).collect();
    if n == 2 {
        return vec![s[0]; 2];
    }
    let end = |h0: f64, h1: f64, s0: f64, s1: f64| {
        let d = ((2.0 * h0 + h1) * s0 - h0 * s1) / (h0 + h1);
        if d * s0 <= 0.0 {
            0.0
        } else if s0 * s1 < 0.0 && d.abs() > 3.0 * s0.abs() {
            3.0 * s0
        } else {
            d
        }
    };
    let mut d = vec![0.0; n];
    d[0] = end(h[0], h[1], s[0], s[1]);
    d[n - 1] = end(h[n - 2], h[n - 3], s[n - 2], s[n - 3]);
    for i in 1..n - 1 {
        if s[i - 1] * s[i] > 0.0 {
            let (w0, w1) = (2.0 * h[i] + h[i - 1], h[i] + 2.0 * h[i - 1]);
            d[i] = (w0 + w1) / (w0 / s[i - 1] + w1 / s[i]);
        }
    }
    d
}

/// The monotone cubic through `(x, y)` at `at`, continued by its tangent outside.
pub fn along(x: &[f64], y: &[f64], at: f64) -> f64 {
    let d = slopes(x, y);
    let b = Basis::at(x, at);
    let mut out = 0.0;
    for k in 0..b.corners {
        out += b.value[k][0] * y[b.cell + k] + b.value[k][1] * d[b.cell + k];
    }
    out
}

/// Hermite basis of one axis at one place: weights of value and slope at the two ends of the cell, and their derivatives.
#[derive(Debug, Clone, Copy)]
pub struct Basis {
    cell: usize,
    corners: usize,
    value: [[f64; 2]; 2],
    slope: [[f64; 2]; 2],
    /// Whether the place lies on the axis.
    pub inside: bool,
}

/// Slack at the ends of an axis, V: rounding of differences of node voltages.
pub const EDGE_SLACK: f64 = 1e-9;

impl Basis {
    /// At `x` on an axis of at least one point.
    pub fn at(axis: &[f64], x: f64) -> Self {
        let n = axis.len();
        let (first, last) = (axis[0], axis[n - 1]);
        let inside = x >= first - EDGE_SLACK && x <= last + EDGE_SLACK;
        let mut b = Self { cell: 0, corners: 1, value: [[0.0; 2]; 2], slope: [[0.0; 2]; 2], inside };
        if n == 1 {
            b.value[0][0] = 1.0;
            return b;
        }
        // at an end and outside: along the tangent of that node alone
        let end = if !(x > first) {
            Some((0, first))
        } else if x >= last {
            Some((n - 1, last))
        } else {
            None
        };
        if let Some((cell, node)) = end {
            b.cell = cell;
            b.value[0] = [1.0, x - node];
            b.slope[0] = [0.0, 1.0];
            return b;
        }
        b.corners = 2;
        b.cell = axis.partition_point(|&a| a <= x) - 1;
        let h = axis[b.cell + 1] - axis[b.cell];
        let t = (x - axis[b.cell]) / h;
        let u = 1.0 - t;
        b.value = [[u * u * (1.0 + 2.0 * t), h * t * u * u], [t * t * (3.0 - 2.0 * t), -h * t * t * u]];
        b.slope = [[-6.0 * t * u / h, u * (1.0 - 3.0 * t)], [6.0 * t * u / h, t * (3.0 * t - 2.0)]];
        b
    }
}

/// Value and three first slopes at every node of a grid, with all mixed slopes: what the Hermite cubic needs.
#[derive(Debug, Clone)]
pub struct Field {
    size: [usize; 3],
    /// Bit 0: slope along the first axis, bit 1: second, bit 2: third.
    nodes: Vec<[f64; 8]>,
}

impl Field {
    /// From node values in the order first axis slowest, third fastest.
    pub fn new(axes: [&[f64]; 3], values: &[f64]) -> Self {
        let size = axes.map(<[f64]>::len);
        let mut nodes: Vec<[f64; 8]> =
            values.iter().map(|&v| [v, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0]).collect();
        let strides = [size[1] * size[2], size[2], 1];
        for axis in 0..3 {
            let bit = 1 << axis;
            let (n, stride) = (size[axis], strides[axis]);
            for start in (0..nodes.len()).filter(|i| (i / stride).is_multiple_of(n)) {
                for from in 0..bit {
                    let line: Vec<f64> = (0..n).map(|k| nodes[start + k * stride][from]).collect();
                    for (k, d) in slopes(axes[axis], &line).into_iter().enumerate() {
                        nodes[start + k * stride][from | bit] = d;
                    }
                }
            }
        }
        Self { size, nodes }
    }

    /// Value and gradient.
    #[inline]
    pub fn at(&self, b: &[Basis; 3]) -> (f64, [f64; 3]) {
        let (mut value, mut grad) = (0.0, [0.0; 3]);
        let [bx, by, bz] = b;
        for i in 0..bx.corners {
            for j in 0..by.corners {
                let row = ((bx.cell + i) * self.size[1] + by.cell + j) * self.size[2] + bz.cell;
                // sums over the third axis: by the bits of the first two
                let (mut at, mut dz) = ([0.0; 4], [0.0; 4]);
                for (c, (v, s)) in
                    self.nodes[row..row + bz.corners].iter().zip(bz.value.iter().zip(&bz.slope))
                {
                    for m in 0..4 {
                        at[m] += c[m] * v[0] + c[m + 4] * v[1];
                        dz[m] += c[m] * s[0] + c[m + 4] * s[1];
                    }
                }
                let (v, s) = (by.value[j], by.slope[j]);
                let plane = [at[0] * v[0] + at[2] * v[1], at[1] * v[0] + at[3] * v[1]];
                let dy = [at[0] * s[0] + at[2] * s[1], at[1] * s[0] + at[3] * s[1]];
                let dz = [dz[0] * v[0] + dz[2] * v[1], dz[1] * v[0] + dz[3] * v[1]];
                let (v, s) = (bx.value[i], bx.slope[i]);
                value += plane[0] * v[0] + plane[1] * v[1];
                grad[0] += plane[0] * s[0] + plane[1] * s[1];
                grad[1] += dy[0] * v[0] + dy[1] * v[1];
                grad[2] += dz[0] * v[0] + dz[1] * v[1];
            }
        }
        (value, grad)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Weighted harmonic means by hand: steps 1 and 2 with secants 2 and 1 give (5 + 4)/(5/2 + 4/1) = 18/13.
    #[test]
    fn slopes_are_weighted_harmonic_means_and_stop_at_extrema() {
        let d = slopes(&[0.0, 1.0, 3.0, 4.0], &[0.0, 2.0, 4.0, 3.0]);
        assert!((d[1] - 9.0 / (5.0 / 2.0 + 4.0 / 1.0)).abs() < 1e-15);
        assert_eq!(d[2], 0.0);
    }

    #[test]
    fn a_product_of_lines_is_met_everywhere_with_its_gradient() {
        let axes: [&[f64]; 3] = [&[0.0, 0.5, 2.0], &[-1.0, 1.0], &[0.0, 1.0, 1.5, 4.0]];
        let f = |x: f64, y: f64, z: f64| (1.0 + x) * (3.0 + y) * (2.0 + z);
        let mut values = Vec::new();
        for &x in axes[0] {
            for &y in axes[1] {
                for &z in axes[2] {
                    values.push(f(x, y, z));
                }
            }
        }
        let field = Field::new(axes, &values);
        for (x, y, z) in [(0.3, 0.2, 0.7), (1.9, -0.9, 3.3), (0.0, 1.0, 4.0), (-1.0, 2.0, 5.0)] {
            let b = [Basis::at(axes[0], x), Basis::at(axes[1], y), Basis::at(axes[2], z)];
            let (v, g) = field.at(&b);
            assert!((v - f(x, y, z)).abs() < 1e-12);
            let want = [(3.0 + y) * (2.0 + z), (1.0 + x) * (2.0 + z), (1.0 + x) * (3.0 + y)];
            for k in 0..3 {
                assert!((g[k] - want[k]).abs() < 1e-12, "{g:?} {want:?}");
            }
        }
    }
}
