//! Lines that are damaged, faulty, or oddly ended (chapters 1, 2 and 8).

use wire::{LINE_BYTES_MAX, SinkLine, checksum};

use crate::checks::A_WHILE;
use crate::probe::{Mark, Outcome, Probe, Stop, ensure, sound_line};

/// Whether a line is the answer to an ask or an order.
fn answers(line: &SinkLine) -> bool {
    matches!(
        line,
        SinkLine::Ok { .. }
            | SinkLine::OffDone { .. }
            | SinkLine::No { .. }
            | SinkLine::NoGap { .. }
            | SinkLine::Clock { .. }
            | SinkLine::About { .. }
    )
}

/// Sends what must go unanswered, then something that must not.
fn must_be_ignored(probe: &mut Probe<'_>, what: &str, bytes: &[u8]) -> Result<(), Stop> {
    let mark = probe.mark();
    probe.say_bytes(bytes)?;
    probe.fence()?;
    let count = answers_since(probe, mark);
    ensure!(
        count <= 1,
        "{what} was answered; a damaged line is discarded, since its number may be what was \
         damaged (chapter 1)"
    );
    Ok(())
}

fn answers_since(probe: &Probe<'_>, mark: Mark) -> usize {
    probe.since(mark).filter(|line| answers(line)).count()
}

/// An ask whose checksum has a letter, so that its case can be turned.
fn ask_with_letters(probe: &mut Probe<'_>) -> (String, u16) {
    loop {
        let text = format!("clock {}", probe.next_token());
        let sum = checksum(text.as_bytes());
        if format!("{sum:04X}") != format!("{sum:04x}") {
            return (text, sum);
        }
    }
}

pub(crate) fn damaged(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let before = probe.reading()?.counters.damaged;
    let (ask, sum) = ask_with_letters(probe);
    let digits = LINE_BYTES_MAX - ask.len() - 6;
    let long = format!("{ask} {}", "1".repeat(digits));
    let cases = [
        (
            "a line with a wrong checksum",
            format!("{ask} {:04X}\n", sum ^ 1).into_bytes(),
        ),
        (
            "a line with its checksum in lower case",
            format!("{ask} {sum:04x}\n").into_bytes(),
        ),
        ("a line without a checksum", format!("{ask}\n").into_bytes()),
        (
            "a line with a byte turned",
            format!("{} {sum:04X}\n", ask.replace('c', "k")).into_bytes(),
        ),
        (
            "a line that lost its first byte",
            sound_line(&ask).split_off(1),
        ),
        ("a line of 97 bytes", sound_line(&long)),
        (
            "a line with a byte that is not printable",
            sound_line(&format!("{ask}\u{7}")),
        ),
        (
            "a line with a return in its middle",
            sound_line(&ask.replace(' ', "\r ")),
        ),
        ("a checksum of nothing", b" FFFF\n".to_vec()),
    ];
    for (what, bytes) in &cases {
        must_be_ignored(probe, what, bytes)?;
    }
    // A damaged order must not have used up its number either.
    let number = probe.next_number();
    let order = format!("readback {number} 0");
    let wrong = format!("{order} {:04X}\n", checksum(order.as_bytes()) ^ 0x8000);
    must_be_ignored(probe, "an order with a wrong checksum", wrong.as_bytes())?;
    let sent = u16::try_from(cases.len() + 1).unwrap_or(u16::MAX);
    let after = probe.reading()?.counters.damaged;
    let counted = after.wrapping_sub(before);
    ensure!(
        counted == sent,
        "{sent} damaged lines were sent and {counted} counted (chapters 1 and 4)"
    );
    Ok(format!("{sent} kinds of damage ignored and counted"))
}

