//! `gaptone render --series`: every clip of a series with its truth, and an index.
//!
//! Everything is checked before anything is written. Each file appears whole or not at all, and the index after each clip, so
//! that a series which was interrupted goes on where it stopped: a clip whose recipe is unchanged is not made again.

use super::bench_file;
use super::exit::{Exit, Failure, say, tell};
use super::files::{self, ClipFacts, SampleFormat};
use super::page;
use super::render::{facts, programme, summary, write_truth};
use crate::bench::{SeriesEntry, parse_series};
use crate::model::finish::FinishTruth;
use crate::model::firings::Realised;
use crate::model::receiver::Programme;
use crate::model::series::{self, Ingredients};
use crate::model::truth::Truth;
use crate::page::SeriesClip;
use serde::{Deserialize, Serialize};
use std::io::Write;
use std::path::Path;

/// Name of the format of the index.
const FORMAT: &str = "gaptone.series/1";
/// Name of the index in the folder of the clips.
const INDEX: &str = "index.json";
/// The same for people.
const INDEX_PAGE: &str = "index.html";

/// The index of a series.
#[derive(Debug, Default, Serialize, Deserialize)]
struct Index {
    format: String,
    title: Option<String>,
    clips: Vec<Listed>,
}

/// A clip in the index.
#[derive(Debug, Clone, Serialize, Deserialize)]
struct Listed {
    name: String,
    title: Option<String>,
    file: String,
    truth: String,
    /// Of everything that the clip depends on.
    fingerprint: String,
    bytes: u64,
    duration_s: f64,
    seed: u64,
    changes: Vec<(String, String)>,
    realised: Option<Realised>,
    finish: Option<FinishTruth>,
}

/// A clip to be made.
struct Job {
    entry: SeriesEntry,
    ingredients: Ingredients,
    fingerprint: String,
}

/// Runs a series.
///
/// # Errors
/// A series or bench that cannot be used, with its line; a folder that cannot be written.
pub(super) fn run(series_name: &str, folder: &str, seed: Option<u64>) -> Result<Exit, Failure> {
    let text = files::read_text(series_name).map_err(|error| Failure::file(series_name, &error))?;
    let mut description = parse_series(&text, series_name).map_err(Failure::usage)?;
    if let Some(seed) = seed {
        let first = description.entries.first().map_or(0, |entry| entry.seed);
        description.entries.iter_mut().for_each(|e| e.seed = e.seed.wrapping_sub(first).wrapping_add(seed));
    }
    let jobs = prepare(series_name, description.entries)?;
    std::fs::create_dir_all(folder)
        .map_err(|error| Failure::Told(Exit::File, format!("{folder}: cannot be made: {error}")))?;
    let index_place = in_folder(folder, INDEX);
    let old = files::read_text(&index_place).ok().and_then(|text| serde_json::from_str::<Index>(&text).ok());
    let old = old.unwrap_or_default().clips;
    let mut index = Index { format: FORMAT.to_owned(), title: description.title, clips: Vec::new() };
    for job in &jobs {
        let done = old.iter().find(|listed| is_done(listed, job, folder));
        let listed = match done {
            Some(listed) => {
                say(&format!("{}: is there already\n", in_folder(folder, &listed.file)))?;
                listed.clone()
            }
            None => make(job, folder)?,
        };
        index.clips.push(listed);
        // What an earlier run has made and this one has not come to yet stays in the index.
        let names: Vec<&str> = index.clips.iter().map(|listed| listed.name.as_str()).collect();
        let later = jobs.iter().filter(|job| !names.contains(&job.entry.name.as_str()));
        let kept: Vec<Listed> =
            later.filter_map(|job| old.iter().find(|listed| is_done(listed, job, folder)).cloned()).collect();
        let all = Index {
            clips: index.clips.iter().cloned().chain(kept).collect(),
            title: index.title.clone(),
            format: FORMAT.to_owned(),
        };
        write_index(&index_place, &all)?;
    }
    page::write(&in_folder(folder, INDEX_PAGE), &index_page(&index)?)?;
    Ok(Exit::Done)
}

/// The index as a page with a player for each clip.
fn index_page(index: &Index) -> Result<String, Failure> {
    let json = serde_json::to_string(index)
        .map_err(|error| Failure::Told(Exit::File, format!("the index cannot be written as JSON: {error}")))?;
    let clips: Vec<SeriesClip> = index
        .clips
        .iter()
        .map(|listed| SeriesClip {
            title: listed.title.clone().unwrap_or_else(|| listed.name.clone()),
            file: listed.file.clone(),
            truth: listed.truth.clone(),
            duration_s: listed.duration_s,
            firing_rate_hz: listed.realised.and_then(|realised| realised.firing_rate_hz),
            relative_jitter: listed.realised.and_then(|realised| Some(realised.period_jitter_s? / realised.period_s?)),
            changes: listed.changes.clone(),
            seed: listed.seed,
        })
        .collect();
    Ok(crate::page::series(index.title.as_deref(), &clips, &json))
}

