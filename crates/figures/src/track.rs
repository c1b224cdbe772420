//! The course of two values in a bounded number of means, however long they are watched.

/// Means at most. When there would be more, neighbours are put together.
const BINS: usize = 512;

/// Length of a mean at first, seconds.
const WIDTH_S: f64 = 1.0;

/// Two values over time, in means of equal length.
#[derive(Debug, Clone)]
pub(crate) struct Track {
    width_s: f64,
    bins: Vec<Bin>,
}

#[derive(Debug, Clone, Copy, Default)]
struct Bin {
    count: f64,
    seconds: f64,
    values: [f64; 2],
}

/// A mean of the track.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct TrackPoint {
    /// Since the beginning.
    pub(crate) seconds: f64,
    /// As they were added.
    pub(crate) values: [f64; 2],
}

impl Default for Track {
    fn default() -> Self {
        Self {
            width_s: WIDTH_S,
            bins: Vec::new(),
        }
    }
}

impl Track {
    pub(crate) fn add(&mut self, seconds: f64, values: [f64; 2]) {
        while self.place(seconds) >= BINS {
            self.halve();
        }
        let place = self.place(seconds);
        if place >= self.bins.len() {
            self.bins.resize(place + 1, Bin::default());
        }
        if let Some(bin) = self.bins.get_mut(place) {
            bin.count += 1.0;
            bin.seconds += seconds;
            for (sum, value) in bin.values.iter_mut().zip(values) {
                *sum += value;
            }
        }
    }

    /// The means in the order of time.
    pub(crate) fn points(&self) -> Vec<TrackPoint> {
        let filled = self.bins.iter().filter(|bin| bin.count > 0.0);
        filled
            .map(|bin| TrackPoint {
                seconds: bin.seconds / bin.count,
                values: bin.values.map(|sum| sum / bin.count),
            })
            .collect()
    }

    /// First values of the other less those of the one, where both have a mean at the same time.
    pub(crate) fn differences(one: &Self, other: &Self) -> Vec<f64> {
        let (mut one, mut other) = (one.clone(), other.clone());
        while one.width_s < other.width_s {
            one.halve();
        }
        while other.width_s < one.width_s {
            other.halve();
        }
        let mean = |bin: &Bin| (bin.count > 0.0).then(|| bin.values[0] / bin.count);
        let pairs = one.bins.iter().zip(&other.bins);
        pairs
            .filter_map(|(one, other)| Some(mean(other)? - mean(one)?))
            .collect()
    }

    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a time since a beginning is not negative, and the cast saturates"
    )]
    fn place(&self, seconds: f64) -> usize {
        (seconds / self.width_s) as usize
    }

    fn halve(&mut self) {
        self.width_s *= 2.0;
        self.bins = self
            .bins
            .chunks(2)
            .map(|pair| {
                pair.iter().fold(Bin::default(), |sum, bin| Bin {
                    count: sum.count + bin.count,
                    seconds: sum.seconds + bin.seconds,
                    values: add(sum.values, bin.values),
                })
            })
            .collect();
    }
}

fn add([a, b]: [f64; 2], [c, d]: [f64; 2]) -> [f64; 2] {
    [a + c, b + d]
}
