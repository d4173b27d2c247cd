//! Exact fields with known answers, as plain functions of position, and the placement that turns them off the grid's axes.

/// Where a field is put: its own origin and axes, so that it can lie off the grid's axes and off its samples.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Placement {
    /// Rows are the field's own x, y, z directions: orthonormal and right-handed.
    pub axes: [[f64; 3]; 3],
    /// Position of the field's own origin.
    pub centre: [f64; 3],
}

impl Placement {
    /// Unrotated, with the field's origin at `centre`.
    pub fn at(centre: [f64; 3]) -> Placement {
        Placement { axes: [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]], centre }
    }

    /// The field's own z-axis points along `direction`; its own x and y axes are fixed but otherwise of no meaning.
    ///
    /// # Panics
    /// When `direction` is the zero vector or not finite.
    pub fn along(direction: [f64; 3], centre: [f64; 3]) -> Placement {
        let z = unit(direction);
        // The grid axis farthest from z keeps the cross product long.
        let far = (0..3).fold(0, |best, a| if z[a].abs() < z[best].abs() { a } else { best });
        let x = unit(cross(std::array::from_fn(|a| f64::from(u8::from(a == far))), z));
        Placement { axes: [x, cross(z, x), z], centre }
    }

    /// A position in the field's own coordinates.
    pub fn local(&self, p: [f64; 3]) -> [f64; 3] {
        let d: [f64; 3] = std::array::from_fn(|a| p[a] - self.centre[a]);
        self.axes.map(|axis| axis[0] * d[0] + axis[1] * d[1] + axis[2] * d[2])
    }

    /// The vector field `field`, given in its own coordinates and components, at position `p` and in the grid's components.
    pub fn place(&self, p: [f64; 3], field: impl Fn([f64; 3]) -> [f64; 3]) -> [f64; 3] {
        let v = field(self.local(p));
        std::array::from_fn(|a| (0..3).map(|own| v[own] * self.axes[own][a]).sum())
    }
}

/// Taylor–Green velocity (sin x cos y cos z, −cos x sin y cos z, 0); period 2π.
///
/// ω = (−cos x sin y sin z, −sin x cos y sin z, 2 sin x sin y cos z), so u·ω = 0 everywhere, ⟨|u|²⟩ = 1/4, ⟨|ω|²⟩ = 3/4,
/// |ω| ≤ 2, reached at eight points of a period where Q = 1; Q = −½ (cos 2x + cos 2y) cos² z.
///
/// # References
/// G. I. Taylor & A. E. Green, Proc. R. Soc. Lond. A 158 (1937) 499, doi:10.1098/rspa.1937.0036.
pub fn taylor_green([x, y, z]: [f64; 3]) -> [f64; 3] {
    [x.sin() * y.cos() * z.cos(), -x.cos() * y.sin() * z.cos(), 0.0]
}

/// Arnold–Beltrami–Childress velocity (A sin z + C cos y, B sin x + A cos z, C sin y + B cos x); period 2π.
///
/// ∇×u = u: relative helicity 1 and u×ω = 0 everywhere, ⟨|u|²⟩ = A² + B² + C². With A = B = C = 1,
/// Q = cos x sin y + cos z sin x + cos y sin z, at most 3/2, and ⟨Q²⟩ = 3/4.
///
/// # References
/// T. Dombre et al., J. Fluid Mech. 167 (1986) 353, doi:10.1017/S0022112086002859.
pub fn abc([a, b, c]: [f64; 3], [x, y, z]: [f64; 3]) -> [f64; 3] {
    [a * z.sin() + c * y.cos(), b * x.sin() + a * z.cos(), c * y.sin() + b * x.cos()]
}

/// Solid rotation about z at the angular velocity `rate` Ω: |ω| = 2Ω, S = 0, Q = Ω².
pub fn solid_rotation(rate: f64, [x, y, _]: [f64; 3]) -> [f64; 3] {
    [-rate * y, rate * x, 0.0]
}

/// Plane shear (γ y, 0, 0): |ω| = γ, S:S = γ²/2, Q = 0.
pub fn shear(rate: f64, [_, y, _]: [f64; 3]) -> [f64; 3] {
    [rate * y, 0.0, 0.0]
}

/// Lamb–Oseen vortex about z with ω = ω₀ exp(−r²/r_c²), `peak` ω₀ and `radius` r_c: u_θ = (ω₀ r_c²/2r) (1 − exp(−r²/r_c²)).
///
/// |ω| exceeds ω₀/2 within √(ln 2) r_c = 0.8326 r_c; on the axis Q = ω₀²/4.
///
/// # References
/// H. Lamb, Hydrodynamics, 6th ed. (1932), §334a.
///
/// # Panics
/// When `radius` is not positive.
pub fn lamb_oseen(peak: f64, radius: f64, [x, y, _]: [f64; 3]) -> [f64; 3] {
    assert!(radius > 0.0, "expected a radius above 0, got {radius}");
    let s = (x * x + y * y) / (radius * radius);
    // u_θ / r, with its limit on the axis.
    let turn = 0.5 * peak * if s > 0.0 { -(-s).exp_m1() / s } else { 1.0 };
    solid_rotation(turn, [x, y, 0.0])
}

