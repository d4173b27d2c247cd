//! The lines of the benchmark table that are measured inside one process; every figure is a line of JSON on standard output.
//!
//! `cargo bench --bench table -- LINE... [--field FILE] [--indicator FILE] [--runs N] [--threads 1,2] [--size N]`
#![allow(clippy::print_stdout)]

use std::time::Instant;

use ropewalk::base::par::Pool;

mod compute;
mod copy;
mod giant;
mod labels;
mod sweep;

/// What was asked for.
struct Asked {
    lines: Vec<String>,
    /// HDF5 snapshot with u, v, w and perhaps bx, by, bz in a box of 2 pi.
    field: Option<String>,
    /// Cube of little-endian f32, x fastest.
    indicator: Option<String>,
    /// Level of the indicator over its rms.
    level: f64,
    runs: usize,
    threads: Vec<usize>,
    /// Cells along each axis of made fields.
    size: usize,
}

impl Asked {
    /// A pool for each number of threads.
    fn pools(&self) -> Result<Vec<Pool>, String> {
        self.threads.iter().map(|&n| Pool::new(n).map_err(|e| e.to_string())).collect()
    }
}

const LINES: [&str; 5] = ["compute", "copy", "sweep", "labels", "giant"];

fn asked() -> Result<Asked, String> {
    let mut a = Asked { lines: Vec::new(), field: None, indicator: None, level: 1.6, runs: 5, threads: vec![1, 2], size: 256 };
    let mut words = std::env::args().skip(1);
    while let Some(word) = words.next() {
        let mut value = || words.next().ok_or_else(|| format!("{word} takes a value"));
        let whole = |text: &str| text.parse::<usize>().map_err(|e| format!("{text}: {e}"));
        match word.as_str() {
            // What `cargo bench` adds.
            "--bench" => {}
            "--field" => a.field = Some(value()?),
            "--indicator" => a.indicator = Some(value()?),
            "--level" => a.level = value()?.parse().map_err(|e| format!("--level: {e}"))?,
            "--runs" => a.runs = whole(&value()?)?.max(1),
            "--threads" => a.threads = value()?.split(',').map(whole).collect::<Result<_, _>>()?,
            "--size" => a.size = whole(&value()?)?,
            line if LINES.contains(&line) => a.lines.push(word),
            other => return Err(format!("{other} is none of {LINES:?}, --field, --indicator, --level, --runs, --threads, --size")),
        }
    }
    Ok(a)
}

fn main() -> Result<(), String> {
    let asked = asked()?;
    for line in &asked.lines {
        match line.as_str() {
            "compute" => compute::run(&asked)?,
            "copy" => copy::run(&asked)?,
            "sweep" => sweep::run(&asked)?,
            "labels" => labels::run(&asked)?,
            _ => giant::run(&asked)?,
        }
    }
    Ok(())
}

/// Seconds that a call takes.
fn seconds(f: impl FnOnce()) -> f64 {
    let start = Instant::now();
    f();
    start.elapsed().as_secs_f64()
}

/// Calls each of `cases` once uncounted, then all of them in turn `runs` times; the median seconds of each.
fn medians(runs: usize, cases: usize, mut case: impl FnMut(usize) -> f64) -> Vec<f64> {
    (0..cases).for_each(|k| {
        case(k);
    });
    let mut all = vec![Vec::new(); cases];
    for _ in 0..runs {
        for (k, times) in all.iter_mut().enumerate() {
            times.push(case(k));
        }
    }
    all.into_iter().map(median).collect()
}

fn median(mut v: Vec<f64>) -> f64 {
    v.sort_by(f64::total_cmp);
    let n = v.len();
    (v[(n - 1) / 2] + v[n / 2]) / 2.0
}

/// Prints one figure.
fn tell(line: &str, what: &str, threads: usize, seconds: f64, more: serde_json::Value) {
    let mut out = serde_json::json!({ "line": line, "what": what, "threads": threads, "seconds": seconds });
    if let (Some(out), serde_json::Value::Object(more)) = (out.as_object_mut(), more) {
        out.extend(more);
    }
    println!("{out}");
}
