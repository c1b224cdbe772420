//! A record in grains: every few readbacks in one, with their extremes, so that a plot of any
//! stretch of a long record is made without reading the record again.
//!
//! Grains are derived from the record and can be made anew from it at any time. They are exact:
//! a bucket of grains has the same least, mean and largest as one of the readbacks themselves,
//! only its borders lie between grains.
//!
//! What it deliberately does not do: replace the record for anything but a picture.

mod bytes;

use std::ops::Range;

use quantity::{Charge, Current, HostTime, Temperature, Voltage};
use sink::correction::Correction;
use wire::Reading;

use crate::account::Account;
use crate::thin::{Extremes, Filling, Point};
use crate::{Bucket, Readings};

/// Readbacks in one grain.
pub const GRAIN: u32 = 32;

/// Some readbacks after each other in one, true values.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Grain {
    /// All but the charge.
    pub bucket: Bucket,
    /// True charge at its first readback, since the first of the record.
    pub charge: Charge,
}

/// A record's grains in order, and what is needed to go on where they end.
#[derive(Debug, Clone)]
pub struct Grains {
    correction: Correction,
    account: Account,
    full: Vec<Grain>,
    filling: Option<(Charge, Filling)>,
}

impl Grains {
    /// None yet.
    pub fn new(correction: Correction) -> Self {
        Self {
            correction,
            account: Account::new(correction),
            full: Vec::new(),
            filling: None,
        }
    }

    /// The same, going on where these end but without what they hold: for a stretch that is read
    /// again later, when it is complete.
    #[must_use]
    pub fn continued(&self) -> Self {
        Self {
            correction: self.correction,
            account: self.account.clone(),
            full: Vec::new(),
            filling: self.filling.clone(),
        }
    }

    /// Takes further readbacks, in order.
    pub fn take(&mut self, readings: &Readings) {
        for (index, &at) in readings.at.iter().enumerate() {
            let (Some(reading), Some(&number)) = (readings.get(index), readings.number.get(index))
            else {
                return;
            };
            self.account.row(number, at, &reading, "");
            self.add(at, &reading);
        }
    }

    fn add(&mut self, at: HostTime, reading: &Reading) {
        let point = Point::new(at, reading, &self.correction);
        let charge = self.account.charge();
        match &mut self.filling {
            None => self.filling = Some((charge, Filling::new(&point))),
            Some((_, filling)) => filling.take(&point),
        }
        if let Some((charge, filling)) = &self.filling
            && filling.count() >= u64::from(GRAIN)
        {
            let (bucket, charge) = (filling.bucket(), *charge);
            self.full.push(Grain { bucket, charge });
            self.filling = None;
        }
    }

    /// The grains that are full.
    pub fn full(&self) -> &[Grain] {
        &self.full
    }

    /// Gives the full grains away and goes on without them.
    pub fn take_full(&mut self) -> Vec<Grain> {
        std::mem::take(&mut self.full)
    }

    /// The grain that is being filled.
    pub fn last(&self) -> Option<Grain> {
        self.filling.as_ref().map(|(charge, filling)| Grain {
            bucket: filling.bucket(),
            charge: *charge,
        })
    }

    /// Grains as bytes, to be kept beside a record that is complete.
    pub fn bytes_of(grains: &[Grain]) -> Vec<u8> {
        bytes::of(grains)
    }

    /// The grains of a complete record from its bytes; `None` if they are not what
    /// [`Grains::bytes_of`] makes.
    pub fn from_bytes(bytes: &[u8]) -> Option<Vec<Grain>> {
        bytes::grains(bytes)
    }
}

/// Joins grains that begin in a stretch of host time into at most so many buckets of equal time.
pub fn gather(
    grains: impl Iterator<Item = Grain>,
    stretch: &Range<HostTime>,
    buckets_max: u32,
) -> Vec<Grain> {
    let length = stretch.end.saturating_since(stretch.start).micros();
    if length == 0 || buckets_max == 0 {
        return Vec::new();
    }
    let width = length.div_ceil(u64::from(buckets_max));
    let mut gathered = Vec::new();
    let mut filling: Option<(u64, Joined)> = None;
    for grain in grains {
        let first = grain.bucket.first_at;
        if !stretch.contains(&first) {
            continue;
        }
        let place = first.saturating_since(stretch.start).micros() / width;
        match &mut filling {
            Some((open, joined)) if *open == place => joined.add(&grain),
            _ => {
                let full = filling.replace((place, Joined::new(&grain)));
                gathered.extend(full.map(|(_, full)| full.grain()));
            }
        }
    }
    gathered.extend(filling.map(|(_, last)| last.grain()));
    gathered
}

/// Grains joined into one.
struct Joined {
    grain: Grain,
    current: i128,
    voltage: i128,
    /// Sum of the means, and of how many readbacks.
    temperature: (i128, u64),
}

impl Joined {
    fn new(grain: &Grain) -> Self {
        let bucket = &grain.bucket;
        let count = i128::from(bucket.count);
        let degrees = |all: &Extremes<Temperature>| all.mean.millidegrees_celsius();
        Self {
            grain: *grain,
            current: i128::from(bucket.current.mean.microamperes()) * count,
            voltage: i128::from(bucket.voltage.mean.microvolts()) * count,
            temperature: bucket.temperature.as_ref().map_or((0, 0), |all| {
                (i128::from(degrees(all)) * count, bucket.count)
            }),
        }
    }

    fn add(&mut self, grain: &Grain) {
        let other = Self::new(grain);
        self.current += other.current;
        self.voltage += other.voltage;
        self.temperature.0 += other.temperature.0;
        self.temperature.1 += other.temperature.1;
        let (mine, new) = (&mut self.grain.bucket, &grain.bucket);
        mine.last_at = new.last_at;
        mine.last_time = new.last_time;
        mine.count += new.count;
        mine.current.widen(&new.current);
        mine.voltage.widen(&new.voltage);
        match (&mut mine.temperature, &new.temperature) {
            (Some(mine), Some(new)) => mine.widen(new),
            (None, Some(new)) => mine.temperature = Some(*new),
            (_, None) => {}
        }
    }

    fn grain(mut self) -> Grain {
        let mean = |sum: i128, count: u64| {
            let mean = sum.checked_div_euclid(i128::from(count));
            mean.and_then(|mean| i64::try_from(mean).ok()).unwrap_or(0)
        };
        let bucket = &mut self.grain.bucket;
        bucket.current.mean = Current::from_microamperes(mean(self.current, bucket.count));
        bucket.voltage.mean = Voltage::from_microvolts(mean(self.voltage, bucket.count));
        if let Some(all) = &mut bucket.temperature {
            let (sum, count) = self.temperature;
            all.mean = Temperature::from_millidegrees_celsius(mean(sum, count));
        }
        self.grain
    }
}

#[cfg(test)]
mod tests;
