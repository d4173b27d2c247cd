//! The one registry of catalogue columns: name, unit, definition, source, and the stage that fills it.

pub use crate::model::row::{Cell, Counts, Row, Value};

/// Unit of a column in terms of the user's own units.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Unit {
    /// A word or a list of words.
    Text,
    /// A whole number.
    Count,
    /// A pure number.
    One,
    /// The snapshot's time unit.
    Time,
    /// The user's length unit.
    Length,
    /// Length squared.
    Area,
    /// Length cubed.
    Volume,
    /// Kolmogorov lengths.
    KolmogorovLength,
    /// The unit of the family's indicator.
    Indicator,
    /// Velocity squared over time times volume.
    Power,
}

impl Unit {
    /// As written in the dictionary.
    pub fn text(self) -> &'static str {
        match self {
            Unit::Text => "text",
            Unit::Count => "count",
            Unit::One => "1",
            Unit::Time => "time",
            Unit::Length => "length",
            Unit::Area => "length^2",
            Unit::Volume => "length^3",
            Unit::KolmogorovLength => "Kolmogorov length",
            Unit::Indicator => "indicator",
            Unit::Power => "velocity^2 length^3 / time",
        }
    }
}

/// Which part of the program fills a column.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Stage {
    /// The run itself.
    Run,
    /// Sums over cells.
    Tallies,
    /// The isosurface.
    Surface,
}

impl Stage {
    /// As written in the dictionary.
    pub fn text(self) -> &'static str {
        match self {
            Stage::Run => "run",
            Stage::Tallies => "tallies",
            Stage::Surface => "surface",
        }
    }
}

/// What the values of a column are.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// Words.
    Text,
    /// Whole numbers.
    Integer,
    /// Numbers.
    Number,
    /// Counts a bin, separated by spaces in text.
    Counts,
}

/// One column of the catalogue.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Column {
    /// Name in the header.
    pub name: &'static str,
    /// Unit.
    pub unit: Unit,
    /// What it is, with the conventions that matter.
    pub definition: &'static str,
    /// Where the formula comes from.
    pub source: &'static str,
    /// What fills it.
    pub stage: Stage,
}

impl Column {
    /// What its values are.
    pub const fn kind(&self) -> Kind {
        match self.unit {
            Unit::Text => Kind::Text,
            Unit::Count if is_histogram(self.name.as_bytes()) => Kind::Counts,
            Unit::Count => Kind::Integer,
            _ => Kind::Number,
        }
    }
}

/// Whether a name begins with `histogram_`.
const fn is_histogram(name: &[u8]) -> bool {
    matches!(name.split_at_checked(10), Some((b"histogram_", _)))
}

macro_rules! columns {
    ($($id:ident $name:literal $unit:ident $stage:ident $definition:literal $source:literal;)*) => {
        /// A column of the catalogue, usable as an index into [`COLUMNS`].
        #[derive(Debug, Clone, Copy, PartialEq, Eq)]
        pub enum Col {
            $(
                #[doc = $definition]
                $id,
            )*
        }

        /// Every column in catalogue order.
        pub const COLUMNS: &[Column] = &[
            $(Column { name: $name, unit: Unit::$unit, definition: $definition, source: $source, stage: Stage::$stage },)*
        ];
    };
}

