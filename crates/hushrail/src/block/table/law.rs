//! Current of a table cell over the span that is left to it, with bounds.
//!
//! Within the spans that the libraries cover, the fitted law tells how the current falls. Below, no table says anything but that
//! there is none at span zero. Three laws stand there, each with the factor `1 - exp(-span / vt)` of a channel (none at zero,
//! ohmic near it): the law continued, the current held at its lowest known value, and a straight line to zero. What is drawn lies
//! between the smaller of the first and the last, and the second: a current does not rise as the span falls. The middle of the
//! interval, in the logarithm, is the answer; the interval is its uncertainty and mostly the larger part of it.
//!
//! Tables are made with wells on the rails of the cell. Where wells stay on the real rails while the block's collapse, they are
//! biased in reverse and less may be drawn than the interval says: no table tells how much.

use super::fit::{FitPoint, LeakageFit};
use crate::physics::Kelvin;

/// Which end of the interval.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Bound {
    /// The answer.
    #[default]
    Middle,
    /// The least that the tables allow.
    Low,
    /// The most.
    High,
}

/// A corner that tables say nothing about.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error(
    "no library is for {vdd_v} V and {temp_c:.1} °C, and {points} libraries are too few to fit a law over supply and temperature \
     (want four or more, with two supplies and two temperatures)"
)]
pub struct LawError {
    /// Supply of the corner, V.
    pub vdd_v: f64,
    /// Temperature of the corner, degrees Celsius.
    pub temp_c: f64,
    /// Libraries of the process.
    pub points: usize,
}

/// The law of one cell at one temperature.
#[derive(Debug, Clone, PartialEq)]
pub struct TableLaw {
    fit: Option<LeakageFit>,
    temp: Kelvin,
    vdd_v: f64,
    full_a: f64,
    sigma: f64,
    lowest_v: f64,
}

impl TableLaw {
    /// A law that passes through `exact` at full supply, or else through the fit.
    ///
    /// # Errors
    /// Neither is there.
    pub fn new(
        fit: Option<LeakageFit>,
        exact: Option<f64>,
        points: &[FitPoint],
        temp: Kelvin,
        vdd_v: f64,
    ) -> Result<Self, LawError> {
        let (full_a, sigma) = match (exact, &fit) {
            (Some(a), _) => (a, 0.0),
            (None, Some(f)) => {
                let (ln, sigma) = f.ln_current(vdd_v, temp);
                (ln.exp(), sigma)
            }
            (None, None) => {
                return Err(LawError { vdd_v, temp_c: temp.celsius(), points: points.len() });
            }
        };
        let lowest_v = fit.as_ref().map_or(vdd_v, |f| f.lowest_v.min(vdd_v));
        Ok(Self { fit, temp, vdd_v, full_a, sigma, lowest_v })
    }

    /// One sigma of ln(current) at full supply; zero where a library states it.
    pub fn sigma(&self) -> f64 {
        self.sigma
    }

    /// Least span that tables speak for, V.
    pub fn lowest_v(&self) -> f64 {
        self.lowest_v
    }

    /// What the law rests on.
    pub fn in_words(&self) -> String {
        let below = format!(
            "below {:.3} V no table speaks, and the current is an interval (wells on the rails of the cells)",
            self.lowest_v
        );
        match &self.fit {
            Some(f) => format!(
                "over the span a law of {} foretells corners left out within {:.1} % (median; worst {:.1} %); {below}",
                if f.terms == 1 { "one term" } else { "two terms" },
                100.0 * f.median.exp_m1(),
                100.0 * f.worst.exp_m1(),
            ),
            None => format!("too few corners for a law over the span; {below}"),
        }
    }

    /// ln of the law's factor from full supply to a span, and one sigma with that of full supply in it.
    fn fall(&self, span_v: f64) -> (f64, f64) {
        let Some(f) = &self.fit else { return (0.0, self.sigma) };
        let (ln, sigma) = f.ln_ratio(span_v, self.vdd_v, self.temp);
        // a current does not rise as the span falls
        let ln = if span_v < self.vdd_v { ln.min(0.0) } else { ln };
        (ln, self.sigma.hypot(sigma))
    }

