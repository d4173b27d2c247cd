//! What a second core gives: a loop that touches no memory, its work shared by threads.

use std::hint::black_box;

use ropewalk::base::par;
use serde_json::json;

use crate::{Asked, medians, seconds, tell};

/// Pieces of work, many enough for any number of threads.
const PIECES: usize = 240;

pub fn run(asked: &Asked) -> Result<(), String> {
    let pools = asked.pools()?;
    let times = medians(asked.runs, pools.len(), |k| {
        seconds(|| {
            pools[k].run(|| par::map_range(PIECES, |p| black_box(piece(p as u64))));
        })
    });
    for (threads, seconds) in asked.threads.iter().zip(times) {
        tell("compute", "loop without memory", *threads, seconds, json!({}));
    }
    Ok(())
}

/// Many steps of a generator (xorshift, Marsaglia 2003), which no optimiser shortens.
fn piece(seed: u64) -> u64 {
    let mut v = seed | 1;
    for _ in 0..600_000 {
        v ^= v << 13;
        v ^= v >> 7;
        v ^= v << 17;
    }
    v
}
