//! The course of a temperature in a bounded number of means, however long it is watched.

/// Means at most. When there would be more, neighbours are put together.
const BINS: usize = 512;

/// Length of a mean at first, seconds.
const WIDTH_S: f64 = 1.0;

/// Temperature and power over time, in means of equal length.
#[derive(Debug, Clone)]
pub(crate) struct Track {
    width_s: f64,
    bins: Vec<Bin>,
}

#[derive(Debug, Clone, Copy, Default)]
struct Bin {
    count: f64,
    seconds: f64,
    degc: f64,
    watts: f64,
}

/// A mean of the track.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct TrackPoint {
    /// Since the beginning.
    pub(crate) seconds: f64,
    pub(crate) degc: f64,
    /// Nominal.
    pub(crate) watts: f64,
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
    pub(crate) fn add(&mut self, seconds: f64, degc: f64, watts: f64) {
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
            bin.degc += degc;
            bin.watts += watts;
        }
    }

    /// The means in the order of time.
    pub(crate) fn points(&self) -> Vec<TrackPoint> {
        let filled = self.bins.iter().filter(|bin| bin.count > 0.0);
        filled
            .map(|bin| TrackPoint {
                seconds: bin.seconds / bin.count,
                degc: bin.degc / bin.count,
                watts: bin.watts / bin.count,
            })
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
                    degc: sum.degc + bin.degc,
                    watts: sum.watts + bin.watts,
                })
            })
            .collect();
    }
}
