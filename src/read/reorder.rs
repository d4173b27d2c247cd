//! Copies a block of any axis order into planes with z slowest and x fastest, tile by tile.

/// Edge of a tile: a tile of f32 touches 16 cache lines on either side.
const TILE: usize = 16;

/// Copies `n` samples along x, y, z; sample (x, y, z) is at `x * stride[0] + y * stride[1] + z * stride[2]`
/// in `from`, and goes to `(z * n[1] + y) * n[0] + x` in `to`.
pub(super) fn reorder<T: Copy>(from: &[T], stride: [usize; 3], n: [usize; 3], to: &mut [T]) {
    let pitch = [1, n[0], n[0] * n[1]];
    if stride[0] <= stride[1].min(stride[2]) {
        for z in 0..n[2] {
            for y in 0..n[1] {
                let row = &mut to[z * pitch[2] + y * pitch[1]..][..n[0]];
                let start = z * stride[2] + y * stride[1];
                if stride[0] == 1 {
                    row.copy_from_slice(&from[start..start + n[0]]);
                } else {
                    for (o, v) in row.iter_mut().zip(from[start..].iter().step_by(stride[0])) {
                        *o = *v;
                    }
                }
            }
        }
        return;
    }
    // `fast` is the axis along which `from` is read in sequence; tiles span it and x.
    let (fast, slow) = if stride[1] < stride[2] { (1, 2) } else { (2, 1) };
    for s in 0..n[slow] {
        for f0 in (0..n[fast]).step_by(TILE) {
            for x0 in (0..n[0]).step_by(TILE) {
                let width = TILE.min(n[0] - x0);
                for f in f0..n[fast].min(f0 + TILE) {
                    let row = &mut to[s * pitch[slow] + f * pitch[fast] + x0..][..width];
                    let start = s * stride[slow] + f * stride[fast] + x0 * stride[0];
                    for (i, o) in row.iter_mut().enumerate() {
                        *o = from[start + i * stride[0]];
                    }
                }
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_order_and_interleaving_arrives() {
        let n = [37, 18, 21];
        for (axes, width) in [[0, 1, 2], [0, 2, 1], [1, 0, 2], [1, 2, 0], [2, 0, 1], [2, 1, 0]].into_iter().flat_map(|a| [(a, 1), (a, 3)]) {
            // axes: x, y, z named fastest first.
            let mut stride = [0; 3];
            let mut step = width;
            for a in axes {
                stride[a] = step;
                step *= n[a];
            }
            let mut from = vec![u32::MAX; step];
            for z in 0..n[2] {
                for y in 0..n[1] {
                    for x in 0..n[0] {
                        from[x * stride[0] + y * stride[1] + z * stride[2]] = (x + 100 * y + 10_000 * z) as u32;
                    }
                }
            }
            let mut to = vec![0; n[0] * n[1] * n[2]];
            reorder(&from, stride, n, &mut to);
            for (i, v) in to.iter().enumerate() {
                let (x, y, z) = (i % n[0], i / n[0] % n[1], i / n[0] / n[1]);
                assert_eq!(*v as usize, x + 100 * y + 10_000 * z, "{axes:?} {width}");
            }
        }
    }
}
