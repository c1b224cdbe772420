//! A record beside a rehearsal of its sequence.

use std::io::{self, Write};

use figures::LabelDifference;

use super::table::{table, write};
use super::unit::{duration, percent, quantity, words};
use crate::commands::{AgainstAnswer, Side};

/// Writes both endings, the labels and the margins.
pub(crate) fn against(out: &mut dyn Write, answer: &AgainstAnswer) -> io::Result<()> {
    writeln!(
        out,
        "record {} beside a rehearsal on {}",
        answer.record, answer.source
    )?;
    writeln!(out)?;
    writeln!(out, "  recorded   {}", ended(&answer.recorded))?;
    writeln!(out, "  simulated  {}", ended(&answer.simulated))?;
    writeln!(
        out,
        "  {}",
        if answer.same_ending {
            "the ending would have been the same, and so would every trip"
        } else {
            "THE ENDING WOULD HAVE BEEN ANOTHER"
        }
    )?;
    writeln!(out)?;
    let mut rows = table(&[
        "label",
        "steps",
        "time",
        "simulated",
        "charge",
        "simulated",
        "energy",
        "simulated",
        "voltage apart, rms",
        "largest",
    ]);
    for label in &answer.labels {
        rows.add_row(row(label));
    }
    write(out, &rows)?;
    writeln!(out)?;
    let mut rows = table(&["interlock", "recorded", "simulated"]);
    for margin in &answer.recorded.margins {
        let mut others = answer.simulated.margins.iter();
        let other = others.find(|other| other.interlock == margin.interlock);
        rows.add_row([
            words(&margin.interlock),
            percent(margin.worst_nearness),
            other.map_or_else(|| "-".to_owned(), |other| percent(other.worst_nearness)),
        ]);
    }
    write(out, &rows)
}

fn ended(side: &Side) -> String {
    let Some(ending) = &side.ending else {
        return "not ended when the record was read".to_owned();
    };
    let by = ending.interlock.map_or_else(String::new, |interlock| {
        format!(" by {}", words(&interlock))
    });
    let crossed: Vec<String> = side
        .crossings
        .iter()
        .map(|crossing| {
            format!(
                "{} {}, limit {}",
                words(&crossing.interlock),
                quantity(crossing.value, &crossing.unit),
                quantity(crossing.threshold, &crossing.unit)
            )
        })
        .collect();
    let crossed = if crossed.is_empty() {
        String::new()
    } else {
        format!(" ({})", crossed.join("; "))
    };
    format!("{}{by}{crossed}", ending.how.text())
}

fn row(label: &LabelDifference) -> Vec<String> {
    let [steps, simulated] = label.steps;
    let steps = if steps == simulated {
        steps.to_string()
    } else {
        format!("{steps} / {simulated}")
    };
    let volts = |value: Option<f64>| value.map_or_else(|| "-".to_owned(), |v| quantity(v, "V"));
    let pair = |values: [f64; 2], unit: &str| values.map(|value| quantity(value, unit));
    let [time, simulated_time] = label.duration_s.map(duration);
    let [charge, simulated_charge] = pair(label.charge_ah, "Ah");
    let [energy, simulated_energy] = pair(label.energy_wh, "Wh");
    vec![
        label.label.clone().unwrap_or_else(|| "-".to_owned()),
        steps,
        time,
        simulated_time,
        charge,
        simulated_charge,
        energy,
        simulated_energy,
        volts(label.voltage_rms_v),
        volts(label.voltage_largest_v),
    ]
}
