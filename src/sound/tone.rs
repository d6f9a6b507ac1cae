//! Notes → samples: a fundamental with harmonics, soft at both ends, nothing above 3 kHz.
//!
//! A fundamental with at least four harmonics is easier to hear through the noise of a cabin, and to place, than a pure
//! tone (IEC 60601-1-8, which asks for four); ramps of 20–30 ms neither click nor startle.

use super::Cue;
use super::pattern::{Note, notes_of};
use std::f64::consts::{PI, TAU};

/// Weights of the fundamental and its harmonics: flat enough that the road, which is loudest below 500 Hz, masks few of them.
const WEIGHTS: [f64; 5] = [1.0, 0.8, 0.65, 0.5, 0.35];
/// Harmonics fade out between these two frequencies, Hz.
const FADE_HZ: (f64, f64) = (2800.0, 3000.0);
/// Length of a rise or fall, s.
pub const RAMP_S: f64 = 0.025;
/// Peak of the cues that must not be missed.
const LOUD: f64 = 0.8;
/// Peak of those that only follow the window.
const SOFT: f64 = 0.4;

/// Samples of a cue's sound.
///
/// *Input*: sample rate, Hz, at least 8000. *Output*: mono samples, peak 0.8 at most (of full scale 1). *Method*: additive synthesis,
/// every note at a level of its own so that all of one cue are equally loud.
///
/// ```
/// use steadytap::sound::{Cue, synthesise};
/// let kept = synthesise(Cue::Kept, 48_000);
/// assert_eq!(kept.len(), 48 * 370);
/// assert_eq!(kept[0], 0.0);
/// ```
pub fn synthesise(cue: Cue, rate: u32) -> Vec<f32> {
    let peak = if cue.is_of_the_window() && cue != Cue::Held { SOFT } else { LOUD };
    let mut samples = Vec::new();
    for note in notes_of(cue) {
        samples.resize(samples.len() + samples_in(note.rest_ms, rate), 0.0);
        sound(&note, peak, rate, &mut samples);
    }
    samples
}

fn samples_in(ms: u32, rate: u32) -> usize {
    (u64::from(ms) * u64::from(rate) / 1000) as usize
}

fn sound(note: &Note, peak: f64, rate: u32, into: &mut Vec<f32>) {
    let (n, rate) = (samples_in(note.length_ms, rate), f64::from(rate));
    let ramp = RAMP_S * rate;
    let mut phase = 0.0;
    into.extend((0..n).map(|i| {
        let hz = note.from_hz + (note.to_hz - note.from_hz) * i as f64 / n as f64;
        let ends = raised_cosine(i as f64 / ramp) * raised_cosine((n - 1 - i) as f64 / ramp);
        let sample = peak * ends * timbre(phase, hz);
        phase = (phase + hz / rate).fract();
        sample as f32
    }));
}

/// One moment of the tone, within ±1. `phase` in turns of the fundamental.
pub(super) fn timbre(phase: f64, hz: f64) -> f64 {
    let harmonics = (1_u8..).zip(WEIGHTS).map(|(k, weight)| {
        let k = f64::from(k);
        weight * audible(k * hz) * (TAU * k * phase).sin()
    });
    harmonics.sum::<f64>() / LARGEST
}

/// The largest value of the sum of all harmonics over a turn of the fundamental is 2.468; rounded up.
const LARGEST: f64 = 2.47;

/// How much of a harmonic at this frequency is left.
fn audible(hz: f64) -> f64 {
    let (from, to) = FADE_HZ;
    raised_cosine((to - hz) / (to - from))
}

/// 0 at and below 0, 1 at and above 1, a half cosine between.
pub(super) fn raised_cosine(x: f64) -> f64 {
    0.5 - 0.5 * (PI * x.clamp(0.0, 1.0)).cos()
}
