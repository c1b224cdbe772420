//! Whether readings have settled enough to be put beside a meter's.
//!
//! The means of the earlier and the later half must agree: within one step of the converter, or
//! within three standard deviations of the difference of two such means, whichever is more.
//! Common practice, no source. A slow drift that is smaller than that is in the residuals.

use quantity::Current;

use super::micro;
use crate::accumulate::{Moments, count};

/// How many standard deviations the two halves' means may differ by.
const DEVIATIONS: f64 = 3.0;
/// Fewest readings that can be judged.
const READINGS_MIN: usize = 4;

/// Why readings have not settled.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum Unsettled {
    /// Not enough of them yet.
    #[error("{readings} of {wanted} readbacks have come since the setpoint was reached")]
    TooFew {
        /// How many there are.
        readings: usize,
        /// How many it takes.
        wanted: usize,
    },
    /// The later ones differ from the earlier ones.
    #[error("the readbacks still move: the later half is {by} from the earlier, {most} may it be")]
    Moving {
        /// By how much.
        by: Current,
        /// How much it may be.
        most: Current,
    },
}

/// Judges the last `wanted` of the current readings, taken with steps of `step`.
///
/// # Errors
/// [`Unsettled`] with what is missing.
pub fn settled(readings: &[Current], wanted: usize, step: Current) -> Result<(), Unsettled> {
    let wanted = wanted.max(READINGS_MIN);
    let few = Unsettled::TooFew {
        readings: readings.len(),
        wanted,
    };
    let first = readings.len().checked_sub(wanted).ok_or(few)?;
    let (earlier, later) = readings.get(first..).ok_or(few)?.split_at(wanted / 2);
    let [earlier, later] = [earlier, later].map(moments);
    let (Some(before), Some(after)) = (earlier.mean(), later.mean()) else {
        return Err(few);
    };
    let variance = |half: &Moments| {
        half.standard_deviation().map_or(0.0, |deviation| {
            deviation * deviation / count(half.number())
        })
    };
    let by = (after - before).abs();
    let most = (DEVIATIONS * (variance(&earlier) + variance(&later)).sqrt()).max(micro(step));
    if by > most {
        let current = |value: f64| Current::from_amperes(value / 1e6).unwrap_or(Current::MAX);
        return Err(Unsettled::Moving {
            by: current(by),
            most: current(most),
        });
    }
    Ok(())
}

fn moments(readings: &[Current]) -> Moments {
    readings.iter().map(|reading| micro(*reading)).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn milli(values: &[i64]) -> Vec<Current> {
        values
            .iter()
            .map(|value| Current::from_milliamperes(*value))
            .collect()
    }

    #[test]
    fn readings_that_stand_still_have_settled() {
        let step = Current::from_milliamperes(1);
        assert_eq!(
            settled(&milli(&[500, 501, 500, 501, 500, 500]), 6, step),
            Ok(())
        );
        // What came before the last six does not count.
        assert_eq!(
            settled(&milli(&[10, 90, 500, 501, 500, 501, 500, 500]), 6, step),
            Ok(())
        );
    }

    #[test]
    fn readings_that_still_move_have_not_settled() {
        let step = Current::from_milliamperes(1);
        let moving = settled(&milli(&[500, 502, 504, 506, 508, 510]), 6, step);
        assert_eq!(
            moving.unwrap_err().to_string(),
            "the readbacks still move: the later half is 6 mA from the earlier, 4.899 mA may it be"
        );
        let few = settled(&milli(&[500, 500]), 6, step);
        assert!(matches!(
            few,
            Err(Unsettled::TooFew {
                readings: 2,
                wanted: 6
            })
        ));
    }
}
