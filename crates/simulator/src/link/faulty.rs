//! A device behind a faulty link, still a device.

use quantity::Span;
use transport::port::VirtualDevice;

use super::{Link, LinkCounts, LinkFaults};

/// A device with a [`Link`] in each direction.
#[derive(Debug, Clone)]
pub struct FaultyDevice<D> {
    device: D,
    now: Span,
    to_device: Link,
    to_host: Link,
}

impl<D: VirtualDevice> FaultyDevice<D> {
    /// A device behind a link with these faults in both directions.
    pub fn new(device: D, faults: &LinkFaults, seed: u64) -> Self {
        Self {
            now: device.now(),
            device,
            to_device: Link::new(faults.clone(), seed),
            to_host: Link::new(faults.clone(), seed.wrapping_add(1)),
        }
    }

    /// The device itself.
    pub const fn device(&self) -> &D {
        &self.device
    }

    /// The device itself, for those who break it.
    pub const fn device_mut(&mut self) -> &mut D {
        &mut self.device
    }

    /// What became of the bytes: towards the device, towards the host.
    pub fn counts(&self) -> (LinkCounts, LinkCounts) {
        (self.to_device.counts(), self.to_host.counts())
    }

    /// Hands the device what has reached it by now.
    fn deliver(&mut self) {
        let mut arrived = Vec::new();
        self.to_device.receive(self.now, &mut arrived);
        if !arrived.is_empty() {
            self.device.receive(&arrived);
        }
    }
}

impl<D: VirtualDevice> VirtualDevice for FaultyDevice<D> {
    fn now(&self) -> Span {
        self.now
    }

    fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        let before = out.len();
        loop {
            self.deliver();
            self.to_host.receive(self.now, out);
            if out.len() > before || self.now >= until {
                return;
            }
            // The next moment at which anything can happen on either link.
            let arrivals = [self.to_device.next_arrival(), self.to_host.next_arrival()];
            let next = arrivals.into_iter().flatten().fold(until, Span::min);
            let mut sent = Vec::new();
            self.device.advance(next, &mut sent);
            self.now = self.device.now();
            if !sent.is_empty() {
                self.to_host.send(self.now, &sent);
            }
        }
    }

    fn receive(&mut self, bytes: &[u8]) {
        self.to_device.send(self.now, bytes);
        self.deliver();
    }
}
