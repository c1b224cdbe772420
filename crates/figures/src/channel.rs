//! What is known of the errors of a sink's readings: one channel for the current, one for the
//! voltage.
//!
//! Nearly every error of a channel is an offset and a gain, and the two may hang together: a
//! reading errs by `offset + gain * value`, so what adds up over a time errs by
//! `offset * time + gain * amount`. The same few sources of error therefore serve a reading, a
//! charge, an energy and a difference of readings, with a certificate and without. The fit of a
//! bent curve errs as it predicts at the mean.
//!
//! Without a certificate there is only what the bench file states: the sense resistor's
//! tolerance and temperature coefficient, the reading converter's own stated errors (if it states
//! any), its steps.
//! What a calibration would find beyond that is not in it, and the figures say so.

mod source;

use sink::bench::{Adc, Codes, SinkEntry};
use sink::calibration::{
    CalibrationError, Certificate, Channel as Fitted, ChannelSummary, Measurements,
};
use sink::uncertainty::{Budget, Contribution, Shape, of_resolution};

use crate::noise::Noise;
use source::{Law, MICRO, Source, fitted, of_meter};

/// The temperature at which a sense resistor has its nominal value, degrees Celsius.
const REFERENCE_DEGC: f64 = 25.0;

/// What is known of one channel's errors.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Channel {
    sources: Vec<Source>,
    /// One step of the converter that reads, ampere or volt.
    pub(crate) step: f64,
    resolution: f64,
    /// What the readbacks tell of a sample's noise.
    noise: Option<Noise>,
    /// Smallest and largest true value that is vouched for; `None`: no certificate says.
    pub(crate) range: Option<(f64, f64)>,
}

/// What is known of a sink's readings.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Instrument {
    pub(crate) current: Channel,
    pub(crate) voltage: Channel,
    /// Standard uncertainty of the resistance that two-wire voltages were corrected by, ohm.
    pub(crate) leads_ohm: f64,
}

impl Instrument {
    /// Of a sink without a valid certificate; `hottest_degc` is its hottest heat sink.
    pub(crate) fn nominal(entry: &SinkEntry, hottest_degc: Option<f64>) -> Self {
        let front_end = &entry.front_end;
        let adc = front_end.adc;
        let resistor = front_end.sense_resistor;
        let warming = hottest_degc.map_or(0.0, |hottest| (hottest - REFERENCE_DEGC).abs());
        let drift = resistor.temperature_coefficient.fraction_per_kelvin() * warming;
        let mut current = vec![
            Source::stated_gain("sense resistor, tolerance", resistor.tolerance.fraction()),
            Source::stated_gain("sense resistor, temperature", drift),
        ];
        current.extend(
            adc.current_error
                .map(|error| Source::stated_error("reading converter, current", &error)),
        );
        let current_step = adc.current_full_scale.amperes() / steps_of(&adc);
        current.push(Source::step(
            "converter step and noise, current",
            current_step,
        ));
        Self {
            current: Channel::new(current, current_step),
            voltage: Channel::nominal_voltage(entry),
            leads_ohm: 0.0,
        }
    }

    /// Of a sink with a valid certificate; what that says nothing of is nominal.
    ///
    /// # Errors
    /// Those of its fits; none for a certificate that was computed again from its points.
    pub(crate) fn certified(
        certificate: &Certificate,
        entry: &SinkEntry,
    ) -> Result<Self, CalibrationError> {
        let channels = certificate.channels()?;
        let measurements = &certificate.measurements;
        let mut current = vec![
            fitted(
                [
                    "certificate, current: offset and slope",
                    "certificate, current: curve",
                ],
                &certificate.current_read,
                channels.current_read,
            ),
            of_meter("reference meter, current", &measurements.current_meter),
        ];
        let drift = measurements
            .temperature_coefficient
            .fraction_per_kelvin()
            .abs()
            * measurements.temperature_spread_k;
        current.push(Source::stated_gain("sense resistor, temperature", drift));
        let current_step = measurements.current_step.amperes();
        current.push(Source::step(
            "converter step and noise, current",
            current_step,
        ));
        Ok(Self {
            current: Channel {
                range: Some(true_range(&certificate.current_read)),
                ..Channel::new(current, current_step)
            },
            voltage: match (&certificate.voltage_read, channels.voltage_read) {
                (Some(summary), Some(fit)) => {
                    Channel::certified_voltage(measurements, summary, fit)
                }
                _ => Channel::nominal_voltage(entry),
            },
            leads_ohm: 0.0,
        })
    }
}

impl Instrument {
    /// The same, the converters' steps as far as the noise of the readbacks leaves them.
    pub(crate) fn with_noise(self, (current, voltage): (Noise, Noise)) -> Self {
        Self {
            current: self.current.with_noise(current),
            voltage: self.voltage.with_noise(voltage),
            ..self
        }
    }
}

impl Channel {
    fn new(sources: Vec<Source>, step: f64) -> Self {
        Self {
            sources,
            step,
            resolution: of_resolution(step),
            noise: None,
            range: None,
        }
    }

    /// Of a voltage readback that nobody calibrated.
    fn nominal_voltage(entry: &SinkEntry) -> Self {
        let adc = entry.front_end.adc;
        let step = adc.voltage_full_scale.volts() / steps_of(&adc);
        let stated = adc
            .voltage_error
            .map(|error| Source::stated_error("reading converter, voltage", &error));
        let step_alone = Source::step("converter step and noise, voltage", step);
        Self::new(stated.into_iter().chain([step_alone]).collect(), step)
    }

