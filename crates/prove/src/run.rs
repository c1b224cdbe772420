//! Runs the checks one after the other and gathers what they show.

use quantity::{Current, Span};

use crate::guarantees::{CHECKS, Check, Guarantee, Needs, guarantees};
use crate::port::{Port, PortError};
use crate::probe::{Probe, Stop};
use crate::report::{Report, Shown, Verdict};

/// How often a failing check is tried where the port may be to blame: it damaged a line from the
/// sink, or held lines back. A fault of the firmware fails every time.
const TRIES: u32 = 3;

/// Lines held back for longer than this upset what a check is about: a host that keeps a deadman
/// of 500 ms quiet has 100 ms to spare. (A pseudo-terminal's bytes are carried by a worker of the
/// operating system, which waits for its turn like everybody else: half a second was measured
/// with ten programs for each processor.)
const HELD_UP: Span = Span::from_millis(80);

/// What may be done to the sink, and what is borne from it.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Options {
    /// The most that may be drawn from a source that is connected; `None`: nothing is drawn.
    pub source: Option<Current>,
    /// How long an answer may take.
    pub patience: Span,
    /// How much later than the protocol says, beyond one tick, a sink may act. A microcontroller
    /// needs none; a process on a busy machine does.
    pub late: Span,
}

impl Default for Options {
    fn default() -> Self {
        Self {
            source: None,
            patience: Span::from_secs(1),
            late: Span::from_millis(2),
        }
    }
}

/// What a run is doing.
#[derive(Debug, Clone, Copy)]
pub enum Progress<'a> {
    /// A check begins.
    Begins {
        /// Its place, from 1.
        place: usize,
        /// How many there are.
        of: usize,
        /// Which.
        guarantee: &'a Guarantee,
    },
    /// It has ended.
    Ends(&'a Shown),
}

/// The longest that all checks can take with these options: on a port that damages lines, with
/// every answer at the last moment.
pub fn time_at_most(options: &Options) -> Span {
    guarantees().fold(Span::ZERO, |sum, guarantee| {
        let one = longest(guarantee, options);
        (0..TRIES).fold(sum, |sum, _| sum.saturating_add(one))
    })
}

/// The longest that one try of a check takes: its own waiting, answers that come at the last
/// moment, and turning the sink off behind it.
fn longest(guarantee: &Guarantee, options: &Options) -> Span {
    let margin = options.patience.saturating_add(options.late);
    (0..4).fold(guarantee.longest, |sum, _| sum.saturating_add(margin))
}

/// Runs every check on what is on the port.
///
/// # Errors
/// [`PortError`] if the port goes away. What fails in the sink is in the report.
pub fn run(
    port: &mut dyn Port,
    options: &Options,
    progress: &mut dyn FnMut(Progress<'_>),
) -> Result<Report, PortError> {
    let mut probe = Probe::new(port, *options);
    let mut shown = Vec::with_capacity(CHECKS.len());
    for (index, (guarantee, check)) in CHECKS.iter().enumerate() {
        progress(Progress::Begins {
            place: index + 1,
            of: CHECKS.len(),
            guarantee,
        });
        let one = show(&mut probe, guarantee, *check, options)?;
        progress(Progress::Ends(&one));
        shown.push(one);
    }
    Ok(Report {
        description: probe.description().copied(),
        shown,
        took: probe.elapsed(),
    })
}

fn show(
    probe: &mut Probe<'_>,
    guarantee: &Guarantee,
    check: Check,
    options: &Options,
) -> Result<Shown, PortError> {
    let began = probe.elapsed();
    let mut verdict = Verdict::NotShown {
        why: "it needs a source that gives current; connect one and say with `--with-source` how \
              much may be drawn"
            .to_owned(),
    };
    if guarantee.needs == Needs::Nothing || options.source.is_some() {
        for _ in 0..TRIES {
            // The first check asks for nothing, and the second must see the sink as it was found:
            // behind it the sink is turned off, and what it was found in is gone.
            let as_found = probe.untouched();
            probe.begin(longest(guarantee, options));
            verdict = judge(check(probe))?;
            let noisy = probe.heard_damage();
            if !probe.untouched() {
                probe.leave_off()?;
            }
            let held_up = probe.held_up();
            let Verdict::Fails { wrong } = &mut verdict else {
                break;
            };
            if held_up > HELD_UP {
                *wrong = format!(
                    "{wrong}; meanwhile an answer took {held_up}: if it is the port or a busy machine \
                     that holds lines back, prove again when that is over"
                );
            } else if !noisy {
                break;
            }
            if as_found {
                break;
            }
        }
    }
    Ok(Shown {
        guarantee: *guarantee,
        verdict,
        took: probe.elapsed().saturating_sub(began),
        evidence: probe.take_evidence(),
    })
}

fn judge(outcome: Result<String, Stop>) -> Result<Verdict, PortError> {
    match outcome {
        Ok(measured) => Ok(Verdict::Holds { measured }),
        Err(Stop::Fails(wrong)) => Ok(Verdict::Fails { wrong }),
        Err(Stop::NotShown(why)) => Ok(Verdict::NotShown { why }),
        Err(Stop::OutOfTime) => Ok(Verdict::Fails {
            wrong: "the check did not end in its time: answers come too slowly".to_owned(),
        }),
        Err(Stop::Port(error)) => Err(error),
    }
}
