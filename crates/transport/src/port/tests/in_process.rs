use super::*;

/// Says `tick` and a line end every 100 ms of its time, and repeats what it is told.
#[derive(Default)]
struct Ticker {
    now: Span,
    told: Vec<u8>,
}

const INTERVAL: u64 = 100_000;

impl VirtualDevice for Ticker {
    fn now(&self) -> Span {
        self.now
    }

    fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        if !self.told.is_empty() {
            out.append(&mut self.told);
            return;
        }
        let next = (self.now.micros() / INTERVAL + 1) * INTERVAL;
        if next <= until.micros() {
            self.now = Span::from_micros(next);
            out.extend_from_slice(b"tick\n");
        } else {
            self.now = self.now.max(until);
        }
    }

    fn receive(&mut self, bytes: &[u8]) {
        self.told.extend_from_slice(bytes);
    }
}

fn link(pace: Pace) -> (VirtualLink<(), Ticker>, Commands<()>) {
    VirtualLink::new(Ticker::default(), pace, HostClock::start())
}

#[test]
fn without_bound_a_day_passes_at_once_and_nothing_is_skipped() {
    let clock = HostClock::start();
    let (mut link, _commands) = link(Pace::Unbounded);
    wait_open(&mut link);
    let begun = Link::<()>::now(&link);
    let end = begun + Span::from_secs(86_400);
    let mut ticks = 0;
    while let Some(inbox) = link.wait(end) {
        assert!(matches!(inbox, Inbox::Bytes(bytes) if bytes == b"tick\n"));
        ticks += 1;
        let passed = Link::<()>::now(&link).saturating_since(begun);
        assert_eq!(passed.micros(), ticks * INTERVAL);
    }
    assert_eq!(ticks, 864_000);
    assert_eq!(Link::<()>::now(&link), end);
    assert!(clock.now().saturating_since(begun) < Span::from_secs(20));
}

#[test]
fn in_time_lapse_time_passes_no_faster_than_the_pace() {
    let clock = HostClock::start();
    let (mut link, _commands) = link(Pace::Times(100));
    wait_open(&mut link);
    let (real, begun) = (clock.now(), Link::<()>::now(&link));
    let end = begun + Span::from_secs(20);
    while link.wait(end).is_some() {}
    let took = clock.now().saturating_since(real);
    assert!(took >= Span::from_millis(199), "20 s took {took:?}");
}

#[test]
fn while_time_is_held_only_commands_come() {
    let (mut link, commands) = link(Pace::Unbounded);
    wait_open(&mut link);
    let begun = Link::<()>::now(&link);
    Link::<()>::hold_time(&mut link, true);
    let end = begun + Span::from_secs(5);
    assert!(link.wait(end).is_none());
    commands.give(()).unwrap();
    assert!(matches!(link.wait(end), Some(Inbox::Command(()))));
    assert_eq!(Link::<()>::now(&link), begun);
    Link::<()>::hold_time(&mut link, false);
    assert!(matches!(link.wait(end), Some(Inbox::Bytes(_))));
}

#[test]
fn what_is_sent_is_answered_at_the_same_instant() {
    let (mut link, _commands) = link(Pace::Unbounded);
    wait_open(&mut link);
    let begun = Link::<()>::now(&link);
    Link::<()>::send(&mut link, b"hello\n", Urgency::InTurn);
    assert_eq!(wait_bytes(&mut link, 6), b"hello\n");
    assert_eq!(Link::<()>::now(&link), begun);
}

#[test]
fn virtual_time_begins_no_earlier_than_asked() {
    let (link, _commands) = link(Pace::Unbounded);
    let begun = Link::<()>::now(&link);
    let later = begun + Span::from_secs(86_400);
    let link = link.not_before(later);
    assert_eq!(Link::<()>::now(&link), later);
    let mut link = link.not_before(begun);
    assert_eq!(Link::<()>::now(&link), later);
    wait_open(&mut link);
    assert_eq!(wait_bytes(&mut link, 5), b"tick\n");
    assert_eq!(Link::<()>::now(&link), later + Span::from_millis(100));
}
