//! Snapshots as HDF5 files: single precision, mantissas rounded, compressed.

use std::path::Path;

use ndarray::ArrayView3;

/// Dataset names in the order of the components.
pub const NAMES: [&str; 6] = ["u", "v", "w", "bx", "by", "bz"];

/// What goes into the root attributes.
pub struct Facts<'a> {
    /// Time since the start of the run.
    pub time: f64,
    /// Kinematic viscosity.
    pub viscosity: f64,
    /// Magnetic diffusivity.
    pub resistivity: f64,
    /// Seed option of the run.
    pub seed: u64,
    /// What the data are meant to be, and that they are invented.
    pub scenario: &'a str,
    /// The options that remake the file.
    pub options: &'a str,
    /// Explicit mantissa bits kept of the 23 of single precision.
    pub mantissa_bits: u32,
}

/// Writes 3 or 6 components, each `[z][y][x]` of `n`³ samples, first sample at the origin, into a
/// new file, for a box of length 2π along each axis.
pub fn write(path: &Path, n: usize, fields: &[Vec<f64>], facts: &Facts) -> hdf5::Result<()> {
    let file = hdf5::File::create(path)?;
    for (name, field) in NAMES.iter().zip(fields) {
        let values: Vec<f32> = field.iter().map(|&v| rounded(v as f32, facts.mantissa_bits)).collect();
        let view = ArrayView3::from_shape((n, n, n), &values).expect("n³ samples");
        file.new_dataset_builder()
            .with_data(view)
            .chunk((n.min(16), n.min(64), n.min(64)))
            .shuffle()
            .deflate(9)
            .obj_track_times(false)
            .create(*name)?;
    }
    let numbers = [("time", facts.time), ("viscosity", facts.viscosity), ("resistivity", facts.resistivity)];
    let with_resistivity = fields.len() > 3;
    for (name, value) in numbers {
        if name != "resistivity" || with_resistivity {
            file.new_attr::<f64>().create(name)?.write_scalar(&value)?;
        }
    }
    file.new_attr_builder().with_data(&[std::f64::consts::TAU; 3]).create("lengths")?;
    file.new_attr::<u64>().create("seed")?.write_scalar(&facts.seed)?;
    file.new_attr::<u32>().create("mantissa_bits")?.write_scalar(&facts.mantissa_bits)?;
    let texts = [("scenario", facts.scenario), ("options", facts.options), ("index_order", "[z][y][x], x fastest")];
    for (name, text) in texts {
        let value: hdf5::types::VarLenUnicode = text.parse().expect("text holds no NUL");
        file.new_attr::<hdf5::types::VarLenUnicode>().create(name)?.write_scalar(&value)?;
    }
    Ok(())
}

/// The value with `bits` explicit mantissa bits nearest to `value`, ties away from zero: relative
/// error at most 2^-(bits+1). The cleared bits are what makes turbulence compressible.
fn rounded(value: f32, bits: u32) -> f32 {
    let dropped = 23 - bits;
    if dropped == 0 || !value.is_finite() {
        return value;
    }
    // A carry out of the mantissa raises the exponent, which is the right answer.
    let half = 1u32 << (dropped - 1);
    f32::from_bits((value.to_bits() + half) >> dropped << dropped)
}
