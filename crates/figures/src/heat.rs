//! The sink's heat at a steady power: where it would settle, thermal resistance, and what is left
//! to the junction's limit.
//!
//! One exponential is fitted to the heat sink's temperature, without the first tenth of the
//! step, in which the MOSFET warms up. A heat sink in a box, a draught or a power that is not
//! steady is another curve: how far the fit of the second half leads elsewhere is in the
//! uncertainty.

use quantity::Resistance;
use sink::bench::{Sensing, SinkEntry};
use sink::leads::loop_resistance;
use sink::uncertainty::{Budget, Contribution, DegreesOfFreedom, Stated};

use crate::charge::Amount;
use crate::contribution::{bounded, observed, stated};
use crate::figure::{COMMON, Figure, Figures, Missing, Name, Rows, Unit};
use crate::least_squares::{Fitted, least_squares};
use crate::stage::Stage;
use crate::track::Track;
use crate::walk::Delivered;
use crate::work::Workbench;

/// A power that changes by more than this share of itself is not steady.
const STEADY: f64 = 0.05;

/// A soak shorter than this share of its time constant does not tell where it leads.
const LEAST: f64 = 0.7;

/// Leads are known to this share of their resistance: a table has the largest that flexible copper
/// may have, a fifth above that of solid copper of the same cross-section (common practice, no
/// source).
const LEADS_KNOWN: f64 = 0.2;

/// Noise sets two ends farther apart than so many standard deviations once in twenty times.
const BY_CHANCE: f64 = 1.96;

/// Smallest rise that is looked at, kelvins.
const LEAST_RISE_K: f64 = 1.0;

/// A rest of so many time constants has cooled down.
const COOLED: f64 = 5.0;

const SETTLED: &str = "end of one exponential fitted to the heat sink's temperature under a steady \
                       power, the first tenth of the step left out";
const RESISTANCE: &str = "rise of the settled temperature above that of the rest before, over the \
                          mean power less that of sense resistor and leads; the air is taken not \
                          to have changed";
const MARGIN: &str = "largest junction temperature of the bench file less the settled \
                      temperature and the power times the stated resistances from junction to \
                      heat sink";
const FIT_SOURCE: &str = "first-order response; Levenberg-Marquardt least squares";

/// A mean of the heat sink's temperature and of the power.
#[derive(Debug, Clone, Copy)]
struct HeatPoint {
    seconds: f64,
    degc: f64,
    /// Nominal.
    watts: f64,
}

fn heat_points(track: &Track) -> Vec<HeatPoint> {
    let points = track.points().into_iter();
    points
        .map(|point| {
            let [degc, watts] = point.values;
            HeatPoint {
                seconds: point.seconds,
                degc,
                watts,
            }
        })
        .collect()
}

/// The fitted end of a soak.
struct Soak {
    settled_degc: f64,
    time_constant_s: f64,
    budget: Budget,
    standard_k: f64,
    /// Standard deviation of one mean of the temperature about the fit.
    residual_k: f64,
    residual_freedom: DegreesOfFreedom,
    watts: f64,
    /// What the power is uncertain by, as shares of it.
    power: Vec<Contribution>,
    rows: Rows,
}

impl Soak {
    fn freedom(&self) -> DegreesOfFreedom {
        self.budget
            .combined()
            .map_or(DegreesOfFreedom::INFINITE, |combined| {
                combined.degrees_of_freedom
            })
    }

    /// The share of the power in something in proportion to it.
    fn of_power(&self, amount: f64) -> impl Iterator<Item = Contribution> {
        let lines = self.power.iter().cloned();
        lines.map(move |line| line.scaled(amount))
    }
}

