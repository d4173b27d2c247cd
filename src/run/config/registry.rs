//! The one list of settings: key in the run file, flag, default, help, examples. Everything that shows or reads settings goes by it.

/// A setting.
#[allow(missing_docs)] // Explained by the registry, each beside its entry.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Key {
    Paths,
    Lists,
    Steps,
    Times,
    Velocity,
    Magnetic,
    Buoyancy,
    Density,
    Order,
    Lengths,
    Spacing,
    Origin,
    Periodic,
    Coordinates,
    Staggering,
    Region,
    RegionCells,
    RawValues,
    RawEndian,
    RawShape,
    RawOffset,
    RawRecords,
    TimeAttribute,
    TimeDataset,
    TimeName,
    Viscosity,
    Resistivity,
    Dissipation,
    KolmogorovLength,
    Frame,
    Derivative,
    Filter,
    Portable,
    Families,
    MinCells,
    Connectivity,
    MaxObjectCells,
    Companions,
    Folder,
    Replace,
    Tables,
    Surfaces,
    SurfaceMinCells,
    MeshValues,
    Labels,
    CutOuts,
    CutOutMargin,
    Threads,
    BlockPlanes,
    Memory,
    Scratch,
}

/// How a flag takes its value.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Takes {
    /// One value.
    One,
    /// One value each time it is given.
    Many,
    /// `yes` or `no`; the flag alone is `yes`.
    Switch,
}

/// One entry of the registry.
#[derive(Debug)]
pub struct Setting {
    /// Which.
    pub key: Key,
    /// Table of the run file, e.g. `input.raw`.
    pub table: &'static str,
    /// Key in that table.
    pub name: &'static str,
    /// Flag without its dashes; empty for what stands on the command line without a flag.
    pub flag: &'static str,
    /// One-letter flag.
    pub short: Option<char>,
    /// How the flag takes its value.
    pub takes: Takes,
    /// Name of the value in help.
    pub value: &'static str,
    /// The only values it can have; empty where others are possible.
    pub choices: &'static [&'static str],
    /// What holds when it is not given, as one would type it; empty where there is none.
    pub default: &'static str,
    /// What it is.
    pub help: &'static str,
    /// An example other than the default, as in a run file.
    pub example: &'static str,
    /// The same, as behind the flag.
    pub typed: &'static str,
}

impl Setting {
    /// Table and key, e.g. `input.raw.shape`.
    pub fn path(&self) -> String {
        format!("{}.{}", self.table, self.name)
    }

    const fn choices(mut self, choices: &'static [&'static str]) -> Setting {
        self.choices = choices;
        self
    }

    const fn many(mut self) -> Setting {
        self.takes = Takes::Many;
        self
    }

    const fn switch(mut self) -> Setting {
        self.takes = Takes::Switch;
        self
    }

    const fn or(mut self, default: &'static str) -> Setting {
        self.default = default;
        self
    }

    const fn short(mut self, short: char) -> Setting {
        self.short = Some(short);
        self
    }
}

impl Key {
    /// The registry entry.
    pub fn setting(self) -> &'static Setting {
        &SETTINGS[self as usize]
    }
}

/// The tables of a run file in their order, each with a heading for help and what it is about.
pub const TABLES: [(&str, &str, &str); 8] = [
    ("snapshots", "Snapshots", "which snapshots; paths are relative to the folder of the run file"),
    ("input", "Input", "how they are to be read; triples are in the order x, y, z"),
    ("input.raw", "Input without a header", "layout of binary files without a header; values and shape go together"),
    ("input.time", "Time", "where the time of a snapshot stands, if not in an attribute time or t"),
    ("physics", "Physics", "coefficients, and how fields are derived"),
    ("objects", "Objects", "what an object is"),
    ("output", "Output", "what is written"),
    ("execution", "Execution (never changes a result)", "how it is carried out; never changes a result"),
];

const fn s(
    key: Key,
    (table, name): (&'static str, &'static str),
    (flag, value): (&'static str, &'static str),
    help: &'static str,
    (example, typed): (&'static str, &'static str),
) -> Setting {
    Setting { key, table, name, flag, short: None, takes: Takes::One, value, choices: &[], default: "", help, example, typed }
}

