//! The faulty link: what it promises with faults and without.

use proptest::prelude::*;

use super::*;

fn share(fraction: f64) -> Ratio {
    Ratio::from_fraction(fraction).unwrap()
}

fn at(millis: u64) -> Span {
    Span::from_millis(millis)
}

fn lines(count: u32) -> Vec<u8> {
    (0..count)
        .flat_map(|n| format!("line {n}\n").into_bytes())
        .collect()
}

fn all_through(link: &mut Link, bytes: &[u8]) -> Vec<u8> {
    let mut out = Vec::new();
    for (millis, piece) in (0..).zip(bytes.chunks(7)) {
        link.send(at(millis), piece);
    }
    link.receive(Span::MAX, &mut out);
    out
}

#[test]
fn a_link_without_faults_passes_all_at_once() {
    let mut link = Link::new(LinkFaults::default(), 1);
    let mut out = Vec::new();
    link.send(at(5), b"half a li");
    assert_eq!(link.next_arrival(), Some(at(5)));
    link.receive(at(5), &mut out);
    assert_eq!(out, b"half a li");
    assert_eq!(link.counts(), LinkCounts::default());
}

#[test]
fn the_same_seed_damages_the_same_bytes() {
    let faults = LinkFaults {
        drop_byte: share(0.02),
        corrupt_byte: share(0.02),
        duplicate_byte: share(0.02),
        drop_line: share(0.1),
        duplicate_line: share(0.1),
        delay_max: at(30),
        ..LinkFaults::default()
    };
    let run = |seed| all_through(&mut Link::new(faults.clone(), seed), &lines(500));
    assert_eq!(run(3), run(3));
    assert_ne!(run(3), run(4));
    assert_ne!(run(3), lines(500));
}

#[test]
fn whole_lines_are_lost_or_doubled_and_never_cut() {
    let faults = LinkFaults {
        drop_line: share(0.3),
        duplicate_line: share(0.3),
        ..LinkFaults::default()
    };
    let mut link = Link::new(faults, 9);
    let out = String::from_utf8(all_through(&mut link, &lines(1000))).unwrap();
    let mut last = None;
    for line in out.lines() {
        let number: u32 = line.strip_prefix("line ").unwrap().parse().unwrap();
        assert!(last.is_none_or(|before| before <= number), "order is kept");
        last = Some(number);
    }
    let counts = link.counts();
    assert!(
        counts.dropped > 2000 && counts.duplicated > 1000,
        "{counts:?}"
    );
}

#[test]
fn bytes_wait_out_a_stall_and_are_lost_while_unplugged() {
    let faults = LinkFaults {
        stalls: vec![Outage {
            from: at(10),
            lasts: at(5),
        }],
        unplugged: vec![Outage {
            from: at(20),
            lasts: at(5),
        }],
        ..LinkFaults::default()
    };
    let mut link = Link::new(faults, 1);
    let mut out = Vec::new();
    link.send(at(12), b"a\n");
    link.receive(at(14), &mut out);
    assert!(out.is_empty());
    assert_eq!(link.next_arrival(), Some(at(15)));
    link.receive(at(15), &mut out);
    link.send(at(22), b"b\n");
    link.send(at(25), b"c\n");
    link.receive(at(30), &mut out);
    assert_eq!(out, b"a\nc\n");
    assert_eq!(link.counts().dropped, 2);
}

#[test]
fn what_is_under_way_when_the_cable_comes_off_is_lost() {
    let faults = LinkFaults {
        delay_min: at(10),
        delay_max: at(10),
        unplugged: vec![Outage {
            from: at(5),
            lasts: at(10),
        }],
        ..LinkFaults::default()
    };
    let mut link = Link::new(faults, 1);
    let mut out = Vec::new();
    link.send(at(0), b"a\n");
    link.receive(at(50), &mut out);
    assert!(out.is_empty());
}

proptest! {
    #[test]
    fn lines_are_never_overtaken_and_never_early(
        seed in any::<u64>(), least in 0_u64..20, spread in 0_u64..20,
    ) {
        let faults = LinkFaults {
            delay_min: at(least),
            delay_max: at(least + spread),
            ..LinkFaults::default()
        };
        let mut link = Link::new(faults, seed);
        let (mut out, mut sent) = (Vec::new(), Vec::new());
        for now in 0..200 {
            let line = format!("{now}\n").into_bytes();
            link.send(at(now), &line);
            sent.extend(line);
            link.receive(at(now), &mut out);
            prop_assert!(sent.starts_with(&out));
            if let Some(arrival) = link.next_arrival() {
                prop_assert!(arrival > at(now));
            }
        }
        link.receive(at(1000), &mut out);
        prop_assert_eq!(out, sent);
    }
}

/// A device that says every second what it has heard so far, and how much.
#[derive(Debug, Clone, Default)]
struct Parrot {
    now: Span,
    heard: Vec<u8>,
}

impl transport::port::VirtualDevice for Parrot {
    fn now(&self) -> Span {
        self.now
    }

    fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        let next = Span::from_secs(self.now.micros() / 1_000_000 + 1);
        if next <= until {
            self.now = next;
            out.extend(format!("{}\n", self.heard.len()).into_bytes());
        } else {
            self.now = until;
        }
    }

    fn receive(&mut self, bytes: &[u8]) {
        self.heard.extend_from_slice(bytes);
    }
}

#[test]
fn a_device_behind_a_late_link_hears_and_is_heard_late() {
    use transport::port::VirtualDevice;
    let faults = LinkFaults {
        delay_min: at(300),
        delay_max: at(300),
        ..LinkFaults::default()
    };
    let mut device = FaultyDevice::new(Parrot::default(), &faults, 1);
    let mut out = Vec::new();
    device.advance(at(800), &mut out);
    device.receive(b"hello\n");
    assert!(device.device().heard.is_empty());
    device.advance(at(5000), &mut out);
    assert_eq!((device.now(), out.as_slice()), (at(1300), &b"0\n"[..]));
    assert_eq!(device.device().heard, b"hello\n");
    device.advance(at(5000), &mut out);
    assert_eq!((device.now(), out.as_slice()), (at(2300), &b"0\n6\n"[..]));
    device.advance(at(2400), &mut out);
    assert_eq!((device.now(), out.len()), (at(2400), 4));
}
