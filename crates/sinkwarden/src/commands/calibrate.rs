//! `calibrate`: a certificate from points taken at the prompt or in a table; or its verification.

mod dialogue;
mod guard;
mod table;

use std::fs;

use anyhow::Result;
use daemon::Certificates;
use daemon::view::{CalibrationOutcome, CertificateSummary, VerificationView};
use quantity::{Current, Text};
use serde::Serialize;
use sink::calibration::{Certificate, Statement};

use crate::arguments::Calibrate;
use crate::exit::{Exit, hinted};
use crate::output::{Output, give_text};
use crate::print;

/// A new certificate.
#[derive(Debug, Serialize)]
pub(crate) struct Certified {
    /// Its file.
    pub(crate) file: String,
    /// What the bench file's entry of the sink must say to use it.
    pub(crate) bench_entry: String,
    /// It in short.
    pub(crate) certificate: CertificateSummary,
    /// How uncertain its corrected values are.
    pub(crate) uncertainties: Vec<Uncertainty>,
}

/// How uncertain a corrected value is.
#[derive(Debug, Serialize)]
pub(crate) struct Uncertainty {
    /// Of which channel.
    pub(crate) channel: &'static str,
    /// Its unit.
    pub(crate) unit: &'static str,
    /// At which nominal value.
    pub(crate) nominal: f64,
    /// The true value.
    pub(crate) corrected: f64,
    /// Expanded uncertainty (95 %).
    pub(crate) expanded: f64,
    /// What contributes most.
    pub(crate) dominant: String,
}

pub(super) fn carry_out(arguments: &Calibrate, output: Output) -> Result<Exit> {
    if arguments.meters_example {
        give_text(Statement::EXAMPLE)?;
        return Ok(Exit::Done);
    }
    let (Some(sink), Some(meters)) = (&arguments.sink, &arguments.meters) else {
        return Err(hinted("no sink or no meters", "give --sink and --meters"));
    };
    let text = fs::read_to_string(meters).map_err(|error| {
        hinted(
            format!("cannot read {}: {error}", meters.display()),
            "make one to start from: sinkwarden calibrate --meters-example > meters.toml",
        )
    })?;
    let statement = Statement::from_toml(&text).map_err(|error| {
        hinted(
            format!("{} cannot be used: {error}", meters.display()),
            "`sinkwarden calibrate --meters-example` prints one that is right",
        )
    })?;
    if let Some(from) = &arguments.from {
        let certified = table::certify(arguments, sink, &statement, from)?;
        output.give(&certified, print::certified)?;
        return Ok(Exit::Done);
    }
    dialogue::hold(arguments, sink, statement, output)
}

/// What the daemon has made of a calibration or a verification.
fn give(
    outcome: CalibrationOutcome,
    certificate: Option<&Certificate>,
    output: Output,
) -> Result<Exit> {
    if let Some(verification) = outcome.verification {
        return give_verification(&verification, output);
    }
    let (Some(summary), Some(certificate)) = (outcome.certificate, certificate) else {
        return Err(hinted(
            "the daemon gives no certificate",
            "see the daemon's log",
        ));
    };
    let certified = Certified {
        file: outcome.file,
        bench_entry: outcome.bench_entry.unwrap_or_default(),
        certificate: summary,
        uncertainties: uncertainties(certificate)?,
    };
    output.give(&certified, print::certified)?;
    Ok(Exit::Done)
}

fn give_verification(verification: &VerificationView, output: Output) -> Result<Exit> {
    output.give(verification, print::verification)?;
    Ok(if verification.passed {
        Exit::Done
    } else {
        Exit::Unverified
    })
}

/// A new certificate as it was kept.
fn certified(certificate: &Certificate, file: String) -> Result<Certified> {
    let now = jiff::Timestamp::now().as_second();
    let identity = &certificate.measurements.identity;
    Ok(Certified {
        file,
        bench_entry: format!("certificate = \"{}\"", Certificates::entry(identity)),
        certificate: CertificateSummary::new(certificate, now),
        uncertainties: uncertainties(certificate)?,
    })
}

/// At both ends and in the middle of each channel.
fn uncertainties(certificate: &Certificate) -> Result<Vec<Uncertainty>> {
    let channels = certificate.channels()?;
    let mut all = Vec::new();
    for (channel, unit, of) in [
        ("current set", "A", Some(&channels.current_set)),
        ("current read", "A", Some(&channels.current_read)),
        ("voltage read", "V", channels.voltage_read.as_ref()),
    ] {
        let Some(of) = of else { continue };
        let (low, high) = of.range();
        for nominal in [low, f64::midpoint(low, high), high] {
            let budget = of.budget(nominal);
            let expanded = budget.expanded(0.95);
            all.push(Uncertainty {
                channel,
                unit,
                nominal: nominal / 1e6,
                corrected: of.predict(nominal).value / 1e6,
                expanded: expanded.map_or(f64::INFINITY, |expanded| expanded.half_width / 1e6),
                dominant: budget
                    .dominant()
                    .map_or_else(String::new, |dominant| dominant.name.clone()),
            });
        }
    }
    Ok(all)
}

/// So many setpoints from 2 % to 93 % of a current, nearer together at the bottom, where the
/// floor and the offset are.
fn spread(points: u32, most: Current) -> Vec<Text<Current>> {
    const FROM: f64 = 0.02;
    const TO: f64 = 0.93;
    let last = f64::from(points.saturating_sub(1).max(1));
    (0..points)
        .map(|point| f64::from(point) / last)
        .map(|place| FROM + (TO - FROM) * place.powf(1.5))
        .filter_map(|share| {
            Current::from_amperes((share * most.amperes() * 1e3).round() / 1e3).ok()
        })
        .map(Text)
        .collect()
}
