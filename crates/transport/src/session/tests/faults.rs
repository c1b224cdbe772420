//! The session and the model over a link that drops, repeats, delays and corrupts lines.

use std::collections::{BTreeMap, VecDeque};

use proptest::prelude::*;

use super::peer::Deed;
use super::*;

/// A small generator of known quality, so that a seed means the same for ever (SplitMix64,
/// from memory).
struct Chance(u64);

impl Chance {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^ (z >> 31)
    }

    fn below(&mut self, bound: u64) -> u64 {
        self.next() % bound
    }

    fn percent(&mut self, percent: u64) -> bool {
        self.below(100) < percent
    }
}

/// What the link does wrong, each in percent of the lines.
#[derive(Debug, Clone, Copy)]
struct Faults {
    drop: u64,
    repeat: u64,
    corrupt: u64,
    delay_ms: u64,
}

/// One direction. Lines never overtake each other.
#[derive(Default)]
struct Way {
    lines: VecDeque<(HostTime, Vec<u8>)>,
}

impl Way {
    fn send(&mut self, bytes: &[u8], now: HostTime, faults: Faults, chance: &mut Chance) {
        for line in bytes.split_inclusive(|byte| *byte == b'\n') {
            if chance.percent(faults.drop) {
                continue;
            }
            let mut line = line.to_vec();
            if chance.percent(faults.corrupt) {
                let place = usize::try_from(chance.below(line.len() as u64)).unwrap();
                line[place] ^= 1 << chance.below(8);
            }
            let delay = Span::from_micros(100 + chance.below(faults.delay_ms * 1_000 + 1));
            let earliest = self.lines.back().map_or(now, |(at, _)| *at);
            let at = earliest.max(now + delay);
            if chance.percent(faults.repeat) {
                self.lines.push_back((at, line.clone()));
            }
            self.lines.push_back((at, line));
        }
    }

    fn due(&self) -> Option<HostTime> {
        self.lines.front().map(|(at, _)| *at)
    }

    fn take(&mut self, now: HostTime) -> Option<Vec<u8>> {
        if self.due()? > now {
            return None;
        }
        self.lines.pop_front().map(|(_, line)| line)
    }
}

#[derive(Debug, Clone, Copy, PartialEq)]
enum Outcome {
    Acknowledged,
    Refused,
    Withdrawn,
    Abandoned,
}

struct World {
    session: Session,
    session_number: u32,
    peer: Peer,
    chance: Chance,
    faults: Faults,
    there: Way,
    back: Way,
    now: HostTime,
    given: Vec<(OrderId, Order)>,
    outcomes: BTreeMap<OrderId, Outcome>,
    offs_open: bool,
    connected: u32,
}

impl World {
    fn new(seed: u64, faults: Faults) -> Self {
        let mut config = config();
        config.window = 1 + u8::try_from(seed % 15).unwrap();
        Self {
            session: Session::new(config, 1),
            session_number: 1,
            peer: Peer::new(at(-10_000)),
            chance: Chance(seed),
            faults,
            there: Way::default(),
            back: Way::default(),
            now: at(0),
            given: Vec::new(),
            outcomes: BTreeMap::new(),
            offs_open: false,
            connected: 0,
        }
    }

