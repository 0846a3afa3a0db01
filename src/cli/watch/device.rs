//! The machine's sound input as a source.
//!
//! The callback of the device only copies into a queue: it takes no lock, allocates nothing and waits for nothing. What the queue has
//! no room for is counted. Where it lies, and where the device itself has lost something, is a break in the audio, of unknown length. A
//! device that is lost is looked for until it is back.

use super::feed::{Feed, Piece, Way};
use crate::audio::{AudioError, Block, Source};
use crate::cli::exit::{Exit, Failure, say};
use cpal::traits::{DeviceTrait, HostTrait, StreamTrait};
use cpal::{
    BufferSize, Device, ErrorKind, FromSample, InputCallbackInfo, SampleFormat, SizedSample, Stream, StreamConfig,
};
use rtrb::{Consumer, Producer, RingBuffer};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};
use std::sync::mpsc::SyncSender;
use std::time::{Duration, Instant};

/// What is asked for in turn.
const RATES_HZ: [u32; 2] = [48_000, 44_100];
const CHANNELS: [u16; 2] = [1, 2];
const FORMATS: [SampleFormat; 3] = [SampleFormat::F32, SampleFormat::I32, SampleFormat::I16];
/// Audio that the queue holds, s: longer than anything this program does between two looks at it.
const QUEUE_S: f64 = 10.0;
/// Breaks that can wait; more lie so close together that one says it all.
const BREAKS: usize = 256;
/// Lost audio is told at most so often.
const TELL: Duration = Duration::from_secs(1);
/// How often the queue is looked at while it is empty, and how often a lost device is looked for.
const LOOK: Duration = Duration::from_millis(5);
const AGAIN: Duration = Duration::from_secs(1);
/// Longest block that is handed on, s.
const BLOCK_S: f64 = 0.02;
/// Name of the usual device.
const USUAL: &str = "default";

/// What the callbacks tell.
#[derive(Debug, Default)]
struct Told {
    /// Frames that the queue had no room for.
    dropped: AtomicU64,
    /// The device has lost audio since its last callback.
    overrun: AtomicBool,
    lost: AtomicBool,
}

/// What the callback fills: samples, and the frames before which audio is missing.
struct Filled<Samples, Breaks> {
    samples: Samples,
    breaks: Breaks,
    /// Frames so far.
    frames: u64,
}

/// The end of the queue that is read, and the one that the callback writes.
type Outlet = Filled<Consumer<f32>, Consumer<u64>>;
type Inlet = Filled<Producer<f32>, Producer<u64>>;

/// A stream from a device with the ends of its queues.
struct Open {
    _stream: Stream,
    queue: Outlet,
    /// Frame before which audio is missing, not yet reached.
    next_break: Option<u64>,
    config: StreamConfig,
}

/// A device as a source.
struct DeviceSource {
    name: String,
    open: Option<Open>,
    config: StreamConfig,
    told: Arc<Told>,
    breaks: u64,
    dropped: u64,
    told_at: Option<Instant>,
    frames: u64,
    messages: SyncSender<Piece>,
}

/// Opens a device.
///
/// # Errors
/// Exit status 1 with one line that says what to do.
pub(super) fn open(name: &str, way: Way) -> Result<Feed, Failure> {
    let told = Arc::new(Told::default());
    let open = open_stream(name, None, &told)?;
    let config = open.config;
    let failed = |error: AudioError| Failure::Told(Exit::File, format!("{name}: {error}"));
    Feed::start_with(
        |messages| DeviceSource {
            name: name.to_owned(),
            open: Some(open),
            config,
            told,
            breaks: 0,
            dropped: 0,
            told_at: None,
            frames: 0,
            messages,
        },
        way,
    )
    .map_err(failed)
}

/// Lists the devices that can be listened to.
///
/// # Errors
/// Standard output that cannot be written.
pub(super) fn list() -> Result<Exit, Failure> {
    let names = names();
    if names.is_empty() {
        return Err(Failure::Told(
            Exit::File,
            "no sound input was found; a pipe or a file can be watched instead".into(),
        ));
    }
    say(&names.iter().map(|(name, about)| format!("{name}  {about}\n")).collect::<String>())?;
    Ok(Exit::Done)
}

/// Names of the inputs, with what they are.
fn names() -> Vec<(String, String)> {
    let _kept_quiet = quiet();
    let host = cpal::default_host();
    let Ok(devices) = host.input_devices() else { return Vec::new() };
    devices
        .filter_map(|device| {
            let id = device.id().ok()?;
            let about = device.description().map(|about| about.name().to_owned()).unwrap_or_default();
            Some((id.id().to_owned(), about))
        })
        .collect()
}

/// The sound library says a dozen lines of its own about a missing device; ours says it in one.
#[cfg(target_os = "linux")]
fn quiet() -> impl Sized {
    alsa::Output::local_error_handler()
}

#[cfg(not(target_os = "linux"))]
fn quiet() {}

