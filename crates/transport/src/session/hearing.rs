//! What the session makes of each line from the sink.

use quantity::{HostTime, SinkTime, Span};
use wire::{Cause, Counters, Description, Order, OrderNumber, ReasonRefused, SinkLine, Token};

use super::config::{DEADMAN_UNTOLD, Mismatch};
use super::greeting::Gathered;
use super::heard::{Heard, RebootEvidence, Side};
use super::pairing::{CountersFault, Paired, lost_between};
use super::timer::Timer;
use super::window::{Answered, Gap};
use super::{Phase, REPORT_INTERVAL, Session, third};

/// Lines of different kinds may wait for each other in the sink, so a time may be behind the
/// latest heard by this much without the clock having gone back.
const TIME_BACK_TOLERANCE: Span = Span::from_secs(1);

impl Session {
    pub(super) fn hear(&mut self, line: &SinkLine, now: HostTime) {
        match *line {
            SinkLine::About { token, .. }
            | SinkLine::Front { token, .. }
            | SinkLine::Drive { token, .. }
            | SinkLine::Sense { token, .. }
            | SinkLine::Ready { token, .. } => self.hear_description(token, line, now),
            SinkLine::OffDone { token } => self.hear_off_done(token, now),
            SinkLine::Ok { .. }
            | SinkLine::No { .. }
            | SinkLine::NoGap { .. }
            | SinkLine::Clock { .. }
            | SinkLine::Counters { .. }
            | SinkLine::Readback { .. }
            | SinkLine::Edge { .. }
            | SinkLine::End { .. }
            | SinkLine::Trip { .. }
            | SinkLine::Burst { .. }
            | SinkLine::BurstDone { .. } => {
                if self.phase == Phase::Open {
                    self.hear_in_session(line, now);
                } else {
                    self.counts.stale += 1;
                }
            }
        }
    }

    fn hear_in_session(&mut self, line: &SinkLine, now: HostTime) {
        match *line {
            SinkLine::Ok { number } => self.hear_ok(number, now),
            SinkLine::No { number, reason } => self.hear_no(number, reason, now),
            SinkLine::NoGap { expected, .. } => self.hear_gap(expected, now),
            SinkLine::Clock { token, time } => self.hear_clock(token, time, now),
            SinkLine::Counters { readback, counters } => self.hear_counters(readback, counters),
            SinkLine::Readback {
                readback,
                time_low,
                values,
            } => match self.pairing.readback(readback, time_low, values, now) {
                Paired::Reading(reading) => {
                    self.counts.readings += 1;
                    self.counts.readbacks_lost += u64::from(reading.lost);
                    self.heard.push_back(Heard::Reading(reading));
                }
                Paired::Discarded => self.counts.stale += 1,
            },
            SinkLine::Edge { event, time, step } => {
                if self.hear_event(event, time) {
                    self.hear_edge(time, step);
                }
            }
            SinkLine::End { event, time } => {
                if self.hear_event(event, time) {
                    self.heard.push_back(Heard::HoldExpired { time });
                }
            }
            SinkLine::Trip {
                event,
                time,
                cause,
                value,
            } => self.hear_trip(event, time, cause, value),
            SinkLine::Burst {
                burst,
                index,
                len,
                samples,
            } => self.heard.push_back(Heard::BurstSamples {
                burst,
                index,
                len,
                samples,
            }),
            SinkLine::BurstDone { burst } => self.heard.push_back(Heard::BurstDone { burst }),
            SinkLine::OffDone { .. }
            | SinkLine::About { .. }
            | SinkLine::Front { .. }
            | SinkLine::Drive { .. }
            | SinkLine::Sense { .. }
            | SinkLine::Ready { .. } => unreachable!("heard outside a session too"),
        }
    }

    fn hear_description(&mut self, token: Token, line: &SinkLine, now: HostTime) {
        match self.phase {
            Phase::Greeting => match self.greeting.gather(token, line) {
                Gathered::Stale => self.counts.stale += 1,
                Gathered::Kept => {}
                Gathered::Holed => self.greet(now),
                Gathered::Foreign { protocol } => {
                    let mismatch = Mismatch::protocol(protocol);
                    self.refuse(vec![mismatch]);
                }
                Gathered::Whole(description, time) => self.open(description, time, now),
            },
            Phase::Open => self.hear_description_again(token, line),
            Phase::Mismatched | Phase::Lost => self.counts.stale += 1,
        }
    }

