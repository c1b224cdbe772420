//! A certificate from a table of points: no daemon, nothing flows.

use std::fs;
use std::path::Path;

use anyhow::Result;
use daemon::Certificates;
use sink::calibration::{Identity, Statement, Table, calibrate};

use super::{Certified, certified};
use crate::arguments::Calibrate;
use crate::bench_file;
use crate::exit::hinted;

/// Makes and keeps the certificate.
pub(super) fn certify(
    arguments: &Calibrate,
    sink: &str,
    statement: &Statement,
    from: &Path,
) -> Result<Certified> {
    let bench = bench_file::load(&arguments.bench)?;
    let entry = bench_file::sink(&bench, &arguments.bench, sink)?;
    let text = fs::read_to_string(from).map_err(|error| {
        hinted(
            format!("cannot read {}: {error}", from.display()),
            "give --from a CSV file of setpoints, meter readings and readbacks",
        )
    })?;
    let table = Table::from_csv(&text).map_err(|error| {
        hinted(
            format!("{}: {error}", from.display()),
            "a row is, for example, 0.5,0.4986,0.4951,3.702,3.713",
        )
    })?;
    let now = jiff::Timestamp::now();
    let name = arguments.identity.clone().unwrap_or_else(|| {
        let date = now.to_string();
        let date = date.get(..10).unwrap_or(&date);
        format!("{}-{sink}-{date}", bench.name)
    });
    let certificates = Certificates::beside(&arguments.bench);
    certificates.is_free(&name)?;
    let identity = Identity {
        name,
        serial_number: None,
        issued_unix_s: now.as_second(),
        record: None,
    };
    let measurements =
        statement.measurements(&entry, identity, table.current_points, table.voltage_points);
    let certificate = calibrate(measurements).map_err(|error| {
        hinted(
            format!("{} gives no certificate: {error}", from.display()),
            "see docs/calibration.md for what a table must hold",
        )
    })?;
    let file = certificates.keep(&certificate)?;
    certified(&certificate, file.display().to_string())
}