    #[expect(
        clippy::wildcard_enum_match_arm,
        reason = "only what this test is about is looked at"
    )]
    fn hear(&mut self) {
        while let Some(heard) = self.session.poll_heard() {
            let (order, outcome) = match heard {
                Heard::Acknowledged { order } => (order, Outcome::Acknowledged),
                Heard::Refused { order, .. } => (order, Outcome::Refused),
                Heard::Withdrawn { order } => (order, Outcome::Withdrawn),
                Heard::Abandoned { order } => (order, Outcome::Abandoned),
                Heard::OffAcknowledged => {
                    assert!(self.offs_open, "off acknowledged unasked");
                    self.offs_open = false;
                    assert!(
                        self.peer.deeds.contains(&Deed::Off),
                        "acknowledged but not off"
                    );
                    continue;
                }
                Heard::SinkRebooted { .. } => {
                    self.session_number += 1;
                    self.session.restart(self.session_number, self.now);
                    continue;
                }
                Heard::Connected { .. } => {
                    self.connected += 1;
                    continue;
                }
                _ => continue,
            };
            let before = self.outcomes.insert(order, outcome);
            assert_eq!(before, None, "{order:?} has a second outcome {outcome:?}");
        }
    }

    /// Carries bytes until both sides are silent and nothing more is due.
    fn carry(&mut self) {
        loop {
            self.hear();
            let mut bytes = Vec::new();
            self.session.take_transmit(&mut bytes);
            self.there
                .send(&bytes, self.now, self.faults, &mut self.chance);
            while let Some(line) = self.there.take(self.now) {
                self.peer.receive(&line, self.now);
            }
            let answer = self.peer.take();
            self.back
                .send(&answer, self.now, self.faults, &mut self.chance);
            let mut heard = false;
            while let Some(line) = self.back.take(self.now) {
                self.session.receive(&line, self.now);
                heard = true;
            }
            if bytes.is_empty() && answer.is_empty() && !heard {
                return;
            }
        }
    }

    /// Lets time pass with every deadline met.
    fn pass(&mut self, span: Span) {
        let end = self.now + span;
        loop {
            self.carry();
            let due = [
                self.session.deadline().map(|(due, _)| due),
                self.there.due(),
                self.back.due(),
            ]
            .into_iter()
            .flatten()
            .min();
            match due {
                Some(due) if due <= end => self.now = self.now.max(due),
                _ => break,
            }
            self.session.tick(self.now);
        }
        self.now = end;
        self.session.tick(self.now);
        self.carry();
    }

    /// Does something at random.
    fn act(&mut self) {
        match self.chance.below(20) {
            0 => {
                self.session.off(self.now);
                self.offs_open = true;
            }
            1 => self.peer.reboot(self.now),
            2 => {
                self.session.link_lost(self.now);
                self.there.lines.clear();
                self.back.lines.clear();
                self.pass(Span::from_millis(300));
                self.session.link_back(self.now);
            }
            _ => {
                for _ in 0..=self.chance.below(12) {
                    let id = OrderId(self.given.len() as u64 + 1);
                    // Each order is another, so that the model's deeds tell which it was.
                    let unique = i64::try_from(id.0).unwrap();
                    let order = if self.chance.percent(50) {
                        step(unique)
                    } else {
                        limit(unique)
                    };
                    self.given.push((id, order));
                    self.session.order(id, order, self.now);
                }
            }
        }
    }

    fn check(&self) {
        assert_eq!(self.outcomes.len(), self.given.len(), "an order was lost");
        assert!(!self.offs_open, "off was never acknowledged");
        assert!(
            self.session.description().is_some(),
            "no session at the end"
        );
        // Within each of the sink's sessions: no order twice, and in the order given.
        let mut last = None;
        let mut done = BTreeMap::new();
        for deed in &self.peer.deeds {
            match deed {
                Deed::Began(_) => last = None,
                Deed::Off => {}
                Deed::Did(order) => {
                    let Some((id, _)) = self.given.iter().find(|(_, given)| given == order) else {
                        assert!(matches!(order, Order::Clear { .. }), "{order:?} not given");
                        continue;
                    };
                    assert!(Some(*id) > last, "{id:?} executed again or out of turn");
                    last = Some(*id);
                    *done.entry(*id).or_insert(0) += 1;
                }
            }
        }
        for (id, outcome) in &self.outcomes {
            let times = done.get(id).copied().unwrap_or(0);
            match outcome {
                Outcome::Acknowledged => assert!(times >= 1, "{id:?} acknowledged, not executed"),
                Outcome::Refused => assert_eq!(times, 0, "{id:?} refused but executed"),
                Outcome::Withdrawn | Outcome::Abandoned => {}
            }
        }
    }
}

