//! The sink's heat: MOSFET and heat sink as two lumps towards the ambient.
//!
//! A Cauer ladder: power enters the MOSFET (its case counted with it), flows through one
//! thermal resistance into the heat sink and through another into the air. For a constant power
//! the step is exact, whatever its length: the two modes of the ladder decay each with its own
//! exponential. A data sheet's two-term Foster network converts exactly.
//!
//! What it deliberately does not do: radiation, air warming up in a box, two devices on one heat
//! sink.

/// The two lumps and what joins them.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct HeatPath {
    /// Heat capacity of MOSFET and case, joule per kelvin.
    pub mosfet_j_per_k: f64,
    /// Junction to heat sink, kelvin per watt.
    pub to_heat_sink_k_per_w: f64,
    /// Heat capacity of the heat sink, joule per kelvin.
    pub heat_sink_j_per_k: f64,
    /// Heat sink to ambient, kelvin per watt.
    pub to_ambient_k_per_w: f64,
}

/// Why a heat path cannot be.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
#[error("`{name}` of the heat path is {value}; give a finite number above zero")]
pub struct HeatPathError {
    /// The value's name.
    pub name: &'static str,
    /// What it is.
    pub value: f64,
}

/// The temperatures, and the power that is due to change them.
#[derive(Debug, Clone)]
pub struct Thermal {
    path: HeatPath,
    ambient_degc: f64,
    mosfet_degc: f64,
    heat_sink_degc: f64,
    step_s: f64,
    /// What the deviations from the settled state become over `step_s`.
    decay: [[f64; 2]; 2],
}

impl HeatPath {
    /// From a two-term Foster network, `Z(t) = sum(R_i (1 - exp(-t / (R_i C_i))))`, by equating
    /// the two forms of the impedance.
    pub fn from_foster(resistance_k_per_w: [f64; 2], capacity_j_per_k: [f64; 2]) -> Self {
        let [r1, r2] = resistance_k_per_w;
        let [c1, c2] = capacity_j_per_k;
        let (tau1, tau2) = (r1 * c1, r2 * c2);
        // Z(s) = (a0 + a1 s) / (1 + b1 s + b2 s^2)
        let (a0, a1) = (r1 + r2, r1 * tau2 + r2 * tau1);
        let (b1, b2) = (tau1 + tau2, tau1 * tau2);
        let mosfet_j_per_k = b2 / a1;
        let rest = b1 - mosfet_j_per_k * a0;
        let to_heat_sink_k_per_w = a1 / rest;
        let to_ambient_k_per_w = a0 - to_heat_sink_k_per_w;
        Self {
            mosfet_j_per_k,
            to_heat_sink_k_per_w,
            heat_sink_j_per_k: rest / to_ambient_k_per_w,
            to_ambient_k_per_w,
        }
    }

    fn check(&self) -> Result<(), HeatPathError> {
        let values = [
            ("mosfet_j_per_k", self.mosfet_j_per_k),
            ("to_heat_sink_k_per_w", self.to_heat_sink_k_per_w),
            ("heat_sink_j_per_k", self.heat_sink_j_per_k),
            ("to_ambient_k_per_w", self.to_ambient_k_per_w),
        ];
        for (name, value) in values {
            if !(value.is_finite() && value > 0.0) {
                return Err(HeatPathError { name, value });
            }
        }
        Ok(())
    }

    /// `exp(A t)` of the deviations' system, from its two real eigenvalues (they are always
    /// apart: the lumps pull each other the same way).
    fn decay_over(&self, time_s: f64) -> [[f64; 2]; 2] {
        let (g1, g2) = (
            1.0 / self.to_heat_sink_k_per_w,
            1.0 / self.to_ambient_k_per_w,
        );
        let (c1, c2) = (self.mosfet_j_per_k, self.heat_sink_j_per_k);
        let a = [[-g1 / c1, g1 / c1], [g1 / c2, -(g1 + g2) / c2]];
        let mean = 0.5 * (a[0][0] + a[1][1]);
        let half = 0.5 * (a[0][0] - a[1][1]);
        let apart = (half * half + a[0][1] * a[1][0]).sqrt();
        let (slow, fast) = (mean + apart, mean - apart);
        let (p, q) = ((slow * time_s).exp(), (fast * time_s).exp());
        let of = |row: f64, diagonal: f64| {
            (p * (row - fast * diagonal) - q * (row - slow * diagonal)) / (slow - fast)
        };
        [
            [of(a[0][0], 1.0), of(a[0][1], 0.0)],
            [of(a[1][0], 0.0), of(a[1][1], 1.0)],
        ]
    }
}

