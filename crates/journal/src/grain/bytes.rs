//! Grains as bytes: columns of whole numbers, each as the difference to the one before, which
//! compresses well; a checksum before them.

use quantity::{Charge, Current, HostTime, SinkTime, Temperature, Voltage};

use super::Grain;
use crate::{Bucket, Extremes};

/// What the bytes begin with; the last character is the form's version.
const MAGIC: &[u8; 8] = b"grains 1";
/// Fast: the bytes are small already.
const LEVEL: i32 = 1;
/// No record is longer; a damaged length allocates no more than that.
const GRAINS_MAX: usize = 1 << 26;

/// Columns of a grain.
const COLUMNS: usize = 15;
/// Where a sensor gave no temperature.
const NONE: i64 = i64::MIN;

fn row(grain: &Grain) -> [i64; COLUMNS] {
    let bucket = &grain.bucket;
    let whole = |value: u64| i64::try_from(value).unwrap_or(i64::MAX);
    let degrees = |value: Temperature| value.millidegrees_celsius();
    let [coldest, mean, hottest] = match &bucket.temperature {
        Some(all) => [all.min, all.mean, all.max].map(degrees),
        None => [NONE; 3],
    };
    [
        bucket.first_at.micros(),
        bucket.last_at.micros(),
        whole(bucket.first_time.micros()),
        whole(bucket.last_time.micros()),
        whole(bucket.count),
        bucket.current.min.microamperes(),
        bucket.current.mean.microamperes(),
        bucket.current.max.microamperes(),
        bucket.voltage.min.microvolts(),
        bucket.voltage.mean.microvolts(),
        bucket.voltage.max.microvolts(),
        coldest,
        mean,
        hottest,
        grain.charge.microcoulombs(),
    ]
}

fn grain(row: [i64; COLUMNS]) -> Option<Grain> {
    let [
        first_at,
        last_at,
        first_time,
        last_time,
        count,
        current_min,
        current_mean,
        current_max,
        voltage_min,
        voltage_mean,
        voltage_max,
        coldest,
        mean,
        hottest,
        charge,
    ] = row;
    let extremes = |[min, mean, max]: [i64; 3]| Extremes { min, mean, max };
    let temperature = (mean != NONE).then(|| extremes([coldest, mean, hottest]));
    Some(Grain {
        bucket: Bucket {
            first_at: HostTime::from_micros(first_at),
            last_at: HostTime::from_micros(last_at),
            first_time: SinkTime::from_micros(u64::try_from(first_time).ok()?),
            last_time: SinkTime::from_micros(u64::try_from(last_time).ok()?),
            count: u64::try_from(count).ok()?,
            current: extremes([current_min, current_mean, current_max])
                .map(Current::from_microamperes),
            voltage: extremes([voltage_min, voltage_mean, voltage_max])
                .map(Voltage::from_microvolts),
            temperature: temperature.map(|all| all.map(Temperature::from_millidegrees_celsius)),
        },
        charge: Charge::from_microcoulombs(charge),
    })
}

impl Extremes<i64> {
    fn map<T>(self, unit: fn(i64) -> T) -> Extremes<T> {
        Extremes {
            min: unit(self.min),
            mean: unit(self.mean),
            max: unit(self.max),
        }
    }
}

pub(super) fn of(grains: &[Grain]) -> Vec<u8> {
    let rows: Vec<[i64; COLUMNS]> = grains.iter().map(row).collect();
    let mut plain = Vec::with_capacity(rows.len() * COLUMNS * size_of::<i64>());
    for column in 0..COLUMNS {
        let mut before = 0_i64;
        for row in &rows {
            let value = row.get(column).copied().unwrap_or_default();
            plain.extend_from_slice(&value.wrapping_sub(before).to_le_bytes());
            before = value;
        }
    }
    let packed = zstd::bulk::compress(&plain, LEVEL).unwrap_or_default();
    let mut bytes = MAGIC.to_vec();
    bytes.extend_from_slice(&(rows.len() as u64).to_le_bytes());
    bytes.extend_from_slice(&crc32c::crc32c(&packed).to_le_bytes());
    bytes.extend_from_slice(&packed);
    bytes
}

pub(super) fn grains(bytes: &[u8]) -> Option<Vec<Grain>> {
    let rest = bytes.strip_prefix(MAGIC)?;
    let (count, rest) = rest.split_first_chunk::<8>()?;
    let (sum, packed) = rest.split_first_chunk::<4>()?;
    let count = usize::try_from(u64::from_le_bytes(*count)).ok()?;
    if count > GRAINS_MAX || crc32c::crc32c(packed) != u32::from_le_bytes(*sum) {
        return None;
    }
    let size = count * COLUMNS * size_of::<i64>();
    let plain = zstd::bulk::decompress(packed, size).ok()?;
    if plain.len() != size {
        return None;
    }
    let mut rows = vec![[0_i64; COLUMNS]; count];
    let mut words = plain.chunks_exact(size_of::<i64>());
    for column in 0..COLUMNS {
        let mut before = 0_i64;
        for row in &mut rows {
            let word = words.next()?.first_chunk::<8>()?;
            before = before.wrapping_add(i64::from_le_bytes(*word));
            *row.get_mut(column)? = before;
        }
    }
    rows.into_iter().map(grain).collect()
}
