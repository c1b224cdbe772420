use super::*;
use peer::Deed;

#[test]
fn off_goes_before_every_byte_not_yet_sent_and_withdraws_steps() {
    let mut bench = Bench::open();
    bench.session.order(OrderId(1), limit(500), bench.now);
    bench.session.order(OrderId(2), step(500), bench.now);
    bench.session.off(bench.now);
    bench.bytes.clear();
    let urgency = bench.session.take_transmit(&mut bench.bytes);
    assert_eq!(urgency, Urgency::Overtakes);
    assert!(bench.bytes.starts_with(b"\noff "));
    assert_eq!(bench.bytes.split(|byte| *byte == b'\n').count(), 3);
    bench.peer.receive(&bench.bytes, bench.now);
    let answer = bench.peer.take();
    bench.session.receive(&answer, bench.now);
    bench.settle();
    assert_eq!(
        bench.take_heard(),
        [
            Heard::Withdrawn { order: OrderId(2) },
            Heard::OffAcknowledged,
            Heard::Retransmitted {
                orders: 2,
                attempt: 1
            },
            acknowledged(1),
        ]
    );
    let drop_all = Order::Clear {
        from: SinkTime::ZERO,
    };
    assert_eq!(
        bench.peer.deeds[1..],
        [Deed::Off, Deed::Did(limit(500)), Deed::Did(drop_all)]
    );
}

#[test]
fn off_needs_no_session() {
    let mut bench = Bench::new();
    bench.off();
    assert_eq!(bench.take_heard(), [Heard::OffAcknowledged]);
    assert_eq!(bench.peer.deeds, [Deed::Off]);
}

#[test]
fn off_is_repeated_until_acknowledged_and_holds_back_every_order() {
    let mut bench = Bench::open();
    bench.session.off(bench.now);
    bench.swallow();
    bench.session.order(OrderId(1), step(500), bench.now);
    let mut repeated = 0;
    while repeated < 20 {
        let (due, _) = bench.session.deadline().unwrap();
        bench.now = due;
        bench.session.tick(due);
        for line in bench.swallow() {
            match line.split(' ').next() {
                Some("off") => repeated += 1,
                Some("clock") => {}
                other => panic!("{other:?} before off was acknowledged"),
            }
        }
    }
    bench.pass(1_000);
    let heard = bench.take_heard();
    assert_eq!(heard, [Heard::OffAcknowledged, acknowledged(1)]);
    assert_eq!(bench.peer.deeds[1..], [Deed::Off, Deed::Did(step(500))]);
}

#[test]
fn an_answer_to_an_earlier_off_does_not_acknowledge_a_later_one() {
    let mut bench = Bench::open();
    bench.session.off(bench.now);
    let earlier = bench.session.off.unwrap();
    bench.swallow();
    bench.session.off(bench.now);
    bench.swallow();
    let mut line = wire::LineBuffer::new();
    SinkLine::OffDone { token: earlier }
        .encode(&mut line)
        .unwrap();
    bench.session.receive(line.as_bytes(), bench.now);
    assert_eq!(bench.session.poll_heard(), None);
    bench.pass(1_000);
    assert_eq!(bench.take_heard(), [Heard::OffAcknowledged]);
}

#[test]
fn off_given_while_the_link_is_down_goes_out_first_when_it_is_back() {
    let mut bench = Bench::open();
    bench.session.link_lost(bench.now);
    bench.session.off(bench.now);
    assert!(bench.swallow().is_empty());
    bench.session.order(OrderId(1), limit(500), bench.now);
    bench.pass(500);
    bench.session.link_back(bench.now);
    bench.settle();
    assert_eq!(bench.peer.deeds[1], Deed::Off);
    assert!(bench.heard.contains(&Heard::OffAcknowledged));
    assert!(bench.heard.contains(&acknowledged(1)));
}

#[test]
fn off_survives_a_restart_until_acknowledged() {
    let mut bench = Bench::open();
    bench.session.off(bench.now);
    bench.swallow();
    bench.session.restart(8, bench.now);
    bench.settle();
    assert!(bench.heard.contains(&Heard::OffAcknowledged));
    assert_eq!(
        bench.peer.deeds,
        [Deed::Began(7), Deed::Off, Deed::Began(8)]
    );
}
