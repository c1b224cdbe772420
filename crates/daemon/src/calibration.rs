//! The calibration of a sink, from the certificate that its bench entry names.

use std::fs;
use std::path::Path;

use serde_json::Value;
use sink::bench::SinkEntry;
use sink::calibration::Certificate;
use sink::correction::Correction;

use crate::error::DaemonError;

/// The correction of a sink and its certificate for the record; without a certificate, nominal
/// is true.
///
/// A certificate that is named and cannot be used is an error: a sink that is silently driven
/// uncorrected is off by percents.
pub(crate) fn load(
    entry: &SinkEntry,
    bench: &Path,
) -> Result<(Correction, Option<Value>), DaemonError> {
    let Some(certificate) = &entry.certificate else {
        return Ok((Correction::IDENTITY, None));
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
    let value = serde_json::from_str(&text).map_err(|error| refused(error.to_string()))?;
    Ok((certificate.correction, Some(value)))
}
