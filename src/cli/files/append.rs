//! Appending lines to a file that other processes append to as well.
//!
//! A writer holds the lock of the file while it looks at the end and writes: two writers never mix their lines, and what it finds
//! at the end was left there by nobody who is still writing. A last line without its line break was cut off, by a kill or a power cut: it is
//! closed, kept as it is, and told. A write that fails (a full disk) is taken back.

use super::FileError;
use std::fs::{File, TryLockError};
use std::io::{self, Read, Seek, SeekFrom, Write};
use std::path::Path;
use std::time::{Duration, Instant};

/// Longest wait for other writers; each holds the lock for some milliseconds.
const PATIENCE: Duration = Duration::from_secs(30);

/// Appends one line; the text has no line break. Gives true if the line before it had been cut off.
///
/// # Errors
/// [`FileError`] if the file cannot be opened, or the line not be written whole.
pub fn append_line(name: &str, line: &str) -> Result<bool, FileError> {
    let path = Path::new(name);
    if path.is_dir() {
        return Err(FileError::Directory);
    }
    let mut file = open(path)?;
    lock(&file)?;
    let failed = |error| FileError::from_io("writing", error);
    let end = file.seek(SeekFrom::End(0)).map_err(failed)?;
    let cut = end > 0 && !ends_with_line_break(&mut file).map_err(failed)?;
    let text = format!("{}{line}\n", if cut { "\n" } else { "" });
    let written = file.write_all(text.as_bytes()).and_then(|()| file.sync_data());
    if let Err(error) = written {
        // Half a line must not stay; if taking it back fails too, the next writer closes it.
        let _ = file.set_len(end);
        return Err(failed(error));
    }
    Ok(cut)
}

/// Tells before any work whether lines could be appended; leaves no file behind that was not there.
///
/// # Errors
/// [`FileError`].
pub fn check_appendable(name: &str) -> Result<(), FileError> {
    let path = Path::new(name);
    if path.exists() {
        return if path.is_dir() { Err(FileError::Directory) } else { open(path).map(|_| ()) };
    }
    super::check_writable(name)
}

fn open(path: &Path) -> Result<File, FileError> {
    File::options().read(true).append(true).create(true).open(path).map_err(super::write::not_writable)
}

/// The lock of the file. A file system without locks leaves it to the appending mode, which keeps short lines whole on a local disk.
fn lock(file: &File) -> Result<(), FileError> {
    let began = Instant::now();
    loop {
        match file.try_lock() {
            Ok(()) => return Ok(()),
            Err(TryLockError::Error(error)) if error.kind() == io::ErrorKind::Unsupported => return Ok(()),
            Err(TryLockError::Error(error)) => return Err(FileError::from_io("locking", error)),
            Err(TryLockError::WouldBlock) if began.elapsed() > PATIENCE => {
                let seconds = PATIENCE.as_secs();
                return Err(FileError::Broken(format!(
                    "is locked by another program for {seconds} s; close that first"
                )));
            }
            Err(TryLockError::WouldBlock) => std::thread::sleep(Duration::from_millis(2)),
        }
    }
}

fn ends_with_line_break(file: &mut File) -> io::Result<bool> {
    file.seek(SeekFrom::End(-1))?;
    let mut last = [0];
    file.read_exact(&mut last)?;
    Ok(last[0] == b'\n')
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::fs;

    #[test]
    fn lines_of_many_writers_stay_whole_and_none_is_lost() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let path = folder.path().join("log");
        let name = path.to_str().expect("UTF-8");
        std::thread::scope(|scope| {
            for writer in 0..8 {
                scope.spawn(move || {
                    for number in 0..40 {
                        let line = format!("{writer} {number} {}", "x".repeat(100 * writer + number));
                        assert!(!append_line(name, &line).expect("appended"));
                    }
                });
            }
        });
        let text = fs::read_to_string(&path).expect("read");
        for writer in 0..8 {
            let start = format!("{writer} ");
            let of_writer: Vec<&str> = text.lines().filter(|line| line.starts_with(&start)).collect();
            assert_eq!(of_writer.len(), 40);
            for (number, line) in of_writer.iter().enumerate() {
                assert_eq!(*line, format!("{writer} {number} {}", "x".repeat(100 * writer + number)));
            }
        }
        assert_eq!(text.lines().count(), 320);
    }

    #[test]
    fn a_line_that_was_cut_is_closed_kept_and_told() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let path = folder.path().join("log");
        fs::write(&path, "whole\ncut off he").expect("written");
        let name = path.to_str().expect("UTF-8");
        assert!(append_line(name, "next").expect("appended"));
        assert!(!append_line(name, "last").expect("appended"));
        assert_eq!(fs::read_to_string(&path).expect("read"), "whole\ncut off he\nnext\nlast\n");
    }

    #[test]
    fn what_cannot_be_appended_to_is_told_and_nothing_is_left_behind() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let inside = |name: &str| folder.path().join(name).to_str().expect("UTF-8").to_owned();
        assert!(matches!(check_appendable(&inside("")), Err(FileError::Directory)));
        assert!(check_appendable(&inside("no/log")).is_err() && append_line(&inside("no/log"), "x").is_err());
        check_appendable(&inside("log")).expect("a good place");
        assert_eq!(fs::read_dir(folder.path()).expect("a folder").count(), 0);
    }
}
