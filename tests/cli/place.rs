//! A folder to work in, snapshots to put there, and the program started in it.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::sync::RwLock;

/// Samples along every axis of the snapshots here.
pub const N: usize = 16;

/// Held exclusively while a snapshot is open for writing: a program started at that moment would inherit the open file,
/// and with it the library's lock on it.
static STARTING: RwLock<()> = RwLock::new(());

/// What a run of the program left behind.
pub struct Ran {
    pub code: i32,
    pub out: String,
    pub err: String,
}

/// A folder that is removed at the end.
pub struct Place(tempfile::TempDir);

impl Place {
    pub fn new() -> Place {
        Place(tempfile::tempdir().expect("a folder for temporary files"))
    }

    /// A folder that holds `good.h5`.
    pub fn with_snapshot() -> Place {
        let place = Place::new();
        place.hdf5("good.h5", &flow());
        place
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    /// Runs the program here, with arguments separated by blanks except inside single quotes.
    pub fn run(&self, line: &str) -> Ran {
        let words = line
            .split('\'')
            .enumerate()
            .flat_map(|(i, part)| if i % 2 == 1 { vec![part.to_string()] } else { part.split_whitespace().map(str::to_string).collect() });
        let mut command = Command::new(env!("CARGO_BIN_EXE_ropewalk"));
        command.args(words).current_dir(self.0.path()).env_remove("COLUMNS");
        ended(command)
    }

    /// Runs a line of the shell here.
    pub fn shell(&self, line: &str) -> Ran {
        let mut command = Command::new("sh");
        command.args(["-c", line]).current_dir(self.0.path()).env_remove("COLUMNS");
        ended(command)
    }

    /// Runs it and expects success.
    pub fn succeed(&self, line: &str) -> Ran {
        let ran = self.run(line);
        assert_eq!(ran.code, 0, "{line}\n{}{}", ran.out, ran.err);
        ran
    }

    pub fn read(&self, name: &str) -> String {
        fs::read_to_string(self.path(name)).unwrap_or_else(|e| panic!("{name}: {e}"))
    }

    pub fn write(&self, name: &str, bytes: &[u8]) {
        fs::write(self.path(name), bytes).unwrap_or_else(|e| panic!("{name}: {e}"));
    }

    pub fn json(&self, name: &str) -> serde_json::Value {
        serde_json::from_str(&self.read(name)).unwrap_or_else(|e| panic!("{name}: {e}"))
    }

    /// Writes datasets of single precision.
    pub fn hdf5(&self, name: &str, datasets: &[(&str, Vec<f32>)]) {
        self.hdf5_shaped(name, &datasets.iter().map(|(n, v)| (*n, v.clone(), [N, N, N])).collect::<Vec<_>>());
    }

    pub fn hdf5_shaped(&self, name: &str, datasets: &[(&str, Vec<f32>, [usize; 3])]) {
        let _no_starting = STARTING.write().unwrap_or_else(|e| e.into_inner());
        let file = hdf5::File::create(self.path(name)).expect("a new HDF5 file");
        for (name, values, shape) in datasets {
            let dataset = file.new_dataset::<f32>().shape(*shape).create(*name).expect("a new dataset");
            dataset.write_raw(values).expect("written values");
        }
    }

    /// Gives a file of [`Place::hdf5`] a time.
    pub fn timed(&self, name: &str, time: f64) {
        self.attribute(name, "time", time);
    }

    /// Gives it the length of a cube.
    pub fn sized(&self, name: &str, length: f64) {
        self.attribute(name, "length", length);
    }

    fn attribute(&self, name: &str, attribute: &str, value: f64) {
        let _no_starting = STARTING.write().unwrap_or_else(|e| e.into_inner());
        let file = hdf5::File::open_rw(self.path(name)).expect("an HDF5 file");
        file.new_attr::<f64>().create(attribute).and_then(|a| a.write_scalar(&value)).expect("a written attribute");
    }

    /// Writes an array in the format of NumPy Enhancement Proposal 1, version 1.0.
    pub fn npy(&self, name: &str, shape: &[usize], values: &[f32]) {
        let shape: Vec<String> = shape.iter().map(usize::to_string).collect();
        let mut header = format!("{{'descr': '<f4', 'fortran_order': False, 'shape': ({}), }}", shape.join(", "));
        while (10 + header.len() + 1) % 64 != 0 {
            header.push(' ');
        }
        header.push('\n');
        let mut bytes = b"\x93NUMPY\x01\x00".to_vec();
        bytes.extend((header.len() as u16).to_le_bytes());
        bytes.extend(header.as_bytes());
        bytes.extend(values.iter().flat_map(|v| v.to_le_bytes()));
        self.write(name, &bytes);
    }

    /// Names of everything here, folders opened, sorted.
    pub fn listing(&self) -> Vec<String> {
        let mut out = Vec::new();
        list(self.0.path(), "", &mut out);
        out.sort();
        out
    }
}

/// What a command left behind.
fn ended(mut command: Command) -> Ran {
    command.stdin(Stdio::null()).stdout(Stdio::piped()).stderr(Stdio::piped());
    let started = {
        let _no_writing = STARTING.read().unwrap_or_else(|e| e.into_inner());
        command.spawn().expect("the program starts")
    };
    let output = started.wait_with_output().expect("the program ends");
    let text = |bytes: Vec<u8>| String::from_utf8(bytes).expect("UTF-8 output");
    Ran { code: output.status.code().expect("an exit code"), out: text(output.stdout), err: text(output.stderr) }
}

fn list(folder: &Path, prefix: &str, out: &mut Vec<String>) {
    for entry in fs::read_dir(folder).expect("a readable folder") {
        let entry = entry.expect("a readable entry");
        let name = format!("{prefix}{}", entry.file_name().to_string_lossy());
        if entry.path().is_dir() {
            list(&entry.path(), &format!("{name}/"), out);
            out.push(name + "/");
        } else {
            out.push(name);
        }
    }
}

/// Exactly divergence-free, also for differences: no component varies along its own axis. Unequal in x, y and z.
pub fn flow() -> Vec<(&'static str, Vec<f32>)> {
    let wave = |f: fn(f64, f64, f64) -> f64| -> Vec<f32> {
        let step = std::f64::consts::TAU / N as f64;
        let cells = (0..N * N * N).map(|i| [i % N, i / N % N, i / N / N].map(|k| k as f64 * step));
        cells.map(|[x, y, z]| (1..4).map(|k| f(f64::from(k) * x, f64::from(k) * y, f64::from(k) * z)).sum::<f64>() as f32).collect()
    };
    vec![
        ("u", wave(|_, y, z| (z + 1.0).sin() * (y + 1.3).cos())),
        ("v", wave(|x, _, z| (x + 0.3).sin() * (z - 0.4).cos())),
        ("w", wave(|x, y, _| (y + 0.8).sin() * (x + 2.0).cos())),
    ]
}

/// A magnetic field of the same kind: the flow with its axes' parts exchanged.
pub fn field() -> Vec<(&'static str, Vec<f32>)> {
    let flow = flow();
    let turned = |values: &[f32]| -> Vec<f32> { values.iter().rev().map(|v| 0.5 * v).collect() };
    vec![("bx", turned(&flow[0].1)), ("by", turned(&flow[1].1)), ("bz", turned(&flow[2].1))]
}

/// Options that suit these snapshots.
pub const OPTIONS: &str = "--lengths 2pi --family 'v: vorticity > 2.2 rms' --min-cells 4";
