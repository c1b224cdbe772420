//! Real pseudo-terminals, real sockets, a small device in virtual time.

mod in_process;
mod queues;
#[cfg(unix)]
mod serial;
mod tcp;

use quantity::Span;

use super::*;

/// The longest anything here may take on a busy machine.
const PATIENCE: Span = Span::from_secs(20);

/// Waits until a link brings what is looked for; everything else goes by.
#[track_caller]
fn wait_for<C, T>(link: &mut impl Link<C>, mut pick: impl FnMut(Inbox<C>) -> Option<T>) -> T {
    let end = link.now() + PATIENCE;
    while link.now() < end {
        if let Some(found) = link.wait(end).and_then(&mut pick) {
            return found;
        }
    }
    panic!("nothing came in {PATIENCE:?}");
}

#[track_caller]
fn wait_open<C>(link: &mut impl Link<C>) {
    wait_for(link, |inbox| matches!(inbox, Inbox::LinkBack).then_some(()));
}

#[track_caller]
fn wait_lost<C>(link: &mut impl Link<C>) -> LinkError {
    wait_for(link, |inbox| {
        if let Inbox::LinkLost(reason) = inbox {
            Some(reason)
        } else {
            None
        }
    })
}

/// Waits until so many bytes have come.
#[track_caller]
fn wait_bytes<C>(link: &mut impl Link<C>, len: usize) -> Vec<u8> {
    let mut all = Vec::new();
    wait_for(link, |inbox| {
        if let Inbox::Bytes(bytes) = inbox {
            all.extend_from_slice(&bytes);
        }
        (all.len() >= len).then_some(())
    });
    all
}
