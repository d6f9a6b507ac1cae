//! Linux: the sound server (PulseAudio, or PipeWire in its place), spoken to directly.
//!
//! Every await has a limit, since a server may stop answering at any moment; the handshake, which blocks, has a thread of its own.
//! One stream a cue: after a drain none plays again. Buffers of 20 ms with the server's own pre-buffering sound at once and drain well.

use super::Guide;
use crate::sound::guidance::Guidance;
use pulseaudio::protocol::stream::{BufferAttr, StreamFlags};
use pulseaudio::protocol::{self, ChannelMap, PlaybackStreamParams, SampleFormat, SampleSpec};
use pulseaudio::{AsPlaybackSource, Client, PlaybackStream};
use std::os::unix::fs::MetadataExt;
use std::os::unix::net::UnixStream;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::mpsc::channel;
use std::time::Duration;
use tokio::runtime::Runtime;

/// Sample rate, Hz.
const RATE_HZ: u32 = 48_000;
/// Sound that the server holds ready, so that a busy machine tears no hole into a cue, ms.
const BUFFER_MS: u32 = 80;
/// Sound that the server waits for before it begins, ms. Not 0: such a stream may never drain.
const BEGIN_MS: u32 = 10;
/// How long the server may take to answer.
const ANSWER: Duration = Duration::from_millis(800);

/// A connection to the server.
pub struct Server {
    client: Client,
    runtime: Runtime,
    guidance: Option<PlaybackStream>,
}

impl Server {
    /// Connects.
    ///
    /// # Errors
    /// Why not, in words.
    pub fn connect() -> Result<Self, String> {
        let socket = socket().ok_or("no sound server runs")?;
        let (connected, waiting) = channel();
        std::thread::spawn(move || drop(connected.send(handshake(&socket))));
        let client = waiting.recv_timeout(ANSWER * 2).map_err(|_| "the sound server does not answer".to_string())??;
        let runtime = tokio::runtime::Builder::new_current_thread().enable_time().build().map_err(|e| e.to_string())?;
        Ok(Self { client, runtime, guidance: None })
    }

    /// What plays, for the screen.
    pub fn name(&self) -> &'static str {
        "sound server"
    }

    /// Samples a second.
    pub fn rate(&self) -> u32 {
        RATE_HZ
    }

    /// Plays to the end.
    ///
    /// # Errors
    /// Why not, in words: the connection is of no use any more.
    pub fn play(&mut self, samples: &Arc<[f32]>) -> Result<(), String> {
        let length = Duration::from_secs_f64(samples.len() as f64 / f64::from(RATE_HZ));
        let (samples, mut at) = (samples.clone(), 0);
        let source = move |buffer: &mut [u8]| {
            let n = fill(buffer, &samples[at..]);
            at += n;
            n * size_of::<f32>()
        };
        let stream = self.stream(source)?;
        self.answered(length + ANSWER, stream.play_all())?;
        self.answered(ANSWER, stream.delete())
    }

    /// Starts the guidance tone when there is a place for it, and lets it go when it has faded.
    ///
    /// # Errors
    /// As [`Server::play`].
    pub fn guide(&mut self, guide: &Arc<Guide>) -> Result<(), String> {
        let ended = self.guidance.is_none() || guide.has_faded();
        if guide.place().is_none() {
            if ended && let Some(stream) = self.guidance.take() {
                self.answered(ANSWER, stream.delete())?;
            }
            return Ok(());
        }
        if ended {
            self.guidance = None;
            guide.begin();
            let (guide, mut tone) = (guide.clone(), Guidance::default());
            let source = move |buffer: &mut [u8]| {
                let place = guide.place();
                if place.is_none() && tone.is_silent() {
                    guide.faded();
                    return 0;
                }
                let block = tone.block(place, RATE_HZ, buffer.len() / size_of::<f32>());
                fill(buffer, &block) * size_of::<f32>()
            };
            self.guidance = Some(self.stream(source)?);
        }
        Ok(())
    }

    /// The server is still there.
    ///
    /// # Errors
    /// Why it is not, in words.
    pub fn alive(&mut self) -> Result<(), String> {
        self.answered(ANSWER, self.client.server_info()).map(|_| ())
    }

    fn stream(&self, source: impl FnMut(&mut [u8]) -> usize + Send + 'static) -> Result<PlaybackStream, String> {
        let created = self.client.create_playback_stream(parameters(), source.as_playback_source());
        self.answered(ANSWER, created)
    }

    fn answered<T>(
        &self,
        patience: Duration,
        answer: impl Future<Output = pulseaudio::Result<T>>,
    ) -> Result<T, String> {
        self.runtime.block_on(async {
            match tokio::time::timeout(patience, answer).await {
                Ok(Ok(answer)) => Ok(answer),
                Ok(Err(why)) => Err(format!("the sound server is gone: {why}")),
                Err(_) => Err("the sound server does not answer".to_string()),
            }
        })
    }
}

/// Writes as many samples as there are and fit; how many.
fn fill(buffer: &mut [u8], samples: &[f32]) -> usize {
    let (slots, _) = buffer.as_chunks_mut::<4>();
    let n = slots.len().min(samples.len());
    std::iter::zip(slots, samples).for_each(|(slot, sample)| *slot = sample.to_le_bytes());
    n
}

fn parameters() -> PlaybackStreamParams {
    let bytes = |ms: u32| RATE_HZ / 1000 * ms * size_of::<f32>() as u32;
    PlaybackStreamParams {
        sample_spec: SampleSpec { format: SampleFormat::Float32Le, channels: 1, sample_rate: RATE_HZ },
        channel_map: ChannelMap::mono(),
        cvolume: Some(protocol::ChannelVolume::norm(1)),
        sink_name: Some(protocol::DEFAULT_SINK.to_owned()),
        buffer_attr: BufferAttr {
            target_length: bytes(BUFFER_MS),
            pre_buffering: bytes(BEGIN_MS),
            ..BufferAttr::default()
        },
        flags: StreamFlags { adjust_latency: true, ..StreamFlags::default() },
        ..PlaybackStreamParams::default()
    }
}

fn handshake(socket: &Path) -> Result<Client, String> {
    let failed = |e: std::io::Error| format!("the sound server cannot be reached: {e}");
    let stream = UnixStream::connect(socket).map_err(failed)?;
    stream.set_read_timeout(Some(ANSWER)).map_err(failed)?;
    let cookie = pulseaudio::cookie_path_from_env().and_then(|path| std::fs::read(path).ok());
    Client::new_unix(c"steadytap", stream, cookie).map_err(|e| format!("the sound server refuses: {e}"))
}

/// The server's socket: where `PULSE_SERVER` says and nowhere else, or in the usual places.
fn socket() -> Option<PathBuf> {
    if let Some(server) = std::env::var("PULSE_SERVER").ok().filter(|s| !s.is_empty()) {
        let path = server.split_whitespace().find_map(|place| place.split_once("unix:").map(|(_, path)| path))?;
        return Some(PathBuf::from(path));
    }
    let beside = |name: &str, inside: &str| std::env::var_os(name).map(|d| PathBuf::from(d).join(inside));
    let user = std::fs::metadata("/proc/self").map(|m| m.uid()).ok();
    [
        beside("PULSE_RUNTIME_PATH", "native"),
        beside("XDG_RUNTIME_DIR", "pulse/native"),
        user.map(|uid| PathBuf::from(format!("/run/user/{uid}/pulse/native"))),
    ]
    .into_iter()
    .flatten()
    .find(|path| path.exists())
}
