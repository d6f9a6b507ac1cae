//! Elsewhere than on Linux: the default sound device of the system.

use super::Guide;
use crate::sound::guidance::Guidance;
use cpal::traits::{DeviceTrait, HostTrait, StreamTrait};
use cpal::{ErrorKind, FromSample, SampleFormat, SizedSample, Stream, SupportedStreamConfig};
use std::sync::mpsc::{Sender, channel};
use std::sync::{Arc, Mutex, PoisonError};
use std::time::Duration;

/// How much longer than its sound a device may take.
const PATIENCE: Duration = Duration::from_millis(800);

/// The default device as it was found.
pub struct Server {
    device: cpal::Device,
    config: SupportedStreamConfig,
    guidance: Option<Stream>,
    trouble: Arc<Mutex<Option<String>>>,
}

impl Server {
    /// Finds it.
    ///
    /// # Errors
    /// Why not, in words.
    pub fn connect() -> Result<Self, String> {
        let device = cpal::default_host().default_output_device().ok_or("there is no sound device")?;
        let config = device.default_output_config().map_err(|e| format!("the sound device refuses: {e}"))?;
        Ok(Self { device, config, guidance: None, trouble: Arc::default() })
    }

    /// What plays, for the screen.
    pub fn name(&self) -> &'static str {
        "sound device"
    }

    /// Samples a second.
    pub fn rate(&self) -> u32 {
        self.config.sample_rate()
    }

    /// Plays to the end.
    ///
    /// # Errors
    /// Why not, in words: the device is of no use any more.
    pub fn play(&mut self, samples: &Arc<[f32]>) -> Result<(), String> {
        let length = Duration::from_secs_f64(samples.len() as f64 / f64::from(self.rate()));
        let (samples, mut at) = (samples.clone(), 0);
        let (done, is_done) = channel();
        let stream = self.stream(move |n| {
            let end = samples.len().min(at + n);
            let block = samples[at..end].to_vec();
            at = end;
            tell_end(&block, &done);
            block
        })?;
        let played = is_done.recv_timeout(length + PATIENCE);
        drop(stream);
        self.alive()?;
        played.map_err(|_| "the sound device does not play".to_string())
    }

    /// Starts the guidance tone when there is a place for it, and lets it go when it has faded.
    ///
    /// # Errors
    /// As [`Server::play`].
    pub fn guide(&mut self, guide: &Arc<Guide>) -> Result<(), String> {
        let ended = self.guidance.is_none() || guide.has_faded();
        if ended {
            self.guidance = None;
        }
        if ended && guide.place().is_some() {
            guide.begin();
            let (guide, mut tone, rate) = (guide.clone(), Guidance::default(), self.rate());
            let stream = self.stream(move |n| {
                let block = tone.block(guide.place(), rate, n);
                if guide.place().is_none() && tone.is_silent() {
                    guide.faded();
                }
                block
            })?;
            self.guidance = Some(stream);
        }
        self.alive()
    }

    /// The device has not failed.
    ///
    /// # Errors
    /// Why it has, in words.
    pub fn alive(&mut self) -> Result<(), String> {
        match &*self.trouble.lock().unwrap_or_else(PoisonError::into_inner) {
            Some(why) => Err(why.clone()),
            None => Ok(()),
        }
    }

    fn stream(&self, source: impl FnMut(usize) -> Vec<f32> + Send + 'static) -> Result<Stream, String> {
        let stream = match self.config.sample_format() {
            SampleFormat::F32 => self.of::<f32>(source),
            SampleFormat::I16 => self.of::<i16>(source),
            SampleFormat::U16 => self.of::<u16>(source),
            SampleFormat::I32 => self.of::<i32>(source),
            format => Err(format!("the sound device wants samples of {format}")),
        }?;
        stream.play().map_err(|e| format!("the sound device does not play: {e}"))?;
        Ok(stream)
    }

    fn of<T: SizedSample + FromSample<f32>>(
        &self,
        mut source: impl FnMut(usize) -> Vec<f32> + Send + 'static,
    ) -> Result<Stream, String> {
        let channels = usize::from(self.config.channels()).max(1);
        let trouble = self.trouble.clone();
        let failed = move |e: cpal::Error| {
            if matches!(e.kind(), ErrorKind::Xrun | ErrorKind::DeviceChanged | ErrorKind::RealtimeDenied) {
                return; // A gap in the sound, or another device that plays on: no loss.
            }
            *trouble.lock().unwrap_or_else(PoisonError::into_inner) = Some(format!("the sound device failed: {e}"));
        };
        let fill = move |data: &mut [T], _: &cpal::OutputCallbackInfo| {
            let block = source(data.len() / channels);
            let samples = block.into_iter().chain(std::iter::repeat(0.0));
            for (frame, sample) in data.chunks_mut(channels).zip(samples) {
                frame.fill(T::from_sample(sample));
            }
        };
        let built = self.device.build_output_stream(self.config.config(), fill, failed, Some(PATIENCE));
        built.map_err(|e| format!("the sound device refuses: {e}"))
    }
}

/// An empty block is the end: what came before has been taken.
fn tell_end(block: &[f32], done: &Sender<()>) {
    if block.is_empty() {
        let _ = done.send(());
    }
}
