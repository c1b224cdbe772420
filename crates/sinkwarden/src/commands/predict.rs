//! `predict`: how long a load runs on a cell.

use std::fs;
use std::path::Path;

use anyhow::{Context as _, Result};
use figures::{CellModel, CellSpread, Load, LoadError, RunTime, Terms, Warmth, predict};
use quantity::Ratio;
use serde::Serialize;
use simulator::cell::{specimen, specimens};

use super::check::{problem_of, tell_refused};
use crate::arguments::{Predict, RecordOf, SequenceOn};
use crate::exit::{Exit, hinted};
use crate::output::Output;
use crate::print;
use crate::record_folder;
use crate::sequence_file::Submission;

/// A prediction, and what it was made for.
#[derive(Debug, Serialize)]
pub(crate) struct PredictionAnswer {
    /// The cell.
    pub(crate) cell: String,
    /// The sequence's title.
    pub(crate) load: String,
    /// Mean current of the load, ampere.
    pub(crate) mean_current_a: f64,
    /// Length of one cycle, second.
    pub(crate) cycle_s: f64,
    /// The cut-off, volt.
    pub(crate) cut_off_v: f64,
    /// The run-time.
    #[serde(flatten)]
    pub(crate) run_time: RunTime,
}

pub(super) fn carry_out(arguments: &Predict, output: Output) -> Result<Exit> {
    let (cell, model) = model(arguments)?;
    let on = SequenceOn {
        sequence: arguments.sequence.clone(),
        bench: arguments.bench.clone(),
        sink: arguments.sink.clone(),
        dut: None,
    };
    let compiled = match Submission::load(&on)?.compile() {
        Ok(compiled) => compiled,
        Err(refused) => {
            return tell_refused(&problem_of(refused, &on.sink), &on.sequence, output);
        }
    };
    let cut_off = arguments.cut_off.map(quantity::Voltage::volts);
    let load = Load::of_plan(&compiled.plan, cut_off).map_err(|error| {
        let hint = match error {
            LoadError::NoCutOff { .. } => "give --cut-off",
            LoadError::NoCycle | LoadError::NotACurrent { .. } | LoadError::TooLong { .. } => {
                "see sequences/logger-profile-to-cut-off.json for a load that can be predicted"
            }
        };
        hinted(error.to_string(), hint)
    })?;
    let run_time = predict(&model, &load, terms(arguments)?)?;
    let answer = PredictionAnswer {
        cell,
        load: compiled.plan.title.clone(),
        mean_current_a: load.mean_amperes(),
        cycle_s: load.cycle.iter().map(|step| step.seconds).sum(),
        cut_off_v: load.cut_off_v,
        run_time,
    };
    output.give(&answer, print::prediction)?;
    Ok(Exit::Done)
}

fn terms(arguments: &Predict) -> Result<Terms> {
    let share = |ratio: Option<Ratio>| ratio.map_or(0.0, Ratio::fraction);
    let (capacity, resistance) = (
        share(arguments.spread_capacity),
        share(arguments.spread_resistance),
    );
    if capacity < 0.0 || resistance < 0.0 || arguments.temperature_spread < 0.0 {
        return Err(hinted(
            "a spread is a standard deviation, and not below zero",
            "give --spread-capacity, --spread-resistance and --temperature-spread zero or more",
        ));
    }
    let spread = match arguments.spread_from {
        Some(cells) => CellSpread::of_cells(capacity, resistance, cells),
        None => CellSpread {
            // The cell that runs and the cell that was measured both differ from the type.
            degrees_of_freedom: None,
            ..CellSpread::of_cells(capacity, resistance, 2)
        },
    };
    Ok(Terms {
        spread,
        warmth: arguments.temperature.map(|temperature| Warmth {
            degc: temperature.degrees_celsius(),
            standard_k: arguments.temperature_spread,
        }),
        trials: usize::try_from(arguments.trials).unwrap_or(usize::MAX),
        seed: arguments.seed,
    })
}

/// The cell and its name: a file, a simulated cell, or a record.
fn model(arguments: &Predict) -> Result<(String, CellModel)> {
    let asked = &arguments.model;
    let path = Path::new(asked);
    if path.is_file() {
        let text =
            fs::read_to_string(path).with_context(|| format!("cannot read {}", path.display()))?;
        let model = CellModel::from_file(&text)
            .with_context(|| format!("{} is no cell model", path.display()))?;
        return Ok((path.display().to_string(), model));
    }
    if let Ok(found) = specimen(asked) {
        let mut model = CellModel::from_file(&found.model.to_json())?;
        model.capacity_ah *= found.spread.capacity_factor;
        for point in &mut model.points {
            point.delivered_ah *= found.spread.capacity_factor;
            point.series_resistance_ohm.value *= found.spread.resistance_factor;
            for pair in &mut point.pairs {
                pair.resistance_ohm.value *= found.spread.resistance_factor;
            }
        }
        return Ok((format!("{asked}, simulated"), model));
    }
    let record = record_folder::open(&RecordOf {
        record: asked.clone(),
        records: arguments.records.clone(),
    })
    .map_err(|error| {
        hinted(
            format!("`{asked}` is no file, no simulated cell and no record: {error}"),
            format!(
                "give --model a file that `figures --model` wrote, a record, or one of: {}",
                specimens().join(", ")
            ),
        )
    })?;
    let dut = record.manifest().plan.dut.label.clone();
    let model = figures::work_out(&record)?.cell_model.ok_or_else(|| {
        hinted(
            format!("the record of {dut} tells no cell model"),
            "a model needs pulses between rests: see sequences/pulses-at-ten-states-of-charge.json",
        )
    })?;
    Ok((format!("{dut}, fitted to its record"), model))
}
