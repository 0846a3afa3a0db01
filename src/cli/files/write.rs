//! Writing files: whole or not at all.
//!
//! A file is written under a temporary name beside its place and then moved there, so that no reader meets half a
//! file and a failure leaves what was there before.

use super::FileError;
use std::fs::{self, File};
use std::io::{self, BufWriter};
use std::path::{Path, PathBuf};

/// Removes the temporary file unless it was moved to its place.
struct Temporary {
    path: PathBuf,
    kept: bool,
}

impl Drop for Temporary {
    fn drop(&mut self) {
        if !self.kept {
            // Nothing can be done about a file that will not go away, and the first error matters more.
            let _ = fs::remove_file(&self.path);
        }
    }
}

/// Writes a file through `content`; the file appears under its name only when everything is written.
///
/// A name that is there already and is no regular file (a pipe, a device) is written directly.
///
/// # Errors
/// [`FileError`] if the folder does not exist or cannot be written, or if `content` fails.
pub fn write_atomically(
    name: &str,
    content: impl FnOnce(&mut BufWriter<File>) -> io::Result<()>,
) -> Result<(), FileError> {
    let path = Path::new(name);
    match fs::metadata(path) {
        Ok(facts) if facts.is_dir() => return Err(FileError::Directory),
        Ok(facts) if !facts.is_file() => {
            let file = File::options().write(true).open(path).map_err(not_writable)?;
            return fill(file, content).map_err(not_writable).map(|_| ());
        }
        _ => {}
    }
    remove_left_behind(path);
    let mut temporary = Temporary { path: temporary_path(path), kept: false };
    let file = File::create_new(&temporary.path).map_err(not_writable)?;
    let file = fill(file, content).map_err(not_writable)?;
    file.sync_all().map_err(not_writable)?;
    fs::rename(&temporary.path, path).map_err(not_writable)?;
    temporary.kept = true;
    Ok(())
}

fn fill(file: File, content: impl FnOnce(&mut BufWriter<File>) -> io::Result<()>) -> io::Result<File> {
    let mut writer = BufWriter::new(file);
    content(&mut writer)?;
    writer.into_inner().map_err(io::IntoInnerError::into_error)
}

/// Tells before any work whether a file could be written.
///
/// # Errors
/// [`FileError`] as [`write_atomically`] would give it.
pub fn check_writable(name: &str) -> Result<(), FileError> {
    let path = Path::new(name);
    match fs::metadata(path) {
        Ok(facts) if facts.is_dir() => Err(FileError::Directory),
        Ok(facts) if !facts.is_file() => Ok(()),
        _ => {
            let temporary = Temporary { path: temporary_path(path), kept: false };
            File::create_new(&temporary.path).map_err(not_writable).map(|_| ())
        }
    }
}

/// Reads a text file, such as a bench file.
///
/// # Errors
/// [`FileError`] if it cannot be read or is no text.
pub fn read_text(name: &str) -> Result<String, FileError> {
    /// A description of a bench has some kilobytes; more is another file named by mistake.
    const LONGEST_TEXT: u64 = 1 << 20;
    let failed = |error| FileError::from_io("reading", error);
    let facts = fs::metadata(name).map_err(failed)?;
    if facts.is_dir() {
        return Err(FileError::Directory);
    }
    if facts.len() > LONGEST_TEXT {
        return Err(FileError::Broken("is too large; a text file of at most 1 MiB was expected".to_owned()));
    }
    let bytes = fs::read(name).map_err(failed)?;
    String::from_utf8(bytes).map_err(|_| FileError::Broken("is no text in UTF-8; a text file was expected".to_owned()))
}

/// A name beside the place of the file that no other run uses.
fn temporary_path(path: &Path) -> PathBuf {
    let name = path.file_name().unwrap_or_default().to_string_lossy();
    path.with_file_name(format!(".{name}.{}.part", std::process::id()))
}