pub(crate) fn line_ends(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let before = probe.reading()?.counters.damaged;
    let mark = probe.mark();
    probe.say_bytes(b"\n\r\n\n")?;
    probe.fence()?;
    ensure!(
        answers_since(probe, mark) == 1,
        "an empty line was answered (chapter 1)"
    );
    let mark = probe.mark();
    let token = probe.next_token();
    let mut returned = sound_line(&format!("clock {token}"));
    returned.insert(returned.len() - 1, b'\r');
    probe.say_bytes(&returned)?;
    probe.fence()?;
    ensure!(
        answers_since(probe, mark) == 2,
        "a line ended by a return and a line end was not taken (chapter 1)"
    );
    // In two halves, as a port may deliver it.
    let mark = probe.mark();
    let token = probe.next_token();
    let whole = sound_line(&format!("clock {token}"));
    let (one, other) = whole.split_at(4);
    probe.say_bytes(one)?;
    probe.listen(A_WHILE)?;
    probe.say_bytes(other)?;
    probe.fence()?;
    ensure!(
        answers_since(probe, mark) == 2,
        "a line that came in two pieces was not taken (chapter 1)"
    );
    let after = probe.reading()?.counters.damaged;
    ensure!(
        after == before,
        "{} lines counted as damaged, and none was: an empty line is no line (chapter 1)",
        after.wrapping_sub(before)
    );
    Ok("empty lines, returns and halves borne".to_owned())
}

/// What follows the number of an order, and the reason with which it must be refused.
const FAULTY_ORDERS: [(&str, &str, &str); 19] = [
    ("frobnicate", "1", "unknown"),
    ("limit", "current 1", "range"),
    ("limit", "current 1 0 0", "range"),
    ("limit", "currents 1 0", "unknown"),
    ("limit", "Current 1 0", "unknown"),
    ("limit", "current 01 0", "range"),
    ("limit", "current +1 0", "range"),
    ("limit", "voltage-low -0 0", "range"),
    ("limit", "current 1.5 0", "range"),
    ("limit", "current -1 0", "range"),
    ("limit", "current 1000000000 0", "range"),
    ("limit", "current 1 60000001", "range"),
    ("deadman", "99999", "range"),
    ("deadman", "10000001", "range"),
    ("readback", "3600000001", "range"),
    ("step", "current 0 0 0 0", "range"),
    ("step", "voltage 0 0 0 1000000", "unknown"),
    ("step", "resistance 0 0 0 1000000", "range"),
    ("isolator", "2", "range"),
];

/// Lines that bear no order number.
const FAULTY_ASKS: [(&str, &str); 8] = [
    ("clock", "range"),
    ("clock 65536", "range"),
    ("clock 1 2", "range"),
    ("hello 1 0", "range"),
    ("off", "range"),
    ("limit 0 current 1 0", "range"),
    ("limit x current 1 0", "range"),
    ("frobnicate", "unknown"),
];

pub(crate) fn faulty(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    let before = probe.reading()?.counters.damaged;
    for (kind, fields, reason) in FAULTY_ORDERS {
        let (number, answer) = probe.order(kind, fields)?;
        ensure!(
            answer.to_string() == format!("no {reason}"),
            "`{kind} {number} {fields}` was answered `{answer}`, expected `no {reason}` \
             (chapters 2 and 8)"
        );
    }
    for (text, reason) in FAULTY_ASKS {
        let answer = probe.say_order(text, 0)?;
        ensure!(
            answer.to_string() == format!("no {reason}"),
            "`{text}` was answered `{answer}` under number 0, expected `no {reason}` (chapter 2)"
        );
    }
    let sent = u16::try_from(FAULTY_ORDERS.len() + FAULTY_ASKS.len()).unwrap_or(u16::MAX);
    let pair = probe.reading()?;
    let counted = pair.counters.damaged.wrapping_sub(before);
    ensure!(
        counted == sent,
        "{sent} faulty lines were sent and {counted} counted (chapter 1)"
    );
    // Undamaged and in its form, but not what this sink offers.
    if described.fastest_readback.micros() > 1 {
        let below = described.fastest_readback.micros() - 1;
        probe.refused("readback", &below.to_string(), wire::ReasonRefused::Range)?;
    }
    Ok(format!(
        "{sent} faults refused with their reasons and counted"
    ))
}