/// Burgers vortex about z: [`lamb_oseen`] in the strain u_z = α z, u_r = −α r/2, `strain` being α.
///
/// Steady for r_c² = 4ν/α; on the axis Q = ω₀²/4 − ¾ α².
///
/// # References
/// J. M. Burgers, Adv. Appl. Mech. 1 (1948) 171, doi:10.1016/S0065-2156(08)70100-5.
///
/// # Panics
/// When `radius` is not positive.
pub fn burgers(peak: f64, radius: f64, strain: f64, [x, y, z]: [f64; 3]) -> [f64; 3] {
    let [u, v, _] = lamb_oseen(peak, radius, [x, y, z]);
    [u - 0.5 * strain * x, v - 0.5 * strain * y, strain * z]
}

/// Harris current sheet (b₀ tanh(y/a), 0, 0): j_z = −(b₀/a) sech²(y/a).
///
/// The full width at half maximum of |j| is 2 arcosh(√2) a = 1.76275 a, and holds 5√2/8 = 88.4 % of ∫j² dy = 4b₀²/3a.
///
/// # References
/// E. G. Harris, Nuovo Cimento 23 (1962) 115, doi:10.1007/BF02733547.
///
/// # Panics
/// When `half_width` a is not positive.
pub fn harris(field: f64, half_width: f64, [_, y, _]: [f64; 3]) -> [f64; 3] {
    assert!(half_width > 0.0, "expected a half width above 0, got {half_width}");
    [field * (y / half_width).tanh(), 0.0, 0.0]
}

/// Two opposite [`harris`] sheets at y = L/4 and y = 3L/4 of a box of length `length` L that is periodic along y:
/// b_x = b₀ (tanh((y − L/4)/a) − tanh((y − 3L/4)/a) − 1), for y in [0, L].
///
/// The slope jumps by about 8 (b₀/a) exp(−L/2a) across the periodic face.
///
/// # Panics
/// When `half_width` a is not positive.
pub fn harris_pair(field: f64, half_width: f64, length: f64, [_, y, _]: [f64; 3]) -> [f64; 3] {
    let sheet = |at: f64| harris(field, half_width, [0.0, y - at, 0.0])[0];
    [sheet(0.25 * length) - sheet(0.75 * length) - field, 0.0, 0.0]
}

fn cross(a: [f64; 3], b: [f64; 3]) -> [f64; 3] {
    [a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]]
}

fn unit(v: [f64; 3]) -> [f64; 3] {
    let length = v.iter().map(|c| c * c).sum::<f64>().sqrt();
    assert!(length > 0.0 && length.is_finite(), "expected a direction, got {v:?}");
    v.map(|c| c / length)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn placements_are_right_handed_and_point_where_they_should() {
        for direction in [[0.0, 0.0, 2.0], [3.0, 0.0, 0.0], [0.0, -1.0, 0.0], [0.4, -0.7, 1.9]] {
            let p = Placement::along(direction, [0.5, 0.25, -3.0]);
            let [x, y, z] = p.axes;
            for a in 0..3 {
                assert!((cross(x, y)[a] - z[a]).abs() < 1e-15);
                assert!((z[a] - unit(direction)[a]).abs() < 1e-15);
            }
            // A vector along its own z comes out along the direction, and the centre is the origin.
            let v = p.place([1.0, 2.0, 3.0], |_| [0.0, 0.0, 1.0]);
            assert!((0..3).all(|a| (v[a] - z[a]).abs() < 1e-15));
            assert_eq!(p.local(p.centre), [0.0; 3]);
        }
    }

    #[test]
    fn the_vortex_is_smooth_on_its_axis() {
        // Solid rotation at half the peak vorticity, to first order in r²/r_c².
        for r in [0.0, 1e-9, 1e-4] {
            let [_, v, _] = lamb_oseen(3.0, 0.5, [r, 0.0, 0.0]);
            assert!((v - 1.5 * r).abs() <= 1.5 * r * 2.0 * r * r);
        }
        // Largest swirl 0.31909 ω₀ r_c at r = 1.12091 r_c (maximum of (1 − exp(−s²))/2s).
        let v = lamb_oseen(3.0, 0.5, [0.5 * 1.12091, 0.0, 0.0])[1];
        assert!((v / (3.0 * 0.5) - 0.31909).abs() < 5e-6);
    }
}