fn device(name: &str) -> Option<Device> {
    let host = cpal::default_host();
    if name == USUAL {
        return host.default_input_device();
    }
    host.input_devices().ok()?.find(|device| {
        device.id().is_ok_and(|id| id.id() == name || id.to_string() == name)
            || device.description().is_ok_and(|about| about.name() == name)
    })
}

/// Opens a stream: `config` as it was before, or the first of the usual ones that the device takes.
fn open_stream(name: &str, config: Option<StreamConfig>, told: &Arc<Told>) -> Result<Open, Failure> {
    let _kept_quiet = quiet();
    let Some(device) = device(name) else {
        let known: Vec<String> = names().into_iter().map(|known| known.0).collect();
        let there = if known.is_empty() {
            "no sound input was found".into()
        } else {
            format!("there are {}", known.join(", "))
        };
        return Err(Failure::Told(Exit::File, format!("there is no sound input '{name}'; {there}")));
    };
    let mut reason = String::new();
    for (channels, sample_rate, format) in wanted(config) {
        let config = StreamConfig { channels, sample_rate, buffer_size: BufferSize::Default };
        match build(&device, config, format, told).and_then(|(stream, queue)| {
            stream.play().map_err(|error| error.to_string())?;
            Ok((stream, queue))
        }) {
            Ok((stream, queue)) => {
                told.lost.store(false, Ordering::Relaxed);
                return Ok(Open { _stream: stream, queue, next_break: None, config });
            }
            Err(why) => reason = why,
        }
    }
    let what = "is it plugged in, and is no other program using it? A pipe or a file can be watched instead";
    Err(Failure::Told(Exit::File, format!("the sound input '{name}' cannot be opened ({reason}); {what}")))
}

fn wanted(config: Option<StreamConfig>) -> Vec<(u16, u32, SampleFormat)> {
    let rates = config.map_or(RATES_HZ.to_vec(), |config| vec![config.sample_rate]);
    let channels = config.map_or(CHANNELS.to_vec(), |config| vec![config.channels]);
    let mut all = Vec::new();
    for &rate in &rates {
        for &count in &channels {
            all.extend(FORMATS.iter().map(|&format| (count, rate, format)));
        }
    }
    all
}

fn build(
    device: &Device,
    config: StreamConfig,
    format: SampleFormat,
    told: &Arc<Told>,
) -> Result<(Stream, Outlet), String> {
    let samples = QUEUE_S * f64::from(config.sample_rate) * f64::from(config.channels);
    let (samples_in, samples) = RingBuffer::new(samples as usize);
    let (breaks_in, breaks) = RingBuffer::new(BREAKS);
    let producer = Filled { samples: samples_in, breaks: breaks_in, frames: 0 };
    let consumer = Filled { samples, breaks, frames: 0 };
    let stream = match format {
        SampleFormat::I32 => build_as::<i32>(device, config, producer, told),
        SampleFormat::I16 => build_as::<i16>(device, config, producer, told),
        _ => build_as::<f32>(device, config, producer, told),
    };
    stream.map(|stream| (stream, consumer)).map_err(|error| error.to_string())
}

fn build_as<T: SizedSample>(
    device: &Device,
    config: StreamConfig,
    mut queue: Inlet,
    told: &Arc<Told>,
) -> Result<Stream, cpal::Error>
where
    f32: FromSample<T>,
{
    let (on_data, on_error) = (told.clone(), told.clone());
    let width = usize::from(config.channels);
    let take = move |samples: &[T], _: &InputCallbackInfo| {
        if on_data.overrun.swap(false, Ordering::Relaxed) {
            queue.interrupt();
        }
        let dropped = queue.fill(samples, width);
        on_data.dropped.fetch_add(dropped, Ordering::Relaxed);
    };
    let fail = move |error: cpal::Error| match error.kind() {
        ErrorKind::Xrun => on_error.overrun.store(true, Ordering::Relaxed),
        ErrorKind::RealtimeDenied | ErrorKind::DeviceChanged => {}
        _ => on_error.lost.store(true, Ordering::Relaxed),
    };
    device.build_input_stream(config, take, fail, None)
}

impl Inlet {
    /// Audio is missing before the next frame.
    fn interrupt(&mut self) {
        // Without room for it another break lies close by.
        let _ = self.breaks.push(self.frames);
    }

    /// Copies whole frames into the queue; gives how many had no room, behind which there is a break.
    fn fill<T: Copy>(&mut self, samples: &[T], width: usize) -> u64
    where
        f32: FromSample<T>,
    {
        let room = self.samples.slots() / width * width;
        let (kept, dropped) = samples.split_at(samples.len().min(room));
        for &sample in kept {
            // There is room.
            let _ = self.samples.push(f32::from_sample_(sample));
        }
        self.frames += (kept.len() / width) as u64;
        if !dropped.is_empty() {
            self.interrupt();
        }
        (dropped.len() / width) as u64
    }
}

