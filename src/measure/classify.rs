//! The shape class of an object, by a rule that survives negative, misordered and missing shapefinders.

/// Planarity and filamentarity below this make a blob: an ellipsoid of axes 1:1:2.6 or rounder.
const ROUND: f64 = 0.1;
/// Ratio of largest to smallest extent below which an object without a closed surface counts as a blob.
const ROUND_EXTENTS: f64 = 2.0;
/// Handles from which on an object counts as a tangle.
pub const TANGLED: i64 = 3;

/// What the rule looks at.
#[derive(Debug, Clone, Copy, Default)]
pub struct Evidence {
    /// Extents, largest first, of the axes along which the object is finite.
    pub extents: [f64; 3],
    /// Axes along which it closes on itself.
    pub spans: [bool; 3],
    /// Handles of the surface, where measured.
    pub handles: Option<i64>,
    /// Mean curvature integral, where measured.
    pub curvature: Option<f64>,
    /// Planarity and filamentarity, where measured.
    pub planarity: Option<f64>,
    /// As above.
    pub filamentarity: Option<f64>,
}

/// `filament`, `sheet`, `blob` or `tangle`; the rule is stated in the definition of the column `class`.
pub fn class(e: &Evidence) -> &'static str {
    match e.spans.iter().filter(|&&s| s).count() {
        0 => {}
        // Across the axis it closes on, it is compact (a filament) or drawn out (a sheet).
        1 => return if e.extents[0] < ROUND_EXTENTS * e.extents[1] { "filament" } else { "sheet" },
        2 => return "sheet",
        _ => return "tangle",
    }
    if e.handles.is_some_and(|h| h >= TANGLED) || e.curvature.is_some_and(|c| c <= 0.0) {
        return "tangle";
    }
    if let (Some(p), Some(f)) = (e.planarity, e.filamentarity) {
        return if p < ROUND && f < ROUND {
            "blob"
        } else if p > f {
            "sheet"
        } else {
            "filament"
        };
    }
    let [a, b, c] = e.extents;
    if a < ROUND_EXTENTS * c {
        "blob"
    } else if b * b > a * c {
        "sheet"
    } else {
        "filament"
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn shape(planarity: f64, filamentarity: f64) -> &'static str {
        class(&Evidence {
            planarity: Some(planarity),
            filamentarity: Some(filamentarity),
            handles: Some(0),
            curvature: Some(1.0),
            ..Evidence::default()
        })
    }

    /// Planarity and filamentarity of exact bodies: table of closed forms in Sahni, Sathyaprakash & Shandarin's definition
    /// (ellipsoids 1:1:1, 1:1:2, 1:1:10, 1:10:10, cylinder of length 20 r, plate 1:20:20, torus 10:1).
    #[test]
    fn exact_bodies_get_the_class_one_expects() {
        let cases = [
            (0.0, 0.0, "blob"),
            (0.0283, 0.0541, "blob"),
            (0.0945, 0.5415, "filament"),
            (0.5415, 0.0945, "sheet"),
            (0.1191, 0.5224, "filament"),
            (0.6672, 0.2001, "sheet"),
            (0.1429, 0.7741, "filament"),
        ];
        for (p, f, want) in cases {
            assert_eq!(shape(p, f), want, "{p} {f}");
        }
    }

    #[test]
    fn odd_shapefinders_still_get_a_class() {
        assert_eq!(shape(0.8, -0.6), "sheet");
        assert_eq!(shape(-0.2, 0.5), "filament");
        assert_eq!(shape(-0.2, -0.1), "blob");
        let holes = Evidence { handles: Some(5), planarity: Some(0.1), filamentarity: Some(0.9), ..Evidence::default() };
        assert_eq!(class(&holes), "tangle");
        assert_eq!(class(&Evidence { curvature: Some(-1.0), ..Evidence::default() }), "tangle");
    }

    #[test]
    fn without_a_closed_surface_extents_decide() {
        let of = |extents, spans| class(&Evidence { extents, spans, ..Evidence::default() });
        assert_eq!(of([10.0, 1.0, 1.0], [false; 3]), "filament");
        assert_eq!(of([10.0, 8.0, 1.0], [false; 3]), "sheet");
        assert_eq!(of([1.5, 1.2, 1.0], [false; 3]), "blob");
        assert_eq!(of([1.5, 1.0, 0.0], [false, false, true]), "filament");
        assert_eq!(of([6.0, 1.0, 0.0], [false, false, true]), "sheet");
        assert_eq!(of([1.0, 0.0, 0.0], [true, false, true]), "sheet");
        assert_eq!(of([0.0; 3], [true; 3]), "tangle");
    }
}
