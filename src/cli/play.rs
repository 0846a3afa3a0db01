//! Playing a mono clip on the machine's default sound output.
//!
//! The callback of the device only copies from memory: it takes no lock, allocates nothing and waits for nothing.

use cpal::traits::{DeviceTrait, HostTrait, StreamTrait};
use cpal::{BufferSize, Stream, StreamConfig};
use dasp::Sample;
use std::sync::Arc;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::mpsc::{self, Receiver, Sender};
use std::time::{Duration, Instant};

/// How often playing is looked after.
const LOOK: Duration = Duration::from_millis(20);

/// Time for the device to play what it has been given, after the last sample went to it.
const TAIL: Duration = Duration::from_millis(300);

/// A device that takes nothing for this long is stuck.
const PATIENCE: Duration = Duration::from_secs(5);

/// Why a clip cannot be played.
#[derive(Debug, thiserror::Error)]
pub(super) enum PlayError {
    /// There is no output.
    #[error("no sound output was found; write the clip to a file and play that elsewhere")]
    NoDevice,
    /// The output cannot be opened.
    #[error("the sound output cannot be opened at {sample_rate_hz} Hz ({reason}); write the clip to a file instead")]
    Open {
        /// Sample rate asked for, Hz.
        sample_rate_hz: u32,
        /// What the system said.
        reason: String,
    },
    /// The output failed while playing.
    #[error("the sound output failed: {0}")]
    Failed(String),
}

/// Names of the sound outputs of this machine.
pub(super) fn outputs() -> Vec<String> {
    #[cfg(target_os = "linux")]
    let _kept_quiet = alsa::Output::local_error_handler();
    let Ok(devices) = cpal::default_host().output_devices() else { return Vec::new() };
    devices.map(|device| device.to_string()).collect()
}

/// Plays the clip to its end.
pub(super) fn play(samples: Vec<f32>, sample_rate_hz: u32) -> Result<(), PlayError> {
    // The sound library tells a dozen lines of its own about a missing device; ours says it in one.
    #[cfg(target_os = "linux")]
    let _kept_quiet = alsa::Output::local_error_handler();
    let device = cpal::default_host().default_output_device().ok_or(PlayError::NoDevice)?;
    let total = samples.len();
    let samples: Arc<[f32]> = samples.into();
    let (failures, failed) = mpsc::channel();
    let played = Arc::new(AtomicUsize::new(0));
    // Not every card takes one channel; two every card does.
    let open = |channels| open(&device, channels, sample_rate_hz, &samples, &played, &failures);
    let stream = open(1).or_else(|_| open(2)).map_err(|reason| PlayError::Open { sample_rate_hz, reason })?;
    stream.play().map_err(|error| PlayError::Failed(error.to_string()))?;
    wait(&played, total, &failed)
}

fn open(
    device: &cpal::Device,
    channels: u16,
    sample_rate_hz: u32,
    samples: &Arc<[f32]>,
    played: &Arc<AtomicUsize>,
    failures: &Sender<String>,
) -> Result<Stream, String> {
    let config = StreamConfig { channels, sample_rate: sample_rate_hz, buffer_size: BufferSize::Default };
    let (samples, played, failures) = (samples.clone(), played.clone(), failures.clone());
    let fill = move |out: &mut [f32], _: &cpal::OutputCallbackInfo| {
        let mut next = played.load(Ordering::Relaxed);
        for frame in out.chunks_mut(usize::from(channels)) {
            frame.fill(samples.get(next).copied().unwrap_or(f32::EQUILIBRIUM));
            next += 1;
        }
        played.store(next, Ordering::Release);
    };
    let fail = move |error: cpal::Error| {
        // An output that ran dry clicks once; everything else ends the playing.
        if error.kind() != cpal::ErrorKind::Xrun {
            // If nobody waits any more the failure does not matter.
            let _ = failures.send(error.to_string());
        }
    };
    device.build_output_stream(config, fill, fail, None).map_err(|error| error.to_string())
}

/// Waits until the device has taken all samples. Counts samples, not time: a test device takes them at once.
fn wait(played: &AtomicUsize, total: usize, failed: &Receiver<String>) -> Result<(), PlayError> {
    let mut progress = (0, Instant::now());
    loop {
        if let Ok(reason) = failed.recv_timeout(LOOK) {
            return Err(PlayError::Failed(reason));
        }
        let now = played.load(Ordering::Acquire);
        if now >= total {
            std::thread::sleep(TAIL);
            return Ok(());
        }
        if now > progress.0 {
            progress = (now, Instant::now());
        } else if progress.1.elapsed() > PATIENCE {
            return Err(PlayError::Failed("it takes no samples".to_owned()));
        }
    }
}