/// No step that was given before an `off` may be executed after it in the same session.
fn check_off(world: &World, given_before_last_off: usize) {
    let Some(last_off) = world.peer.deeds.iter().rposition(|deed| *deed == Deed::Off) else {
        return;
    };
    for deed in &world.peer.deeds[last_off..] {
        let Deed::Did(order @ Order::Step(_)) = deed else {
            continue;
        };
        let place = world.given.iter().position(|(_, given)| given == order);
        assert!(
            place.is_some_and(|place| place >= given_before_last_off),
            "{order:?} executed after the off that overtook it"
        );
    }
}

fn faults() -> impl Strategy<Value = Faults> {
    (0_u64..30, 0_u64..30, 0_u64..20, 0_u64..120).prop_map(|(drop, repeat, corrupt, delay_ms)| {
        Faults {
            drop,
            repeat,
            corrupt,
            delay_ms,
        }
    })
}

/// What became of a readback pair on the way.
fn heard_readings(world: &mut World) -> Vec<wire::Reading> {
    let mut readings = Vec::new();
    while let Some(heard) = world.session.poll_heard() {
        if let Heard::Reading(reading) = heard {
            readings.push(reading);
        }
    }
    readings
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(96))]

    #[test]
    fn over_any_faulty_link_a_reading_is_true_or_counted_as_lost(
        seed: u64,
        faults in faults(),
        pairs in 1_u16..400,
    ) {
        let mut world = World::new(seed, faults);
        // 15 s before the turn of the low 32 bits of the sink's time.
        world.peer = Peer::new(at(-4_280_000));
        world.faults = Faults { drop: 0, repeat: 0, corrupt: 0, delay_ms: 1 };
        world.session.tick(world.now);
        world.pass(Span::from_secs(1));
        world.faults = faults;
        let mut sent = BTreeMap::new();
        let mut readings = Vec::new();
        for _ in 0..pairs {
            world.now += Span::from_millis(100);
            if sent.is_empty() {
                world.peer.readbacks = 65_400;
            }
            world.peer.say_pair(world.now, 0, 0);
            sent.insert(world.peer.readbacks, world.peer.time(world.now));
            let bytes = world.peer.take();
            world.back.send(&bytes, world.now, world.faults, &mut world.chance);
            while let Some(line) = world.back.take(world.now) {
                world.session.receive(&line, world.now);
            }
            readings.append(&mut heard_readings(&mut world));
        }
        for reading in &readings {
            prop_assert_eq!(sent.get(&reading.readback), Some(&reading.time));
        }
        for pair in readings.windows(2) {
            prop_assert!(pair[0].time < pair[1].time);
            let apart = (pair[1].time.micros() - pair[0].time.micros()) / 100_000;
            prop_assert_eq!(u64::from(pair[1].lost), apart - 1);
        }
    }

    #[test]
    fn over_any_faulty_link_each_order_has_one_outcome_and_none_runs_twice(
        seed: u64,
        faults in faults(),
        acts in 1_usize..60,
    ) {
        let mut world = World::new(seed, faults);
        world.session.tick(world.now);
        for _ in 0..acts {
            world.act();
            let pause = Span::from_millis(world.chance.below(400));
            world.pass(pause);
        }
        world.faults = Faults { drop: 0, repeat: 0, corrupt: 0, delay_ms: 1 };
        world.pass(Span::from_secs(30));
        world.check();
    }

    #[test]
    fn over_any_faulty_link_no_step_given_before_off_begins_after_it(
        seed: u64,
        faults in faults(),
        before in 1_usize..40,
    ) {
        let mut world = World::new(seed, faults);
        world.session.tick(world.now);
        world.pass(Span::from_secs(5));
        for _ in 0..before {
            world.act();
            let pause = Span::from_millis(world.chance.below(20));
            world.pass(pause);
        }
        let given = world.given.len();
        world.session.off(world.now);
        world.offs_open = true;
        world.faults = Faults { drop: 10, ..faults };
        world.pass(Span::from_secs(10));
        world.faults = Faults { drop: 0, repeat: 0, corrupt: 0, delay_ms: 1 };
        world.pass(Span::from_secs(30));
        check_off(&world, given);
        world.check();
    }
}
