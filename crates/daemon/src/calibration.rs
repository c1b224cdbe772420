//! The calibration of a sink, from the certificate that its bench entry names.

use std::path::Path;

use serde_json::Value;
use sink::bench::SinkEntry;
use sink::correction::Correction;

use crate::error::DaemonError;

/// The correction of a sink and its certificate for the record; without a certificate, nominal
/// is true.
pub(crate) fn load(
    entry: &SinkEntry,
    bench: &Path,
) -> Result<(Correction, Option<Value>), DaemonError> {
    let Some(certificate) = &entry.certificate else {
        return Ok((Correction::IDENTITY, None));
    };
    let path = bench.parent().unwrap_or(Path::new(".")).join(certificate);
    Err(DaemonError::Sink {
        sink: entry.name.clone(),
        reason: format!("the certificate {} cannot be used", path.display()),
    })
}
