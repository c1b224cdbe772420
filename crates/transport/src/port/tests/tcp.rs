use std::io::{Read, Write};
use std::net::{TcpListener, TcpStream};

use super::*;

fn accept(listener: &TcpListener) -> TcpStream {
    let (stream, _) = listener.accept().unwrap();
    stream
        .set_read_timeout(Some(std::time::Duration::from_secs(20)))
        .unwrap();
    stream
}

#[test]
fn bytes_go_both_ways_and_a_closed_connection_is_made_again() {
    let listener = TcpListener::bind("127.0.0.1:0").unwrap();
    let address = listener.local_addr().unwrap().to_string();
    let (mut link, _commands) = super::super::tcp::<()>(address, HostClock::start());
    let mut far = accept(&listener);
    wait_open(&mut link);
    link.send(b"clock 1 ABCD\n", Urgency::InTurn);
    let mut bytes = [0; 13];
    far.read_exact(&mut bytes).unwrap();
    assert_eq!(&bytes, b"clock 1 ABCD\n");
    far.write_all(b"clock 1 5 ABCD\n").unwrap();
    assert_eq!(wait_bytes(&mut link, 15), b"clock 1 5 ABCD\n");

    drop(far);
    let reason = wait_lost(&mut link);
    assert!(matches!(reason, LinkError::Gone { .. }), "{reason}");
    let mut far = accept(&listener);
    wait_open(&mut link);
    far.write_all(b"again\n").unwrap();
    assert_eq!(wait_bytes(&mut link, 6), b"again\n");
}

#[test]
fn bytes_for_a_link_that_is_down_are_thrown_away() {
    let listener = TcpListener::bind("127.0.0.1:0").unwrap();
    let address = listener.local_addr().unwrap().to_string();
    let (mut link, _commands) = super::super::tcp::<()>(address, HostClock::start());
    let far = accept(&listener);
    wait_open(&mut link);
    drop(far);
    wait_lost(&mut link);
    link.send(b"step\n", Urgency::InTurn);
    let mut far = accept(&listener);
    wait_open(&mut link);
    link.send(b"clock\n", Urgency::InTurn);
    let mut bytes = [0; 6];
    far.read_exact(&mut bytes).unwrap();
    assert_eq!(&bytes, b"clock\n");
}

#[test]
fn an_address_where_nobody_listens_is_named() {
    let listener = TcpListener::bind("127.0.0.1:0").unwrap();
    let address = listener.local_addr().unwrap().to_string();
    drop(listener);
    let (mut link, _commands) = super::super::tcp::<()>(address.clone(), HostClock::start());
    let reason = wait_lost(&mut link);
    assert!(
        matches!(&reason, LinkError::Open { name, .. } if *name == address),
        "{reason}"
    );
}

#[test]
fn commands_come_before_bytes_and_wake_the_worker() {
    let listener = TcpListener::bind("127.0.0.1:0").unwrap();
    let address = listener.local_addr().unwrap().to_string();
    let (mut link, commands) = super::super::tcp::<&str>(address, HostClock::start());
    let mut far = accept(&listener);
    wait_open(&mut link);
    let waker = std::thread::spawn(move || {
        commands.give("off").unwrap();
        commands
    });
    let command = wait_for(&mut link, |inbox| {
        if let Inbox::Command(command) = inbox {
            Some(command)
        } else {
            None
        }
    });
    assert_eq!(command, "off");
    let commands = waker.join().unwrap();
    far.write_all(b"noise\n").unwrap();
    assert_eq!(wait_bytes(&mut link, 6), b"noise\n");
    drop(link);
    assert_eq!(commands.give("off"), Err(CommandRefused::Ended));
}
