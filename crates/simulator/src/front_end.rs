//! What the sink's converters make of volts and amperes: gain, offset, noise, rounding, floor.
//!
//! Everything nominal comes from the firmware's own figures, so a front end without errors gives
//! codes that are exact: the nearest to the true value. Errors are departures of the hardware
//! from those figures; the firmware never learns of them, calibration on the host does.
//!
//! Noise is white and normal, drawn anew for each sample (see `noise`); the converter's own
//! rounding comes after it.

use wire::TemperatureReading;

use quantity::Temperature;

use crate::firmware::FirmwareConfig;

/// How the hardware departs from its figures. All zeros: not at all.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Errors {
    /// Current set above nominal, relative.
    pub set_gain: f64,
    /// Current added to what is set while the gate is on, ampere.
    pub set_offset_a: f64,
    /// Lowest voltage the setting converter reaches while the gate is on, volt.
    pub drive_floor_v: f64,
    /// Current read above true, relative.
    pub current_gain: f64,
    /// Current added to what is read, ampere.
    pub current_offset_a: f64,
    /// Noise on the current read, standard deviation, ampere.
    pub current_noise_a: f64,
    /// Voltage read above true, relative.
    pub voltage_gain: f64,
    /// Voltage added to what is read, volt.
    pub voltage_offset_v: f64,
    /// Noise on the voltage read, standard deviation, volt.
    pub voltage_noise_v: f64,
    /// Temperature read above true, kelvin.
    pub temperature_offset_k: f64,
    /// Noise on the temperature read, standard deviation, kelvin.
    pub temperature_noise_k: f64,
    /// Sense resistor's relative growth per kelvin of its heat sink above the ambient.
    pub sense_per_k: f64,
    /// Time constant of the loop, seconds: the current's way to a new setpoint.
    pub loop_time_constant_s: f64,
    /// The sink's oscillator fast against true time, parts in 10^9.
    pub oscillator_ppb: i32,
}

/// The converters by the firmware's figures, and the errors on top.
#[derive(Debug, Clone)]
pub(crate) struct FrontEnd {
    errors: Errors,
    set_a_per_code: f64,
    floor_a: f64,
    codes_per_a: f64,
    codes_per_v: f64,
    last_code: u16,
}

/// A straight line from true values to codes, before noise and rounding.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Scale {
    pub(crate) per_unit: f64,
    pub(crate) at_zero: f64,
}

impl Scale {
    pub(crate) fn of(self, value: f64) -> f64 {
        self.at_zero + self.per_unit * value
    }
}

impl FrontEnd {
    pub(crate) fn new(figures: &FirmwareConfig, errors: Errors) -> Self {
        let spans = f64::from(u8::from(figures.drive_spans_full_scale));
        let drive_steps = f64::from(1_u32 << figures.drive_bits.min(16)) - spans;
        let sense_steps = f64::from(1_u32 << figures.sense_bits.min(16));
        let sense_ohm = figures.sense_resistor.ohms();
        Self {
            errors,
            set_a_per_code: figures.drive_full_scale.volts() / drive_steps / sense_ohm,
            floor_a: errors.drive_floor_v / sense_ohm,
            codes_per_a: sense_steps / figures.sense_current.amperes(),
            codes_per_v: sense_steps / figures.sense_voltage.volts(),
            last_code: u16::try_from((1_u32 << figures.sense_bits.min(16)) - 1).unwrap_or(u16::MAX),
        }
    }

    /// The current the loop is asked for by a code, with a sense resistor so many kelvin above
    /// its ambient.
    pub(crate) fn asked_a(&self, code: u16, warmer_k: f64) -> f64 {
        let nominal = (f64::from(code) * self.set_a_per_code).max(self.floor_a);
        let errors = &self.errors;
        let asked = nominal * (1.0 + errors.set_gain) + errors.set_offset_a;
        (asked / (1.0 + errors.sense_per_k * warmer_k)).max(0.0)
    }

    /// From true current to codes; a warm sense resistor reads high as it sets low.
    pub(crate) fn current_scale(&self, warmer_k: f64) -> Scale {
        let drift = 1.0 + self.errors.sense_per_k * warmer_k;
        Scale {
            per_unit: (1.0 + self.errors.current_gain) * drift * self.codes_per_a,
            at_zero: self.errors.current_offset_a * self.codes_per_a,
        }
    }

    /// From the voltage at the sense points to codes.
    pub(crate) fn voltage_scale(&self) -> Scale {
        Scale {
            per_unit: (1.0 + self.errors.voltage_gain) * self.codes_per_v,
            at_zero: self.errors.voltage_offset_v * self.codes_per_v,
        }
    }

    /// Standard deviations in codes: of the current, of the voltage.
    pub(crate) fn noise_codes(&self) -> (f64, f64) {
        (
            self.errors.current_noise_a * self.codes_per_a,
            self.errors.voltage_noise_v * self.codes_per_v,
        )
    }

    pub(crate) fn errors(&self) -> &Errors {
        &self.errors
    }

    /// The nearest code the converter has.
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a float cast saturates, and below zero the converter stands at its stop"
    )]
    #[inline]
    pub(crate) fn code(&self, codes: f64) -> u16 {
        ((codes + 0.5) as u16).min(self.last_code)
    }

    /// The temperature word for a true temperature and a normal deviate.
    pub(crate) fn temperature(&self, true_degc: f64, deviate: f64) -> TemperatureReading {
        let read = true_degc
            + self.errors.temperature_offset_k
            + self.errors.temperature_noise_k * deviate;
        // A heat sink too hot for the type has long burnt its sensor open.
        Temperature::from_degrees_celsius(read)
            .map_or(TemperatureReading::Open, TemperatureReading::Value)
    }
}
