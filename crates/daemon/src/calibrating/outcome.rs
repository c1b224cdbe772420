//! What comes of a calibration: a certificate, or the verification of one.

use std::sync::Arc;

use quantity::{Quantity, Text, Textual};
use sequencer::event::Command;
use sink::accumulate::Moments;
use sink::calibration::{
    CalibrationError, Certificate, Channel, CurrentPoint, Identity, ReferenceMeter,
    VerificationPoint, calibrate, verify,
};
use tokio::sync::oneshot;
use uuid::Uuid;

use super::{Calibration, refused};
use crate::app::App;
use crate::certificates::Certificates;
use crate::http::aside;
use crate::view::{
    CalibrationOutcome, CertificateSummary, Code, Problem, VerificationView, VerifiedPoint, rfc3339,
};
use crate::worker::Ask;

/// Works out what the points give, writes it down, and ends the run.
///
/// # Errors
/// [`Code::CalibrationRefused`] with the point or figure that prevents it; the run goes on then.
pub(crate) async fn finish(app: &Arc<App>, id: Uuid) -> Result<CalibrationOutcome, Problem> {
    let calibration = app.calibrations.get(id)?;
    if calibration.finished {
        let detail = format!("calibration {id} is finished; see /v1/certificates");
        return Err(Problem::new(Code::NotRunning, detail));
    }
    let working = Arc::clone(app);
    let of = calibration.clone();
    let outcome = aside(move || work_out(&working, &of, id)).await?;
    if let Some(known) = app.calibrations.lock().get_mut(&id) {
        known.finished = true;
    }
    let sink = app.sink(&calibration.request.sink)?;
    let (answer, answered) = oneshot::channel();
    sink.give(Ask::Run {
        id,
        command: Command::Stop,
        answer,
    })?;
    // A run that is over already needs no stop.
    let _ = answered.await;
    Ok(outcome)
}

fn work_out(app: &App, calibration: &Calibration, id: Uuid) -> Result<CalibrationOutcome, Problem> {
    if calibration.request.verifies.is_some() {
        return verified(app, calibration, id);
    }
    let sink = app.sink(&calibration.request.sink)?;
    let now = app.clock.now().micros().div_euclid(1_000_000);
    let identity = Identity {
        name: calibration.certificate.clone(),
        serial_number: sink.snapshot.borrow().description.map(|own| own.serial),
        issued_unix_s: now,
        record: Some(id.to_string()),
    };
    let points = &calibration.points;
    let measurements = calibration.request.statement.measurements(
        &sink.entry,
        identity,
        points.current.clone(),
        points.voltage.clone(),
    );
    let certificate = calibrate(measurements).map_err(|error| refused(error.to_string()))?;
    let file = app
        .certificates
        .keep(&certificate)
        .map_err(|error| refused(error.to_string()))?;
    tracing::info!(sink = sink.name(), "certificate {}", file.display());
    Ok(CalibrationOutcome {
        id,
        file: file.display().to_string(),
        bench_entry: Some(format!(
            "certificate = \"{}\"",
            Certificates::entry(&calibration.certificate)
        )),
        certificate: Some(CertificateSummary::new(&certificate, now)),
        verification: None,
    })
}

fn verified(app: &App, calibration: &Calibration, id: Uuid) -> Result<CalibrationOutcome, Problem> {
    let certificate = app
        .certificates
        .load(&calibration.certificate)
        .map_err(|error| refused(error.to_string()))?;
    let points = judged(&certificate, calibration)?;
    if points.is_empty() {
        return Err(refused("no point was measured; take at least one"));
    }
    let verification = VerificationView {
        certificate: calibration.certificate.clone(),
        at: rfc3339(app.clock.now()),
        operator: calibration.request.statement.operator.clone(),
        record: Some(id.to_string()),
        passed: points.iter().all(|point| point.passed),
        points,
    };
    let file = app
        .certificates
        .keep_verification(&verification, &id.to_string())
        .map_err(|error| refused(error.to_string()))?;
    Ok(CalibrationOutcome {
        id,
        file: file.display().to_string(),
        bench_entry: None,
        certificate: None,
        verification: Some(verification),
    })
}

