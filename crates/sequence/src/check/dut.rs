//! Rules on the device under test: its data-sheet values make sense and the sink can see them.

use quantity::{Current, Voltage};

use super::Scene;
use crate::finding::{Finding, Findings};
use crate::plan::DutKind;
use crate::rule::Rule;

pub(super) fn voltages(scene: &Scene<'_>, findings: &mut Findings) {
    let dut = &scene.draft.dut;
    if let Some(least) = dut.voltage_min.filter(|&least| least <= Voltage::ZERO) {
        findings.push(
            Finding::new(
                Rule::DutVoltages,
                "/dut/voltage_min",
                format!("the least voltage of the DUT is {least}, which is not above zero"),
                "write the end-of-discharge voltage of the maker's data sheet",
            )
            .numbers(least, Voltage::ZERO),
        );
    }
    if let (Some(least), Some(most)) = (dut.voltage_min, dut.voltage_max)
        && least >= most
    {
        findings.push(
            Finding::new(
                Rule::DutVoltages,
                "/dut/voltage_min",
                format!("the least voltage of the DUT, {least}, is not below its largest, {most}"),
                "check both against the maker's data sheet",
            )
            .numbers(least, most),
        );
    }
}

pub(super) fn current(scene: &Scene<'_>, findings: &mut Findings) {
    let most = scene.draft.dut.current_max;
    if let Some(most) = most.filter(|&most| most <= Current::ZERO) {
        findings.push(
            Finding::new(
                Rule::DutCurrent,
                "/dut/current_max",
                format!("the largest current of the DUT is {most}, which is not above zero"),
                "write the largest discharge current of the maker's data sheet",
            )
            .numbers(most, Current::ZERO),
        );
    }
}

pub(super) fn cell_count(scene: &Scene<'_>, findings: &mut Findings) {
    let dut = &scene.draft.dut;
    if dut.kind != Some(DutKind::Cell) {
        return;
    }
    for (key, count) in [("series", dut.series), ("parallel", dut.parallel)] {
        if count != 1 {
            findings.push(
                Finding::new(
                    Rule::DutCellCount,
                    format!("/dut/{key}"),
                    format!("a cell that is {count} in {key}"),
                    "write \"pack\" as the kind, or leave the count out",
                )
                .numbers(count, 1),
            );
        }
    }
}

pub(super) fn label(scene: &Scene<'_>, findings: &mut Findings) {
    if scene.draft.dut.label.is_none() && scene.options.dut_label.is_none() {
        findings.push(Finding::new(
            Rule::DutLabel,
            "/dut",
            "the DUT has no label: its record will not say which one it was",
            "give the label with the run, or add `label` to `dut`",
        ));
    }
}

pub(super) fn voltage_range(scene: &Scene<'_>, findings: &mut Findings) {
    let Some(most) = scene.draft.dut.voltage_max else {
        return;
    };
    let facts = scene.facts;
    let (limit, what) = if facts.voltage_max < facts.ranges.voltage {
        (facts.voltage_max, "may be connected to")
    } else {
        (facts.ranges.voltage, "can measure")
    };
    if most > limit {
        findings.push(
            Finding::new(
                Rule::DutVoltageRange,
                "/dut/voltage_max",
                format!(
                    "the DUT reaches {most}, the sink `{}` {what} {limit} at most",
                    facts.name
                ),
                "take a sink with a larger voltage range",
            )
            .numbers(most, limit),
        );
    }
}
