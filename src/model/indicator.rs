//! The registry of derived scalars: each can be thresholded, averaged over objects, and put on mesh vertices.

use crate::model::source::Fields;

/// A derived scalar field.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Indicator {
    /// |ω|, ω = ∇×u.
    Vorticity,
    /// |ω|².
    Enstrophy,
    /// |j|, j = ∇×b.
    Current,
    /// Q = ¼|ω|² − ½ S:S.
    Q,
    /// Δ = (Q/3)³ + (R/2)².
    Delta,
    /// λ2, the middle eigenvalue of S² + W².
    Lambda2,
    /// λ_ci, the imaginary part of the complex eigenvalues of A; 0 where all are real.
    Swirling,
    /// |S| = √(S:S).
    Strain,
    /// 2ν S:S.
    DissipationViscous,
    /// η |j|².
    DissipationOhmic,
    /// u·ω.
    Helicity,
    /// cos(u, ω).
    RelativeHelicity,
    /// u·b.
    CrossHelicity,
    /// j·b.
    CurrentHelicity,
    /// |u×ω|.
    Lamb,
    /// |u×ω| / (|u||ω|).
    LambSin,
    /// |j×b|.
    Lorentz,
    /// |j×b| / (|j||b|).
    LorentzSin,
    /// |∇×(u + b)| = |ω + j|.
    ElsasserPlus,
    /// |∇×(u − b)| = |ω − j|.
    ElsasserMinus,
    /// |u|.
    Speed,
    /// |b|.
    Field,
    /// The buoyancy.
    Buoyancy,
    /// |∇ buoyancy|.
    BuoyancyGradient,
    /// ∇²p = 2Q, pressure over density.
    PressureLaplacian,
}

/// One entry of the registry.
pub struct IndicatorInfo {
    /// Which.
    pub indicator: Indicator,
    /// Name in the family grammar, in options and in column names.
    pub name: &'static str,
    /// Unit in terms of L (length) and T (time); magnetic field in velocity units.
    pub unit: &'static str,
    /// What it is.
    pub definition: &'static str,
    /// Where the formula comes from.
    pub source: &'static str,
}

const fn info(
    indicator: Indicator,
    name: &'static str,
    unit: &'static str,
    definition: &'static str,
    source: &'static str,
) -> IndicatorInfo {
    IndicatorInfo { indicator, name, unit, definition, source }
}

/// Every indicator.
pub const INDICATORS: [IndicatorInfo; 25] = [
    info(Indicator::Vorticity, "vorticity", "1/T", "Magnitude of the vorticity, the curl of the velocity.", ""),
    info(Indicator::Enstrophy, "enstrophy", "1/T^2", "Squared magnitude of the vorticity (without a factor 1/2).", ""),
    info(Indicator::Current, "current", "1/T", "Magnitude of the current density, the curl of the magnetic field.", ""),
    info(
        Indicator::Q,
        "q",
        "1/T^2",
        "Q = |vorticity|^2 / 4 - S:S / 2, with the trace of the gradient removed in compressible flow.",
        "Hunt, Wray & Moin 1988, CTR-S88",
    ),
    info(
        Indicator::Delta,
        "delta",
        "1/T^6",
        "Discriminant (Q/3)^3 + (R/2)^2 of the velocity gradient, R = -det A; trace removed in compressible flow.",
        "Chong, Perry & Cantwell 1990, Phys. Fluids A 2, 765",
    ),
    info(
        Indicator::Lambda2,
        "lambda2",
        "1/T^2",
        "Middle eigenvalue of S^2 + W^2; a vortex where negative; trace removed in compressible flow.",
        "Jeong & Hussain 1995, J. Fluid Mech. 285, 69",
    ),
    info(
        Indicator::Swirling,
        "swirling",
        "1/T",
        "Imaginary part of the complex eigenvalues of the velocity gradient, 0 where all are real.",
        "Zhou, Adrian, Balachandar & Kendall 1999, J. Fluid Mech. 387, 353",
    ),
    info(Indicator::Strain, "strain", "1/T", "Square root of S:S.", ""),
    info(Indicator::DissipationViscous, "dissipation_viscous", "L^2/T^3", "2 nu S:S.", ""),
    info(Indicator::DissipationOhmic, "dissipation_ohmic", "L^2/T^3", "eta |j|^2.", ""),
    info(Indicator::Helicity, "helicity", "L/T^2", "Helicity density u.vorticity.", ""),
    info(Indicator::RelativeHelicity, "relative_helicity", "1", "Cosine of velocity and vorticity, 0 where undefined.", ""),
    info(Indicator::CrossHelicity, "cross_helicity", "L^2/T^2", "Cross helicity density u.b.", ""),
    info(Indicator::CurrentHelicity, "current_helicity", "L/T^2", "Current helicity density j.b.", ""),
    info(Indicator::Lamb, "lamb", "L/T^2", "Magnitude of the Lamb vector u x vorticity.", ""),
    info(Indicator::LambSin, "lamb_sin", "1", "|u x vorticity| over |u||vorticity|: sine of their angle, 0 where undefined.", ""),
    info(Indicator::Lorentz, "lorentz", "L/T^2", "Magnitude of the Lorentz force j x b.", ""),
    info(Indicator::LorentzSin, "lorentz_sin", "1", "|j x b| over |j||b|: sine of their angle, 0 where undefined.", ""),
    info(Indicator::ElsasserPlus, "elsasser_plus", "1/T", "Magnitude of the curl of u + b.", "Elsasser 1950, Phys. Rev. 79, 183"),
    info(Indicator::ElsasserMinus, "elsasser_minus", "1/T", "Magnitude of the curl of u - b.", "Elsasser 1950, Phys. Rev. 79, 183"),
    info(Indicator::Speed, "speed", "L/T", "Magnitude of the velocity in the chosen frame.", ""),
    info(Indicator::Field, "field", "L/T", "Magnitude of the magnetic field.", ""),
    info(Indicator::Buoyancy, "buoyancy", "buoyancy", "Buoyancy as stored.", ""),
    info(Indicator::BuoyancyGradient, "buoyancy_gradient", "buoyancy/L", "Magnitude of the gradient of the buoyancy.", ""),
    info(
        Indicator::PressureLaplacian,
        "pressure_laplacian",
        "1/T^2",
        "Laplacian of pressure over density in solenoidal flow, 2 Q with Q as there.",
        "divergence of the Navier-Stokes equation",
    ),
];