    /// A description while the session stands: the answer to a greeting that was repeated, or a
    /// sign that the sink has begun anew. Since lines keep their order, an answer to a greeting
    /// of ours comes before that to any order; with a token of ours, the last line tells.
    fn hear_description_again(&mut self, token: Token, line: &SinkLine) {
        self.counts.stale += 1;
        let ours = self.greeting.is_ours(token);
        let harmless = if let SinkLine::Ready { session, .. } = *line {
            ours && session == self.greeting.session() && !self.answered_any
        } else {
            ours
        };
        if !harmless {
            self.lose(RebootEvidence::UnaskedDescription);
        }
    }

    fn open(&mut self, description: Description, time: SinkTime, now: HostTime) {
        let mismatches = self.config.expected.mismatches(&description);
        if !mismatches.is_empty() {
            self.refuse(mismatches);
            return;
        }
        self.phase = Phase::Open;
        self.description = Some(description);
        self.time_last = time;
        self.pairing.begin(description.sense_current);
        self.heard.push_back(Heard::Connected {
            description,
            sink_time: time,
        });
        self.ask_clock(now);
    }

    /// The sink is not the one expected.
    fn refuse(&mut self, mismatches: Vec<Mismatch>) {
        self.leave();
        self.phase = Phase::Mismatched;
        self.heard
            .push_back(Heard::DescriptionRefused { mismatches });
    }

    /// The sink no longer knows the session.
    fn lose(&mut self, evidence: RebootEvidence) {
        self.leave();
        self.phase = Phase::Lost;
        self.heard.push_back(Heard::SinkRebooted { evidence });
    }

    fn hear_off_done(&mut self, token: Token, now: HostTime) {
        if self.off != Some(token) {
            self.counts.stale += 1;
            return;
        }
        self.off = None;
        self.repeat_off.stop();
        self.heard.push_back(Heard::OffAcknowledged);
        if self.phase == Phase::Open && self.window.has_unanswered() {
            // `off` threw away what was on its way: ask for the answers at once.
            self.window.forget_gap();
            self.go_back(now);
        }
    }

    fn hear_ok(&mut self, number: OrderNumber, now: HostTime) {
        match self.window.answer(number) {
            Answered::Order(id, order) => {
                if let Order::Deadman { interval } = order {
                    self.keep_alive_interval = third(interval);
                    self.line_sent(now);
                }
                self.heard.push_back(Heard::Acknowledged { order: id });
                self.progress(now);
            }
            Answered::Withdrawn => self.progress(now),
            Answered::Nothing => self.counts.stale += 1,
        }
    }

    fn hear_no(&mut self, number: OrderNumber, reason: ReasonRefused, now: HostTime) {
        if reason == ReasonRefused::Session {
            self.lose(RebootEvidence::NoSession);
            return;
        }
        match self.window.answer(number) {
            Answered::Order(id, order) => {
                if matches!(order, Order::Deadman { .. }) {
                    // What the sink holds now is what it held before, which is not kept here:
                    // the shortest that it can be is heeded until the next order.
                    self.keep_alive_interval = self.keep_alive_interval.min(third(DEADMAN_UNTOLD));
                }
                self.heard.push_back(Heard::Refused { order: id, reason });
                self.progress(now);
            }
            Answered::Withdrawn => self.progress(now),
            Answered::Nothing => self.counts.stale += 1,
        }
    }

    /// An order was answered: the next may take its time.
    fn progress(&mut self, now: HostTime) {
        self.answered_any = true;
        self.attempt = 0;
        if self.window.has_unanswered() && self.off.is_none() {
            self.retransmit.start(now, self.config.retransmit);
        } else {
            self.retransmit.stop();
        }
    }

    fn hear_gap(&mut self, expected: OrderNumber, now: HostTime) {
        match self.window.gap(expected) {
            Gap::GoBack => self.go_back(now),
            Gap::Known => self.counts.stale += 1,
            Gap::Foreign => self.lose(RebootEvidence::NumbersMoved {
                expected: expected.0,
            }),
        }
    }

