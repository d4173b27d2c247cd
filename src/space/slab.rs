//! Planes in memory: batches as they were read, and the block of planes a stage works on with its halo.

use std::ops::Range;
use std::sync::Arc;

use crate::base::pages::Pages;
use crate::base::real::Real;

/// Consecutive planes of all components as they were read.
#[derive(Debug)]
pub struct Batch<T> {
    /// Unwrapped index of the first plane: -4..0 and n..n+4 are halo copies across a periodic face.
    pub first: isize,
    /// Number of planes.
    pub planes: usize,
    /// One array a component, z slowest and x fastest; shared where planes stand on both sides of a periodic face.
    pub components: Arc<Vec<Pages<T>>>,
}

/// A block of planes `z` to work on, with every plane its stencils read.
///
/// Planes are addressed by their unwrapped index, so that a stencil never wraps along z itself.
pub struct Block<'a, T> {
    /// Planes to work on, wrapped indices.
    pub z: Range<usize>,
    first: isize,
    components: usize,
    planes: Vec<&'a [T]>,
}

impl<'a, T: Real> Block<'a, T> {
    /// The planes of `batches` (consecutive, ascending) as one block.
    pub fn new(z: Range<usize>, batches: &'a [Batch<T>], plane_cells: usize) -> Self {
        let components = batches[0].components.len();
        let mut planes = Vec::new();
        for batch in batches {
            for k in 0..batch.planes {
                for c in batch.components.iter() {
                    planes.push(&c[k * plane_cells..(k + 1) * plane_cells]);
                }
            }
        }
        Block { z, first: batches[0].first, components, planes }
    }

    /// The planes `reach.0..reach.1` (unwrapped) of whole components in memory, `n` planes each.
    pub fn of_whole(z: Range<usize>, reach: (isize, isize), components: &[&'a [T]], plane_cells: usize, n: usize) -> Self {
        let mut planes = Vec::with_capacity((reach.1 - reach.0) as usize * components.len());
        for k in reach.0..reach.1 {
            let at = k.rem_euclid(n as isize) as usize * plane_cells;
            planes.extend(components.iter().map(|c| &c[at..at + plane_cells]));
        }
        Block { z, first: reach.0, components: components.len(), planes }
    }

    /// Exactly the planes `z`, one slice a component.
    pub fn of_planes(z: Range<usize>, components: &[&'a [T]], plane_cells: usize) -> Self {
        let planes = (0..z.len()).flat_map(|k| components.iter().map(move |c| &c[k * plane_cells..(k + 1) * plane_cells])).collect();
        Block { first: z.start as isize, z, components: components.len(), planes }
    }

    /// Number of components.
    pub fn components(&self) -> usize {
        self.components
    }

    /// Plane `z` (unwrapped) of a component, x fastest.
    ///
    /// # Panics
    /// When the plane is not part of the block.
    #[inline]
    pub fn plane(&self, component: usize, z: isize) -> &'a [T] {
        self.planes[(z - self.first) as usize * self.components + component]
    }
}
