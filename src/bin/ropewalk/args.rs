//! The command line as typed.

use std::path::PathBuf;

use clap::{Args as ClapArgs, Parser, Subcommand, ValueEnum};

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
pub struct Catalogue {
    /// HDF5 files, .npy files with a component axis, folders of .npy files, or quoted patterns like "run/*.h5"
    #[arg(value_name = "SNAPSHOT", required = true)]
    pub snapshots: Vec<String>,
    /// Run folder to write
    #[arg(short, long, value_name = "DIR", default_value = "ropewalk-run")]
    pub output: PathBuf,
    /// Put this run in the place of an earlier one of that name, once it is complete
    #[arg(long)]
    pub replace: bool,

    /// Datasets of the velocity: three, or one with a component axis
    #[arg(long, value_name = "U,V,W", value_delimiter = ',', help_heading = "Input")]
    pub velocity: Option<Vec<String>>,
    /// Datasets of the magnetic field: three, or one with a component axis
    #[arg(long, value_name = "BX,BY,BZ", value_delimiter = ',', help_heading = "Input")]
    pub magnetic: Option<Vec<String>>,
    /// Array axes, slowest first; a c at one end places the component axis
    #[arg(long, value_name = "AXES", default_value = "zyx", help_heading = "Input")]
    pub order: String,
    /// Box lengths: three numbers, or one for a cube; 2pi is understood
    #[arg(long, value_name = "LX,LY,LZ", allow_hyphen_values = true, help_heading = "Input")]
    pub lengths: Option<String>,
    /// Distance between samples, instead of lengths
    #[arg(long, value_name = "DX,DY,DZ", allow_hyphen_values = true, help_heading = "Input")]
    pub spacing: Option<String>,
    /// Position of the first sample
    #[arg(long, value_name = "X,Y,Z", default_value = "0,0,0", allow_hyphen_values = true, help_heading = "Input")]
    pub origin: String,
    /// Periodic axes: any subset of xyz, or none
    #[arg(long, value_name = "AXES", default_value = "xyz", help_heading = "Input")]
    pub periodic: String,

    /// Kinematic viscosity
    #[arg(long, value_name = "NU", allow_negative_numbers = true, help_heading = "Physics")]
    pub viscosity: Option<f64>,
    /// Magnetic diffusivity
    #[arg(long, value_name = "ETA", allow_negative_numbers = true, help_heading = "Physics")]
    pub resistivity: Option<f64>,
    /// Frame of the velocity: that of the box mean, or as stored
    #[arg(long, value_enum, default_value = "box", help_heading = "Physics")]
    pub frame: FrameArg,
    /// Derivatives: central differences of order 2 to 8, a nine-point stencil optimised in wavenumber, or spectral (exact) on periodic axes; auto is fd8
    #[arg(long, value_enum, default_value = "auto", help_heading = "Physics")]
    pub derivative: DerivativeArg,

    /// A family of objects, "NAME: INDICATOR > LEVEL" (repeatable). LEVEL is a number, alone or with rms, mean or volume. Without it: vorticity > 3 rms, and current > 3 rms with a magnetic field
    #[arg(long = "family", value_name = "SPEC", help_heading = "Objects")]
    pub families: Vec<String>,
    /// Smallest object that is listed; smaller ones are counted
    #[arg(long, value_name = "CELLS", default_value_t = 27, help_heading = "Objects")]
    pub min_cells: u64,
    /// Neighbours of a cell that belong to the same object
    #[arg(long, value_enum, default_value = "26", help_heading = "Objects")]
    pub connectivity: ConnectivityArg,
    /// Larger objects get additive columns only
    #[arg(long, value_name = "CELLS", default_value_t = 1 << 22, help_heading = "Objects")]
    pub max_object_cells: u64,
    /// Surface meshes: one file a snapshot and family, one an object, or none
    #[arg(long, value_enum, default_value = "together", help_heading = "Objects")]
    pub surfaces: SurfacesArg,
    /// Smallest object that gets a mesh
    #[arg(long, value_name = "CELLS", default_value_t = 0, help_heading = "Objects")]
    pub surface_min_cells: u64,

    /// Tables to write; catalogue.csv is always there
    #[arg(long, value_name = "LIST", value_enum, value_delimiter = ',', help_heading = "Output")]
    pub tables: Option<Vec<TableArg>>,
    /// Label volumes: which object every cell belongs to, as HDF5
    #[arg(long, help_heading = "Output")]
    pub labels: bool,
    /// Cut-outs of all fields around objects, as HDF5: largest:N of every family, or ID and FAMILY:ID (repeatable)
    #[arg(long, value_name = "SPEC", value_delimiter = ',', help_heading = "Output")]
    pub cut_outs: Vec<String>,
    /// Cells around the object of a cut-out
    #[arg(long, value_name = "CELLS", default_value_t = 8, help_heading = "Output")]
    pub cut_out_margin: usize,

    /// Worker threads; 0 takes one per core
    #[arg(long, value_name = "N", default_value_t = 0, help_heading = "Execution (never changes a result)")]
    pub threads: usize,
    /// Planes worked on at a time; chosen from the snapshot when not given
    #[arg(long, value_name = "N", help_heading = "Execution (never changes a result)")]
    pub block_planes: Option<usize>,
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
}

#[derive(Debug, Clone, Copy, ValueEnum)]
pub enum FrameArg {
    Box,
    Stored,
}

#[derive(Debug, Clone, Copy, ValueEnum)]
pub enum DerivativeArg {
    Auto,
    Fd2,
    Fd4,
    Fd6,
    Fd8,
    Opt,
    Spectral,
}

#[derive(Debug, Clone, Copy, ValueEnum)]
pub enum ConnectivityArg {
    #[value(name = "6")]
    Six,
    #[value(name = "18")]
    Eighteen,
    #[value(name = "26")]
    TwentySix,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub enum TableArg {
    Csv,
    Parquet,
    Jsonl,
}

#[derive(Debug, Clone, Copy, ValueEnum)]
pub enum SurfacesArg {
    Together,
    Each,
    None,
}
