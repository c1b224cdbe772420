//! The certificate of the sink, or that there is none.

use serde::Deserialize as _;
use sink::calibration::{Certificate, ChannelSummary, ReferenceMeter};

use crate::page::Report;
use crate::section::{WhatIs, table_head};
use crate::wording::{calendar_s, exact, significant, with_unit};
use plot::Markup;

pub(crate) fn certificate(report: &Report<'_>) -> Markup {
    let mut section = Markup::new();
    let Some(value) = &report.manifest.certificate else {
        section.raw("<p><strong>None.</strong> The sink ran on its nominal values: what its ");
        section.raw("bench entry states, and nothing that was measured.</p>\n");
        return section;
    };
    let certificate = match Certificate::deserialize(value) {
        Ok(certificate) => certificate,
        Err(error) => {
            section.raw("<p>There is one, of a form that is not known here: ");
            section.text(error.to_string()).raw(".</p>\n");
            return section;
        }
    };
    let measured = &certificate.measurements;
    let mut table = WhatIs::default();
    table.row("certificate", &measured.identity);
    table.row("sink", &measured.sink);
    if let Some(serial) = measured.serial_number {
        table.row("serial number", serial.to_string());
    }
    table.row("by", &measured.operator);
    table.row(
        "valid",
        format!(
            "{} to {}",
            calendar_s(measured.issued_unix_s),
            calendar_s(measured.valid_until_unix_s)
        ),
    );
    table.row("ambient", exact(&measured.ambient));
    table.row("current meter", meter(&measured.current_meter));
    if let Some(voltage_meter) = &measured.voltage_meter {
        table.row("voltage meter", meter(voltage_meter));
    }
    section.add(&table.table());
    section
        .raw("<div class=\"wide-table\"><table>\n")
        .add(&table_head(&[
            ("", "line"),
            ("number", "true value at nominal zero"),
            ("number", "slope"),
            ("number", "points’ range"),
            ("", "straight?"),
        ]));
    for (name, line, symbol) in [
        ("current set", Some(&certificate.current_set), "A"),
        ("current readback", Some(&certificate.current_read), "A"),
        ("voltage readback", certificate.voltage_read.as_ref(), "V"),
    ] {
        if let Some(line) = line {
            row(&mut section, name, line, symbol);
        }
    }
    section.raw("</tbody></table></div>\n");
    if certificate.voltage_read.is_none() {
        section.raw("<p>The voltage was not calibrated: its nominal values stand.</p>\n");
    }
    section
}

fn meter<T>(meter: &ReferenceMeter<T>) -> String {
    meter.identity.clone()
}

fn row(section: &mut Markup, name: &'static str, line: &ChannelSummary, symbol: &'static str) {
    let milli = |micro: f64| micro / 1e3;
    section.raw("<tr><th scope=\"row\">").raw(name);
    section.raw("</th><td class=\"number\">");
    let offset = figures::with_uncertainty(
        milli(line.offset_micro),
        Some(milli(line.offset_uncertainty_micro)),
    );
    section.text(with_unit(&offset, &format!("m{symbol}")));
    section.raw("</td><td class=\"number\">");
    section.text(figures::with_uncertainty(
        line.slope,
        Some(line.slope_uncertainty),
    ));
    section.raw("</td><td class=\"number\">");
    let [low, high] = line.range_micro;
    section.text(format!(
        "{} to {}",
        significant(low / 1e6, 3),
        with_unit(&significant(high / 1e6, 3), symbol)
    ));
    section.raw("</td><td>").raw(if line.second_order.demanded {
        "no: a second-order term is corrected, too"
    } else {
        "yes"
    });
    section.raw("</td></tr>\n");
}