columns! {
    Snapshot "snapshot" Text Run "Name of the snapshot." "";
    Time "time" Time Run "Time of the snapshot; missing where the file does not say." "";
    Family "family" Text Run "What was thresholded: name of the family." "";
    Id "id" Count Run "Number of the object within snapshot and family, in the order of its smallest cell index (z, then y, then x)." "";
    Class "class" Text Surface "Shape: filament, sheet, blob or tangle. Tangle: three handles or more, or mean curvature integral not positive. Else blob: planarity and filamentarity both below 0.1. Else sheet where planarity exceeds filamentarity, filament otherwise. An object without planarity (open, fragmented) is classed by its extents: ratio below 2 blob, else sheet or filament by the larger step; closed on itself along one axis filament or sheet by the two other extents, along two axes sheet, along three tangle. On a plane, as closed on itself across the plane; three holes or more make a tangle." "rule of this program on the shapefinders of Sahni, Sathyaprakash & Shandarin 1998 ApJ 495, L5";
    Level "level" Indicator Run "Absolute level of the object's edge: that of the family in this snapshot; for an object grown from its peak, the fraction times its peak." "";
    Cells "cells" Count Tallies "Cells beyond the level." "";
    Volume "volume" Volume Tallies "Volume of the cells; missing on a plane snapshot." "";
    Area "area" Area Tallies "Cells times cell area, of an object of a plane snapshot (where volume is missing)." "";
    CentroidX "centroid_x" Length Tallies "Mean position of the cells, unwrapped, moved into the box; missing along an axis on which the object closes on itself." "";
    CentroidY "centroid_y" Length Tallies "As centroid_x, along y." "";
    CentroidZ "centroid_z" Length Tallies "As centroid_x, along z." "";
    Extent1 "extent_1" Length Tallies "Square root of 12 times the largest second moment of the cells, each cell a solid box: the length of a uniform rod or brick." "second moment of a uniform rod, m = l^2/12";
    Extent2 "extent_2" Length Tallies "As extent_1, middle second moment." "as extent_1";
    Extent3 "extent_3" Length Tallies "As extent_1, smallest second moment." "as extent_1";
    Extent1Eta "extent_1_eta" KolmogorovLength Tallies "extent_1 over the Kolmogorov length (nu^3/epsilon)^(1/4), epsilon the total dissipation a volume." "Kolmogorov 1941";
    Extent2Eta "extent_2_eta" KolmogorovLength Tallies "As extent_1_eta, for extent_2." "Kolmogorov 1941";
    Extent3Eta "extent_3_eta" KolmogorovLength Tallies "As extent_1_eta, for extent_3." "Kolmogorov 1941";
    Axis1X "axis_1_x" One Tallies "Unit vector of extent_1; its component of largest magnitude is positive." "principal axes of the second moments";
    Axis1Y "axis_1_y" One Tallies "As axis_1_x, y component." "as axis_1_x";
    Axis1Z "axis_1_z" One Tallies "As axis_1_x, z component." "as axis_1_x";
    Axis2X "axis_2_x" One Tallies "As axis_1_x, for extent_2." "as axis_1_x";
    Axis2Y "axis_2_y" One Tallies "As axis_2_x, y component." "as axis_1_x";
    Axis2Z "axis_2_z" One Tallies "As axis_2_x, z component." "as axis_1_x";
    Axis3X "axis_3_x" One Tallies "As axis_1_x, for extent_3." "as axis_1_x";
    Axis3Y "axis_3_y" One Tallies "As axis_3_x, y component." "as axis_1_x";
    Axis3Z "axis_3_z" One Tallies "As axis_3_x, z component." "as axis_1_x";
    Peak "peak" Indicator Tallies "Most extreme value of the indicator in the object." "";
    PeakX "peak_x" Length Tallies "Position of the cell of the peak, inside the box." "";
    PeakY "peak_y" Length Tallies "As peak_x, along y." "";
    PeakZ "peak_z" Length Tallies "As peak_x, along z." "";
    IndicatorMean "indicator_mean" Indicator Tallies "Volume mean of the indicator over the object." "";
    DissipationViscous "dissipation_viscous" Power Tallies "Integral of 2 nu S:S over the object (over its area on a plane). Without nu but with a given dissipation epsilon and no magnetic field, nu is the effective viscosity epsilon / (2 <S:S>); else missing." "S = (A + A^T)/2, A_ij = du_i/dx_j";
    DissipationOhmic "dissipation_ohmic" Power Tallies "Integral of eta |j|^2 over the object; missing without eta." "j = curl b, b in velocity units";
    ViscousShare "viscous_share" One Tallies "Share of the box integral of S:S held by the object; needs no nu." "as dissipation_viscous";
    OhmicShare "ohmic_share" One Tallies "Share of the box integral of |j|^2 held by the object; needs no eta." "as dissipation_ohmic";
    Perimeter "perimeter" Length Surface "Length of the contour of the indicator at the level, holes included; plane snapshots only." "marching squares";
    SurfaceArea "surface_area" Area Surface "Area of the isosurface of the indicator at the level." "triangulated isosurface of the indicator, not of the mask";
    MeanCurvatureIntegral "mean_curvature_integral" Length Surface "Half the surface integral of the two principal curvatures, positive for convex bodies (sphere: 4 pi R)." "sum over edges of length times signed angle, halved (Steiner formula of polyhedra)";
    Euler "euler" Count Surface "Euler number of the body: half that of its surface (ball 1, torus 0); the sum over pieces and cavities. On a plane the pieces minus the holes." "vertices - edges + faces of the closed surface, halved";
    ShapefinderThickness "shapefinder_thickness" Length Surface "T = 3 V / S, V the volume enclosed by the isosurface (for an object that closes on itself: its cells' volume). A ball of radius R gives R, a long rod of radius r 1.5 r, a wide plate of thickness c 1.5 c." "Sahni, Sathyaprakash & Shandarin 1998 ApJ 495, L5";
    ShapefinderWidth "shapefinder_width" Length Surface "W = S / C, C the mean curvature integral; missing where C is not positive. Of a fragmented object that is not under_resolved, of the largest piece, if that holds 90 % of the volume; of other fragmented objects missing." "Sahni, Sathyaprakash & Shandarin 1998 ApJ 495, L5";
    ShapefinderLength "shapefinder_length" Length Surface "L = C / (4 pi); a long rod of length l gives about l / 4. Missing for an object that closes on itself. Of the largest piece, as shapefinder_width." "Sahni, Sathyaprakash & Shandarin 1998 ApJ 495, L5";
    ShapefinderThicknessEta "shapefinder_thickness_eta" KolmogorovLength Surface "shapefinder_thickness in Kolmogorov lengths." "Kolmogorov 1941";
    ShapefinderWidthEta "shapefinder_width_eta" KolmogorovLength Surface "shapefinder_width in Kolmogorov lengths." "Kolmogorov 1941";
    ShapefinderLengthEta "shapefinder_length_eta" KolmogorovLength Surface "shapefinder_length in Kolmogorov lengths." "Kolmogorov 1941";
    Planarity "planarity" One Surface "(W - T) / (W + T); may be negative for bodies that are not convex. Of the largest piece, as shapefinder_width." "Sahni, Sathyaprakash & Shandarin 1998 ApJ 495, L5";
    Filamentarity "filamentarity" One Surface "(L - W) / (L + W); may be negative for bodies that are not convex. Of the largest piece, as shapefinder_width." "Sahni, Sathyaprakash & Shandarin 1998 ApJ 495, L5";
    CosUVorticity "cos_u_vorticity" One Tallies "Volume mean of the cosine of velocity (in the chosen frame) and vorticity, over cells where both are non-zero." "relative helicity density";
    AbsCosUVorticity "abs_cos_u_vorticity" One Tallies "As cos_u_vorticity, of its magnitude (1/2 for independent isotropic directions)." "as cos_u_vorticity";
    AlignedUVorticity "aligned_u_vorticity" One Tallies "Share of the cells with |cos(u, vorticity)| > 0.9 (0.1 for independent isotropic directions)." "as cos_u_vorticity";
    HistogramUVorticity "histogram_u_vorticity" Count Tallies "Cells in 20 equal bins of the cosine over [-1, 1], separated by spaces." "as cos_u_vorticity";
    CosCurrentB "cos_current_b" One Tallies "Volume mean of the cosine of current density and magnetic field, over cells where both are non-zero." "normalised current helicity density";
    AbsCosCurrentB "abs_cos_current_b" One Tallies "As cos_current_b, of its magnitude." "as cos_current_b";
    AlignedCurrentB "aligned_current_b" One Tallies "Share of the cells with |cos(j, b)| > 0.9." "as cos_current_b";
    HistogramCurrentB "histogram_current_b" Count Tallies "As histogram_u_vorticity, for current density and magnetic field." "as cos_current_b";
    CosUB "cos_u_b" One Tallies "Volume mean of the cosine of velocity and magnetic field, over cells where both are non-zero." "normalised cross helicity density";
    AbsCosUB "abs_cos_u_b" One Tallies "As cos_u_b, of its magnitude." "as cos_u_b";
    AlignedUB "aligned_u_b" One Tallies "Share of the cells with |cos(u, b)| > 0.9." "as cos_u_b";
    HistogramUB "histogram_u_b" Count Tallies "As histogram_u_vorticity, for velocity and magnetic field." "as cos_u_b";
    LambSin2 "lamb_sin2" One Tallies "Mean |u x vorticity|^2 over mean |u|^2 |vorticity|^2 (2/3 for independent isotropic directions, 0 where they are parallel)." "squared sine between velocity and vorticity, weighted by their squares";
    LorentzSin2 "lorentz_sin2" One Tallies "Mean |j x b|^2 over mean |j|^2 |b|^2 (2/3 for independent isotropic directions, 0 where force-free)." "squared sine between current density and field, weighted by their squares";
    CosCurrentBFluct "cos_current_b_fluct" One Tallies "As cos_current_b, with the box mean taken off the magnetic field; missing where that mean is below 1 % of the fluctuations." "as cos_current_b";
    AbsCosCurrentBFluct "abs_cos_current_b_fluct" One Tallies "As cos_current_b_fluct, of its magnitude." "as cos_current_b";
    CosUBFluct "cos_u_b_fluct" One Tallies "As cos_u_b, with the box mean taken off the magnetic field; missing as cos_current_b_fluct." "as cos_u_b";
    AbsCosUBFluct "abs_cos_u_b_fluct" One Tallies "As cos_u_b_fluct, of its magnitude." "as cos_u_b";
    LorentzSin2Fluct "lorentz_sin2_fluct" One Tallies "As lorentz_sin2, with the box mean taken off the magnetic field; missing as cos_current_b_fluct." "as lorentz_sin2";
    Wraps "wraps" Text Tallies "Axes along which the object closes on itself through the periodic box." "";
    OpenFaces "open_faces" Text Tallies "Open faces of the box that the object touches." "";
    Flags "flags" Text Run "Why values are missing or to be read with care: wraps, open, additive_only, under_resolved (shapefinder_thickness below 3 cells), marginal (3 to 5 cells), fragmented (cells that touch at edges or corners only, so that the isosurface is in several pieces: too thin for the grid), curvature_not_positive, undefined_direction, wall (where an object grown from its peak meets another, more than 5 % of its boundary: its surface is not its own), plane (a plane snapshot: no volume, no surface, nothing across it; of fields that lie in the plane no cosines with a curl), no_guide (the mean magnetic field is below 1 % of the fluctuations), no_velocity, no_magnetic, no_viscosity, no_resistivity, no_time." "";
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_unique_and_plain() {
        for (i, c) in COLUMNS.iter().enumerate() {
            assert!(c.name.chars().all(|c| c.is_ascii_lowercase() || c.is_ascii_digit() || c == '_'), "{}", c.name);
            assert!(!c.definition.is_empty(), "{}", c.name);
            assert!(COLUMNS[..i].iter().all(|d| d.name != c.name), "{}", c.name);
        }
    }

    /// The columns that the interface promises to scripts from the first version on.
    #[test]
    fn promised_columns_are_there_in_order() {
        let promised = "snapshot time family id class level cells volume centroid_x centroid_y centroid_z extent_1 extent_2 extent_3 axis_1_x axis_3_z peak \
            peak_x peak_y peak_z indicator_mean dissipation_viscous dissipation_ohmic viscous_share ohmic_share surface_area mean_curvature_integral euler \
            shapefinder_thickness shapefinder_width shapefinder_length planarity filamentarity cos_u_vorticity abs_cos_u_vorticity cos_current_b \
            abs_cos_current_b cos_u_b abs_cos_u_b lamb_sin2 lorentz_sin2 wraps open_faces flags";
        let mut all = COLUMNS.iter();
        for name in promised.split_whitespace() {
            assert!(all.any(|c| c.name == name), "{name}");
        }
    }
}