/// Every setting, in the order of [`Key`].
pub const SETTINGS: [Setting; 51] = [
    s(
        Key::Paths,
        ("snapshots", "paths"),
        ("", "SNAPSHOT"),
        "Files, folders of .npy files, or quoted patterns like \"run/*.h5\"; {field} in a name stands for the component; FILE:/GROUP is one step of an HDF5 file",
        ("[\"run/*.h5\"]", "run/*.h5"),
    )
    .many(),
    s(
        Key::Lists,
        ("snapshots", "lists"),
        ("list", "FILE"),
        "A text file with one path a line; a time may stand behind it, and # begins a comment. Paths start from the folder of the list",
        ("[\"run.txt\"]", "run.txt"),
    )
    .many(),
    s(
        Key::Steps,
        ("snapshots", "steps"),
        ("steps", "PATTERN"),
        "Pattern of the groups that are steps of every HDF5 file",
        ("\"step_*\"", "step_*"),
    ),
    s(
        Key::Times,
        ("snapshots", "times"),
        ("times", "T1,T2,..."),
        "Times of the snapshots in their order; they go before those of lists, and those before what is found in files and their names",
        ("[0.0, 0.5]", "0.0,0.5"),
    ),
    s(
        Key::Velocity,
        ("input", "velocity"),
        ("velocity", "U,V,W"),
        "Datasets of the velocity: three (two on a plane), or one with a component axis. Where neither velocity nor magnetic is named, usual names are looked for",
        ("[\"flow/u\", \"flow/v\", \"flow/w\"]", "flow/u,flow/v,flow/w"),
    ),
    s(
        Key::Magnetic,
        ("input", "magnetic"),
        ("magnetic", "BX,BY,BZ"),
        "Datasets of the magnetic field: three, or one with a component axis",
        ("[\"flow/bx\", \"flow/by\", \"flow/bz\"]", "flow/bx,flow/by,flow/bz"),
    ),
    s(Key::Buoyancy, ("input", "buoyancy"), ("buoyancy", "NAME"), "Dataset of the buoyancy", ("\"theta\"", "theta")),
    s(
        Key::Density,
        ("input", "density"),
        ("density", "NAME"),
        "Dataset of the density: the magnetic field is divided by its square root, and the flow counts as compressible",
        ("\"rho\"", "rho"),
    ),
    s(
        Key::Order,
        ("input", "order"),
        ("order", "AXES"),
        "Array axes, slowest first; a c at one end places the component axis; yx for planes",
        ("\"xyz\"", "xyz"),
    )
    .or("zyx"),
    s(
        Key::Lengths,
        ("input", "lengths"),
        ("lengths", "LX,LY,LZ"),
        "Box lengths: three numbers, or one for a cube, or two on a plane (order yx or xy); 2pi is understood. Samples times spacing, at open faces too. For an axis whose coordinates are given 0, or the length that its cells are to fill",
        ("[\"2pi\", \"2pi\", \"pi\"]", "2pi,2pi,pi"),
    ),
    s(
        Key::Spacing,
        ("input", "spacing"),
        ("spacing", "DX,DY,DZ"),
        "Distance between samples, instead of lengths: three numbers, or one, or two on a plane",
        ("[0.1, 0.1, 0.05]", "0.1,0.1,0.05"),
    ),
    s(Key::Origin, ("input", "origin"), ("origin", "X,Y,Z"), "Position of the first sample: three numbers, or one, or two on a plane", ("[0, -1.5, \"-pi\"]", "0,-1.5,-pi"))
        .or("0,0,0"),
    s(
        Key::Periodic,
        ("input", "periodic"),
        ("periodic", "AXES"),
        "Periodic axes: any subset of xyz, or none",
        ("\"xz\"", "xz"),
    )
    .or("xyz"),
    s(
        Key::Coordinates,
        ("input", "coordinates"),
        ("coordinates", "x=NAME,..."),
        "Datasets with the positions of the samples; an axis of unequal spacing is open",
        ("{ y = \"grid/y\" }", "y=grid/y"),
    ),
    s(
        Key::Staggering,
        ("input", "staggering"),
        ("staggering", "WHERE"),
        "Where the magnetic components are stored: at the samples, or on the cell faces half a cell below or above",
        ("\"lower\"", "lower"),
    )
    .choices(&["centres", "lower", "upper"])
    .or("centres"),
    s(
        Key::Region,
        ("input", "region"),
        ("region", "x=FROM:TO,..."),
        "Part of the box to use, by positions; open faces where it is cut",
        ("{ x = [0.5, 1.5], z = [\"0\", \"pi\"] }", "x=0.5:1.5,z=0:pi"),
    ),
    s(
        Key::RegionCells,
        ("input", "region_cells"),
        ("region-cells", "x=FIRST:END,..."),
        "Part of the box to use, by indices that count from 0; END is the first sample left out. On a periodic axis they may leave the box",
        ("{ x = [10, 50], z = [-8, 24] }", "x=10:50,z=-8:24"),
    ),
    s(
        Key::RawValues,
        ("input.raw", "values"),
        ("raw-values", "TYPE"),
        "Type of the values",
        ("\"f32\"", "f32"),
    )
    .choices(&["f32", "f64"]),
    s(
        Key::RawEndian,
        ("input.raw", "endian"),
        ("raw-endian", "ORDER"),
        "Order of the bytes of a value: least or most significant first",
        ("\"big\"", "big"),
    )
    .choices(&["little", "big"])
    .or("little"),
    s(
        Key::RawShape,
        ("input.raw", "shape"),
        ("raw-shape", "NZ,NY,NX"),
        "Samples along every space axis, slowest first",
        ("[64, 64, 128]", "64,64,128"),
    ),
    s(
        Key::RawOffset,
        ("input.raw", "offset"),
        ("raw-offset", "BYTES"),
        "Bytes before the first value or record",
        ("512", "512"),
    )
    .or("0"),
    s(
        Key::RawRecords,
        ("input.raw", "records"),
        ("raw-records", "BYTES"),
        "Length of the markers around Fortran sequential records",
        ("4", "4"),
    )
    .choices(&["none", "4", "8"])
    .or("none"),
    s(
        Key::TimeAttribute,
        ("input.time", "attribute"),
        ("time-attribute", "NAME"),
        "Attribute that holds the time. It goes before a dataset, that before a number in the name, and that before an attribute time or t",
        ("\"t_now\"", "t_now"),
    ),
    s(
        Key::TimeDataset,
        ("input.time", "dataset"),
        ("time-dataset", "NAME"),
        "Dataset that holds the time, one number; where a time attribute is named as well and found, that one counts",
        ("\"info/time\"", "info/time"),
    ),
    s(
        Key::TimeName,
        ("input.time", "name"),
        ("time-name", "PATTERN"),
        "File name with {time} where the time stands and * for anything else; counts where a time attribute or dataset is not named or not found",
        ("\"out_t{time}.h5\"", "out_t{time}.h5"),
    ),
    s(Key::Viscosity, ("physics", "viscosity"), ("viscosity", "NU"), "Kinematic viscosity", ("0.002", "0.002")),
    s(Key::Resistivity, ("physics", "resistivity"), ("resistivity", "ETA"), "Magnetic diffusivity", ("0.003", "0.003")),
    s(
        Key::Dissipation,
        ("physics", "dissipation"),
        ("dissipation", "EPSILON"),
        "Mean total dissipation EPSILON a unit mass, where the run states it: the Kolmogorov length is then (NU^3/EPSILON)^(1/4), instead of the one with the snapshot's own dissipation",
        ("0.08", "0.08"),
    ),
    s(
        Key::KolmogorovLength,
        ("physics", "kolmogorov_length"),
        ("kolmogorov-length", "LENGTH"),
        "Kolmogorov length, where the run states it. It goes before that of a given dissipation, and that before the snapshot's own; with viscosity and dissipation it may differ by 1 % from (NU^3/EPSILON)^(1/4)",
        ("0.0178", "0.0178"),
    ),
    s(
        Key::Frame,
        ("physics", "frame"),
        ("frame", "FRAME"),
        "Frame of the velocity: box, stored, or the velocity U,V,W of a frame; box is that of the mean over the box",
        ("[0.1, 0, 0]", "0.1,0,0"),
    )
    .or("box"),
    s(
        Key::Derivative,
        ("physics", "derivative"),
        ("derivative", "SCHEME"),
        "Derivatives: central differences of order 2 to 8 (one-sided at open faces), the optimised stencil, or spectral along periodic axes; auto is fd8",
        ("\"spectral\"", "spectral"),
    )
    .choices(&["auto", "fd2", "fd4", "fd6", "fd8", "opt", "spectral"])
    .or("auto"),
    s(
        Key::Filter,
        ("physics", "filter"),
        ("filter", "SHAPE WIDTH"),
        "Low-pass filter of all fields before anything is derived, \"sharp WIDTH\" or \"gaussian WIDTH\", in a periodic box",
        ("\"sharp 0.2\"", "sharp 0.2"),
    ),
    s(
        Key::Portable,
        ("physics", "portable"),
        ("portable", "yes|no"),
        "Ask for one path on every machine, so that the bytes are the same on all of them, and have run.json say so; so far nothing has to be given up for it",
        ("true", "yes"),
    )
    .switch()
    .or("no"),
    s(
        Key::Families,
        ("objects", "families"),
        ("family", "SPEC"),
        "A family of objects, \"NAME: INDICATOR > LEVEL [down to LEVEL]\", or <. LEVEL is a number, alone or with rms, run-rms, mean, volume or peak. When none is given: vorticity > 3 rms, and current > 3 rms with a magnetic field",
        ("[\"worms: vorticity > 2.5 rms\", \"cores: q > 0.01 volume\"]", "worms: vorticity > 2.5 rms"),
    )
    .many(),
    s(
        Key::MinCells,
        ("objects", "min_cells"),
        ("min-cells", "CELLS"),
        "Smallest object that is listed; smaller ones are counted",
        ("8", "8"),
    )
    .or("27"),
    s(
        Key::Connectivity,
        ("objects", "connectivity"),
        ("connectivity", "NEIGHBOURS"),
        "Neighbours of a cell that belong to the same object",
        ("6", "6"),
    )
    .choices(&["6", "18", "26"])
    .or("26"),
    s(
        Key::MaxObjectCells,
        ("objects", "max_object_cells"),
        ("max-object-cells", "CELLS"),
        "Larger objects get additive columns only",
        ("1000000", "1000000"),
    )
    .or("4194304"),
    s(
        Key::Companions,
        ("objects", "companions"),
        ("companions", "LIST"),
        "Indicators whose mean and extremes over each object become columns",
        ("[\"helicity\", \"strain\"]", "helicity,strain"),
    ),
    s(Key::Folder, ("output", "folder"), ("output", "DIR"), "Run folder to write", ("\"results\"", "results"))
        .short('o')
        .or("ropewalk-run"),
    s(
        Key::Replace,
        ("output", "replace"),
        ("replace", "yes|no"),
        "Put this run in the place of an earlier one of that name, once it is complete",
        ("true", "yes"),
    )
    .switch()
    .or("no"),
    s(
        Key::Tables,
        ("output", "tables"),
        ("tables", "LIST"),
        "Tables of the catalogue: csv (always written), parquet, jsonl",
        ("[\"csv\", \"jsonl\"]", "csv,jsonl"),
    )
    .or("csv,parquet"),
    s(
        Key::Surfaces,
        ("output", "surfaces"),
        ("surfaces", "HOW"),
        "Surface meshes: one file a snapshot and family, one an object, or none",
        ("\"each\"", "each"),
    )
    .choices(&["together", "each", "none"])
    .or("together"),
    s(
        Key::SurfaceMinCells,
        ("output", "surface_min_cells"),
        ("surface-min-cells", "CELLS"),
        "Smallest object that gets a mesh",
        ("100", "100"),
    )
    .or("0"),
    s(
        Key::MeshValues,
        ("output", "mesh_values"),
        ("mesh-values", "LIST"),
        "Indicators put on mesh vertices besides the standard values",
        ("[\"q\"]", "q"),
    ),
    s(
        Key::Labels,
        ("output", "labels"),
        ("labels", "yes|no"),
        "Write the object id of every cell, one HDF5 file a snapshot and family",
        ("true", "yes"),
    )
    .switch()
    .or("no"),
    s(
        Key::CutOuts,
        ("output", "cut_outs"),
        ("cut-outs", "SPEC"),
        "Write all fields around some objects: largest:N of every family, or ids like 12 or FAMILY:12, separated by commas",
        ("\"largest:3\"", "largest:3"),
    )
    .or("none"),
    s(
        Key::CutOutMargin,
        ("output", "cut_out_margin"),
        ("cut-out-margin", "CELLS"),
        "Cells of margin around the object of a cut-out",
        ("4", "4"),
    )
    .or("8"),
    s(
        Key::Threads,
        ("execution", "threads"),
        ("threads", "N"),
        "Worker threads; 0 takes one per core",
        ("2", "2"),
    )
    .or("0"),
    s(
        Key::BlockPlanes,
        ("execution", "block_planes"),
        ("block-planes", "N"),
        "Planes worked on at a time; chosen from the snapshot when not given",
        ("16", "16"),
    ),
    s(
        Key::Memory,
        ("execution", "memory"),
        ("memory", "SIZE"),
        "Memory that planes, fields and objects may take, with a unit: KiB, MiB, GiB, TiB, or kB, MB, GB, TB. The program takes up to 32 MiB, and 8 MiB a thread, besides. When not given: half of the smallest of the machine's memory, the limit of its control group, and the limits of ulimit -v and -d",
        ("\"1.5GiB\"", "1.5GiB"),
    ),
    s(
        Key::Scratch,
        ("execution", "scratch"),
        ("scratch", "DIR"),
        "Folder on a disk with room, for what does not fit into memory; emptied at the end. When not given: the unfinished run folder",
        ("\"/scratch\"", "/scratch"),
    ),
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_registry_is_in_the_order_of_its_keys_and_has_no_doubles() {
        for (i, s) in SETTINGS.iter().enumerate() {
            assert_eq!(s.key as usize, i, "{}", s.path());
            assert!(TABLES.iter().any(|(t, _, _)| *t == s.table), "{}", s.path());
            assert_eq!(SETTINGS.iter().filter(|o| o.path() == s.path() || o.flag == s.flag).count(), 1, "{}", s.path());
            assert!(!s.help.is_empty() && !s.example.is_empty() && !s.typed.is_empty(), "{}", s.path());
            assert!(s.choices.is_empty() || s.choices.contains(&s.typed), "{}", s.path());
            assert_ne!(s.typed, s.default, "{}", s.path());
        }
        assert_eq!(SETTINGS.len(), Key::Scratch as usize + 1);
    }
}
