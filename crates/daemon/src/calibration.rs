//! The calibration of a sink, from the certificate that its bench entry names.

use std::fs;
use std::path::Path;
use std::sync::Arc;

use serde_json::Value;
use sink::bench::SinkEntry;
use sink::calibration::Certificate;
use sink::correction::Correction;

use crate::error::DaemonError;

/// What is known of a sink's calibration.
#[derive(Debug, Clone, Default)]
pub(crate) struct Calibration {
    /// What it corrects; without a certificate, nominal is true.
    pub(crate) correction: Correction,
    /// The certificate, for the record.
    pub(crate) value: Option<Value>,
    /// The certificate.
    pub(crate) certificate: Option<Arc<Certificate>>,
}

/// The calibration of a sink.
///
/// A certificate that is named and cannot be used is an error: a sink that is silently driven
/// uncorrected is off by percents.
pub(crate) fn load(entry: &SinkEntry, bench: &Path) -> Result<Calibration, DaemonError> {
    let Some(certificate) = &entry.certificate else {
        return Ok(Calibration::default());
    };
    let path = bench.parent().unwrap_or(Path::new(".")).join(certificate);
    let refused = |reason: String| DaemonError::Sink {
        sink: entry.name.clone(),
        reason: format!(
            "its certificate {} cannot be used: {reason}; calibrate it, or take `certificate` out of the bench file",
            path.display()
        ),
    };
    let text = fs::read_to_string(&path).map_err(|error| refused(error.to_string()))?;
    let certificate = Certificate::from_json(&text).map_err(|error| refused(error.to_string()))?;
    let of = &certificate.measurements.sink;
    if *of != entry.name {
        return Err(refused(format!("it is of sink `{of}`")));
    }
    let value = serde_json::from_str(&text).map_err(|error| refused(error.to_string()))?;
    Ok(Calibration {
        correction: certificate.correction,
        value: Some(value),
        certificate: Some(Arc::new(certificate)),
    })
}
