use std::time::Duration;

use super::super::mailbox::Mailbox;
use super::super::outbound::{Outbound, Piece};
use super::*;

#[test]
fn a_command_overtakes_bytes_that_wait() {
    let mailbox = Mailbox::new();
    let commands = Commands::new(&mailbox);
    mailbox.put_back();
    mailbox.put_bytes(b"one ");
    mailbox.put_bytes(b"two");
    commands.give(7).unwrap();
    let next = || mailbox.wait(Duration::ZERO);
    assert!(matches!(next(), Some(Inbox::Command(7))));
    assert!(matches!(next(), Some(Inbox::LinkBack)));
    assert!(matches!(next(), Some(Inbox::Bytes(bytes)) if bytes == b"one two"));
    assert!(next().is_none());
}

#[test]
fn bytes_of_before_a_loss_are_not_joined_with_those_of_after() {
    let mailbox = Mailbox::<()>::new();
    mailbox.put_bytes(b"half a li");
    mailbox.put_lost(LinkError::Absent {
        name: "left".to_owned(),
    });
    mailbox.put_bytes(b"ne\n");
    let next = || mailbox.wait(Duration::ZERO);
    assert!(matches!(next(), Some(Inbox::Bytes(bytes)) if bytes == b"half a li"));
    assert!(matches!(next(), Some(Inbox::LinkLost(_))));
    assert!(matches!(next(), Some(Inbox::Bytes(bytes)) if bytes == b"ne\n"));
}

#[test]
fn commands_are_bounded_and_bytes_wait_for_room() {
    let mailbox = Mailbox::new();
    let commands = Commands::new(&mailbox);
    let refused = (0..2_000).find_map(|place| commands.give(place).err());
    assert_eq!(refused, Some(CommandRefused::Full));
    let reader = {
        let mailbox = std::sync::Arc::clone(&mailbox);
        std::thread::spawn(move || (0..1_000).all(|_| mailbox.put_bytes(&[b'x'; 4096])))
    };
    let mut taken = 0;
    while taken < 1_000 * 4096 {
        if let Some(Inbox::Bytes(bytes)) = mailbox.wait(Duration::from_secs(20)) {
            assert!(bytes.len() <= 256 * 1024);
            taken += bytes.len();
        }
    }
    assert!(reader.join().unwrap());
    mailbox.end();
    assert!(!mailbox.put_bytes(b"x"));
}

#[test]
fn what_is_written_ends_with_a_line_and_off_replaces_what_waits() {
    let outbound = Outbound::new();
    for _ in 0..30 {
        outbound.put(b"0123456789\n", Urgency::InTurn);
    }
    let Piece::Write { bytes, discard } = outbound.take() else {
        panic!("nothing to write");
    };
    assert!(!discard);
    assert_eq!(bytes.len(), 253);
    assert!(!outbound.is_overtaken());
    outbound.put(b"\noff\n", Urgency::Overtakes);
    assert!(outbound.is_overtaken());
    assert_eq!(
        outbound.take(),
        Piece::Write {
            bytes: b"\noff\n".to_vec(),
            discard: true
        }
    );
    outbound.end();
    assert_eq!(outbound.take(), Piece::End);
}

#[test]
fn a_full_queue_takes_no_part_of_what_does_not_fit() {
    let outbound = Outbound::new();
    for _ in 0..100 {
        outbound.put(&[b'x'; 1_000], Urgency::InTurn);
    }
    outbound.put(b"\noff\n", Urgency::Overtakes);
    assert!(matches!(outbound.take(), Piece::Write { bytes, .. } if bytes == b"\noff\n"));
}
