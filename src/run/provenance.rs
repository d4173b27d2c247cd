//! Where a result comes from: the program (part of the results), and how the run went (never part of them).

use serde_json::{Value, json};

use crate::run::clock::{Clock, StageTime};
use crate::run::machine::{Share, peak_memory};

/// The program and the instruction set that results are identical for; `portable` where the request asks for one path everywhere.
pub fn program(portable: bool) -> Value {
    json!({
        "name": env!("CARGO_PKG_NAME"),
        "version": env!("CARGO_PKG_VERSION"),
        "instruction_set": if portable { "portable" } else { instruction_set() },
    })
}

/// The architecture, and the vector width that row kernels choose on it.
fn instruction_set() -> &'static str {
    #[cfg(target_arch = "x86_64")]
    if std::arch::is_x86_feature_detected!("avx2") {
        return "x86_64+avx2";
    }
    std::env::consts::ARCH
}

/// `timing.json`: seconds, rates and bytes by stage and in all, threads, memory, host. `cells` are those of all snapshots, once.
pub fn timing(clock: &Clock<'_>, threads: usize, memory: &Share, cells: u64) -> Value {
    let whole = clock.whole();
    let stages = clock.stages();
    let inside: f64 = stages.iter().map(|s| s.seconds).sum();
    json!({
        "seconds": whole.seconds,
        "threads": threads,
        "planes": whole.planes,
        "cells": cells,
        "cells_per_second": rate(cells, whole.seconds),
        "bytes_read": whole.read,
        "bytes_written": whole.written,
        "peak_memory_bytes": peak_memory(),
        "memory_budget_bytes": memory.bytes,
        "memory_budget_from": memory.from,
        "stages": stages.iter().map(stage).collect::<Vec<_>>(),
        "seconds_outside_stages": (whole.seconds - inside).max(0.0),
        "host": std::fs::read_to_string("/proc/sys/kernel/hostname").ok().map(|h| h.trim().to_string()),
        "finished_unix_seconds": std::time::SystemTime::now().duration_since(std::time::UNIX_EPOCH).ok().map(|d| d.as_secs()),
    })
}

fn stage(s: &StageTime) -> Value {
    json!({
        "stage": s.name,
        "seconds": s.seconds,
        "planes": s.planes,
        "cells": s.cells,
        "cells_per_second": rate(s.cells, s.seconds),
        "bytes_read": s.read,
        "bytes_written": s.written,
    })
}

fn rate(cells: u64, seconds: f64) -> f64 {
    cells as f64 / seconds.max(1e-9)
}
