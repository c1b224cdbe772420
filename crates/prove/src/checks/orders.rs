//! Order numbers, and executing at most once (chapter 2).

use quantity::SinkTime;
use wire::SinkLine;

use crate::checks::{A_WHILE, LONG};
use crate::probe::{Answer, Outcome, Probe, ensure};

/// Answers that a sink keeps.
const KEPT: u16 = 16;

pub(crate) fn once(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let mark = probe.mark();
    let number = probe.next_number();
    let text = format!("step {number} current 0 0 0 {}", LONG.micros());
    let step = probe.rest(SinkTime::ZERO, LONG)?;
    probe.edge(mark, step)?;
    for _ in 0..3 {
        let answer = probe.say_order(&text, number)?;
        ensure!(
            answer == Answer::Done,
            "`{text}`, sent again, was answered `{answer}` and at first `ok`: the answer is \
             repeated (chapter 2)"
        );
    }
    probe.listen(A_WHILE)?;
    let begun = probe.edges(mark).len();
    ensure!(
        begun == 1,
        "`{text}`, sent four times under the same number, was executed {begun} times: a second \
         `edge` (chapter 2)"
    );
    // Its number decides, whatever else its line says: neither this step nor this unknown kind.
    for other in [
        format!("step {number} current 0 0 0 1000000"),
        format!("frobnicate {number} 1"),
    ] {
        let answer = probe.say_order(&other, number)?;
        ensure!(
            answer == Answer::Done,
            "`{other}` was answered `{answer}`: order {number} has been answered `ok`, and its \
             answer is repeated whatever else its line says (chapter 2)"
        );
    }
    // A refusal is repeated as well, though nothing would refuse the order now.
    let (refused, first) = probe.order("isolator", "7")?;
    let again = probe.say_order(&format!("deadman {refused} 2000000"), refused)?;
    ensure!(
        again == first,
        "order {refused} was answered `{first}` and then `{again}` (chapter 2)"
    );
    probe.listen(A_WHILE)?;
    let begun = probe.edges(mark).len();
    ensure!(
        begun == 1,
        "an order that was answered before began another step: {begun} `edge` lines (chapter 2)"
    );
    Ok("sent four times, begun once".to_owned())
}

pub(crate) fn in_turn(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let expected = probe.next_number();
    for ahead in [expected + 1, expected + 5, u16::MAX] {
        let text = format!("deadman {ahead} 2000000");
        let answer = probe.say_order(&text, ahead)?;
        ensure!(
            answer == Answer::Gap(expected),
            "`{text}` was answered `{answer}`, expected `no gap {expected}` (chapter 2)"
        );
    }
    // The gap used up nothing, and what was out of turn is taken when its turn comes.
    probe.must("deadman", "2000000")?;
    probe.must("deadman", "2000000")?;
    Ok(format!(
        "numbers beyond {expected} refused with `gap`, then taken in turn"
    ))
}

pub(crate) fn sixteen(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let first = probe.next_number();
    let lines: Vec<String> = (0..KEPT)
        .map(|_| format!("deadman {} 2000000", probe.use_number()))
        .collect();
    let last = first + KEPT - 1;
    for round in ["at once", "again"] {
        let mark = probe.mark();
        probe.say_at_once(&lines)?;
        probe.answer(mark, last)?;
        let answered: Vec<u16> = probe
            .since(mark)
            .filter_map(|line| match *line {
                SinkLine::Ok { number } => Some(number.0),
                _ => None,
            })
            .collect();
        ensure!(
            answered.iter().copied().eq(first..=last),
            "orders {first} to {last}, sent {round}, were answered `ok` for {answered:?}: each \
             is answered, in order (chapter 2)"
        );
    }
    // One more, and the oldest answer is no longer kept.
    probe.must("deadman", "2000000")?;
    let text = format!("deadman {first} 2000000");
    let answer = probe.say_order(&text, first)?;
    ensure!(
        answer == Answer::Gap(last + 2),
        "`{text}`, {} orders old, was answered `{answer}`, expected `no gap {}`: the answers of \
         the last 16 orders are kept (chapter 2)",
        KEPT + 1,
        last + 2
    );
    Ok("16 under way, 16 answers kept, in order".to_owned())
}