impl Workbench<'_> {
    /// Heat figures of every long step at a steady power.
    pub(crate) fn heat(&self, figures: &mut Figures, entry: &SinkEntry) {
        for (index, (stage, delivered)) in self.stages.iter().zip(self.walked).enumerate() {
            let Some(track) = &delivered.looked.heat else {
                continue;
            };
            let points = heat_points(track);
            if !is_steady(&points) {
                continue;
            }
            let soak = match self.soak(&points, delivered, entry) {
                Ok(soak) => soak,
                Err(reason) => {
                    let missing = Missing::of(Name::SettledTemperature, stage.label, reason);
                    figures.missing.push(missing);
                    continue;
                }
            };
            figures.figures.push(Figure::of_stage(
                Name::SettledTemperature,
                stage,
                (soak.settled_degc, Unit::DegreeCelsius),
                soak.budget.clone(),
                (SETTLED, FIT_SOURCE),
                soak.rows,
            ));
            match self.ambient_degc(index, &soak) {
                Some(ambient) => figures.figures.push(resistance(stage, &soak, ambient)),
                None => figures.missing.push(Missing::of(
                    Name::ThermalResistance,
                    stage.label,
                    "the step before is no rest in which the heat sink had cooled down",
                )),
            }
            figures.figures.push(margin(stage, &soak, entry));
        }
    }

    fn soak(
        &self,
        points: &[HeatPoint],
        delivered: &Delivered,
        entry: &SinkEntry,
    ) -> Result<Soak, String> {
        let (first, last) = delivered.rows.ok_or("there is no readback")?;
        let end = points.last().ok_or("there is no temperature")?.seconds;
        let from = |share: f64| {
            let begin = share * end;
            let at = points.partition_point(|point| point.seconds < begin);
            points.split_at(at).1
        };
        let whole = from(0.1);
        let fitted = exponential(whole)?;
        let time_constant_s = fitted.parameter(2).exp();
        if end < LEAST * time_constant_s {
            return Err(format!(
                "the step of {end:.0} s is too short for a time constant of about \
                 {time_constant_s:.0} s; soak for longer"
            ));
        }
        let settled_degc = fitted.parameter(0);
        let mut lines = vec![observed(
            "fit of the exponential",
            fitted.standard(0),
            fitted.degrees_of_freedom(),
        )];
        // Where half the soak leads is only told by a half that still moves.
        if let Ok(later) = exponential(from(0.5)) {
            let apart = (later.parameter(0) - settled_degc).abs();
            // What both have in common does not set them apart.
            let by_noise = (later.standard(0).powi(2) - fitted.standard(0).powi(2)).max(0.0);
            if apart > BY_CHANCE * by_noise.sqrt() {
                lines.push(bounded("departure from one exponential", apart));
            }
        }
        let budget = Budget::new(lines);
        let standard_k = budget
            .combined()
            .map_or(f64::NAN, |combined| combined.standard_uncertainty);
        let (watts, power) = self
            .mean_power(delivered, entry)
            .ok_or("the record does not tell the power of the step")?;
        Ok(Soak {
            settled_degc,
            time_constant_s,
            budget,
            standard_k,
            residual_k: fitted.residual_rms(),
            residual_freedom: fitted.degrees_of_freedom(),
            watts,
            power,
            rows: Rows { first, last },
        })
    }

    /// Mean power in the MOSFET by the counters, and what it is uncertain by, as shares of it: what
    /// the sense resistor, and with four-wire sensing the leads, turn into heat does not go through
    /// the heat sink.
    fn mean_power(
        &self,
        delivered: &Delivered,
        entry: &SinkEntry,
    ) -> Option<(f64, Vec<Contribution>)> {
        let correction = &self.plan.correction;
        let amount = Amount::of(delivered, correction, self.time_base)?;
        if amount.seconds <= 0.0 || amount.charge_ah <= 0.0 {
            return None;
        }
        let amperes = amount.charge_ah * 3600.0 / amount.seconds;
        let volts = amount.energy_wh / amount.charge_ah;
        let sense = entry.front_end.sense_resistor.resistance.ohms();
        let (leads, leads_standard) = match entry.leads.sensing {
            // The voltage is the device's as far as the leads' drop was added.
            Sensing::TwoWire => (correction.leads.ohms(), self.instrument.leads_ohm),
            Sensing::FourWire => {
                let leads = loop_resistance(&entry.leads.conductor, entry.ambient)
                    .map_or(0.0, Resistance::ohms);
                let bound = LEADS_KNOWN * leads;
                (leads, Stated::Rectangular.standard_uncertainty(bound))
            }
        };
        let elsewhere = sense + leads;
        let watts = amperes * (volts - amperes * elsewhere);
        let by_ampere = (volts - 2.0 * amperes * elsewhere) / watts;
        let current = self.instrument.current.of_reading(amperes).into_iter();
        let voltage = self.instrument.voltage.of_reading(volts).into_iter();
        let lines = current
            .map(|line| line.scaled(by_ampere))
            .chain(voltage.map(|line| line.scaled(amperes / watts)))
            .chain([stated("heat of the leads", leads_standard)
                .rectangular()
                .scaled(amperes * amperes / watts)]);
        Some((watts, lines.collect()))
    }

    /// The air's temperature: that of the heat sink at the end of a rest before which nothing
    /// was drawn, or which was long enough to cool down.
    fn ambient_degc(&self, index: usize, soak: &Soak) -> Option<f64> {
        let before = index.checked_sub(1)?;
        let rest = self.stages.get(before)?;
        let drawn = self
            .stages
            .get(..=before)?
            .iter()
            .any(|stage| stage.held_current().is_none_or(|held| held > 0.0));
        let long = rest.length().seconds() > COOLED * soak.time_constant_s;
        if rest.draws() || (drawn && !long) {
            return None;
        }
        let temperature = self.walked.get(before)?.latest_temperature?;
        Some(temperature.degrees_celsius())
    }
}

