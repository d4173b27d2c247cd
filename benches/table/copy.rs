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
    of(asked, &planes, planes.components.len()).map(|_| ())
}

/// Copies the first `components`, prints and returns the median seconds for each number of threads.
pub fn of(asked: &Asked, planes: &Planes, components: usize) -> Result<Vec<f64>, String> {
    let pools: Vec<Pool> = asked.threads.iter().map(|&n| Pool::new(n).map_err(|e| e.to_string())).collect::<Result<_, _>>()?;
    // Touched before anything is timed.
    let mut to: Vec<Vec<f32>> = planes.components[..components].iter().map(|c| vec![1.0; c.len()]).collect();
    let times = medians(asked.runs, pools.len(), |k| {
        seconds(|| {
            pools[k].run(|| {
                for (from, to) in planes.components.iter().zip(&mut to) {
                    par::for_chunks(to, PIECE, |i, part| part.copy_from_slice(&from[i * PIECE..i * PIECE + part.len()]));
                }
            });
            black_box(&to);
        })
    });
    let bytes: usize = planes.components[..components].iter().map(|c| size_of_val(c.as_slice())).sum();
    for (threads, seconds) in asked.threads.iter().zip(&times) {
        let rate = 2.0 * bytes as f64 / seconds / 1e9;
        tell("copy", &format!("{components} fields"), *threads, *seconds, json!({ "bytes": bytes, "read_and_written_gb_per_s": rate }));
    }
    Ok(times)
}
