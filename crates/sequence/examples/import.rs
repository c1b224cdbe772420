//! Times the import of a recording of ten million rows (or as many as the first argument says),
//! a line of JSON each way, beside reading each field of the same text as a number: the invented
//! logger, sampled every 100 us, with noise.

use std::fmt::Write as _;
use std::time::Duration;

use quantity::{Current, Span};
use sequence::Facts;
use sequence::import::{ImportOptions, Interpolation, Limits, import};
use sink::bench::Bench;
use sink::correction::Correction;

/// Rows of one cycle: 8 s asleep, 1.5 s sampling, 120 ms transmitting.
const CYCLE_ROWS: usize = 96_200;

fn recording(rows: usize) -> String {
    let mut text = String::with_capacity(rows * 20 + 32);
    text.push_str("time_s,current_ma\n");
    let mut noise = 7_u32;
    for row in 0..rows {
        let level = match row % CYCLE_ROWS {
            0..80_000 => 4_000,
            80_000..95_000 => 35_000,
            _ => 420_000,
        };
        noise = noise.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
        let current = level - 1_000 + noise / 2_147_484;
        let (whole, part) = (current / 1_000, current % 1_000);
        let (seconds, ticks) = (row / 10_000, row % 10_000);
        // Writing to a text cannot fail.
        let _ = writeln!(text, "{seconds}.{ticks:04},{whole}.{part:03}");
    }
    text
}

#[expect(clippy::disallowed_methods, reason = "an example may read a clock")]
fn timed<T>(work: impl FnOnce() -> T) -> (T, Duration) {
    let begin = std::time::Instant::now();
    let done = work();
    (done, begin.elapsed())
}

#[expect(clippy::print_stdout, reason = "an example speaks to a person")]
fn main() -> Result<(), Box<dyn std::error::Error>> {
    let rows = match std::env::args().nth(1) {
        Some(text) => text.parse()?,
        None => 10_000_000,
    };
    let bench = Bench::from_toml(include_str!("../../sink/src/bench/weir.toml"))?;
    let sink = bench.sink("left").ok_or("the bench has no sink `left`")?;
    let limits = Limits::of(&Facts::of(sink, Correction::IDENTITY));
    let text = recording(rows);
    let (sum, by_field) = timed(|| {
        let fields = text.lines().flat_map(|line| line.split(','));
        fields
            .filter_map(|field| field.parse::<f64>().ok())
            .sum::<f64>()
    });
    if sum <= 0.0 {
        return Err("the recording holds no number".into());
    }
    for period in [None, Some(Span::from_millis(9_620))] {
        let options = ImportOptions {
            error: Current::from_milliamperes(4),
            period,
            clip_above: None,
        };
        let (imported, lasted) = timed(|| import(&text, Interpolation::Steps, &limits, &options));
        let imported = imported?;
        let report = imported.report;
        let kind = if period.is_some() {
            "cycles"
        } else {
            "one curve"
        };
        let line = serde_json::json!({
            "measured": format!(
                "import of {} rows as {kind} ({} steps, {} off by at most)",
                report.rows, report.steps, report.charge_error
            ),
            "seconds": lasted.as_secs_f64(),
            "reference": "the same text, read by field",
            "reference_seconds": by_field.as_secs_f64(),
        });
        println!("{line}");
    }
    Ok(())
}
