//! A report as people read it.

use std::fmt;

use crate::evidence::{Direction, Exchange};
use crate::report::{Report, Shown, Verdict};

/// Lines of evidence printed with a failure: the last ones show it.
const EVIDENCE_LINES: usize = 24;

impl fmt::Display for Exchange {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let micros = self.at.micros();
        let way = match self.direction {
            Direction::Sent => "sent    ",
            Direction::Received => "received",
        };
        write!(
            f,
            "{:>4}.{:06} s  {way}  {}",
            micros / 1_000_000,
            micros % 1_000_000,
            self.line
        )?;
        match &self.fault {
            Some(fault) => write!(f, "   ({fault})"),
            None => Ok(()),
        }
    }
}

impl fmt::Display for Shown {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let guarantee = &self.guarantee;
        let (word, text) = match &self.verdict {
            Verdict::Holds { measured } => ("holds", measured),
            Verdict::Fails { wrong } => ("FAILS", wrong),
            Verdict::NotShown { why } => ("not shown", why),
        };
        writeln!(
            f,
            "{word:<9}  {}: {} (chapter {})",
            guarantee.name, guarantee.says, guarantee.chapter
        )?;
        writeln!(f, "           {text}")?;
        if matches!(self.verdict, Verdict::Fails { .. }) {
            let skipped = self.evidence.len().saturating_sub(EVIDENCE_LINES);
            if skipped > 0 {
                writeln!(
                    f,
                    "           ... {skipped} lines before; all of them with --json"
                )?;
            }
            for exchange in self.evidence.iter().skip(skipped) {
                writeln!(f, "           {exchange}")?;
            }
        }
        Ok(())
    }
}

impl fmt::Display for Report {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for shown in &self.shown {
            write!(f, "{shown}")?;
        }
        let (holds, fails, not_shown) = self.counts();
        writeln!(
            f,
            "{holds} hold, {fails} fail, {not_shown} not shown, in {} s",
            Tenths(self.took.micros())
        )
    }
}

/// Microseconds as seconds with one decimal.
struct Tenths(u64);

impl fmt::Display for Tenths {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}.{}", self.0 / 1_000_000, self.0 % 1_000_000 / 100_000)
    }
}
