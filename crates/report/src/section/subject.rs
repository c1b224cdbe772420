//! What was tested, on what, with what.

use journal::Manifest;
use sequence::plan::{Dut, DutKind};
use serde::Deserialize as _;
use sink::bench::{Link, SinkEntry};
use wire::Description;

use crate::page::Report;
use crate::section::WhatIs;
use crate::wording::{count, duration, exact, rfc3339, words};
use plot::Markup;

pub(crate) fn subject(report: &Report<'_>) -> Markup {
    let manifest = report.manifest;
    let mut table = WhatIs::default();
    let dut = &manifest.plan.dut;
    table.row("device under test", device(dut));
    table.row("its limits, as stated", limits(dut));
    table.row("sink", sink(report));
    table.row("link", link(manifest));
    let described = report.evidence.described.as_ref();
    table.row(
        "firmware",
        described.map_or_else(unknown_firmware, firmware),
    );
    table.row(
        "software",
        format!(
            "{}, figures by {}",
            manifest.software, report.figures.software
        ),
    );
    table.row("host", &manifest.host);
    table.row("time", time(report));
    table.row("readbacks", readbacks(report));
    table.row("record", &manifest.record);
    table.table()
}

fn device(dut: &Dut) -> String {
    let kind = match dut.kind {
        DutKind::Cell => "a cell".to_owned(),
        DutKind::Pack => format!(
            "a pack, {} in series, {} in parallel",
            dut.series, dut.parallel
        ),
        DutKind::Supply => "a supply".to_owned(),
    };
    let rated = dut
        .rated_capacity
        .map_or_else(String::new, |rated| format!(", rated {}", exact(&rated)));
    format!("{}, {kind}{rated}", dut.label)
}

fn limits(dut: &Dut) -> String {
    format!(
        "{} to {}, at most {}",
        exact(&dut.voltage_min),
        exact(&dut.voltage_max),
        exact(&dut.current_max)
    )
}

fn sink(report: &Report<'_>) -> String {
    let manifest = report.manifest;
    let Ok(entry) = SinkEntry::deserialize(&manifest.bench) else {
        return format!(
            "{}; its bench entry is of a form not known here",
            manifest.sink
        );
    };
    let front_end = &entry.front_end;
    let serial = report
        .evidence
        .described
        .map(|described| described.serial)
        .or(entry.serial_number)
        .map_or_else(String::new, |serial| format!(", serial number {serial}"));
    format!(
        "{}{serial}: sense resistor {}, {} bits to set, {} bits to read, at most {} and {}",
        entry.name,
        exact(&front_end.sense_resistor.resistance),
        front_end.dac.bits,
        front_end.adc.bits,
        exact(&entry.limits.current),
        exact(&entry.limits.power)
    )
}

fn link(manifest: &Manifest) -> String {
    match SinkEntry::deserialize(&manifest.bench).map(|entry| entry.link) {
        Ok(Link::Serial { path, baud }) => {
            format!("serial port {}, {} baud", path.display(), baud)
        }
        Ok(Link::Tcp { address }) => format!("TCP to {address}"),
        Ok(Link::Simulated { .. }) => {
            "simulated: the firmware’s own logic in front of a simulated source".to_owned()
        }
        Err(_) => String::new(),
    }
}

fn firmware(described: &Description) -> String {
    let version = described.firmware;
    format!(
        "version {}.{}.{}, protocol {}, sampling every {}, last started by: {}",
        version / 10_000,
        version / 100 % 100,
        version % 100,
        described.protocol,
        exact(&described.tick),
        words(&described.reset)
    )
}

fn unknown_firmware() -> String {
    "not told: the record holds no description by the sink".to_owned()
}

fn time(report: &Report<'_>) -> String {
    let manifest = report.manifest;
    let mut text = format!("begun {}", rfc3339(&manifest.created));
    if let Some(ended) = &manifest.ended {
        text.push_str(", ended ");
        text.push_str(&rfc3339(&ended.at));
    }
    for resumed in &manifest.resumed {
        text.push_str(", resumed ");
        text.push_str(&rfc3339(resumed));
    }
    text
}

fn readbacks(report: &Report<'_>) -> String {
    let evidence = report.evidence;
    let length = evidence
        .length()
        .map_or_else(String::new, |length| format!(" over {}", duration(length)));
    format!(
        "{}{length}, usually every {}",
        count(evidence.readback_count),
        exact(&report.manifest.plan.readback)
    )
}