/// Removes what runs that were killed left behind while they wrote the same file. Only where it can be told that the run is
/// gone (Linux); what cannot be removed is left alone.
fn remove_left_behind(path: &Path) {
    let processes = Path::new("/proc");
    let (Some(name), Some(folder)) = (path.file_name(), path.parent()) else { return };
    if !processes.join("self").exists() {
        return;
    }
    let beginning = format!(".{}.", name.to_string_lossy());
    let folder = if folder.as_os_str().is_empty() { Path::new(".") } else { folder };
    for entry in fs::read_dir(folder).into_iter().flatten().flatten() {
        let found = entry.file_name();
        let process = found.to_str().and_then(|name| name.strip_prefix(&beginning)?.strip_suffix(".part"));
        let number = process.filter(|process| process.parse::<u32>().is_ok());
        if number.is_some_and(|number| !processes.join(number).exists()) {
            let _ = fs::remove_file(entry.path());
        }
    }
}

pub(super) fn not_writable(error: io::Error) -> FileError {
    match error.kind() {
        io::ErrorKind::NotFound => FileError::Broken("cannot be written: there is no such folder".to_owned()),
        io::ErrorKind::PermissionDenied => {
            FileError::Broken("cannot be written: permission denied; choose a folder open to this user".to_owned())
        }
        _ => FileError::System { doing: "writing", source: error },
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::io::Write;

    fn names_in(folder: &Path) -> Vec<String> {
        let mut names: Vec<String> = fs::read_dir(folder)
            .expect("a folder")
            .map(|entry| entry.expect("an entry").file_name().to_string_lossy().into_owned())
            .collect();
        names.sort();
        names
    }

    #[test]
    fn a_failure_leaves_the_old_file_and_nothing_else() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let path = folder.path().join("out.csv");
        fs::write(&path, "old").expect("written");
        let name = path.to_str().expect("UTF-8");
        let result = write_atomically(name, |out| {
            out.write_all(b"new, but")?;
            Err(io::Error::other("disk full"))
        });
        assert_eq!(result.expect_err("it failed").to_string(), "writing failed: disk full");
        assert_eq!(fs::read_to_string(&path).expect("read"), "old");
        assert_eq!(names_in(folder.path()), ["out.csv"]);
    }

    #[test]
    fn a_success_replaces_the_old_file() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let path = folder.path().join("out.csv");
        fs::write(&path, "old").expect("written");
        write_atomically(path.to_str().expect("UTF-8"), |out| out.write_all(b"new")).expect("written");
        assert_eq!(fs::read_to_string(&path).expect("read"), "new");
        assert_eq!(names_in(folder.path()), ["out.csv"]);
    }

    #[cfg(target_os = "linux")]
    #[test]
    fn what_a_killed_run_left_behind_goes_with_the_next_writing_of_the_same_file_and_nothing_else() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        // Process numbers of Linux end at 4194304; the first process always lives.
        for name in [".out.csv.4999999.part", ".out.csv.1.part", ".out.csv.x.part", ".other.csv.4999999.part"] {
            fs::write(folder.path().join(name), "half").expect("written");
        }
        let path = folder.path().join("out.csv");
        write_atomically(path.to_str().expect("UTF-8"), |out| out.write_all(b"new")).expect("written");
        assert_eq!(
            names_in(folder.path()),
            [".other.csv.4999999.part", ".out.csv.1.part", ".out.csv.x.part", "out.csv"]
        );
    }

    #[test]
    fn a_place_that_cannot_be_written_is_told_before_any_work() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let nowhere = folder.path().join("no/out.csv");
        let error = check_writable(nowhere.to_str().expect("UTF-8")).expect_err("no folder");
        assert_eq!(error.to_string(), "cannot be written: there is no such folder");
        let error = check_writable(folder.path().to_str().expect("UTF-8")).expect_err("a folder");
        assert_eq!(error.to_string(), "is a directory; name a file in it");
        check_writable(folder.path().join("out.csv").to_str().expect("UTF-8")).expect("a good place");
        assert!(names_in(folder.path()).is_empty());
    }
}