fn resistance(stage: &Stage<'_>, soak: &Soak, ambient_degc: f64) -> Figure {
    let value = (soak.settled_degc - ambient_degc) / soak.watts;
    let mut lines = vec![
        observed(
            "settled temperature",
            soak.standard_k / soak.watts,
            soak.freedom(),
        ),
        observed(
            "air temperature, noise of one readback",
            soak.residual_k / soak.watts,
            soak.residual_freedom,
        ),
    ];
    lines.extend(soak.of_power(value));
    Figure::of_stage(
        Name::ThermalResistance,
        stage,
        (value, Unit::KelvinPerWatt),
        Budget::new(lines),
        (RESISTANCE, COMMON),
        soak.rows,
    )
}

fn margin(stage: &Stage<'_>, soak: &Soak, entry: &SinkEntry) -> Figure {
    let inner = entry.mosfet.junction_to_case.kelvins_per_watt()
        + entry.heat_sink.from_case.kelvins_per_watt();
    let limit = entry.mosfet.junction_max.degrees_celsius();
    let value = limit - soak.settled_degc - soak.watts * inner;
    let settled = observed("settled temperature", soak.standard_k, soak.freedom());
    let mut lines = vec![settled];
    lines.extend(soak.of_power(soak.watts * inner));
    Figure::of_stage(
        Name::JunctionMargin,
        stage,
        (value, Unit::Kelvin),
        Budget::new(lines),
        (MARGIN, COMMON),
        soak.rows,
    )
}

fn is_steady(points: &[HeatPoint]) -> bool {
    let watts = points.iter().map(|point| point.watts);
    let (least, most) = watts.fold(
        (f64::INFINITY, f64::NEG_INFINITY),
        |(least, most), watts| (least.min(watts), most.max(watts)),
    );
    let rise = points.first().zip(points.last());
    let rises = rise.is_some_and(|(first, last)| (last.degc - first.degc).abs() > LEAST_RISE_K);
    most - least <= STEADY * most && rises
}

/// `T = settled + a exp(-t / tau)`, with the logarithm of tau as the third parameter.
fn exponential(points: &[HeatPoint]) -> Result<Fitted, String> {
    let (Some(first), Some(last)) = (points.first(), points.last()) else {
        return Err("there are too few temperatures".to_owned());
    };
    let begin = first.seconds;
    let residual = |p: &[f64], index: usize, slopes: &mut [f64]| {
        let (&[settled, swing, log_tau], Some(point)) = (p, points.get(index)) else {
            return f64::NAN;
        };
        let tau = log_tau.exp();
        let since = point.seconds - begin;
        let decay = (-since / tau).exp();
        if let [by_settled, by_swing, by_log_tau] = slopes {
            *by_settled = 1.0;
            *by_swing = decay;
            *by_log_tau = swing * decay * since / tau;
        }
        settled + swing * decay - point.degc
    };
    let start = [
        last.degc,
        first.degc - last.degc,
        (0.4 * (last.seconds - begin)).max(1.0).ln(),
    ];
    least_squares(&residual, points.len(), &start).map_err(|error| error.to_string())
}
