//! How far a run is: stage, planes, bytes, time left, as numbers and as lines of JSON. Printing is the console's.

use std::time::{Duration, Instant};

use ropewalk::base::budget::size;
use serde_json::{Value, json};

/// Lines of one stage are at least this far apart, but for its first and last.
const APART: Duration = Duration::from_millis(100);

/// Where a run is.
#[derive(Default)]
pub struct Track {
    /// Name of the snapshot, which one it is, and of how many.
    snapshot: Option<(String, u64, u64)>,
    stage: Option<Stage>,
}

struct Stage {
    name: String,
    planes: u64,
    of_planes: u64,
    read: u64,
    began: Instant,
    told: Instant,
}

impl Track {
    /// What follows is about this snapshot.
    pub fn snapshot(&mut self, name: &str, k: u64, n: u64) {
        self.snapshot = Some((name.to_string(), k, n));
    }

    /// A stage begins.
    pub fn begin(&mut self, name: &str, of_planes: u64, now: Instant) {
        self.stage = Some(Stage { name: name.to_string(), planes: 0, of_planes, read: 0, began: now, told: now });
    }

    /// Planes are done. Whether it is time to tell.
    pub fn advance(&mut self, planes: u64, now: Instant) -> bool {
        let Some(s) = &mut self.stage else { return false };
        s.planes += planes;
        let due = now.duration_since(s.told) >= APART;
        if due {
            s.told = now;
        }
        due
    }

    /// Bytes were read.
    pub fn read(&mut self, bytes: u64) {
        if let Some(s) = &mut self.stage {
            s.read += bytes;
        }
    }

    /// The stage is over.
    pub fn end(&mut self) {
        self.stage = None;
    }

    /// Planes done.
    pub fn planes(&self) -> u64 {
        self.stage.as_ref().map_or(0, |s| s.planes)
    }

    /// Snapshot and stage, for people.
    pub fn title(&self) -> String {
        let stage = self.stage.as_ref().map_or("", |s| s.name.as_str());
        match &self.snapshot {
            Some((name, k, n)) if *n > 1 => format!("{k}/{n} {name} {stage}"),
            _ => stage.to_string(),
        }
    }

    /// How fast is read and how long it will take, for people; nothing where nothing is known.
    pub fn pace(&self, now: Instant) -> String {
        let Some(s) = &self.stage else { return String::new() };
        let seconds = now.duration_since(s.began).as_secs_f64().max(1e-3);
        let rate = (s.read > 0).then(|| format!(", {}/s", size((s.read as f64 / seconds) as u64)));
        let left = s.left(seconds).map(|left| format!(", {} left", duration(left)));
        [rate, left].into_iter().flatten().collect()
    }

    /// The stage as a line of JSON; `event` is `begin`, `advance` or `end`.
    pub fn line(&self, event: &str, now: Instant) -> Option<Value> {
        let s = self.stage.as_ref()?;
        let seconds = now.duration_since(s.began).as_secs_f64();
        let snapshot = self.snapshot.as_ref();
        Some(json!({
            "event": event,
            "snapshot": snapshot.map(|(name, _, _)| name),
            "snapshot_number": snapshot.map(|(_, k, _)| k),
            "of_snapshots": snapshot.map(|(_, _, n)| n),
            "stage": s.name,
            "planes": s.planes,
            "of_planes": s.of_planes,
            "bytes_read": s.read,
            "seconds": seconds,
            "seconds_left": s.left(seconds),
        }))
    }
}

impl Stage {
    /// Seconds to come, should it go on as in the seconds before.
    fn left(&self, seconds: f64) -> Option<f64> {
        (self.planes > 0 && self.of_planes >= self.planes).then(|| seconds * (self.of_planes - self.planes) as f64 / self.planes as f64)
    }
}

fn duration(seconds: f64) -> String {
    let s = seconds.round() as u64;
    match s {
        0..60 => format!("{s} s"),
        60..3600 => format!("{} min {} s", s / 60, s % 60),
        _ => format!("{} h {} min", s / 3600, s / 60 % 60),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_stage_is_told_at_its_ends_and_now_and_then() {
        let start = Instant::now();
        let at = |ms: u64| start + Duration::from_millis(ms);
        let mut t = Track::default();
        assert_eq!((t.line("begin", start), t.title()), (None, String::new()));
        t.snapshot("s2", 2, 3);
        t.begin("survey", 40, start);
        assert_eq!(t.title(), "2/3 s2 survey");
        assert_eq!(t.line("begin", start).unwrap()["seconds_left"], Value::Null);
        // Ten a second at most.
        let due: Vec<u64> = (1..=40).map(|k| 10 * k).filter(|ms| t.advance(1, at(*ms))).collect();
        assert_eq!(due, [100, 200, 300, 400]);
        t.read(3 << 20);
        assert_eq!(t.pace(at(1000)), ", 3.0 MiB/s, 0 s left");
        t.begin("survey", 40, start);
        t.advance(10, at(500));
        let line = t.line("advance", at(500)).unwrap();
        // 10 of 40 planes in half a second leave 1.5 s.
        assert_eq!((&line["planes"], &line["of_planes"], &line["seconds_left"]), (&json!(10), &json!(40), &json!(1.5)));
        assert_eq!((&line["snapshot"], &line["snapshot_number"], &line["of_snapshots"]), (&json!("s2"), &json!(2), &json!(3)));
        t.end();
        assert!(!t.advance(1, at(5000)) && t.line("end", at(5000)).is_none());
        assert_eq!(t.pace(at(1000)), "");
    }

    #[test]
    fn durations() {
        assert_eq!([0.4, 59.4, 61.0, 3599.0, 7380.0].map(duration), ["0 s", "59 s", "1 min 1 s", "59 min 59 s", "2 h 3 min"]);
    }
}
