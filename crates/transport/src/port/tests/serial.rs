use std::io::{Read, Write};
use std::os::unix::fs::symlink;
use std::path::Path;
use std::sync::{Mutex, MutexGuard, PoisonError};
use std::time::Duration;

use serialport::{SerialPort, TTYPort};

use super::*;

/// Pseudo-terminals get their numbers anew: a test that waits for its own to come back must not
/// find another test's.
static ONE_AT_A_TIME: Mutex<()> = Mutex::new(());

/// The far end of a port, and the path of the near end.
struct Cable {
    far: TTYPort,
    near: String,
    _alone: Option<MutexGuard<'static, ()>>,
}

fn plug() -> Cable {
    let alone = ONE_AT_A_TIME.lock().unwrap_or_else(PoisonError::into_inner);
    Cable {
        _alone: Some(alone),
        ..plug_again()
    }
}

fn plug_again() -> Cable {
    let (mut far, near) = TTYPort::pair().unwrap();
    far.set_timeout(Duration::from_secs(20)).unwrap();
    let name = near.name().unwrap();
    drop(near);
    Cable {
        far,
        near: name,
        _alone: None,
    }
}

fn open(path: impl AsRef<Path>) -> PortLink<()> {
    let config = SerialConfig {
        path: path.as_ref().to_str().unwrap().to_owned(),
        baud: BAUD_DEFAULT,
    };
    serial(config, HostClock::start()).0
}

#[test]
fn bytes_go_both_ways_over_a_port_opened_by_its_path() {
    let mut cable = plug();
    let mut link = open(&cable.near);
    wait_open(&mut link);
    link.send(b"clock 1 ABCD\n", Urgency::InTurn);
    let mut bytes = [0; 13];
    cable.far.read_exact(&mut bytes).unwrap();
    assert_eq!(&bytes, b"clock 1 ABCD\n");
    // All 256 values: nothing on the way changes a line end or swallows a control byte.
    let all = (0..=255).collect::<Vec<u8>>();
    cable.far.write_all(&all).unwrap();
    assert_eq!(wait_bytes(&mut link, 256), all);
}

#[test]
fn an_idle_port_is_not_a_lost_one() {
    let mut cable = plug();
    let mut link = open(&cable.near);
    wait_open(&mut link);
    let until = link.now() + Span::from_millis(350);
    let heard = link.wait(until);
    assert!(heard.is_none(), "{heard:?}");
    assert!(link.now() >= until);
    cable.far.write_all(b"still here\n").unwrap();
    assert_eq!(wait_bytes(&mut link, 11), b"still here\n");
}

#[test]
fn an_unplugged_port_is_found_again_under_its_name() {
    let folder = tempfile::tempdir().unwrap();
    let name = folder.path().join("usb-sink-left");
    let cable = plug();
    symlink(&cable.near, &name).unwrap();
    let mut link = open(&name);
    wait_open(&mut link);

    std::fs::remove_file(&name).unwrap();
    let Cable { far, _alone, .. } = cable;
    drop(far);
    let reason = wait_lost(&mut link);
    assert!(matches!(reason, LinkError::Gone { .. }), "{reason}");
    let reason = wait_lost(&mut link);
    assert!(matches!(reason, LinkError::Absent { .. }), "{reason}");

    let mut again = plug_again();
    symlink(&again.near, &name).unwrap();
    wait_open(&mut link);
    again.far.write_all(b"back\n").unwrap();
    assert_eq!(wait_bytes(&mut link, 5), b"back\n");
}

#[test]
fn a_port_in_use_is_not_opened_a_second_time() {
    let cable = plug();
    let mut first = open(&cable.near);
    wait_open(&mut first);
    let mut second = open(&cable.near);
    let reason = wait_lost(&mut second);
    assert!(matches!(reason, LinkError::InUse { .. }), "{reason}");
    drop(first);
    wait_open(&mut second);
}

#[test]
fn a_port_that_is_not_there_is_named_with_its_mend() {
    let mut link = open("/dev/serial/by-id/usb-nobody-made-this-one");
    assert_eq!(
        wait_lost(&mut link).to_string(),
        "no port /dev/serial/by-id/usb-nobody-made-this-one; plug the sink in, or correct \
         its `path` in the bench file"
    );
}

#[test]
fn a_sink_that_stops_reading_blocks_nobody_and_off_overtakes_what_waits() {
    let mut cable = plug();
    let mut link = open(&cable.near);
    wait_open(&mut link);
    let before = link.now();
    for place in 0..5_000 {
        link.send(format!("filler {place:05}\n").as_bytes(), Urgency::InTurn);
    }
    // The far end takes nothing, and the operating system holds far less than this; still
    // nobody waits.
    let took = link.now().saturating_since(before);
    assert!(took < Span::from_secs(1), "{took:?}");
    link.send(b"\noff 7 ABCD\n", Urgency::Overtakes);

    let mut all = Vec::new();
    let mut bytes = [0; 4096];
    while !all.ends_with(b"\noff 7 ABCD\n") {
        let len = cable.far.read(&mut bytes).unwrap();
        all.extend_from_slice(&bytes[..len]);
    }
    // What the operating system had taken before may come out; what waited behind it may not.
    assert!(all.len() < 20_000, "{} bytes before off", all.len());
    cable.far.set_timeout(Duration::from_millis(300)).unwrap();
    let after = cable.far.read(&mut bytes);
    assert!(after.is_err(), "{after:?} after off");
}