/// Every point of every channel against the certificate.
fn judged(
    certificate: &Certificate,
    calibration: &Calibration,
) -> Result<Vec<VerifiedPoint>, Problem> {
    let correction = &certificate.correction;
    let channels = certificate
        .channels()
        .map_err(|error| refused(error.to_string()))?;
    let statement = &calibration.request.statement;
    let points = &calibration.points;
    let mut all = Vec::new();
    let set = points.current.iter().filter_map(|point| {
        let reference = mean(&point.reference)?;
        Some(VerificationPoint {
            nominal: Text(point.setpoint),
            corrected: Text(correction.current_from_setpoint(point.setpoint)),
            reference,
        })
    });
    let set: Vec<_> = set.collect();
    let meter = &statement.current_meter;
    all.extend(channel(
        "current set",
        "A",
        &channels.current_set,
        meter,
        &set,
    )?);
    let read = points.current.iter().filter_map(|point: &CurrentPoint| {
        let nominal = mean(&point.readback)?;
        Some(VerificationPoint {
            nominal,
            corrected: Text(correction.current_from_readback(nominal.0)),
            reference: mean(&point.reference)?,
        })
    });
    let read: Vec<_> = read.collect();
    all.extend(channel(
        "current read",
        "A",
        &channels.current_read,
        meter,
        &read,
    )?);
    let voltage = points.voltage.iter().filter_map(|point| {
        let nominal = mean(&point.readback)?;
        Some(VerificationPoint {
            nominal,
            corrected: Text(correction.terminal_voltage(nominal.0)),
            reference: mean(&point.reference)?,
        })
    });
    let voltage: Vec<_> = voltage.collect();
    if voltage.is_empty() {
        return Ok(all);
    }
    let Some(of) = &channels.voltage_read else {
        return Err(refused(
            "the certificate is of the current alone; verify it without voltages",
        ));
    };
    let meter = statement.voltage_meter.as_ref();
    let meter = meter.ok_or_else(|| refused(CalibrationError::NoVoltageMeter.to_string()))?;
    all.extend(channel("voltage read", "V", of, meter, &voltage)?);
    Ok(all)
}

fn channel<T: Textual + Quantity>(
    name: &str,
    unit: &str,
    channel: &Channel,
    meter: &ReferenceMeter<T>,
    points: &[VerificationPoint<T>],
) -> Result<Vec<VerifiedPoint>, Problem> {
    let verdicts = verify(channel, meter, points).map_err(|error| refused(error.to_string()))?;
    let all = points
        .iter()
        .zip(verdicts)
        .map(|(point, verdict)| VerifiedPoint {
            channel: name.to_owned(),
            unit: unit.to_owned(),
            nominal: units(point.nominal.0),
            corrected: units(point.corrected.0),
            reference: units(point.reference.0),
            error: verdict.error_micro / 1e6,
            expanded: verdict.expanded_micro / 1e6,
            reference_expanded: verdict.reference_expanded_micro / 1e6,
            normalised_error: verdict.normalised_error,
            passed: verdict.passed,
        });
    Ok(all.collect())
}

#[expect(
    clippy::cast_precision_loss,
    reason = "readings are below 2^53 micro-units"
)]
fn units<T: Quantity>(value: T) -> f64 {
    value.base_units() as f64 / 1e6
}

/// The mean of readings, to the nearest micro-unit; `None` of none.
fn mean<T: Textual + Quantity>(readings: &[Text<T>]) -> Option<Text<T>> {
    let moments: Moments = readings.iter().map(|reading| units(reading.0)).collect();
    #[expect(
        clippy::cast_possible_truncation,
        reason = "the mean of values that fit does, too"
    )]
    let nearest = (moments.mean()? * 1e6).round() as i128;
    T::from_base_units(nearest).map(Text)
}
