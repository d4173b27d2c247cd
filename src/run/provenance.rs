//! Where a result comes from: the program (part of the results), and how the run went (never part of them).

use serde_json::{Value, json};

use crate::run::clock::StageTime;

/// The program and the instruction set that results are identical for.
pub fn program() -> Value {
    json!({
        "name": env!("CARGO_PKG_NAME"),
        "version": env!("CARGO_PKG_VERSION"),
        "instruction_set": instruction_set(),
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

/// `timing.json`: threads, seconds, rates, peak memory, host.
pub fn timing(stages: &[StageTime], seconds: f64, threads: usize, cells: u64) -> Value {
    let stages: Vec<Value> = stages.iter().map(|s| json!({ "stage": s.name, "seconds": s.seconds, "planes": s.planes })).collect();
    json!({
        "seconds": seconds,
        "threads": threads,
        "stages": stages,
        "cells": cells,
        "cells_per_second": cells as f64 / seconds.max(1e-9),
        "peak_memory_bytes": peak_memory(),
        "host": std::fs::read_to_string("/proc/sys/kernel/hostname").ok().map(|h| h.trim().to_string()),
        "finished_unix_seconds": std::time::SystemTime::now().duration_since(std::time::UNIX_EPOCH).ok().map(|d| d.as_secs()),
    })
}

/// Peak resident memory of this process, where the system tells.
fn peak_memory() -> Option<u64> {
    let status = std::fs::read_to_string("/proc/self/status").ok()?;
    let line = status.lines().find(|l| l.starts_with("VmHWM:"))?;
    line.split_whitespace().nth(1)?.parse::<u64>().ok().map(|k| k * 1024)
}
