use super::*;
use peer::Deed;

#[test]
fn orders_given_before_the_sink_answers_are_executed_in_order_once_it_does() {
    let mut bench = Bench::new();
    bench.session.order(OrderId(1), limit(500), bench.now);
    bench.session.order(OrderId(2), readback(100), bench.now);
    bench.tick();
    assert_eq!(
        bench.peer.deeds,
        [
            Deed::Began(7),
            Deed::Did(limit(500)),
            Deed::Did(readback(100))
        ]
    );
    assert_eq!(bench.take_heard()[1..], [acknowledged(1), acknowledged(2)]);
}

#[test]
fn no_more_than_the_window_is_under_way() {
    let mut bench = Bench::open();
    for id in 1..=20 {
        bench.session.order(OrderId(id), limit(500), bench.now);
    }
    assert_eq!(bench.swallow().len(), 8);
    bench.pass(300);
    let done = (1..=20).map(acknowledged).collect::<Vec<_>>();
    let heard = bench.take_heard();
    let acks = heard
        .iter()
        .filter(|heard| matches!(heard, Heard::Acknowledged { .. }))
        .cloned()
        .collect::<Vec<_>>();
    assert_eq!(acks, done);
    assert_eq!(
        heard[0],
        Heard::Retransmitted {
            orders: 8,
            attempt: 1
        }
    );
}

#[test]
fn a_lost_order_is_sent_again_with_all_after_it_when_the_sink_reports_the_gap() {
    let mut bench = Bench::open();
    bench.session.order(OrderId(1), limit(500), bench.now);
    bench.swallow();
    bench.session.order(OrderId(2), readback(100), bench.now);
    bench.order(3, readback(200));
    assert_eq!(
        bench.take_heard(),
        [
            Heard::Retransmitted {
                orders: 3,
                attempt: 1
            },
            acknowledged(1),
            acknowledged(2),
            acknowledged(3),
        ]
    );
    assert_eq!(
        bench.peer.deeds[1..],
        [
            Deed::Did(limit(500)),
            Deed::Did(readback(100)),
            Deed::Did(readback(200))
        ]
    );
}

#[test]
fn a_lost_answer_is_asked_for_again_and_nothing_is_executed_twice() {
    let mut bench = Bench::open();
    bench.session.order(OrderId(1), step(500), bench.now);
    bench.bytes.clear();
    bench.session.take_transmit(&mut bench.bytes);
    bench.peer.receive(&bench.bytes, bench.now);
    bench.peer.take();
    bench.pass(1_000);
    assert_eq!(
        bench.take_heard(),
        [
            Heard::Retransmitted {
                orders: 1,
                attempt: 1
            },
            acknowledged(1)
        ]
    );
    assert_eq!(bench.peer.deeds[1..], [Deed::Did(step(500))]);
}

#[test]
fn a_refusal_uses_up_the_number_and_names_the_reason() {
    let mut bench = Bench::open();
    bench.peer.refuse = Some(ReasonRefused::Unready);
    bench.order(1, step(500));
    bench.order(2, limit(500));
    assert_eq!(
        bench.take_heard(),
        [
            Heard::Refused {
                order: OrderId(1),
                reason: ReasonRefused::Unready
            },
            acknowledged(2)
        ]
    );
}

#[test]
fn an_order_that_no_line_can_carry_is_refused_and_uses_up_no_number() {
    let mut bench = Bench::open();
    bench.order(1, step(-1));
    bench.order(2, limit(500));
    assert_eq!(
        bench.take_heard(),
        [
            Heard::Refused {
                order: OrderId(1),
                reason: ReasonRefused::Range
            },
            acknowledged(2)
        ]
    );
}

#[test]
fn numbers_wrap_and_edges_still_find_their_order() {
    let mut bench = Bench::open();
    for id in 1..=65_540 {
        bench.order(id, step(500));
        bench.heard.clear();
        bench.pass(1);
    }
    for (event, number, id) in [
        (1, 65_530, 65_530),
        (2, 65_535, 65_535),
        (3, 1, 65_536),
        (4, 5, 65_540),
    ] {
        bench.say(SinkLine::Edge {
            event,
            time: bench.peer.time(bench.now),
            step: wire::OrderNumber(number),
        });
        assert_eq!(
            bench.take_heard(),
            [Heard::Edge {
                time: bench.peer.time(bench.now),
                order: OrderId(id)
            }]
        );
    }
}

#[test]
fn unanswered_orders_are_sent_again_ever_less_often() {
    let mut bench = Bench::open();
    bench.session.order(OrderId(1), limit(500), bench.now);
    bench.swallow();
    let retransmit = bench.session.config.retransmit.micros();
    let mut waited = Vec::new();
    let mut last = bench.now;
    while waited.len() < 6 {
        let (due, _) = bench.session.deadline().unwrap();
        bench.now = due;
        bench.session.tick(due);
        bench.swallow();
        while let Some(heard) = bench.session.poll_heard() {
            if matches!(heard, Heard::Retransmitted { .. }) {
                waited.push(due.saturating_since(last).micros() / retransmit);
                last = due;
            }
        }
    }
    assert_eq!(waited, [1, 2, 4, 8, 8, 8]);
}

#[test]
fn an_idle_session_says_something_every_third_of_the_deadman() {
    let mut bench = Bench::open();
    bench.pass(2_000);
    bench.order(
        1,
        Order::Deadman {
            interval: Span::from_millis(300),
        },
    );
    let mut said = vec![bench.now];
    while said.len() < 30 {
        let (due, _) = bench.session.deadline().unwrap();
        bench.now = due;
        bench.session.tick(due);
        if !bench.swallow().is_empty() {
            said.push(due);
        }
        bench.session.poll_heard();
    }
    for pair in said.windows(2) {
        assert!(pair[1].saturating_since(pair[0]) <= Span::from_millis(100));
    }
}
