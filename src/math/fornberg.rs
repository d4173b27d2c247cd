//! Weights of the first derivative on any nodes.

/// Weights of the first derivative at `x0` from values at `nodes`, exact for polynomials of degree `nodes.len() - 1`.
///
/// # References
/// B. Fornberg, Math. Comp. 51 (1988) 699, doi:10.1090/S0025-5718-1988-0935077-0.
pub fn fornberg(x0: f64, nodes: &[f64]) -> Vec<f64> {
    let n = nodes.len();
    // c[j][m]: weight of node j for derivative m (0 or 1), built node by node.
    let mut c = vec![[0.0f64; 2]; n];
    c[0][0] = 1.0;
    let mut c1 = 1.0;
    let mut c4 = nodes[0] - x0;
    for i in 1..n {
        let mut c2 = 1.0;
        let c5 = c4;
        c4 = nodes[i] - x0;
        for j in 0..i {
            let c3 = nodes[i] - nodes[j];
            c2 *= c3;
            if j == i - 1 {
                c[i][1] = c1 * (c[i - 1][0] - c5 * c[i - 1][1]) / c2;
                c[i][0] = -c1 * c5 * c[i - 1][0] / c2;
            }
            c[j][1] = (c4 * c[j][1] - c[j][0]) / c3;
            c[j][0] = c4 * c[j][0] / c3;
        }
        c1 = c2;
    }
    c.into_iter().map(|w| w[1]).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn same(found: &[f64], wanted: &[f64]) {
        assert_eq!(found.len(), wanted.len());
        for (a, b) in found.iter().zip(wanted) {
            assert!((a - b).abs() < 1e-13, "{found:?}, wanted {wanted:?}");
        }
    }

    /// Fornberg (1988), table 1: centred first-derivative weights of order 2, 4, 6, 8.
    #[test]
    fn centred_weights_match_the_published_table() {
        let tables: [&[f64]; 4] = [
            &[-1.0 / 2.0, 0.0, 1.0 / 2.0],
            &[1.0 / 12.0, -2.0 / 3.0, 0.0, 2.0 / 3.0, -1.0 / 12.0],
            &[-1.0 / 60.0, 3.0 / 20.0, -3.0 / 4.0, 0.0, 3.0 / 4.0, -3.0 / 20.0, 1.0 / 60.0],
            &[1.0 / 280.0, -4.0 / 105.0, 1.0 / 5.0, -4.0 / 5.0, 0.0, 4.0 / 5.0, -1.0 / 5.0, 4.0 / 105.0, -1.0 / 280.0],
        ];
        for wanted in tables {
            let half = (wanted.len() / 2) as i32;
            let nodes: Vec<f64> = (-half..=half).map(f64::from).collect();
            same(&fornberg(0.0, &nodes), wanted);
        }
    }

    /// Fornberg (1988), table 3: one-sided first-derivative weights at the end of two to five equally spaced nodes.
    #[test]
    fn one_sided_weights_match_the_published_table() {
        let tables: [&[f64]; 4] = [
            &[-1.0, 1.0],
            &[-3.0 / 2.0, 2.0, -1.0 / 2.0],
            &[-11.0 / 6.0, 3.0, -3.0 / 2.0, 1.0 / 3.0],
            &[-25.0 / 12.0, 4.0, -3.0, 4.0 / 3.0, -1.0 / 4.0],
        ];
        for wanted in tables {
            let nodes: Vec<f64> = (0..wanted.len()).map(|i| i as f64).collect();
            same(&fornberg(0.0, &nodes), wanted);
        }
    }

    /// Polynomials up to the full degree are differentiated exactly on unequal nodes (definition of the weights).
    #[test]
    fn unequal_nodes_reproduce_polynomials() {
        let nodes = [-1.3, -0.9, -0.2, 0.05, 0.4, 1.1, 1.15, 1.9, 2.0];
        for count in 2..=nodes.len() {
            for x0 in [-1.3f64, 0.3, 1.9] {
                let w = fornberg(x0, &nodes[..count]);
                for degree in 0..count as i32 {
                    let found: f64 = w.iter().zip(&nodes).map(|(w, x)| w * x.powi(degree)).sum();
                    let wanted = if degree == 0 { 0.0 } else { f64::from(degree) * x0.powi(degree - 1) };
                    let size: f64 = w.iter().zip(&nodes).map(|(w, x)| (w * x.powi(degree)).abs()).sum();
                    assert!((found - wanted).abs() < 1e-13 * size.max(1.0), "{count} nodes, degree {degree} at {x0}: {found}, {wanted}");
                }
            }
        }
    }
}
