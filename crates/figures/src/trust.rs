//! What stands behind a record's figures: a valid certificate, or only the bench file.
//!
//! Invariants:
//! - A certificate counts only if it can be computed again from its own points, is of the
//!   record's sink, is the one whose correction the run was driven with, and holds from the
//!   record's first entry to its last. Else the figures are nominal, and a warning says why.

use journal::{Entry, Manifest};
use quantity::Resistance;
use sink::bench::SinkEntry;
use sink::calibration::{Certificate, Validity};
use sink::leads::two_wire_uncertainty;

use crate::channel::Instrument;
use crate::figure::Standing;

/// What stands behind the figures.
pub(crate) struct Trust {
    pub(crate) standing: Standing,
    pub(crate) instrument: Instrument,
    /// Why a certificate in the record does not count.
    pub(crate) warning: Option<String>,
}

impl Trust {
    /// Of a record with this manifest; `others` are its entries other than readbacks.
    pub(crate) fn of(
        manifest: &Manifest,
        entry: &SinkEntry,
        others: &[Entry],
        hottest_degc: Option<f64>,
    ) -> Self {
        let leads_ohm = leads_ohm(manifest, entry);
        let nominal = |warning| Self {
            standing: Standing::NominalUncalibrated,
            instrument: Instrument {
                leads_ohm,
                ..Instrument::nominal(entry, hottest_degc)
            },
            warning,
        };
        let Some(value) = &manifest.certificate else {
            return nominal(None);
        };
        let certificate = match Certificate::from_json(&value.to_string()) {
            Ok(certificate) => certificate,
            Err(error) => {
                return nominal(Some(format!(
                    "the record's certificate is not used: {error}"
                )));
            }
        };
        match objection(&certificate, manifest, others) {
            Some(objection) => nominal(Some(format!(
                "certificate `{}` is not used: {objection}",
                certificate.measurements.identity
            ))),
            None => match Instrument::certified(&certificate, entry) {
                Ok(instrument) => Self {
                    standing: if certificate.voltage_read.is_some() {
                        Standing::Calibrated
                    } else {
                        Standing::CurrentCalibrated
                    },
                    instrument: Instrument {
                        leads_ohm,
                        ..instrument
                    },
                    warning: None,
                },
                Err(error) => nominal(Some(format!(
                    "the record's certificate is not used: {error}"
                ))),
            },
        }
    }
}

/// How well the leads are known that the record's two-wire voltages were corrected for.
fn leads_ohm(manifest: &Manifest, entry: &SinkEntry) -> f64 {
    if manifest.plan.correction.leads == Resistance::ZERO {
        return 0.0;
    }
    // The correction's leads came from the same entry: their tables know it.
    two_wire_uncertainty(entry).unwrap_or(0.0)
}

/// Why a sound certificate does not count for this record.
fn objection(certificate: &Certificate, manifest: &Manifest, others: &[Entry]) -> Option<String> {
    let measurements = &certificate.measurements;
    if measurements.sink != manifest.sink {
        return Some(format!(
            "it is of sink `{}`, and the record of sink `{}`",
            measurements.sink, manifest.sink
        ));
    }
    let driven_with = manifest.plan.correction;
    if certificate.correction.with_leads(driven_with.leads) != driven_with {
        return Some("the run was driven with another correction than it gives".to_owned());
    }
    let unix_s = |entry: &Entry| entry.at.micros().div_euclid(1_000_000);
    let (Some(first), Some(last)) = (others.first(), others.last()) else {
        return Some("the record does not tell when it was made".to_owned());
    };
    let at = [unix_s(first), unix_s(last)].map(|at| certificate.validity(at));
    let [Validity::Valid, Validity::Valid] = at else {
        return Some(match at {
            [Validity::NotYet, _] => format!(
                "it was issued at unix time {} s, after the run began; calibrate before a run",
                measurements.issued_unix_s
            ),
            _ => format!(
                "it ended at unix time {} s, before the run did; calibrate again",
                measurements.valid_until_unix_s
            ),
        });
    };
    None
}
