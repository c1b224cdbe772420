use super::*;

#[test]
fn a_sink_that_answers_is_connected_with_its_description_and_time() {
    let mut bench = Bench::new();
    bench.tick();
    let Some(Heard::Connected {
        description,
        sink_time,
    }) = bench.heard.first()
    else {
        panic!("{:?}", bench.heard);
    };
    assert_eq!(description.serial, 4711);
    assert_eq!(description.sense_current, Current::from_milliamperes(3_000));
    assert_eq!(*sink_time, SinkTime::from_micros(5_000_000));
}

#[test]
fn a_silent_sink_is_greeted_ever_less_often_and_for_ever() {
    let mut session = Session::new(config(), 7);
    let mut now = at(0);
    let mut pauses = Vec::new();
    let mut bytes = Vec::new();
    session.tick(now);
    for _ in 0..6 {
        let (due, reason) = session.deadline().unwrap();
        assert_eq!(reason, DeadlineReason::Greet);
        pauses.push(due.saturating_since(now).micros() / 1_000);
        now = due;
        bytes.clear();
        session.tick(now);
        session.take_transmit(&mut bytes);
        assert!(bytes.windows(6).any(|window| window == b"hello "));
    }
    assert_eq!(pauses, [250, 500, 1_000, 2_000, 2_000, 2_000]);
}

#[test]
fn a_lost_line_of_the_description_makes_the_greeting_go_out_again_at_once() {
    let mut bench = Bench::new();
    bench.session.tick(bench.now);
    bench.swallow();
    let token = bench.session.token;
    for line in bench.peer.description(token, 7, bench.now) {
        if !matches!(line, SinkLine::Drive { .. }) {
            bench.peer.say(line);
        }
    }
    bench.settle();
    assert_eq!(bench.peer.hello_count, 1);
    assert!(bench.session.description().is_some());
}

#[test]
fn an_answer_to_another_session_does_not_connect() {
    let mut bench = Bench::new();
    bench.session.tick(bench.now);
    bench.swallow();
    let token = bench.session.token;
    for line in bench.peer.description(token, 6, bench.now) {
        bench.peer.say(line);
    }
    let bytes = bench.peer.take();
    bench.session.receive(&bytes, bench.now);
    assert!(bench.session.description().is_none());
    assert!(bench.session.counts().stale > 0);
}

#[test]
fn a_sink_that_is_not_the_one_described_is_named_and_gets_no_order() {
    let mut config = config();
    config.expected = Expected {
        serial: Some(4712),
        queue_at_least: Some(64),
        sense_resistor: Some(quantity::Resistance::from_milliohms(1_000)),
        abilities: wire::Abilities {
            isolator: true,
            ..wire::Abilities::default()
        },
        ..Expected::default()
    };
    let mut bench = Bench::with(config);
    bench.tick();
    let Some(Heard::DescriptionRefused { mismatches }) = bench.heard.first() else {
        panic!("{:?}", bench.heard);
    };
    let text = mismatches.iter().map(ToString::to_string);
    assert_eq!(
        text.collect::<Vec<_>>(),
        [
            "serial is 4711, the bench file says 4712",
            "queue_at_least is 32, the bench file says at least 64",
            "abilities.isolator is false, the bench file says true",
            "sense_resistor is 100 mohm, the bench file says 1 ohm",
        ]
    );
    bench.heard.clear();
    bench.order(1, limit(500));
    bench.pass(5_000);
    assert_eq!(bench.take_heard(), [Heard::Abandoned { order: OrderId(1) }]);
    assert_eq!(bench.peer.deeds, [peer::Deed::Began(7)]);
    bench.off();
    assert_eq!(bench.take_heard(), [Heard::OffAcknowledged]);
}

#[test]
fn another_version_of_the_protocol_is_refused_by_name() {
    let mut bench = Bench::new();
    bench.session.tick(bench.now);
    bench.swallow();
    let token = bench.session.token;
    bench.say(SinkLine::About {
        token,
        protocol: 2,
        firmware: 20_000,
        serial: 1,
        reset: wire::Reset::Power,
    });
    assert_eq!(
        bench.heard,
        [Heard::DescriptionRefused {
            mismatches: vec![Mismatch {
                field: "protocol".into(),
                expected: "1".into(),
                found: "2".into(),
            }]
        }]
    );
}

#[test]
fn a_repeated_greeting_answered_twice_does_not_end_the_session() {
    let mut bench = Bench::new();
    bench.session.tick(bench.now);
    let first = bench.session.token;
    bench.now = at(250);
    bench.session.tick(bench.now);
    let second = bench.session.token;
    bench.swallow();
    for token in [first, second] {
        for line in bench.peer.description(token, 7, bench.now) {
            bench.peer.say(line);
        }
    }
    let bytes = bench.peer.take();
    bench.session.receive(&bytes, bench.now);
    assert!(bench.session.description().is_some());
    assert!(bench.session.counts().stale > 0);
}

#[test]
fn a_greeting_that_arrives_twice_does_not_end_the_session() {
    let mut bench = Bench::new();
    bench.session.tick(bench.now);
    bench.swallow();
    let token = bench.session.token;
    for pause in [0, 7] {
        bench.now += Span::from_millis(pause);
        for line in bench.peer.description(token, 7, bench.now) {
            bench.peer.say(line);
        }
    }
    let bytes = bench.peer.take();
    bench.session.receive(&bytes, bench.now);
    assert!(bench.session.description().is_some());
}

#[test]
fn a_greeting_answered_anew_after_an_order_shows_a_new_beginning() {
    let mut bench = Bench::open();
    bench.order(1, limit(500));
    bench.heard.clear();
    let token = bench.session.greeting.last_token();
    for line in bench.peer.description(token, 7, bench.now) {
        bench.peer.say(line);
    }
    bench.settle();
    assert_eq!(
        rebooted(&bench.heard),
        Some(RebootEvidence::UnaskedDescription)
    );
}
