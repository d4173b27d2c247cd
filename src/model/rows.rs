//! Derived quantities of a row of cells, or of part of one: filled by the derive stage, read by every stage behind it.

/// What has to be derived for a pass.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Need {
    /// S:S of the velocity gradient; an indicator made of it is derived in any case.
    pub strain: bool,
    /// The divergences.
    pub divergence: bool,
    /// The difference that the scheme's comparison makes in the divergence, a measure of the truncation error.
    pub truncation: bool,
    /// Cosines and squared cross products.
    pub alignment: bool,
    /// The indicators beside those of the families.
    pub extras: bool,
    /// u, ω, b, j and the squares of the curls, where nothing else needs them.
    pub vectors: bool,
}

/// Derived quantities of consecutive cells of one row, all arrays of one length. Vectors have one array a component (x, y, z).
///
/// Arrays of a field that is not there, and of what neither [`Need`] nor an indicator asks for, are empty.
#[derive(Debug, Clone, Default)]
pub struct Rows<T> {
    /// Velocity in the chosen frame.
    pub u: [Vec<T>; 3],
    /// Vorticity ∇×u.
    pub w: [Vec<T>; 3],
    /// |ω|².
    pub w2: Vec<T>,
    /// S:S.
    pub strain2: Vec<T>,
    /// ∇·u.
    pub div_u: Vec<T>,
    /// ∇·u by the scheme minus that by its comparison (order 6 for order 8).
    pub div_u_miss: Vec<T>,
    /// Magnetic field.
    pub b: [Vec<T>; 3],
    /// Current density ∇×b.
    pub j: [Vec<T>; 3],
    /// |j|².
    pub j2: Vec<T>,
    /// ∇·b.
    pub div_b: Vec<T>,
    /// ∇·b by the scheme minus that by its comparison.
    pub div_b_miss: Vec<T>,
    /// cos(u, ω), NaN where undefined.
    pub cos_uw: Vec<T>,
    /// cos(j, b), NaN where undefined.
    pub cos_jb: Vec<T>,
    /// cos(u, b), NaN where undefined.
    pub cos_ub: Vec<T>,
    /// |u×ω|².
    pub lamb2: Vec<T>,
    /// |u|²|ω|².
    pub u2w2: Vec<T>,
    /// |j×b|².
    pub lorentz2: Vec<T>,
    /// |j|²|b|².
    pub j2b2: Vec<T>,
    /// cos(j, b − ⟨b⟩), NaN where undefined; empty where the mean field is not removed.
    pub cos_jb_fluct: Vec<T>,
    /// cos(u, b − ⟨b⟩).
    pub cos_ub_fluct: Vec<T>,
    /// |j×(b − ⟨b⟩)|².
    pub lorentz2_fluct: Vec<T>,
    /// |j|²|b − ⟨b⟩|².
    pub j2b2_fluct: Vec<T>,
    /// Buoyancy.
    pub buoyancy: Vec<T>,
    /// Volumes of the cells over that of the largest cell; empty where all are equal.
    pub weights: Vec<f64>,
    /// Indicators, one array a family.
    pub indicators: Vec<Vec<T>>,
    /// Further indicators (companions, mesh values), one array each; filled where [`Need::extras`] asks.
    pub extras: Vec<Vec<T>>,
}

impl<T> Rows<T> {
    /// The cosines in the order of [`crate::model::contents::COSINES`].
    pub fn cosines(&self) -> [&[T]; 5] {
        [&self.cos_uw, &self.cos_jb, &self.cos_ub, &self.cos_jb_fluct, &self.cos_ub_fluct]
    }
}
