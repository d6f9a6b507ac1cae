//! WAV files: those that replace a cue are read, cues are written.

use crate::shell::{Trouble, files};
use hound::{SampleFormat, WavReader, WavSpec, WavWriter};
use std::f64::consts::PI;
use std::io::Cursor;
use std::path::Path;

/// Largest file, bytes.
const LARGEST: u64 = 10 << 20;
/// Longest sound, s.
const LONGEST_S: u32 = 5;
/// Sample rates that a sound may have, Hz.
const RATES_HZ: std::ops::RangeInclusive<u32> = 4000..=384_000;
/// Peak that a sound is brought down to.
const PEAK: f32 = 0.8;
/// Zero crossings of the resampling kernel on each side.
const CROSSINGS: f64 = 12.0;

/// A sound as its file has it, in one channel.
#[derive(Clone, Debug, PartialEq)]
pub struct Wave {
    /// Samples a second.
    pub rate: u32,
    /// Samples within ±0.8.
    pub samples: Vec<f32>,
}

/// Reads a WAV file: 8, 16, 24 or 32-bit integers or 32-bit floats, mono or stereo (mixed down), at most 5 s and 10 MiB.
///
/// # Errors
/// [`Trouble`] with the file and the remedy when it cannot be read, is no such file, is broken, or is too long.
pub fn read_wav(path: &Path) -> Result<Wave, Trouble> {
    let bytes = files::read(path, LARGEST)?;
    decode(&bytes).map_err(|what| {
        Trouble::new(what).at(path.display()).hint(
            "give a WAV file of at most 5 s: 16-bit, mono, 48 kHz is best; without it the built-in sound is played",
        )
    })
}

/// The sound in the bytes of a WAV file, or why it cannot be used.
///
/// # Errors
/// What is wrong with it, in words.
pub fn decode(bytes: &[u8]) -> Result<Wave, String> {
    let mut reader = WavReader::new(bytes).map_err(broken)?;
    let spec = reader.spec();
    if !(1..=2).contains(&spec.channels) {
        return Err(format!("the sound has {} channels; 1 or 2 are understood", spec.channels));
    }
    if !RATES_HZ.contains(&spec.sample_rate) {
        return Err(format!("{} samples a second: 4000 to 384000 are understood", spec.sample_rate));
    }
    if reader.duration() > LONGEST_S * spec.sample_rate {
        return Err(format!("the sound is longer than {LONGEST_S} s"));
    }
    let read: Vec<f32> = match (spec.sample_format, spec.bits_per_sample) {
        (SampleFormat::Float, 32) => reader.samples::<f32>().collect::<Result<_, _>>().map_err(broken)?,
        (SampleFormat::Int, bits @ (8 | 16 | 24 | 32)) => {
            let full = 2_f32.powi(i32::from(bits) - 1);
            reader.samples::<i32>().map(|s| s.map(|s| s as f32 / full)).collect::<Result<_, _>>().map_err(broken)?
        }
        (_, bits) => return Err(format!("samples of {bits} bits: 8, 16, 24 and 32 are understood")),
    };
    if read.is_empty() {
        return Err("the sound is empty".to_string());
    }
    if read.iter().any(|s| !s.is_finite()) {
        return Err("the sound holds samples that are no numbers".to_string());
    }
    let channels = usize::from(spec.channels);
    let mono: Vec<f32> = read.chunks(channels).map(|c| c.iter().sum::<f32>() / channels as f32).collect();
    Ok(Wave { rate: spec.sample_rate, samples: within_peak(mono) })
}

fn broken(error: hound::Error) -> String {
    match error {
        hound::Error::IoError(_) => "the file ends before its sound does".to_string(),
        hound::Error::Unsupported => "this kind of WAV file is not understood (compressed?)".to_string(),
        hound::Error::FormatError(why) => format!("this is no WAV file, or it is damaged: {why}"),
        other => format!("this is no WAV file, or it is damaged: {other}"),
    }
}

fn within_peak(mut samples: Vec<f32>) -> Vec<f32> {
    let peak = samples.iter().fold(0.0_f32, |peak, s| peak.max(s.abs()));
    if peak > PEAK {
        samples.iter_mut().for_each(|s| *s = (*s * (PEAK / peak)).clamp(-PEAK, PEAK));
    }
    samples
}

/// A sound at another rate, within ±0.8.
///
/// *Method*: windowed-sinc interpolation (Hann, 12 crossings a side), cut off at the lower of both Nyquist frequencies;
/// J. O. Smith, Digital Audio Resampling, "Theory of ideal bandlimited interpolation". *Accuracy*: a 1 kHz tone keeps its level within 0.1 dB
/// between 8 and 192 kHz (test).
pub fn resampled(wave: &Wave, rate: u32) -> Vec<f32> {
    if wave.rate == rate {
        return wave.samples.clone();
    }
    let ratio = f64::from(wave.rate) / f64::from(rate);
    let cut = (1.0 / ratio).min(1.0);
    let reach = CROSSINGS / cut;
    let n = (wave.samples.len() as f64 / ratio).ceil() as usize;
    let moment = |i: usize| {
        let at = i as f64 * ratio;
        let from = (at - reach).ceil().max(0.0) as usize;
        let to = ((at + reach).floor() as usize).min(wave.samples.len() - 1);
        (from..=to).map(|k| f64::from(wave.samples[k]) * kernel(at - k as f64, cut, reach)).sum::<f64>() as f32
    };
    within_peak((0..n).map(moment).collect())
}

fn kernel(x: f64, cut: f64, reach: f64) -> f64 {
    let turn = PI * x * cut;
    let sinc = if turn.abs() < 1e-9 { 1.0 } else { turn.sin() / turn };
    cut * sinc * (0.5 + 0.5 * (PI * x / reach).cos())
}

/// The bytes of a 16-bit mono WAV file.
pub fn encode(samples: &[f32], rate: u32) -> Vec<u8> {
    let spec = WavSpec { channels: 1, sample_rate: rate, bits_per_sample: 16, sample_format: SampleFormat::Int };
    let mut bytes = Cursor::new(Vec::new());
    let mut writer = WavWriter::new(&mut bytes, spec).expect("memory takes a header");
    for sample in samples {
        // A float beyond the range becomes its end.
        let sample = (sample * 32_768.0).round() as i16;
        writer.write_sample(sample).expect("memory takes a sample");
    }
    writer.finalize().expect("memory takes an end");
    bytes.into_inner()
}
