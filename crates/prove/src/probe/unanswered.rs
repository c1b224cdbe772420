//! Lines whose answer has not come, and when they were said: how long a port holds lines back.
//!
//! Lines keep their order, so whatever was held back is heard, at the latest, before the answer
//! to the `off` behind a check. What is never answered is a check's own affair.

#![expect(
    clippy::wildcard_enum_match_arm,
    reason = "answers are picked out of all kinds of line"
)]

use quantity::HostTime;
use wire::SinkLine;

/// Beyond this a check says more than is ever under way at once.
const KEPT_MAX: usize = 64;

/// An ask or an order by its number.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Said {
    Ask(u16),
    Order(u16),
}

/// What was said and not answered, the latest last.
#[derive(Debug, Default)]
pub(super) struct Unanswered(Vec<(Said, HostTime)>);

impl Unanswered {
    /// A line goes out. One without a number in its place is not waited for.
    pub(super) fn said(&mut self, text: &str, at: HostTime) {
        let mut words = text.split(' ');
        let (Some(kind), Some(Ok(number))) = (words.next(), words.next().map(str::parse)) else {
            return;
        };
        let said = match kind {
            "hello" | "clock" | "off" => Said::Ask(number),
            _ => Said::Order(number),
        };
        if self.0.len() < KEPT_MAX {
            self.0.push((said, at));
        }
    }

    /// When the latest line was said that this one answers.
    pub(super) fn answered(&mut self, line: &SinkLine) -> Option<HostTime> {
        let said = match *line {
            SinkLine::Clock { token, .. }
            | SinkLine::OffDone { token }
            | SinkLine::Ready { token, .. } => Said::Ask(token),
            SinkLine::Ok { number }
            | SinkLine::No { number, .. }
            | SinkLine::NoGap { number, .. } => Said::Order(number.0),
            _ => return None,
        };
        let place = self.0.iter().rposition(|(of, _)| *of == said)?;
        Some(self.0.remove(place).1)
    }
}
