//! The segments of a record that were looked at last, kept decoded.
//!
//! Whoever looks closely at a record looks again: a little earlier, later, closer. Each look asks
//! for the same one or two segments, and decoding one takes longer than all else about it. So
//! they are kept as true points, a few segments and no more, and where each segment begins is
//! asked of the disk once.
//!
//! Invariants:
//! - Only a segment to which nothing is added any more is kept.
//! - The answer is that of [`thin`](crate::thin), whatever is kept.
//!
//! What it deliberately does not do: notice that a file was altered after it was read. A record
//! that is sealed stays as it is; whether it did is for [`crate::verify`] to say.

use std::collections::VecDeque;
use std::ops::Range;

use quantity::HostTime;

use crate::thin::{Point, Thinning, begins, points_of, touched};
use crate::{Bucket, JournalError, Record};

/// Points kept of one record, some 80 bytes each: two segments at the least readback interval.
/// The segments of the last look are always kept.
const POINTS_MAX: usize = 300_000;

/// What is kept of one record.
#[derive(Debug, Default)]
pub struct Near {
    /// When each complete segment begins.
    begins: Vec<Option<HostTime>>,
    /// Segments, the latest looked at first.
    held: VecDeque<(usize, Vec<Point>)>,
}

impl Near {
    /// As [`thin`](crate::thin), with what is kept of the record; it must be the same one each
    /// time.
    ///
    /// # Errors
    /// As [`thin`](crate::thin).
    pub fn thin(
        &mut self,
        record: &Record,
        stretch: &Range<HostTime>,
        buckets_max: u32,
    ) -> Result<Vec<Bucket>, JournalError> {
        let Some(mut thinning) = Thinning::new(stretch, buckets_max) else {
            return Ok(Vec::new());
        };
        let segments = self.touched(record, stretch)?;
        let complete = record.segments_complete();
        for segment in segments.clone() {
            if let Some(place) = self.held.iter().position(|(held, _)| *held == segment) {
                // It is the latest looked at.
                let found = self.held.remove(place);
                self.held.extend(found);
                self.held.rotate_right(1);
            } else {
                let points = points_of(record, segment)?;
                self.held.push_front((segment, points));
            }
            if let Some((_, points)) = self.held.front() {
                thinning.take(points);
            }
            if segment >= complete {
                // It still grows.
                self.held.pop_front();
            }
        }
        self.bound(segments.len());
        Ok(thinning.finish())
    }

    /// How many points are kept.
    pub fn points(&self) -> usize {
        self.held.iter().map(|(_, points)| points.len()).sum()
    }

    /// Lets go of all that is kept.
    pub fn clear(&mut self) {
        *self = Self::default();
    }

    fn touched(
        &mut self,
        record: &Record,
        stretch: &Range<HostTime>,
    ) -> Result<Range<usize>, JournalError> {
        let complete = record.segments_complete();
        for segment in self.begins.len()..complete {
            self.begins.push(begins(record, segment)?);
        }
        let mut all = self.begins.clone();
        for segment in complete..record.segments().len() {
            all.push(begins(record, segment)?);
        }
        Ok(touched(&all, stretch))
    }

    /// Lets go of the segments that were looked at longest ago, bar those of the last look.
    fn bound(&mut self, last: usize) {
        let mut points = self.points();
        while points > POINTS_MAX && self.held.len() > last.max(1) {
            points -= self.held.pop_back().map_or(0, |(_, points)| points.len());
        }
    }
}
