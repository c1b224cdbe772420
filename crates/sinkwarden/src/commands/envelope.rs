//! `envelope`: what a sink can do at each source voltage, and which limit binds.

use anyhow::{Result, anyhow};
use quantity::{Current, Resistance, Voltage};
use serde::Serialize;
use sink::bench::SinkEntry;
use sink::envelope::{Ceiling, Duration, Envelope, Limit, usual_durations};

use crate::arguments::EnvelopeOf;
use crate::bench_file;
use crate::exit::{Exit, hinted};
use crate::output::Output;
use crate::{picture, print};

/// Most rows of a table without `--voltage`.
const ROWS_MOST: i64 = 12;

/// What a sink can do.
#[derive(Debug, Serialize)]
pub(crate) struct EnvelopeAnswer {
    /// Which sink.
    pub(crate) sink: String,
    /// The air's temperature that heat is reckoned from.
    pub(crate) ambient_degc: f64,
    /// The source's own resistance.
    pub(crate) source_resistance_ohm: f64,
    /// The least current that can be set.
    pub(crate) floor_a: f64,
    /// The smallest change of current that can be set.
    pub(crate) step_a: f64,
    /// What a user should know beside the numbers.
    pub(crate) warnings: Vec<String>,
    /// The largest currents, by rising voltage.
    pub(crate) voltages: Vec<AtVoltage>,
}

/// The largest currents at one source voltage.
#[derive(Debug, Serialize)]
pub(crate) struct AtVoltage {
    /// The source's voltage.
    pub(crate) voltage_v: f64,
    /// For ever and for a time.
    pub(crate) ceilings: Vec<CeilingAnswer>,
}

/// The largest current for a time.
#[derive(Debug, Serialize)]
pub(crate) struct CeilingAnswer {
    /// For how long, out of rest; null: for ever.
    pub(crate) for_s: Option<f64>,
    /// The largest current.
    pub(crate) current_a: f64,
    /// The limit that binds.
    pub(crate) binding: Limit,
    /// Every limit's own largest current, the least first; null where it bounds nothing.
    pub(crate) limits: Vec<LimitAnswer>,
}

/// One limit's own largest current.
#[derive(Debug, Serialize)]
pub(crate) struct LimitAnswer {
    pub(crate) limit: Limit,
    pub(crate) current_a: Option<f64>,
}

pub(super) fn carry_out(arguments: &EnvelopeOf, output: Output) -> Result<Exit> {
    let bench = bench_file::load(&arguments.bench)?;
    let entry = bench_file::sink(&bench, &arguments.bench, &arguments.sink)?;
    let envelope = Envelope::of(&entry).map_err(|error| {
        hinted(
            format!(
                "the envelope of `{}` cannot be worked out: {error}",
                entry.name
            ),
            "mend the sink's leads in the bench file",
        )
    })?;
    let output_resistance = arguments.source_resistance;
    if output_resistance < Resistance::ZERO {
        return Err(hinted(
            format!("a source resistance of {output_resistance} is below zero"),
            "give --source-resistance zero or more",
        ));
    }
    let voltages = voltages(arguments, &entry)?;
    let durations: Vec<Duration> = if arguments.spans.is_empty() {
        usual_durations().to_vec()
    } else {
        arguments
            .spans
            .iter()
            .copied()
            .map(Duration::Pulse)
            .collect()
    };
    if let Some(path) = &arguments.plot {
        let largest = entry.limits.voltage.min(entry.mosfet.voltage_max);
        let drawn = picture::envelope(
            &entry.name,
            &envelope,
            largest,
            output_resistance,
            &durations,
        );
        picture::write(path, &drawn)?;
    }
    let answer = answer(&entry, &envelope, output_resistance, &voltages, &durations);
    output.give(&answer, print::envelope)?;
    Ok(Exit::Done)
}

/// The voltages asked for, rising; else whole steps of 1, 2 or 5 up to the largest allowed.
fn voltages(arguments: &EnvelopeOf, entry: &SinkEntry) -> Result<Vec<Voltage>> {
    if let Some(below) = arguments.voltages.iter().find(|one| **one < Voltage::ZERO) {
        return Err(hinted(
            format!("a source voltage of {below} is below zero"),
            "give --voltage with the magnitude; a sink draws with its polarity right only",
        ));
    }
    if !arguments.voltages.is_empty() {
        let mut voltages = arguments.voltages.clone();
        voltages.sort_unstable();
        voltages.dedup();
        return Ok(voltages);
    }
    let largest = entry.limits.voltage.min(entry.mosfet.voltage_max);
    let steps = (0..).flat_map(|power| [1, 2, 5].map(|digit| digit * 10_i64.pow(power)));
    let step = steps
        .take_while(|step| *step <= largest.microvolts())
        .find(|step| largest.microvolts() / step <= ROWS_MOST)
        .ok_or_else(|| anyhow!("the sink `{}` may have no voltage at all", entry.name))?;
    let mut voltages: Vec<Voltage> = (1..=largest.microvolts() / step)
        .map(|times| Voltage::from_microvolts(times * step))
        .collect();
    if voltages.last() != Some(&largest) {
        voltages.push(largest);
    }
    Ok(voltages)
}

fn answer(
    entry: &SinkEntry,
    envelope: &Envelope,
    output: Resistance,
    voltages: &[Voltage],
    durations: &[Duration],
) -> EnvelopeAnswer {
    let table = envelope.table(voltages, output, durations);
    let voltages = table
        .rows
        .into_iter()
        .map(|row| AtVoltage {
            voltage_v: row.voltage.volts(),
            ceilings: durations
                .iter()
                .zip(row.ceilings)
                .map(|(duration, ceiling)| ceiling_answer(*duration, &ceiling))
                .collect(),
        })
        .collect();
    EnvelopeAnswer {
        sink: entry.name.clone(),
        ambient_degc: entry.ambient.degrees_celsius(),
        source_resistance_ohm: output.ohms(),
        floor_a: envelope.floor().amperes(),
        step_a: envelope.step().amperes(),
        warnings: envelope
            .warnings()
            .iter()
            .map(ToString::to_string)
            .collect(),
        voltages,
    }
}

fn ceiling_answer(duration: Duration, ceiling: &Ceiling) -> CeilingAnswer {
    CeilingAnswer {
        for_s: match duration {
            Duration::Continuous => None,
            Duration::Pulse(span) => Some(span.seconds()),
        },
        current_a: ceiling.current.amperes(),
        binding: ceiling.binding,
        limits: ceiling
            .limits
            .iter()
            .map(|&(limit, current)| LimitAnswer {
                limit,
                // Of a limit that bounds nothing the current is held at the end of its type.
                current_a: (current < Current::MAX).then(|| current.amperes()),
            })
            .collect(),
    }
}
