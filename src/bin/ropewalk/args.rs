//! The command line as typed.

use std::path::PathBuf;

use clap::{Args as ClapArgs, Parser, Subcommand, ValueEnum};

use ropewalk::model::indicator::INDICATORS;

use crate::flags::Flags;

/// Catalogues of coherent structures from turbulence snapshots: vortex filaments, current sheets, and whatever else a
/// threshold on a derived field outlines.
#[derive(Debug, Parser)]
#[command(name = "ropewalk", version, disable_help_subcommand = true, max_term_width = 100)]
pub struct Args {
    /// What to do
    #[command(subcommand)]
    pub command: Command,
}

#[derive(Debug, Subcommand)]
pub enum Command {
    /// Run the main job on the shipped demo run and say what to look at
    Demo(Demo),
    /// Say what a file holds and how it would be read; write a run file for it
    Inspect(Inspect),
    /// Snapshots in, a catalogue of their objects and surface meshes out
    Catalogue(Box<Catalogue>),
    /// Join the run folders of separate jobs, such as a job array over snapshots, into one
    Gather(Gather),
    /// Print the data dictionary: name, unit, definition, source of every column
    Columns,
}

#[derive(Debug, ClapArgs)]
pub struct Demo {
    /// Folder for the results
    #[arg(value_name = "DIR", default_value = "demo-run")]
    pub folder: PathBuf,
    /// Folder of the shipped demo data
    #[arg(long, value_name = "DIR")]
    pub data: Option<PathBuf>,
    /// Replace the results of an earlier demo
    #[arg(long)]
    pub replace: bool,
    #[command(flatten)]
    pub talk: Talk,
}

#[derive(Debug, ClapArgs)]
pub struct Inspect {
    /// HDF5 files, .npy files, folders of .npy files, or files without a header
    #[arg(value_name = "FILE", required = true)]
    pub files: Vec<PathBuf>,
    /// Write a commented run file for them, with every setting
    #[arg(long, value_name = "RUN.toml")]
    pub run_file: Option<PathBuf>,
    /// Overwrite an earlier run file of that name
    #[arg(long)]
    pub replace: bool,
}

#[derive(Debug, ClapArgs)]
#[command(after_help = after_help())]
pub struct Catalogue {
    /// A run file RUN.toml; or snapshots: HDF5 files, .npy files, folders of .npy files, quoted patterns like "run/*.h5";
    /// {field} in a name stands for the component, FILE:/GROUP is one step of an HDF5 file
    #[arg(value_name = "RUN.toml|SNAPSHOT")]
    pub named: Vec<String>,
    #[command(flatten)]
    pub flags: Flags,
    /// Check everything that headers tell and print what would be done; nothing is written
    #[arg(long)]
    pub dry_run: bool,
    #[command(flatten)]
    pub talk: Talk,
}

#[derive(Debug, ClapArgs)]
pub struct Gather {
    /// Run folders to join; of an unfinished one (NAME.unfinished) the snapshots that are complete
    #[arg(value_name = "DIR", required = true)]
    pub runs: Vec<PathBuf>,
    /// Run folder to write
    #[arg(short, long, value_name = "DIR", default_value = "ropewalk-run")]
    pub output: PathBuf,
    /// Put this run in the place of an earlier one of that name, once it is complete
    #[arg(long)]
    pub replace: bool,
    #[command(flatten)]
    pub talk: Talk,
}

/// How much to say.
#[derive(Debug, Clone, Copy, ClapArgs)]
pub struct Talk {
    /// Say nothing but errors
    #[arg(short, long)]
    pub quiet: bool,
    /// Name every stage as it begins
    #[arg(short, long, conflicts_with = "quiet")]
    pub verbose: bool,
    /// How progress is told on standard error: auto on a terminal only, json as one JSON object a line (so are warnings and errors
    /// then), none not at all
    #[arg(long, value_name = "HOW", default_value = "auto", hide_possible_values = true)]
    pub progress: Progress,
}

/// How progress is told.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub enum Progress {
    Auto,
    Json,
    None,
}

impl Args {
    /// How progress is told, and with it errors.
    pub fn progress(&self) -> Progress {
        match &self.command {
            Command::Demo(a) => a.talk.progress,
            Command::Catalogue(a) => a.talk.progress,
            Command::Gather(a) => a.talk.progress,
            Command::Inspect(_) | Command::Columns => Progress::None,
        }
    }
}

/// What stands below the options of a run.
fn after_help() -> String {
    let names: Vec<&str> = INDICATORS.iter().map(|i| i.name).collect();
    format!(
        "Indicators, for --family, --companions and --mesh-values: {}. ropewalk columns defines them.\n\n{SETTINGS_HELP}",
        names.join(", ")
    )
}

const SETTINGS_HELP: &str = "Every option but --dry-run, -q, -v and --progress is also a setting of the run file, and one that is given here replaces the \
    setting there (--lengths also a spacing, and the other way round). Relative paths in a run file start from its folder, \
    those given here from the present one. ropewalk inspect SNAPSHOT --run-file RUN.toml writes a run file to begin with.";
