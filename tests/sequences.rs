//! Benches and sequences of the invented scenario, short enough to run in real time.

use std::path::Path;

use simulator::bench_source::sink_parts;
use simulator::device::SinkParts;
use sink::bench::{Bench, SinkEntry};

const WEIR: &str = include_str!("../crates/sink/src/bench/weir.toml");

/// The bench file with the sink `left` on a serial port, and free space no condition.
///
/// # Panics
/// If the bench file has changed so that its link cannot be found.
pub fn bench_on(port: &Path) -> String {
    let begin = WEIR.find("[sink.link.simulated]");
    let end = WEIR.find("[sink.front_end]");
    let (Some(begin), Some(end)) = (begin, end) else {
        panic!("the bench file has no simulated link before its front end");
    };
    let link = format!(
        "[sink.link.serial]\npath = {:?}\nbaud = 115200\n\n",
        port.display().to_string()
    );
    let (before, after) = (
        WEIR.get(..begin).unwrap_or_default(),
        WEIR.get(end..).unwrap_or_default(),
    );
    // Only the first sink: the second would have to be simulated.
    let one = after
        .find("[[sink]]")
        .and_then(|next| after.get(..next))
        .unwrap_or(after);
    format!("{before}{link}{one}").replace("free_space_mb = 500", "free_space_mb = 0")
}

/// A bench of so many simulated sinks, each like `left`, called `sink-1` and on.
///
/// # Panics
/// If the bench file has changed so that its first sink cannot be found.
pub fn bench_of(sinks: usize) -> String {
    let mut parts = WEIR.split("[[sink]]");
    let (Some(head), Some(left)) = (parts.next(), parts.next()) else {
        panic!("the bench file has no sink");
    };
    let mut bench = head.to_owned();
    for number in 1..=sinks {
        bench.push_str("[[sink]]");
        let one = left
            .replace("name = \"left\"", &format!("name = \"sink-{number}\""))
            .replace("serial_number = 1", &format!("serial_number = {number}"));
        bench.push_str(&one);
    }
    bench.replace("free_space_mb = 500", "free_space_mb = 0")
}

/// The bench file with `left` described as the reference firmware's ports describe themselves, on
/// a serial port.
///
/// # Panics
/// If the bench file has changed so that its front end cannot be found.
pub fn bench_on_reference(port: &Path, serial_number: u32) -> String {
    let number = format!("serial_number = {serial_number}");
    [
        ("serial_number = 1", number.as_str()),
        ("full_scale = \"330 mV\"", "full_scale = \"409.6 mV\""),
        (
            "current_full_scale = \"3.3 A\"",
            "current_full_scale = \"4.096 A\"",
        ),
        (
            "voltage_full_scale = \"9.9 V\"",
            "voltage_full_scale = \"20.48 V\"",
        ),
    ]
    .iter()
    .fold(bench_on(port), |text, (from, to)| {
        assert!(text.contains(from), "the bench file has no {from:?}");
        text.replace(from, to)
    })
}

/// The same bench, patient with a machine that has other tests to run: silence is borne for so
/// many seconds by the host, and by the sink for as long as its protocol allows.
///
/// # Panics
/// If the bench file has changed so that its silence cannot be found.
pub fn patient(bench: &str, silence_s: u32) -> String {
    let silence = format!("silence = {{ for = \"{silence_s} s\" }}");
    let deadman = format!("deadman = \"{} s\"", silence_s.min(10));
    let usual = ["silence = { for = \"2 s\" }", "deadman = \"2 s\""];
    for text in usual {
        assert!(bench.contains(text), "the bench file has no {text}");
    }
    bench
        .replace(usual[0], &silence)
        .replace(usual[1], &deadman)
}

/// The sink `left` as the bench file has it.
///
/// # Panics
/// If the bench file is not sound.
#[expect(clippy::unwrap_used, reason = "the bench file is part of the project")]
pub fn left() -> SinkEntry {
    Bench::from_toml(WEIR)
        .unwrap()
        .sink("left")
        .unwrap()
        .clone()
}

/// What the simulated sink `left` is made of.
///
/// # Panics
/// If the bench file is not sound.
#[expect(clippy::unwrap_used, reason = "the bench file is part of the project")]
pub fn left_parts() -> SinkParts {
    sink_parts(&left()).unwrap()
}

/// A discharge of so many seconds at 500 mA, with what to do after an interruption.
pub fn discharge(seconds: u32, on_interruption: &str) -> String {
    format!(
        r#"{{ "sequence": 1, "title": "A short discharge (invented)",
             "dut": {{ "label": "K-01", "kind": "cell", "rated_capacity": "3.2 Ah",
                      "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "6.4 A" }},
             "readback": "100 ms", "on_interruption": "{on_interruption}",
             "interlocks": {{ "undervoltage": {{ "below": "2.5 V" }}, "over_voltage": {{ "above": "4.25 V" }} }},
             "steps": [ {{ "draw": "500 mA", "for": "{seconds} s", "label": "discharge" }} ] }}"#
    )
}