    fn hear_clock(&mut self, token: Token, time: SinkTime, now: HostTime) {
        let Some(sent) = self.asks.answered(token) else {
            self.counts.stale += 1;
            return;
        };
        if !self.hear_time(time) {
            return;
        }
        if std::mem::take(&mut self.resuming) {
            self.heard.push_back(Heard::Resumed { sink_time: time });
        }
        self.counts.round_trip = now.saturating_since(sent);
        self.clock.add(sent, now, time, &mut self.heard);
    }

    fn hear_counters(&mut self, readback: u16, counters: Counters) {
        if !self.hear_time(counters.time) {
            return;
        }
        match self.pairing.counters(readback, counters) {
            Ok(damaged) => self.damaged(Side::Sink, u32::from(damaged)),
            Err(CountersFault::TimeWentBack { from }) => {
                self.lose(RebootEvidence::ClockWentBack {
                    from,
                    to: counters.time,
                });
                return;
            }
            Err(CountersFault::ChargeMoved) => {
                self.lose(RebootEvidence::CountersMoved);
                return;
            }
        }
        if let Some((order, true)) = self.steps.begun(counters.step, self.window.newest()) {
            self.heard.push_back(Heard::StepSeen {
                time: counters.time,
                order,
            });
        }
    }

    /// Takes an event's number and time. False if it has been heard before, or shows another
    /// start of the sink.
    fn hear_event(&mut self, event: u16, time: SinkTime) -> bool {
        if self.event_last == Some(event) {
            self.counts.stale += 1;
            return false;
        }
        if !self.hear_time(time) {
            return false;
        }
        let lost = self.event_last.map_or(0, |last| lost_between(last, event));
        self.event_last = Some(event);
        if lost > 0 {
            self.counts.events_lost += u64::from(lost);
            self.heard.push_back(Heard::EventsLost { count: lost });
        }
        true
    }

    fn hear_edge(&mut self, time: SinkTime, step: OrderNumber) {
        match self.steps.begun(step, self.window.newest()) {
            Some((order, _)) => self.heard.push_back(Heard::Edge { time, order }),
            None => self.counts.stale += 1,
        }
    }

    fn hear_trip(&mut self, event: u16, time: SinkTime, cause: Cause, value: i64) {
        if self.hear_event(event, time) {
            self.heard
                .push_back(Heard::SinkTripped { time, cause, value });
        }
    }

    /// Takes a sink time. False if the sink's clock has gone back: the session is lost then.
    fn hear_time(&mut self, time: SinkTime) -> bool {
        if time.saturating_add(TIME_BACK_TOLERANCE) < self.time_last {
            self.lose(RebootEvidence::ClockWentBack {
                from: self.time_last,
                to: time,
            });
            return false;
        }
        self.time_last = self.time_last.max(time);
        true
    }

    pub(super) fn damaged(&mut self, by: Side, lines: u32) {
        let [here, there] = &mut self.damaged_unreported;
        match by {
            Side::Host => {
                *here = here.saturating_add(lines);
                self.counts.damaged_here += u64::from(lines);
            }
            Side::Sink => {
                *there = there.saturating_add(lines);
                self.counts.damaged_there += u64::from(lines);
            }
        }
    }

    /// Reports damaged lines and floods: the first at once, further ones once a second.
    pub(super) fn report_troubles(&mut self, now: HostTime) {
        if self.report.expired(now) {
            self.report = Timer::IDLE;
        }
        let [here, there] = self.damaged_unreported;
        if !self.report.is_idle() || (here == 0 && there == 0 && self.flooded_unreported == 0) {
            return;
        }
        for (by, lines) in [(Side::Host, here), (Side::Sink, there)] {
            if lines > 0 {
                self.heard.push_back(Heard::Damaged { by, lines });
            }
        }
        if self.flooded_unreported > 0 {
            self.heard.push_back(Heard::Flood {
                bytes: self.flooded_unreported,
            });
        }
        self.damaged_unreported = [0; 2];
        self.flooded_unreported = 0;
        self.report.start(now, REPORT_INTERVAL);
    }
}
