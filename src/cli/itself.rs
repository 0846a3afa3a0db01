//! Completions and manual pages, both from the one definition of the command line.

use super::args::{CompletionsArguments, ManualArguments, definition};
use super::exit::{Exit, Failure, say};
use super::files::{FileError, write_atomically};
use clap::Command;
use std::fs;
use std::io;
use std::path::Path;

/// Name of the program as it is typed.
const NAME: &str = "gaptone";

/// Runs `completions`.
pub fn completions(arguments: &CompletionsArguments) -> Result<Exit, Failure> {
    let mut script = Vec::new();
    clap_complete::generate(arguments.shell, &mut definition(), NAME, &mut script);
    say(&String::from_utf8_lossy(&script))?;
    Ok(Exit::Done)
}

/// Runs `manual`.
pub fn manual(arguments: &ManualArguments) -> Result<Exit, Failure> {
    let folder = &arguments.folder;
    fs::create_dir_all(folder).map_err(|error| Failure::file(folder, &FileError::from_io("writing", error)))?;
    let whole = definition();
    let mut written = write_page(folder, NAME, whole.clone())?;
    for command in whole.get_subcommands() {
        let name = format!("{NAME}-{}", command.get_name());
        written += &write_page(folder, &name, command.clone())?;
    }
    say(&written)?;
    Ok(Exit::Done)
}

/// Writes the page of one command as `NAME.1` and gives the line that says so.
fn write_page(folder: &str, name: &str, command: Command) -> Result<String, Failure> {
    let path = Path::new(folder).join(format!("{name}.1"));
    let path = path.to_string_lossy();
    let typed = name.replacen('-', " ", 1);
    let command = command.display_name(name).bin_name(typed).version(env!("CARGO_PKG_VERSION"));
    let page = clap_mangen::Man::new(command);
    write_atomically(&path, |out| page.render(out as &mut dyn io::Write))
        .map_err(|error| Failure::file(&path, &error))?;
    Ok(format!("{path}\n"))
}
