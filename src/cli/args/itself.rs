//! Arguments of the commands that tell about the program itself.

use clap::Args;
use clap_complete::Shell;

/// Arguments of `abilities`.
#[derive(Debug, Args)]
pub struct AbilitiesArguments {
    /// Write it as JSON
    #[arg(long)]
    pub json: bool,
}

/// Arguments of `completions`.
#[derive(Debug, Args)]
pub struct CompletionsArguments {
    /// The shell
    pub shell: Shell,
}

/// Arguments of `manual`.
#[derive(Debug, Args)]
pub struct ManualArguments {
    /// Folder for the pages; it is made if it is not there
    pub folder: String,
}