impl Indicator {
    /// The registry entry.
    pub fn info(self) -> &'static IndicatorInfo {
        INDICATORS.iter().find(|i| i.indicator == self).unwrap_or(&INDICATORS[0])
    }

    /// Name in the family grammar.
    pub fn name(self) -> &'static str {
        self.info().name
    }

    /// The indicator of that name.
    pub fn named(name: &str) -> Option<Indicator> {
        INDICATORS.iter().find(|i| i.name == name).map(|i| i.indicator)
    }

    /// Which fields it is made of.
    pub fn needs(self) -> Fields {
        use Indicator as I;
        match self {
            I::Vorticity
            | I::Enstrophy
            | I::Q
            | I::Delta
            | I::Lambda2
            | I::Swirling
            | I::Strain
            | I::DissipationViscous
            | I::Helicity
            | I::RelativeHelicity
            | I::Lamb
            | I::LambSin
            | I::PressureLaplacian
            | I::Speed => Fields::VELOCITY,
            I::Current | I::DissipationOhmic | I::CurrentHelicity | I::Lorentz | I::LorentzSin | I::Field => Fields::MAGNETIC,
            I::CrossHelicity | I::ElsasserPlus | I::ElsasserMinus => Fields::BOTH,
            I::Buoyancy | I::BuoyancyGradient => Fields { buoyancy: true, ..Fields::default() },
        }
    }

    /// Whether it is made of S:S.
    pub fn needs_strain(self) -> bool {
        matches!(self, Indicator::Q | Indicator::PressureLaplacian | Indicator::Strain | Indicator::DissipationViscous)
    }

    /// Whether it takes all nine velocity derivatives.
    pub fn needs_full_gradient(self) -> bool {
        self.needs_strain() || matches!(self, Indicator::Delta | Indicator::Lambda2 | Indicator::Swirling)
    }

    /// Whether it depends on the frame in which velocity is measured.
    pub fn depends_on_frame(self) -> bool {
        use Indicator as I;
        matches!(self, I::Helicity | I::RelativeHelicity | I::CrossHelicity | I::Lamb | I::LambSin | I::Speed)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_unique_and_round_trip() {
        for i in &INDICATORS {
            assert_eq!(Indicator::named(i.name), Some(i.indicator));
            assert_eq!(i.indicator.name(), i.name);
            assert_eq!(INDICATORS.iter().filter(|j| j.name == i.name || j.indicator == i.indicator).count(), 1);
        }
    }
}