    fn certified_voltage(
        measurements: &Measurements,
        summary: &ChannelSummary,
        fit: Fitted,
    ) -> Self {
        let mut sources = vec![fitted(
            [
                "certificate, voltage: offset and slope",
                "certificate, voltage: curve",
            ],
            summary,
            fit,
        )];
        let meter = measurements.voltage_meter.as_ref();
        sources.extend(meter.map(|meter| of_meter("reference meter, voltage", meter)));
        let step = measurements.voltage_step.volts();
        sources.push(Source::step("converter step and noise, voltage", step));
        Self {
            range: Some(true_range(summary)),
            ..Self::new(sources, step)
        }
    }

    /// The contributions to what adds up over a time: `time` is what a steady error of one
    /// ampere (or volt) would have added to the figure, `amount` the figure itself.
    pub(crate) fn over(&self, time: f64, amount: f64) -> Vec<Contribution> {
        self.contributions(|source| source.share(time, amount))
    }

    /// The contributions to one reading of a value.
    pub(crate) fn of_reading(&self, value: f64) -> Vec<Contribution> {
        self.over(1.0, value)
    }

    /// The contributions to a mean of so many readings of a value, in which noise that averages out
    /// counts the less.
    pub(crate) fn of_mean(&self, value: f64, readings: f64) -> Vec<Contribution> {
        let averages_out = self.noise.is_some_and(|noise| noise.dithers(self.step));
        let weight = if averages_out {
            1.0 / readings.sqrt()
        } else {
            1.0
        };
        self.contributions(|source| {
            let offset = if source.fresh { weight } else { 1.0 };
            source.share(offset, value)
        })
    }

    /// The contributions to a difference of readings, each times `sensitivity`. An offset that
    /// is common to all cancels; one that differs from reading to reading counts `weight` times,
    /// the root of the sum of the squares of the weights that the readings have.
    pub(crate) fn of_difference(
        &self,
        difference: f64,
        weight: f64,
        sensitivity: f64,
    ) -> Vec<Contribution> {
        self.contributions(|source| {
            let offset = if source.fresh { weight } else { 0.0 };
            source.share(offset, difference) * sensitivity.abs()
        })
    }

    /// The contributions to something in proportion to the channel's gain alone.
    pub(crate) fn of_gain(&self, amount: f64) -> Vec<Contribution> {
        self.of_difference(amount, 0.0, 1.0)
    }

    /// Standard uncertainty of one reading of a value.
    pub(crate) fn standard(&self, value: f64) -> f64 {
        Budget::new(self.of_reading(value))
            .combined()
            .map_or(0.0, |combined| combined.standard_uncertainty)
    }

    /// Standard uncertainty of what differs from reading to reading.
    pub(crate) const fn resolution(&self) -> f64 {
        self.resolution
    }

    /// Standard uncertainty of what differs from one mean of so many captured samples to the next.
    pub(crate) fn resolution_of(&self, samples: f64) -> f64 {
        self.noise.map_or(self.resolution, |noise| {
            noise.of_samples(samples).of_mean(self.step)
        })
    }

    /// How much of the variance of a readback's own errors its neighbours may share, 0 to 1: what
    /// a step leaves that no number of readbacks averages out.
    pub(crate) fn shared(&self) -> f64 {
        let left = self
            .noise
            .map_or(self.resolution, |noise| noise.left_of(self.step));
        (left / self.resolution).powi(2).min(1.0)
    }

    /// Samples in the shortest readbacks; one where nothing tells.
    pub(crate) fn samples(&self) -> f64 {
        self.noise.map_or(1.0, |noise| noise.samples())
    }

    /// The same channel, its steps as far as the noise of the readbacks leaves them.
    fn with_noise(mut self, noise: Noise) -> Self {
        self.noise = Some(noise);
        self.resolution = noise.of_mean(self.step);
        for source in self.sources.iter_mut().filter(|source| source.fresh) {
            source.law = Law::Straight {
                offset: self.resolution,
                gain: 0.0,
                correlation: 0.0,
            };
            if noise.dithers(self.step) {
                source.shape = Shape::Normal;
            }
        }
        self
    }

    fn contributions(&self, share: impl Fn(&Source) -> f64) -> Vec<Contribution> {
        self.sources
            .iter()
            .map(|source| {
                let share = share(source);
                let line = Contribution::new(source.name, source.evaluation, share, source.freedom);
                match source.shape {
                    Shape::Normal => line,
                    Shape::Rectangular => line.rectangular(),
                }
            })
            .filter(|line| line.standard_uncertainty > 0.0)
            .collect()
    }
}

/// How many steps a converter's full scale has.
fn steps_of(adc: &Adc) -> f64 {
    let codes = f64::from(1_u32 << adc.bits.min(31));
    match adc.codes {
        Codes::PowerOfTwo => codes,
        Codes::PowerOfTwoLessOne => codes - 1.0,
    }
}

/// The true values of the least and the largest nominal value of the points.
fn true_range(summary: &ChannelSummary) -> (f64, f64) {
    let curvature = summary
        .curvature
        .map_or(0.0, |curvature| curvature.per_unit / MICRO);
    let [low, high] = summary.range_micro.map(|nominal| {
        let bent = curvature * nominal * nominal;
        (summary.offset_micro + summary.slope * nominal + bent) / MICRO
    });
    (low, high)
}