/// Checks every entry and reads what it needs; tells all that is wrong, each with its line.
fn prepare(series_name: &str, entries: Vec<SeriesEntry>) -> Result<Vec<Job>, Failure> {
    let mut jobs = Vec::new();
    let (mut faults, mut exit) = (Vec::new(), Exit::Usage);
    for entry in entries {
        let place = format!("{series_name} line {}, clip {}", entry.line, entry.name);
        match ingredients(series_name, &entry) {
            Ok(ingredients) => match series::clip(&entry, &ingredients) {
                Ok(_) => jobs.push(Job { fingerprint: fingerprint(&entry, &ingredients), entry, ingredients }),
                Err(error) => faults.push(format!("{place}: {error}")),
            },
            Err(Failure::Told(status, message)) => {
                exit = status;
                faults.push(format!("{place}: {message}"));
            }
            Err(closed) => return Err(closed),
        }
    }
    let Some(last) = faults.pop() else { return Ok(jobs) };
    faults.iter().for_each(|fault| tell(fault));
    Err(Failure::Told(exit, last))
}

/// Files are named from the folder of the series file.
fn ingredients(series_name: &str, entry: &SeriesEntry) -> Result<Ingredients, Failure> {
    let beside = |name: &str| {
        let folder = Path::new(series_name).parent().unwrap_or(Path::new(""));
        folder.join(name).to_string_lossy().into_owned()
    };
    let bench_name = beside(&entry.bench);
    let sound = match &entry.under {
        None => None,
        Some((file, depth)) => match programme(&beside(file), *depth)? {
            Programme::Sound { sound, .. } => sound,
            _ => None,
        },
    };
    Ok(Ingredients {
        bench: bench_file::load(&bench_name)?,
        bench_text: files::read_text(&bench_name).map_err(|error| Failure::file(&bench_name, &error))?,
        further: entry.further.iter().map(|name| bench_file::load(&beside(name))).collect::<Result<_, _>>()?,
        sound,
    })
}

/// A number that changes with everything the clip depends on (FNV-1a of the text of all of it, and of the sound).
fn fingerprint(entry: &SeriesEntry, ingredients: &Ingredients) -> String {
    let described = format!(
        "{} {:?} {} {:?}",
        env!("CARGO_PKG_VERSION"),
        SeriesEntry { line: 0, ..entry.clone() },
        ingredients.bench_text,
        ingredients.further
    );
    let step = |hash: u64, byte: u8| (hash ^ u64::from(byte)).wrapping_mul(0x0000_0100_0000_01b3);
    let hash = described.bytes().fold(0xcbf2_9ce4_8422_2325, step);
    let samples = ingredients.sound.iter().flat_map(|sound| sound.samples.iter());
    let hash = samples.flat_map(|sample| sample.to_le_bytes()).fold(hash, step);
    format!("{hash:016x}")
}

fn in_folder(folder: &str, name: &str) -> String {
    Path::new(folder).join(name).to_string_lossy().into_owned()
}

fn is_done(listed: &Listed, job: &Job, folder: &str) -> bool {
    let bytes = std::fs::metadata(in_folder(folder, &listed.file)).map(|facts| facts.len());
    listed.name == job.entry.name
        && listed.fingerprint == job.fingerprint
        && bytes.is_ok_and(|bytes| bytes == listed.bytes)
        && Path::new(&in_folder(folder, &listed.truth)).is_file()
}

fn make(job: &Job, folder: &str) -> Result<Listed, Failure> {
    let name = &job.entry.name;
    let (extension, bits) = job.entry.format.split_once(' ').unwrap_or((job.entry.format, "16"));
    let format = match bits {
        "24" => SampleFormat::Int24,
        "float" => SampleFormat::Float32,
        _ => SampleFormat::Int16,
    };
    let (file, truth_file) = (format!("{name}.{extension}"), format!("{name}.json"));
    let (place, truth_place) = (in_folder(folder, &file), in_folder(folder, &truth_file));
    let (finished, truth) = series::make(&job.entry, &job.ingredients).map_err(Failure::usage)?;
    let facts = ClipFacts { format, ..facts(&finished, &truth) };
    files::write_frames(&place, finished, &facts).map_err(|error| Failure::file(&place, &error))?;
    write_truth(&truth_place, &truth)?;
    say(&summary(&place, &truth))?;
    Ok(listed(job, &truth, file, truth_file, std::fs::metadata(&place).map_or(0, |facts| facts.len())))
}

fn listed(job: &Job, truth: &Truth, file: String, truth_file: String, bytes: u64) -> Listed {
    Listed {
        name: job.entry.name.clone(),
        title: truth.title.clone(),
        file,
        truth: truth_file,
        fingerprint: job.fingerprint.clone(),
        bytes,
        duration_s: truth.settings.duration_s,
        seed: truth.seed,
        changes: truth.changes.clone(),
        realised: truth.trains.first().map(|train| train.realised),
        finish: truth.finish,
    }
}

fn write_index(place: &str, index: &Index) -> Result<(), Failure> {
    files::write_atomically(place, |out| {
        serde_json::to_writer_pretty(&mut *out, index)?;
        out.write_all(b"\n")
    })
    .map_err(|error| Failure::file(place, &error))
}
