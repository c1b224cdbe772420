use super::*;
use peer::Deed;

/// Lets the sink reboot, then does something, and returns the evidence heard.
fn evidence(after: impl FnOnce(&mut Bench)) -> Option<RebootEvidence> {
    let mut bench = Bench::open();
    bench.pass(3_000);
    bench.peer.reboot(bench.now);
    bench.heard.clear();
    after(&mut bench);
    rebooted(&bench.heard)
}

#[test]
fn an_order_answered_with_no_session_shows_a_reboot() {
    let evidence = evidence(|bench| bench.order(1, step(500)));
    assert_eq!(evidence, Some(RebootEvidence::NoSession));
}

#[test]
fn a_clock_that_went_back_shows_a_reboot() {
    let evidence = evidence(|bench| bench.pass(3_000));
    assert!(matches!(
        evidence,
        Some(RebootEvidence::ClockWentBack { .. })
    ));
}

#[test]
fn a_description_unasked_shows_a_reboot() {
    let evidence = evidence(|bench| {
        bench.say(SinkLine::About {
            token: 0xFFFF,
            protocol: 1,
            firmware: 1,
            serial: 4711,
            reset: wire::Reset::Watchdog,
        });
    });
    assert_eq!(evidence, Some(RebootEvidence::UnaskedDescription));
}

#[test]
fn another_host_that_takes_the_sink_is_noticed_by_its_numbers() {
    let mut bench = Bench::open();
    for id in 1..=3 {
        bench.order(id, limit(500));
    }
    bench.peer.pretend_done(0);
    bench.heard.clear();
    bench.order(4, limit(500));
    assert_eq!(
        rebooted(&bench.heard),
        Some(RebootEvidence::NumbersMoved { expected: 1 })
    );
}

#[test]
fn a_charge_counter_that_jumps_beyond_full_scale_shows_another_start() {
    let mut bench = Bench::open();
    bench.peer.say_pair(bench.now, 5_000_000, 0);
    bench.settle();
    bench.now = at(100);
    // 3 A full scale for 100 ms is 0.3 C; the counter went back by 5 C.
    bench.peer.say_pair(bench.now, 0, 0);
    bench.settle();
    assert_eq!(rebooted(&bench.heard), Some(RebootEvidence::CountersMoved));
}

#[test]
fn after_a_reboot_nothing_is_sent_until_a_restart_and_every_order_has_its_outcome() {
    let mut bench = Bench::open();
    bench.pass(3_000);
    bench.session.order(OrderId(1), limit(500), bench.now);
    bench.swallow();
    bench.session.order(OrderId(2), step(500), bench.now);
    bench.peer.reboot(bench.now);
    bench.heard.clear();
    bench.settle();
    bench.order(3, limit(500));
    assert_eq!(
        bench.take_heard(),
        [
            Heard::Abandoned { order: OrderId(1) },
            Heard::Abandoned { order: OrderId(2) },
            Heard::SinkRebooted {
                evidence: RebootEvidence::NoSession
            },
            Heard::Abandoned { order: OrderId(3) },
        ]
    );
    let deeds = bench.peer.deeds.len();
    bench.pass(10_000);
    assert_eq!(bench.session.deadline(), None);
    assert_eq!(bench.peer.deeds.len(), deeds);
    bench.session.restart(8, bench.now);
    bench.settle();
    bench.order(4, limit(500));
    assert_eq!(
        bench.peer.deeds[deeds..],
        [Deed::Began(8), Deed::Did(limit(500))]
    );
}

#[test]
fn lines_of_the_session_before_are_ignored_and_counted() {
    let mut bench = Bench::open();
    bench.order(1, limit(500));
    bench.heard.clear();
    bench.session.restart(8, bench.now);
    let before = bench.session.counts().stale;
    let mut line = wire::LineBuffer::new();
    for stale in [
        SinkLine::Ok {
            number: wire::OrderNumber(1),
        },
        SinkLine::No {
            number: wire::OrderNumber(2),
            reason: ReasonRefused::Session,
        },
    ] {
        stale.encode(&mut line).unwrap();
        bench.session.receive(line.as_bytes(), bench.now);
    }
    assert_eq!(bench.session.counts().stale, before + 2);
    bench.settle();
    assert!(bench.session.description().is_some());
    assert_eq!(rebooted(&bench.heard), None);
}

#[test]
fn a_session_outlives_a_short_loss_of_the_link() {
    let mut bench = Bench::open();
    bench.pass(1_000);
    bench.session.link_lost(bench.now);
    assert_eq!(bench.session.deadline(), None);
    bench.session.order(OrderId(1), limit(500), bench.now);
    bench.now += Span::from_millis(800);
    bench.session.link_back(bench.now);
    bench.settle();
    let heard = bench.take_heard();
    assert!(matches!(heard[0], Heard::Resumed { .. }), "{heard:?}");
    assert_eq!(heard[1], acknowledged(1));
    assert_eq!(bench.peer.hello_count, 1);
}