impl Open {
    /// Takes up to `most` samples that are ready and have no break among them; true if one lies before them.
    fn take(&mut self, most: usize, block: &mut Vec<f32>) -> bool {
        let width = usize::from(self.config.channels);
        let mut broken = false;
        while self.next_break.is_some_and(|at| at <= self.queue.frames) {
            broken = true;
            self.next_break = None;
            self.next_break = self.queue.breaks.pop().ok();
        }
        // A break is written before the samples behind it, and looked for after they were counted.
        let mut ready = (self.queue.samples.slots() / width * width).min(most);
        self.next_break = self.next_break.or_else(|| self.queue.breaks.pop().ok());
        if let Some(at) = self.next_break {
            ready = ready.min(((at - self.queue.frames.min(at)) as usize).saturating_mul(width));
        }
        block.clear();
        if let Ok(chunk) = self.queue.samples.read_chunk(ready) {
            block.extend(chunk);
            self.queue.frames += (ready / width) as u64;
        }
        broken
    }
}

impl DeviceSource {
    fn tell(&self, message: String) {
        // Nobody listens any more: the reading ends with the next piece.
        let _ = self.messages.send(Piece::Told(message));
    }

    fn tell_dropped(&mut self) {
        let dropped = self.told.dropped.load(Ordering::Relaxed);
        if dropped > self.dropped && self.told_at.is_none_or(|at| at.elapsed() > TELL) {
            self.tell(format!("{} frames of audio came too fast and are lost", dropped - self.dropped));
            (self.dropped, self.told_at) = (dropped, Some(Instant::now()));
        }
    }

    /// Looks for the device until it is back.
    fn come_back(&mut self) {
        self.tell(format!("the sound input '{}' is lost; it is looked for", self.name));
        self.open = None;
        loop {
            std::thread::sleep(AGAIN);
            if let Ok(open) = open_stream(&self.name, Some(self.config), &self.told) {
                self.open = Some(open);
                self.breaks += 1;
                self.tell(format!("the sound input '{}' is back", self.name));
                return;
            }
            if self.messages.send(Piece::Told(String::new())).is_err() {
                return;
            }
        }
    }
}

impl Source for DeviceSource {
    fn sample_rate_hz(&self) -> u32 {
        self.config.sample_rate
    }

    fn channels(&self) -> u16 {
        self.config.channels
    }

    fn next(&mut self, block: &mut Vec<f32>) -> Result<Option<Block>, AudioError> {
        let width = usize::from(self.config.channels);
        let most = ((BLOCK_S * f64::from(self.config.sample_rate)) as usize).max(1) * width;
        loop {
            self.tell_dropped();
            let Some(open) = &mut self.open else { return Ok(None) };
            self.breaks += u64::from(open.take(most, block));
            if !block.is_empty() {
                let position = self.frames;
                self.frames += (block.len() / width) as u64;
                return Ok(Some(Block { frames: block.len() / width, position }));
            }
            if self.told.lost.load(Ordering::Relaxed) {
                self.come_back();
            } else {
                std::thread::sleep(LOOK);
            }
        }
    }

    fn breaks(&self) -> u64 {
        self.breaks
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_full_queue_drops_whole_frames_counts_them_and_marks_where() {
        let (samples_in, samples) = RingBuffer::new(10);
        let (breaks_in, breaks) = RingBuffer::new(BREAKS);
        let mut producer = Filled { samples: samples_in, breaks: breaks_in, frames: 0 };
        assert_eq!(producer.fill(&[1i16 << 14; 8], 2), 0);
        assert_eq!(producer.fill(&[0i16; 6], 2), 2);
        let mut consumer = Filled { samples, breaks, frames: 0 };
        let read: Vec<f32> = std::iter::from_fn(|| consumer.samples.pop().ok()).collect();
        assert_eq!(read, [0.5, 0.5, 0.5, 0.5, 0.5, 0.5, 0.5, 0.5, 0.0, 0.0]);
        assert_eq!(consumer.breaks.pop(), Ok(5));
        producer.interrupt();
        assert_eq!(producer.fill(&[0i16; 4], 2), 0);
        assert_eq!(consumer.breaks.pop(), Ok(5));
    }

    #[test]
    fn the_callback_allocates_nothing_with_room_and_without() {
        let (samples_in, _samples) = RingBuffer::new(1000);
        let (breaks_in, _breaks) = RingBuffer::new(2);
        let mut producer = Filled { samples: samples_in, breaks: breaks_in, frames: 0 };
        let block = [0.25f32; 480];
        let counted = allocation_counter::measure(|| {
            for _ in 0..10 {
                producer.interrupt();
                producer.fill(&block, 2);
            }
        });
        assert_eq!(counted.count_total, 0);
        // The counter counts.
        assert!(allocation_counter::measure(|| drop(vec![1u8; 100])).count_total > 0);
    }
}