    /// Current at a span, A; that at `-span` with the other sign.
    pub fn current_a(&self, span_v: f64, bound: Bound) -> f64 {
        if span_v <= 0.0 {
            return if span_v < 0.0 { -self.current_a(-span_v, bound) } else { 0.0 };
        }
        let (ln, sigma) = self.fall(span_v.max(self.lowest_v));
        let spread = 2.0 * sigma;
        if span_v >= self.lowest_v {
            let known = self.full_a * ln.exp();
            return match bound {
                Bound::Middle => known,
                Bound::Low => known * (-spread).exp(),
                // no more than at full supply, which is known better
                Bound::High => (known * spread.exp()).min(self.full_a.max(known) * (2.0 * self.sigma).exp()),
            };
        }
        let vt = self.temp.thermal_voltage();
        let channel = (-(-span_v / vt).exp_m1()) / (-(-self.lowest_v / vt).exp_m1());
        let edge = self.full_a * ln.exp();
        let held = edge * channel;
        let line = edge * span_v / self.lowest_v;
        let slope = self.fit.as_ref().map(|f| f.ln_ratio(span_v, self.lowest_v, self.temp).0.min(0.0));
        let low = slope.map_or(line, |s| line.min(held * s.exp()));
        match bound {
            Bound::Middle => (low * held).sqrt(),
            Bound::Low => low * (-spread).exp(),
            Bound::High => (held * spread.exp()).min(self.full_a * channel * (2.0 * self.sigma).exp()),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn kelvin(c: f64) -> Kelvin {
        Kelvin::from_celsius(c).expect("in range")
    }

    /// Currents of a law of two terms.
    fn points() -> Vec<FitPoint> {
        let mut out = Vec::new();
        for temp_c in [-40.0, 25.0, 100.0] {
            for voltage_v in [0.9, 1.0, 1.1, 1.2] {
                let temp = kelvin(temp_c);
                let vt = temp.thermal_voltage();
                let a = (temp.get() / 300.0).powi(2) * (-7.0 + (-0.3 + 0.05 * voltage_v) / vt).exp();
                let b = (-8.0 - 10.0 / voltage_v).exp();
                out.push(FitPoint { voltage_v, temp, current_a: a + b });
            }
        }
        out
    }

    #[test]
    fn a_law_of_two_terms_is_found_and_foretells_others() {
        let f = LeakageFit::new(&points()).expect("enough");
        assert_eq!(f.terms, 2);
        assert!(f.scatter < 0.02, "{f:?}");
        let (ln, sigma) = f.ln_current(1.05, kelvin(60.0));
        let vt = kelvin(60.0).thermal_voltage();
        let a = (kelvin(60.0).get() / 300.0).powi(2) * (-7.0 + (-0.3 + 0.05 * 1.05) / vt).exp();
        let miss = ln - (a + (-8.0f64 - 10.0 / 1.05).exp()).ln();
        assert!(miss.abs() < 0.02 && sigma < 0.05, "{miss} {sigma}");
        assert_eq!(LeakageFit::new(&points()[..4]), None);
    }

    #[test]
    fn the_law_meets_the_table_and_its_bounds_enclose_it() {
        let p = points();
        let (fit, temp) = (LeakageFit::new(&p), kelvin(25.0));
        let law = TableLaw::new(fit, Some(p[7].current_a), &p, temp, 1.2).expect("exact");
        assert_eq!(law.current_a(1.2, Bound::Middle), p[7].current_a);
        assert_eq!(law.current_a(0.0, Bound::High), 0.0);
        let mut last = [0.0; 3];
        for k in 1..=1200 {
            let v = f64::from(k) * 1e-3;
            let now = [Bound::Low, Bound::Middle, Bound::High].map(|b| law.current_a(v, b));
            assert!(now[0] <= now[1] && now[1] <= now[2], "{v}: {now:?}");
            assert!(now.iter().zip(last).all(|(a, b)| *a >= b * (1.0 - 1e-3)), "{v}: {now:?} after {last:?}");
            assert!(now[1] - last[1] < 0.2 * p[7].current_a, "no jump at {v}");
            last = now;
        }
        assert_eq!(law.current_a(-0.1, Bound::Middle), -law.current_a(0.1, Bound::Middle));
        // one corner alone still gives an interval
        let alone = TableLaw::new(None, Some(1e-9), &p[..1], temp, 1.2).expect("exact");
        let [low, high] = [Bound::Low, Bound::High].map(|b| alone.current_a(0.6, b));
        assert!((low - 0.5e-9).abs() < 1e-15 && (high - 1e-9).abs() < 1e-15);
        let e = TableLaw::new(None, None, &p[..1], temp, 1.2).expect_err("nothing").to_string();
        assert!(e.contains("no library is for 1.2 V and 25.0 °C"), "{e}");
    }
}
