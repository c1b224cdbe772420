//! What the session heard and the sequencer does not see, as notes for the record.

use journal::{ClockAlignment, Note};
use transport::clock::{ClockEstimate, ClockFault};
use transport::session::{Heard, Mismatch, RebootEvidence, Side};

/// The note that keeps what was heard; `None` for what the sequencer is told instead.
pub(crate) fn note_of(heard: &Heard) -> Option<Note> {
    let note = match heard {
        Heard::Resumed { sink_time } => Note::Text(format!(
            "the session has outlived the loss; sink time {}",
            sink_time.micros()
        )),
        Heard::StepSeen { time, order } => Note::Text(format!(
            "the edge of order {} was lost; its step was seen running at sink time {}",
            order.0,
            time.micros()
        )),
        Heard::EventsLost { count } => Note::Text(format!("{count} event lines were lost")),
        Heard::Withdrawn { order } => {
            Note::Text(format!("off overtook order {}: it will not begin", order.0))
        }
        Heard::Abandoned { order } => {
            Note::Text(format!("order {} was left without an answer", order.0))
        }
        Heard::ClockEstimate(estimate) => Note::ClockAligned(alignment(estimate)),
        Heard::Retransmitted { orders, attempt } => Note::Retransmitted {
            orders: *orders,
            attempt: *attempt,
        },
        Heard::Damaged { by, lines } => Note::DamagedLines {
            seen_by: match by {
                Side::Host => journal::Side::Host,
                Side::Sink => journal::Side::Sink,
            },
            lines: *lines,
        },
        Heard::Flood { bytes } => Note::Text(format!(
            "{bytes} bytes came faster than the link can carry and were ignored"
        )),
        Heard::BurstSamples {
            burst,
            index,
            len,
            samples,
        } => Note::Burst {
            capture: *burst,
            index: *index,
            samples: samples.iter().take(usize::from(*len)).copied().collect(),
        },
        Heard::BurstDone { burst } => Note::BurstDone { capture: *burst },
        Heard::Connected { .. }
        | Heard::DescriptionRefused { .. }
        | Heard::Reading(_)
        | Heard::Edge { .. }
        | Heard::HoldExpired { .. }
        | Heard::SinkTripped { .. }
        | Heard::Acknowledged { .. }
        | Heard::Refused { .. }
        | Heard::OffAcknowledged
        | Heard::SinkRebooted { .. }
        | Heard::ClockOff { .. } => return None,
    };
    Some(note)
}

/// The sink on the link is not the one described, and how it differs.
pub(crate) fn another_sink(mismatches: &[Mismatch]) -> Note {
    let differences: Vec<String> = mismatches.iter().map(ToString::to_string).collect();
    Note::Text(format!(
        "the sink on the link is not the one described: {}",
        differences.join("; ")
    ))
}

/// The sink no longer knows the session, and what shows it.
pub(crate) fn started_anew(evidence: &RebootEvidence) -> Note {
    let shown = match evidence {
        RebootEvidence::NoSession => "it answered an order with `session`".to_owned(),
        RebootEvidence::UnaskedDescription => "it described itself unasked".to_owned(),
        RebootEvidence::ClockWentBack { from, to } => format!(
            "its clock went back from {} us to {} us",
            from.micros(),
            to.micros()
        ),
        RebootEvidence::NumbersMoved { expected } => {
            format!("it expects order number {expected}, which is not of this session")
        }
        RebootEvidence::CountersMoved => {
            "its charge counter moved by more than its full scale allows".to_owned()
        }
    };
    Note::Text(format!("the sink no longer knows the session: {shown}"))
}

/// The sink's clock is out of bounds, and how.
pub(crate) fn clock_fault(fault: &ClockFault) -> Note {
    Note::Text(match fault {
        ClockFault::Jumped { by, back } => {
            let direction = if *back { "back" } else { "ahead" };
            format!("the sink's clock jumped {direction} by {by}")
        }
        ClockFault::Rate { ppb, by } => format!(
            "the sink's clock runs {} by {} parts in 10^9, which made {by}",
            if *ppb < 0 { "slow" } else { "fast" },
            ppb.unsigned_abs()
        ),
    })
}

fn alignment(estimate: &ClockEstimate) -> ClockAlignment {
    ClockAlignment {
        sink: estimate.sink,
        host: estimate.host,
        rate_ppb: estimate.rate_ppb,
        uncertainty: estimate.uncertainty,
        rate_uncertainty_ppb: estimate.rate_uncertainty_ppb,
    }
}
