//! What most checks begin with and ask for: a session, limits, orders and their answers, steps,
//! readbacks.

#![expect(
    clippy::wildcard_enum_match_arm,
    reason = "a wait picks its line out of all kinds and passes the others over"
)]

use quantity::{Current, SinkTime, Span};
use wire::{Cause, Counters, Description, DescriptionBuilder, Readback, ReasonRefused, SinkLine};

use super::{Answer, Mark, Outcome, Probe, Stop, ensure};
use crate::port::PortError;

/// A step that began.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Edge {
    pub(crate) time: SinkTime,
    pub(crate) step: u16,
}

/// The sink turned itself off.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Trip {
    pub(crate) time: SinkTime,
    pub(crate) cause: Cause,
    pub(crate) value: i64,
}

/// Both lines of a readback.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Pair {
    pub(crate) count: u16,
    pub(crate) counters: Counters,
    pub(crate) time_low: u32,
    pub(crate) values: Readback,
}

/// The interval at which checks have readbacks sent, unless the sink is slower: a port of 115200
/// baud carries it and all else.
const READBACK: Span = Span::from_millis(50);

impl Probe<'_> {
    // ---- sessions ----

    /// Begins a new session.
    pub(crate) fn new_session(&mut self) -> Result<Description, Stop> {
        self.session = self.session.wrapping_add(1).max(1);
        self.number = 1;
        self.say_bytes(b"\n")?;
        self.hello().map(|(description, _)| description)
    }

    /// Greets the sink under the session's number.
    pub(crate) fn hello(&mut self) -> Result<(Description, SinkTime), Stop> {
        let (token, session, mark) = (self.next_token(), self.session, self.mark());
        self.say(&format!("hello {token} {session}"))?;
        let patience = self.options.patience;
        self.hear(mark, patience, |line| {
            matches!(line, SinkLine::Ready { token: of, .. } if *of == token).then_some(())
        })?;
        let mut builder = DescriptionBuilder::new(token, session);
        let whole = self
            .since(mark)
            .map(|line| builder.push(line))
            .find(|step| !matches!(step, Ok(None)));
        match whole {
            Some(Ok(Some(whole))) => {
                self.description = Some(whole.0);
                return Ok(whole);
            }
            Some(Err(error)) => return Err(Stop::Fails(format!("{error} (chapter 5)"))),
            Some(Ok(None)) | None => {}
        }
        Err(Stop::Fails(format!(
            "no whole description within {patience} after `hello {token} {session}` (chapter 5); \
             is a sink on this port, at this baud rate?"
        )))
    }

    /// A new session with no latch, all limits set and readbacks coming. The limits are as wide
    /// as they go; where a current may flow, they are close to what is allowed.
    pub(crate) fn ready(&mut self) -> Result<Description, Stop> {
        let description = self.new_session()?;
        let most = match self.options.source {
            None => description.sense_current,
            Some(allowed) => allowed,
        };
        let excess = description.sense_current.microamperes() / 4;
        for limit in [
            format!("current {}", most.microamperes().clamp(0, 999_999_999)),
            "power 999999999".to_owned(),
            "voltage-high 999999999".to_owned(),
            "voltage-low -99999999".to_owned(),
            "temperature 90000".to_owned(),
            format!("excess {excess}"),
        ] {
            self.must("limit", &format!("{limit} 0"))?;
        }
        let (_, answer) = self.order("reset", "")?;
        if answer != Answer::Done {
            return Err(Stop::NotShown(format!(
                "the sink is latched and `reset` is answered `{answer}`; remove the cause first"
            )));
        }
        self.start_readbacks()?;
        Ok(description)
    }

    /// Readbacks at the interval of the checks.
    pub(crate) fn start_readbacks(&mut self) -> Result<Span, Stop> {
        let fastest = self
            .description
            .map_or(READBACK, |description| description.fastest_readback);
        let interval = READBACK.max(fastest);
        self.must("readback", &interval.micros().to_string())?;
        Ok(interval)
    }

    /// Turns the sink off behind a check, and hears it out. What it answers, or that it does
    /// not, is for the checks of `off` to judge.
    pub(crate) fn leave_off(&mut self) -> Result<(), PortError> {
        self.deadline = self
            .port
            .now()
            .saturating_add(self.options.patience)
            .saturating_add(self.options.patience);
        match self.off() {
            Err(Stop::Port(error)) => Err(error),
            Ok(()) | Err(Stop::Fails(_) | Stop::NotShown(_) | Stop::OutOfTime) => Ok(()),
        }
    }

    /// `off`, and its answer.
    pub(crate) fn off(&mut self) -> Result<(), Stop> {
        let (token, mark) = (self.next_token(), self.mark());
        self.say(&format!("off {token}"))?;
        let patience = self.options.patience;
        let answer = self.hear(mark, patience, |line| {
            matches!(line, SinkLine::OffDone { token: of } if *of == token).then_some(())
        })?;
        ensure!(
            answer.is_some(),
            "no `ok {token} off` within {patience} after `off {token}` (chapter 3)"
        );
        Ok(())
    }

    // ---- orders ----

    /// The number that the next order bears.
    pub(crate) const fn next_number(&self) -> u16 {
        self.number
    }

    /// Uses up the next number, for a line that the check writes itself.
    pub(crate) const fn use_number(&mut self) -> u16 {
        let number = self.number;
        self.number = if number == u16::MAX { 1 } else { number + 1 };
        number
    }

    /// Awaits the answer to an order sent since the mark.
    pub(crate) fn answer(&mut self, from: Mark, number: u16) -> Result<Option<Answer>, Stop> {
        let patience = self.options.patience;
        self.hear(from, patience, |line| match *line {
            SinkLine::Ok { number: of } if of.0 == number => Some(Answer::Done),
            SinkLine::No { number: of, reason } if of.0 == number => Some(Answer::Refused(reason)),
            SinkLine::NoGap {
                number: of,
                expected,
            } if of.0 == number => Some(Answer::Gap(expected.0)),
            _ => None,
        })
    }

    /// Sends a line that bears an order's number and awaits its answer.
    pub(crate) fn say_order(&mut self, text: &str, number: u16) -> Result<Answer, Stop> {
        let mark = self.mark();
        self.say(text)?;
        self.answer(mark, number)?.ok_or_else(|| {
            Stop::Fails(format!(
                "no answer to `{text}` within {}: every order is answered (chapter 2)",
                self.options.patience
            ))
        })
    }

    /// Gives the next order; returns its number and the answer.
    pub(crate) fn order(&mut self, kind: &str, fields: &str) -> Result<(u16, Answer), Stop> {
        let number = self.use_number();
        let text = format!("{kind} {number} {fields}");
        let answer = self.say_order(text.trim_end(), number)?;
        Ok((number, answer))
    }

    /// Gives an order that must be executed; returns its number.
    pub(crate) fn must(&mut self, kind: &str, fields: &str) -> Result<u16, Stop> {
        let (number, answer) = self.order(kind, fields)?;
        ensure!(
            answer == Answer::Done,
            "`{kind} {number} {fields}` was answered `{answer}`, expected `ok` (chapter 3)"
        );
        Ok(number)
    }

    /// Gives an order that must be refused for this reason.
    pub(crate) fn refused(
        &mut self,
        kind: &str,
        fields: &str,
        reason: ReasonRefused,
    ) -> Result<(), Stop> {
        let (number, answer) = self.order(kind, fields)?;
        ensure!(
            answer == Answer::Refused(reason),
            "`{kind} {number} {fields}` was answered `{answer}`, expected `no {}` (chapter 3)",
            reason.word()
        );
        Ok(())
    }

    // ---- steps ----

    /// Queues a rest; returns its number. A start of zero is at once.
    pub(crate) fn rest(&mut self, start: SinkTime, hold: Span) -> Result<u16, Stop> {
        let fields = format!("current {} 0 0 {}", start.micros(), hold.micros());
        self.must("step", &fields)
    }

    /// Begins a rest at once and awaits its edge.
    pub(crate) fn rest_now(&mut self, hold: Span) -> Result<Edge, Stop> {
        let mark = self.mark();
        let step = self.rest(SinkTime::ZERO, hold)?;
        self.edge(mark, step)
    }

    /// Awaits the edge of a step that is due.
    pub(crate) fn edge(&mut self, from: Mark, step: u16) -> Result<Edge, Stop> {
        let within = self.options.patience.saturating_add(self.options.late);
        let edge = self.hear(from, within, |line| match *line {
            SinkLine::Edge { time, step: of, .. } if of.0 == step => Some(Edge { time, step }),
            _ => None,
        })?;
        edge.ok_or_else(|| {
            Stop::Fails(format!(
                "no `edge` of order {step} within {within}: a step begins at the first tick at or \
                 after its start (chapter 6.6)"
            ))
        })
    }

    /// The edges heard since a mark.
    pub(crate) fn edges(&self, from: Mark) -> Vec<Edge> {
        self.since(from)
            .filter_map(|line| match *line {
                SinkLine::Edge { time, step, .. } => Some(Edge { time, step: step.0 }),
                _ => None,
            })
            .collect()
    }

    /// Awaits the end of the last step.
    pub(crate) fn end(&mut self, from: Mark, within: Span) -> Result<Option<SinkTime>, Stop> {
        self.hear(from, within, |line| match *line {
            SinkLine::End { time, .. } => Some(time),
            _ => None,
        })
    }

    /// Awaits a trip.
    pub(crate) fn trip(&mut self, from: Mark, within: Span) -> Result<Option<Trip>, Stop> {
        self.hear(from, within, |line| match *line {
            SinkLine::Trip {
                time, cause, value, ..
            } => Some(Trip { time, cause, value }),
            _ => None,
        })
    }

    /// A sink time far enough ahead for orders to reach the sink before it.
    pub(crate) fn ahead(&mut self) -> Result<SinkTime, Stop> {
        let margin = Span::from_millis(300).saturating_add(self.options.late);
        Ok(self.fence()?.saturating_add(margin))
    }

    /// How much later than due, by its own clock, the sink may act: a tick, and what is borne.
    pub(crate) fn lateness(&self) -> Span {
        let tick = self
            .description
            .map_or(Span::ZERO, |description| description.tick);
        tick.saturating_add(self.options.late)
    }

    // ---- readbacks ----

    /// The first whole pair that was taken after all that was said so far.
    pub(crate) fn reading(&mut self) -> Result<Pair, Stop> {
        let now = self.fence()?;
        let mark = self.mark();
        self.pair(mark, now)
    }

    /// The pair that followed another. It may have been heard in one piece with that one, so it is
    /// looked for in all that was heard.
    pub(crate) fn pair_after(&mut self, last: &Counters) -> Result<Pair, Stop> {
        self.pair(Mark(0), last.time)
    }

    /// The first whole pair since a mark with a time after `after`.
    fn pair(&mut self, mark: Mark, after: SinkTime) -> Result<Pair, Stop> {
        let interval = READBACK.max(
            self.description
                .map_or(READBACK, |description| description.fastest_readback),
        );
        let within = interval
            .saturating_add(interval)
            .saturating_add(self.options.patience);
        let later = |line: &SinkLine| match *line {
            SinkLine::Counters { readback, counters } if counters.time > after => {
                Some((readback, counters))
            }
            _ => None,
        };
        let Some((count, counters)) = self.hear(mark, within, later)? else {
            return Err(Stop::Fails(format!(
                "no readback within {within} though one was ordered every {interval} (chapter 3)"
            )));
        };
        let values = self.hear(mark, within, |line| match *line {
            SinkLine::Readback {
                readback,
                time_low,
                values,
            } if readback == count => Some((time_low, values)),
            _ => None,
        })?;
        let Some((time_low, values)) = values else {
            return Err(Stop::Fails(format!(
                "line `c {count}` came without its `r {count}`: both or none (chapter 4)"
            )));
        };
        Ok(Pair {
            count,
            counters,
            time_low,
            values,
        })
    }

    // ---- a source ----

    /// The current that checks draw: what is allowed, less what a limit needs above it.
    pub(crate) fn draw(&self) -> Result<Current, Stop> {
        let allowed = self
            .options
            .source
            .ok_or_else(|| Stop::NotShown("it needs a source, and none was allowed".to_owned()))?;
        let full = self
            .description
            .map_or(Current::ZERO, |description| description.sense_current);
        let most = full.microamperes() / 2;
        let microamperes = (allowed.microamperes() / 5 * 4).min(most);
        if microamperes < full.microamperes() / 100 {
            return Err(Stop::NotShown(format!(
                "{allowed} is too little to measure on a scale of {full}; allow at least a \
                 fiftieth of it"
            )));
        }
        Ok(Current::from_microamperes(microamperes))
    }
}

/// A check that this run cannot carry out.
pub(crate) fn cannot(why: &str) -> Outcome {
    Err(Stop::NotShown(why.to_owned()))
}
