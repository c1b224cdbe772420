//! Certificates, verifications and drift for people.

use std::io::{self, Write};

use daemon::view::{CertificateList, CertificateSummary, LineView, VerificationView};
use figures::with_uncertainty;
use sink::calibration::Drift;

use super::table::{list, table, write};
use super::unit::{quantity, words};
use crate::commands::Certified;

/// A new certificate: its lines, its uncertainties, and what is to be done to use it.
pub(crate) fn certified(out: &mut dyn Write, certified: &Certified) -> io::Result<()> {
    let certificate = &certified.certificate;
    writeln!(
        out,
        "certificate {} of sink {}",
        certificate.identity, certificate.sink
    )?;
    facts(out, certificate)?;
    writeln!(out)?;
    lines(out, &certificate.lines)?;
    writeln!(out, "\nuncertainty of a corrected value (95 %):\n")?;
    let mut rows = table(&["channel", "at", "true value", "most of it"]);
    for one in &certified.uncertainties {
        rows.add_row([
            one.channel.to_owned(),
            quantity(one.nominal, one.unit),
            format!(
                "{} +- {}",
                quantity(one.corrected, one.unit),
                quantity(one.expanded, one.unit)
            ),
            one.dominant.clone(),
        ]);
    }
    write(out, &rows)?;
    writeln!(
        out,
        "\nwritten to {}\nto use it, write this into the sink's entry of the bench file, and start the daemon again:\n\n  {}",
        certified.file, certified.bench_entry
    )
}

fn facts(out: &mut dyn Write, certificate: &CertificateSummary) -> io::Result<()> {
    let mut rows = vec![
        (
            "issued",
            format!("{} by {}", certificate.issued, certificate.operator),
        ),
        (
            "valid until",
            format!(
                "{} ({})",
                certificate.valid_until,
                words(&certificate.validity)
            ),
        ),
        ("meters", certificate.meters.join("; ")),
    ];
    if let Some(record) = &certificate.record {
        rows.push(("record", record.clone()));
    }
    list(out, &rows)
}

fn lines(out: &mut dyn Write, lines: &[LineView]) -> io::Result<()> {
    let mut rows = table(&[
        "channel",
        "points",
        "offset",
        "slope",
        "largest residual",
        "remarks",
    ]);
    for line in lines {
        let mut remarks = Vec::new();
        if line.bent {
            remarks.push("a bend is corrected".to_owned());
        }
        if !line.outliers.is_empty() {
            let points: Vec<String> = line.outliers.iter().map(ToString::to_string).collect();
            remarks.push(format!("point {} lies far off", points.join(", ")));
        }
        if line.points < 3 {
            remarks.push("straightness is taken on trust".to_owned());
        }
        rows.add_row([
            line.channel.clone(),
            line.points.to_string(),
            format!(
                "{} m{}",
                with_uncertainty(line.offset * 1e3, Some(line.offset_uncertainty * 1e3)),
                line.unit
            ),
            with_uncertainty(line.slope, Some(line.slope_uncertainty)),
            quantity(line.largest_residual, &line.unit),
            remarks.join("; "),
        ]);
    }
    write(out, &rows)
}

/// The certificates of a bench, with what has changed and what was verified.
pub(crate) fn certificates(out: &mut dyn Write, all: &CertificateList) -> io::Result<()> {
    if all.certificates.is_empty() {
        writeln!(out, "no certificate; make one with `sinkwarden calibrate`")?;
    }
    for (place, certificate) in all.certificates.iter().enumerate() {
        if place > 0 {
            writeln!(out)?;
        }
        writeln!(out, "{} of sink {}", certificate.identity, certificate.sink)?;
        facts(out, certificate)?;
        lines(out, &certificate.lines)?;
        if !certificate.drift.is_empty() {
            writeln!(out, "  since the one before:")?;
            for drift in &certificate.drift {
                writeln!(out, "    {}", drift_text(drift))?;
            }
        }
        for verification in &certificate.verifications {
            writeln!(out, "  {}", verdict(verification))?;
        }
    }
    for trouble in &all.troubles {
        writeln!(out, "cannot be used: {trouble}")?;
    }
    Ok(())
}

fn drift_text(drift: &Drift) -> String {
    let unit = if drift.channel.starts_with("voltage") {
        "V"
    } else {
        "A"
    };
    let verdict = if drift.significant {
        "more than the uncertainties explain"
    } else {
        "within the uncertainties"
    };
    format!(
        "{} at {}: changed by {} +- {}, E_n {:+.2}, {verdict}",
        drift.channel,
        quantity(drift.at_micro / 1e6, unit),
        quantity(drift.change_micro / 1e6, unit),
        quantity(drift.expanded_micro / 1e6, unit),
        drift.normalised_change
    )
}

fn verdict(verification: &VerificationView) -> String {
    let passed = verification
        .points
        .iter()
        .filter(|point| point.passed)
        .count();
    format!(
        "verified {} by {}: {passed} of {} passed",
        verification.at,
        verification.operator,
        verification.points.len()
    )
}

/// A verification, point by point.
pub(crate) fn verification(out: &mut dyn Write, of: &VerificationView) -> io::Result<()> {
    writeln!(out, "verification of certificate {}\n", of.certificate)?;
    let mut rows = table(&[
        "channel",
        "at",
        "corrected",
        "meter",
        "error",
        "E_n",
        "verdict",
    ]);
    for point in &of.points {
        rows.add_row([
            point.channel.clone(),
            quantity(point.nominal, &point.unit),
            format!(
                "{} +- {}",
                quantity(point.corrected, &point.unit),
                quantity(point.expanded, &point.unit)
            ),
            format!(
                "{} +- {}",
                quantity(point.reference, &point.unit),
                quantity(point.reference_expanded, &point.unit)
            ),
            quantity(point.error, &point.unit),
            format!("{:+.2}", point.normalised_error),
            if point.passed { "passed" } else { "FAILED" }.to_owned(),
        ]);
    }
    write(out, &rows)?;
    writeln!(out, "\n{}", verdict(of))?;
    if !of.passed {
        writeln!(
            out,
            "where |E_n| is above 1 the certificate does not hold: look at leads and meters, then calibrate again"
        )?;
    }
    Ok(())
}
