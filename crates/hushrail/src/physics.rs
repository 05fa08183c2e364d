//! Constants of nature and silicon, each with unit and source.

/// Boltzmann constant over elementary charge, V/K; both exact since the SI of 2019 (CODATA 2018).
pub const KB_OVER_Q: f64 = 1.380649e-23 / 1.602176634e-19;
/// Zero of the Celsius scale, K; exact.
pub const CELSIUS_ZERO_K: f64 = 273.15;
/// Lowest and highest temperature offered to people, degrees Celsius.
pub const TEMP_RANGE_C: (f64, f64) = (-100.0, 300.0);

/// A temperature outside what the equations are meant for.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
#[error("temperature {temp_c} °C is out of range; want {} to {} °C", TEMP_RANGE_C.0, TEMP_RANGE_C.1)]
pub struct TemperatureOutOfRange {
    /// What was given, degrees Celsius.
    pub temp_c: f64,
}

/// An absolute temperature.
#[derive(Debug, Clone, Copy, PartialEq, PartialOrd)]
pub struct Kelvin(f64);

impl Kelvin {
    /// From degrees Celsius.
    ///
    /// # Errors
    /// Not a number, or outside [`TEMP_RANGE_C`].
    pub fn from_celsius(temp_c: f64) -> Result<Self, TemperatureOutOfRange> {
        if temp_c >= TEMP_RANGE_C.0 && temp_c <= TEMP_RANGE_C.1 {
            Ok(Self(temp_c + CELSIUS_ZERO_K))
        } else {
            Err(TemperatureOutOfRange { temp_c })
        }
    }
    /// Kelvin.
    pub fn get(self) -> f64 {
        self.0
    }
    /// Degrees Celsius.
    pub fn celsius(self) -> f64 {
        self.0 - CELSIUS_ZERO_K
    }
    /// Thermal voltage kT/q, V.
    pub fn thermal_voltage(self) -> f64 {
        KB_OVER_Q * self.0
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn thermal_voltage_follows_the_si_constants() {
        // k and q are exact (CODATA 2018); products computed by hand to ten digits
        for (temp_c, want_v) in [(26.85, 25.851999786e-3), (25.0, 25.692579e-3), (85.0, 30.862979e-3)] {
            let t = Kelvin::from_celsius(temp_c).expect("in range");
            assert!((t.thermal_voltage() / want_v - 1.0).abs() < 2e-8, "{temp_c}");
        }
    }

    #[test]
    fn impossible_temperatures_are_refused() {
        for bad in [f64::NAN, -300.0, 1e9] {
            assert!(Kelvin::from_celsius(bad).is_err());
        }
        let text = Kelvin::from_celsius(-300.0).expect_err("too cold").to_string();
        assert_eq!(text, "temperature -300 °C is out of range; want -100 to 300 °C");
    }
}
