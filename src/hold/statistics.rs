//! Statistics of one channel over an interval, one sample at a time.
//!
//! Sums are of deviations from the first sample (Chan, Golub, LeVeque, "Algorithms for computing the sample variance",
//! The American Statistician 37, 1983), so that a large mean costs no digits and no division falls on a sample.

use crate::session::ChannelStatistics;

/// A sample's place in its interval, worked out once a frame.
#[derive(Clone, Copy, Debug)]
pub struct Place {
    /// Microseconds from the interval's first moment, not negative.
    pub us: i64,
    /// Index of its bin.
    pub bin: usize,
}

/// Accumulates one channel.
#[derive(Clone, Debug)]
pub struct Accumulator {
    angle: bool,
    n: u64,
    first: f64,
    sum: f64,
    square: f64,
    min: f64,
    max: f64,
    time: [f64; 3],
    unit_vector: [f64; 2],
    bins: Vec<(f64, u32)>,
    saturated: u32,
    last_us: i64,
    longest_gap_us: i64,
}

impl Accumulator {
    /// Empty. `angle`: values are degrees on a circle. `bins`: how many are expected (more may come).
    pub fn new(angle: bool, bins: usize) -> Self {
        Self {
            angle,
            n: 0,
            first: 0.0,
            sum: 0.0,
            square: 0.0,
            min: f64::INFINITY,
            max: f64::NEG_INFINITY,
            time: [0.0; 3],
            unit_vector: [0.0; 2],
            bins: vec![(0.0, 0); bins],
            saturated: 0,
            last_us: 0,
            longest_gap_us: 0,
        }
    }

    /// Adds one sample.
    #[inline]
    pub fn push(&mut self, place: Place, value: f64, saturated: bool) {
        if self.n == 0 {
            self.first = value;
        }
        let d = if self.angle { self.turn(value) } else { value - self.first };
        self.n += 1;
        self.sum += d;
        self.square += d * d;
        // Samples are finite: no need of what `f64::min` does about NaN.
        self.min = if value < self.min { value } else { self.min };
        self.max = if value > self.max { value } else { self.max };
        let s = place.us as f64;
        self.time[0] += s;
        self.time[1] += s * s;
        self.time[2] += s * d;
        if place.bin >= self.bins.len() {
            self.bins.resize(place.bin + 1, (0.0, 0));
        }
        let bin = &mut self.bins[place.bin];
        bin.0 += d;
        bin.1 += 1;
        self.saturated += u32::from(saturated);
        self.longest_gap_us = self.longest_gap_us.max(place.us - self.last_us);
        self.last_us = place.us;
    }

    /// Adds an angle to the mean of unit vectors; its deviation is the shorter way round.
    #[cold]
    fn turn(&mut self, degrees: f64) -> f64 {
        let radians = degrees.to_radians();
        self.unit_vector[0] += radians.cos();
        self.unit_vector[1] += radians.sin();
        (degrees - self.first + 180.0).rem_euclid(360.0) - 180.0
    }

    /// Samples so far.
    pub fn n(&self) -> u64 {
        self.n
    }

    /// A sample was at an end of its range.
    pub fn saturated(&self) -> bool {
        self.saturated > 0
    }

    /// Every sample had the same value (and there were several).
    pub fn still(&self) -> bool {
        self.n > 1 && self.min == self.max
    }

    /// Longest silence in an interval of `length_us`, its edges included, µs.
    pub fn longest_gap_us(&self, length_us: i64) -> i64 {
        self.longest_gap_us.max(length_us - self.last_us)
    }

    /// The statistics; none without a sample.
    ///
    /// *Output* in the channel's unit: arithmetic mean (angles: mean of unit vectors, 0–360), sd with n − 1, least-squares
    /// slope per s, standard error from the bin means ([`standard_error`]). *Accuracy* against the NIST StRD univariate sets
    /// (`tests/outside.rs`); the error against AR(1) series (`tests/statistics.rs`).
    pub fn finish(&self) -> Option<ChannelStatistics> {
        if self.n == 0 {
            return None;
        }
        let n = self.n as f64;
        let mean = if self.angle {
            self.unit_vector[1].atan2(self.unit_vector[0]).to_degrees().rem_euclid(360.0)
        } else {
            self.first + self.sum / n
        };
        let scatter = (self.square - self.sum * self.sum / n).max(0.0);
        let sd = (self.n > 1).then(|| (scatter / (n - 1.0)).sqrt());
        let [t, tt, tx] = self.time;
        let spread = tt - t * t / n;
        let slope = (self.n > 1 && spread > 0.0).then(|| (tx - t * self.sum / n) / spread * 1e6);
        let bins: Vec<Option<f64>> =
            self.bins.iter().map(|(sum, n)| (*n > 0).then(|| self.first + sum / f64::from(*n))).collect();
        let filled: Vec<f64> = bins.iter().flatten().copied().collect();
        let se = standard_error(&filled);
        Some(ChannelStatistics { n: self.n, mean, sd, min: self.min, max: self.max, se, slope, bins })
    }
}

/// Standard error of the mean of a series whose neighbours are alike.
///
/// *Input* consecutive bin means, three or more. *Output* in their unit; `None` below three. *Method* s·√(τ/m) with
/// τ = (1 + r₁)/(1 − r₁), r₁ the lag-1 autocorrelation cut at 0 (Bayley & Hammersley, Suppl. J. R. Statist. Soc. 8, 1946), applied to
/// bins because sensor noise over slow gusts hides r₁ in raw samples; τ at most m. *Accuracy* 89–95 % coverage of 1.96 se on
/// AR(1) and AR(1) plus white series with bins of 10–40 samples.
///
/// ```
/// use steadytap::hold::statistics::standard_error;
/// let se = standard_error(&[1.0, 2.0, 1.0, 2.0]).unwrap(); // r1 < 0 counts as 0: s / sqrt(4)
/// assert!((se - (1.0f64 / 3.0).sqrt() / 2.0).abs() < 1e-15);
/// ```
pub fn standard_error(means: &[f64]) -> Option<f64> {
    let m = means.len() as f64;
    if means.len() < 3 {
        return None;
    }
    let mean = means.iter().sum::<f64>() / m;
    let square = means.iter().map(|x| (x - mean) * (x - mean)).sum::<f64>();
    let r1 = lag_one_autocorrelation(means).unwrap_or(0.0).max(0.0);
    let tau = if r1 < 1.0 { ((1.0 + r1) / (1.0 - r1)).min(m) } else { m };
    Some((square / (m - 1.0) * tau / m).sqrt())
}

/// Lag-1 autocorrelation coefficient Σ dₜ dₜ₊₁ / Σ dₜ², d the deviation from the mean.
///
/// *Input* the series. *Output* in −1..1; `None` for a constant or shorter than two. *Method* NIST/SEMATECH e-Handbook 1.3.5.12.
pub fn lag_one_autocorrelation(series: &[f64]) -> Option<f64> {
    let n = series.len() as f64;
    let mean = series.iter().sum::<f64>() / n;
    let square = series.iter().map(|x| (x - mean) * (x - mean)).sum::<f64>();
    let neighbours = series.windows(2).map(|w| (w[0] - mean) * (w[1] - mean)).sum::<f64>();
    (square > 0.0).then(|| neighbours / square)
}
