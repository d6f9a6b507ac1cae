//! The guidance tone: quiet, only beside the window, pitch rising while too fast and falling while too slow.
//!
//! The further off, the faster it glides. It fades in and out and at every turn, so that it never clicks, whatever the speed does.

use super::pattern::{HIGH_HZ, LOW_HZ};
use super::tone::{RAMP_S, raised_cosine, timbre};

/// Peak of the tone: -24 dB of full scale, rounded down.
pub const PEAK: f64 = 0.063;
/// Beyond so many tolerances outside the edge nobody is about to come back.
const REACH_TOLERANCES: f64 = 3.0;
/// … but at least so far, km/h.
const REACH_KMH: f64 = 8.0;
/// Length of one glide at the edge of the window and at the end of the reach, s.
const GLIDE_S: (f64, f64) = (0.9, 0.4);

/// Where the speed is beside the window: -1 at the lower end of the reach, +1 at the upper, near 0 at the edges of the window;
/// none inside the window or out of reach.
///
/// ```
/// use steadytap::sound::guidance::place;
/// assert_eq!(place(101.0, 100.0, 2.0), None);
/// assert_eq!(place(106.0, 100.0, 2.0), Some(0.5));
/// assert_eq!(place(90.0, 100.0, 2.0), Some(-1.0));
/// assert_eq!(place(89.0, 100.0, 2.0), None);
/// ```
pub fn place(speed_kmh: f64, target_kmh: f64, tolerance_kmh: f64) -> Option<f64> {
    let off = speed_kmh - target_kmh;
    let beyond = off.abs() - tolerance_kmh;
    let reach = (REACH_TOLERANCES * tolerance_kmh).max(REACH_KMH);
    (beyond > 0.0 && beyond <= reach).then(|| (beyond / reach).copysign(off))
}

/// The tone as it goes on from block to block.
#[derive(Clone, Debug, Default)]
pub struct Guidance {
    /// Phase of the fundamental, turns.
    phase: f64,
    /// How far the glide has gone, 0–1.
    glide: f64,
    /// How far it has faded in, 0–1.
    level: f64,
    /// Where the speed was last.
    place: f64,
}

impl Guidance {
    /// It has faded out.
    pub fn is_silent(&self) -> bool {
        self.level == 0.0
    }

    /// The next `n` samples; `place` as [`place`] gives it.
    ///
    /// *Output*: mono samples, never above -24 dB of full scale; zeros when it has faded out.
    pub fn block(&mut self, place: Option<f64>, rate: u32, n: usize) -> Vec<f32> {
        (0..n).map(|_| self.sample(place, f64::from(rate)) as f32).collect()
    }

    fn sample(&mut self, place: Option<f64>, rate: f64) -> f64 {
        // A change of side fades out first: the glide must not turn in the middle.
        let wanted = place.filter(|p| self.level == 0.0 || p.signum() == self.place.signum());
        self.place = wanted.unwrap_or(self.place).clamp(-1.0, 1.0);
        let step = if wanted.is_some() { 1.0 } else { -1.0 } / (RAMP_S * rate);
        let before = self.level;
        self.level = (self.level + step).clamp(0.0, 1.0);
        if self.level == 0.0 {
            return 0.0;
        }
        if before == 0.0 {
            (self.glide, self.phase) = (0.0, 0.0);
        }
        let length_s = GLIDE_S.0 + (GLIDE_S.1 - GLIDE_S.0) * self.place.abs();
        let ends =
            raised_cosine(self.glide * length_s / RAMP_S) * raised_cosine((1.0 - self.glide) * length_s / RAMP_S);
        let up = if self.place > 0.0 { self.glide } else { 1.0 - self.glide };
        let hz = LOW_HZ + (HIGH_HZ - LOW_HZ) * up;
        let sample = PEAK * raised_cosine(self.level) * ends * timbre(self.phase, hz);
        self.phase = (self.phase + hz / rate).fract();
        self.glide += 1.0 / (length_s * rate);
        if self.glide >= 1.0 {
            self.glide = 0.0;
        }
        sample
    }
}