impl Thermal {
    /// All at ambient temperature.
    ///
    /// # Errors
    /// [`HeatPathError`] for a value that is not above zero.
    pub fn new(path: HeatPath, ambient_degc: f64) -> Result<Self, HeatPathError> {
        path.check()?;
        Ok(Self {
            path,
            ambient_degc,
            mosfet_degc: ambient_degc,
            heat_sink_degc: ambient_degc,
            step_s: 0.0,
            decay: [[1.0, 0.0], [0.0, 1.0]],
        })
    }

    /// A constant power into the MOSFET for a time.
    pub fn step(&mut self, power_w: f64, time_s: f64) {
        if self.step_s.to_bits() != time_s.to_bits() {
            self.step_s = time_s;
            self.decay = self.path.decay_over(time_s);
        }
        let heat_sink = self.ambient_degc + power_w * self.path.to_ambient_k_per_w;
        let mosfet = heat_sink + power_w * self.path.to_heat_sink_k_per_w;
        let away = (self.mosfet_degc - mosfet, self.heat_sink_degc - heat_sink);
        let [of_mosfet, of_heat_sink] = self.decay;
        let left = |row: [f64; 2]| row[0] * away.0 + row[1] * away.1;
        self.mosfet_degc = mosfet + left(of_mosfet);
        self.heat_sink_degc = heat_sink + left(of_heat_sink);
    }

    /// Junction temperature of the MOSFET, degrees Celsius.
    pub fn mosfet_degc(&self) -> f64 {
        self.mosfet_degc
    }

    /// Temperature of the heat sink, degrees Celsius.
    pub fn heat_sink_degc(&self) -> f64 {
        self.heat_sink_degc
    }

    /// Temperature of the air, degrees Celsius.
    pub fn ambient_degc(&self) -> f64 {
        self.ambient_degc
    }

    /// Moves the ambient.
    pub fn set_ambient(&mut self, ambient_degc: f64) {
        self.ambient_degc = ambient_degc;
    }
}

#[cfg(test)]
mod tests {
    use super::{HeatPath, Thermal};

    // Source: the closed form of a Foster pair R 0.7, 0.3 and C 1, 10, evaluated with numpy.
    #[test]
    fn a_foster_pair_warms_as_its_closed_form_says() {
        let path = HeatPath::from_foster([0.7, 0.3], [1.0, 10.0]);
        let points = [
            (-1.0_f64, 0.103_020_64),
            (-0.25, 0.437_798_1),
            (0.5, 0.887_806_34),
            (1.25, 0.999_200_54),
            (2.0, 1.0),
        ];
        for (exponent, rise) in points {
            let time_s = 10.0_f64.powf(exponent);
            let mut thermal = Thermal::new(path, 20.0).unwrap();
            thermal.step(1.0, time_s);
            let risen = thermal.mosfet_degc() - 20.0;
            assert!((risen - rise).abs() < 1e-7, "{time_s} s: {risen}");
        }
    }

    #[test]
    fn a_thousand_short_steps_end_where_one_long_step_ends() {
        let path = HeatPath {
            mosfet_j_per_k: 0.6,
            to_heat_sink_k_per_w: 1.4,
            heat_sink_j_per_k: 90.0,
            to_ambient_k_per_w: 3.5,
        };
        let mut short = Thermal::new(path, 23.0).unwrap();
        let mut long = short.clone();
        for _ in 0..1000 {
            short.step(7.0, 0.256);
        }
        long.step(7.0, 256.0);
        assert!((short.mosfet_degc() - long.mosfet_degc()).abs() < 1e-9);
        assert!((short.heat_sink_degc() - long.heat_sink_degc()).abs() < 1e-9);
    }

    #[test]
    fn settled_rises_are_power_times_resistance() {
        let path = HeatPath {
            mosfet_j_per_k: 0.6,
            to_heat_sink_k_per_w: 1.4,
            heat_sink_j_per_k: 90.0,
            to_ambient_k_per_w: 3.5,
        };
        let mut thermal = Thermal::new(path, 23.0).unwrap();
        thermal.step(10.0, 1e5);
        assert!((thermal.heat_sink_degc() - 58.0).abs() < 1e-9);
        assert!((thermal.mosfet_degc() - 72.0).abs() < 1e-9);
    }

    #[test]
    fn a_heat_path_without_a_capacity_is_refused_by_name() {
        let mut path = HeatPath::from_foster([0.7, 0.3], [1.0, 10.0]);
        path.heat_sink_j_per_k = 0.0;
        let error = Thermal::new(path, 20.0).unwrap_err().to_string();
        assert_eq!(
            error,
            "`heat_sink_j_per_k` of the heat path is 0; give a finite number above zero"
        );
    }
}
