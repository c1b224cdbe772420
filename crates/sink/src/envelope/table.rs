//! The envelope as a table: source voltages down, durations across.

use std::fmt;

use quantity::{Current, Resistance, Span, Voltage};

use super::{Ceiling, Duration, Envelope};

/// The durations that a table shows: for ever, 10 ms, 1 s, 10 s, 5 min.
pub const fn usual_durations() -> [Duration; 5] {
    [
        Duration::Continuous,
        Duration::Pulse(Span::from_millis(10)),
        Duration::Pulse(Span::from_secs(1)),
        Duration::Pulse(Span::from_secs(10)),
        Duration::Pulse(Span::from_secs(300)),
    ]
}

/// One source voltage of a table.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Row {
    /// The source's voltage.
    pub voltage: Voltage,
    /// The largest current for each duration of the table.
    pub ceilings: Vec<Ceiling>,
}

/// An envelope at chosen voltages and durations.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct EnvelopeTable {
    /// The source's output resistance.
    pub output: Resistance,
    /// The durations, in the order of each row.
    pub durations: Vec<Duration>,
    /// The rows.
    pub rows: Vec<Row>,
}

impl Envelope {
    /// A table of the envelope.
    pub fn table(
        &self,
        voltages: &[Voltage],
        output: Resistance,
        durations: &[Duration],
    ) -> EnvelopeTable {
        let rows = voltages
            .iter()
            .map(|&voltage| Row {
                voltage,
                ceilings: durations
                    .iter()
                    .map(|&duration| self.ceiling(voltage, output, duration))
                    .collect(),
            })
            .collect();
        EnvelopeTable {
            output,
            durations: durations.to_vec(),
            rows,
        }
    }
}

impl fmt::Display for Duration {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Continuous => f.pad("continuous"),
            Self::Pulse(span) => f.pad(&format!("for {span}")),
        }
    }
}

/// Milliamperes, rounded down: a table is read, not computed with.
fn milliamperes(current: Current) -> String {
    if current == Current::MAX {
        return "-".to_owned();
    }
    (current.microamperes() / 1_000).to_string()
}

impl fmt::Display for EnvelopeTable {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{:>10}", "source")?;
        for duration in &self.durations {
            write!(f, "  {:<28}", format!("{duration}, mA"))?;
        }
        for row in &self.rows {
            write!(f, "\n{:>10}", row.voltage)?;
            for ceiling in &row.ceilings {
                let cell = format!("{:>6} {}", milliamperes(ceiling.current), ceiling.binding);
                write!(f, "  {cell:<28}")?;
            }
        }
        Ok(())
    }
}
