//! Copying the input once from memory to memory, the measure that sweeps are held against.

use std::hint::black_box;

use ropewalk::base::par::{self, Pool};
use serde_json::json;

use crate::sweep::Planes;
use crate::{Asked, medians, seconds, tell};

/// Values a work item copies.
const PIECE: usize = 1 << 18;

pub fn run(asked: &Asked) -> Result<(), String> {
    let planes = Planes::read(asked)?;
    let mut copy = Copy::new(&planes, planes.components.len());
    let pools = asked.pools()?;
    let times = medians(asked.runs, pools.len(), |k| seconds(|| copy.run(&pools[k])));
    copy.tell(asked, &times);
    Ok(())
}

/// Some components and where they are copied to.
pub struct Copy<'a> {
    from: &'a [Vec<f32>],
    to: Vec<Vec<f32>>,
}

impl<'a> Copy<'a> {
    /// The first `components`; the destination is touched before anything is timed.
    pub fn new(planes: &'a Planes, components: usize) -> Copy<'a> {
        let from = &planes.components[..components];
        Copy { from, to: from.iter().map(|c| vec![1.0; c.len()]).collect() }
    }

    pub fn run(&mut self, pool: &Pool) {
        pool.run(|| {
            for (from, to) in self.from.iter().zip(&mut self.to) {
                par::for_chunks(to, PIECE, |i, part| part.copy_from_slice(&from[i * PIECE..i * PIECE + part.len()]));
            }
        });
        black_box(&self.to);
    }

    /// Prints the median seconds for each number of threads.
    pub fn tell(&self, asked: &Asked, times: &[f64]) {
        let bytes: usize = self.from.iter().map(|c| size_of_val(c.as_slice())).sum();
        for (threads, seconds) in asked.threads.iter().zip(times) {
            let rate = 2.0 * bytes as f64 / seconds / 1e9;
            let what = format!("{} fields", self.from.len());
            tell("copy", &what, *threads, *seconds, json!({ "bytes": bytes, "read_and_written_gb_per_s": rate }));
        }
    }
}
