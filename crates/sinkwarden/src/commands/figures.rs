//! `figures`: from the record alone.

use std::fs;
use std::path::Path;

use anyhow::{Result, anyhow};
use figures::InputMeter;

use crate::arguments::Figures;
use crate::exit::{Exit, hinted};
use crate::output::{Output, tell};
use crate::print;
use crate::record_folder;

pub(super) fn carry_out(arguments: &Figures, output: Output) -> Result<Exit> {
    let record = record_folder::open(&arguments.of)?;
    let input = input_meter(arguments)?;
    let worked = figures::work_out_with_input(&record, input.as_ref());
    let figures = worked.map_err(|error| {
        hinted(
            format!("no figures from {}: {error}", record.folder().display()),
            "`sinkwarden verify` says whether the record is as it was written",
        )
    })?;
    if let Some(path) = &arguments.model {
        write_model(path, &figures)?;
    }
    output.give(&figures, |out, figures| {
        print::figures(out, figures, arguments.budget)
    })?;
    Ok(Exit::Done)
}

fn input_meter(arguments: &Figures) -> Result<Option<InputMeter>> {
    let (Some(path), Some(accuracy)) = (&arguments.input_meter, arguments.input_accuracy) else {
        return Ok(None);
    };
    let text = fs::read_to_string(path).map_err(|error| {
        hinted(
            format!("cannot read {}: {error}", path.display()),
            "give --input-meter a CSV file: label,input_voltage_v,input_current_a",
        )
    })?;
    let meter = InputMeter::from_csv(&text, accuracy.fraction());
    let meter = meter.map_err(|error| anyhow!("{}: {error}", path.display()))?;
    Ok(Some(meter))
}

fn write_model(path: &Path, figures: &figures::Figures) -> Result<()> {
    let model = figures.cell_model.as_ref().ok_or_else(|| {
        hinted(
            format!("record {} tells no cell model", figures.record),
            "a model needs pulses between rests: see sequences/pulses-at-ten-states-of-charge.json",
        )
    })?;
    let text = format!("{:#}\n", model.to_file());
    fs::write(path, text).map_err(|error| {
        hinted(
            format!("cannot write {}: {error}", path.display()),
            "give --model a file in a folder that can be written to",
        )
    })?;
    tell(format_args!(
        "cell model of {} pulses in {}",
        model.points.len(),
        path.display()
    ));
    Ok(())
}
