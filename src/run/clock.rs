//! Times the stages of a run while passing progress on to whoever watches.

use std::sync::Mutex;
use std::time::Instant;

use crate::base::observe::Observe;
use crate::run::machine::transferred;

/// What one stage took, over all snapshots.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct StageTime {
    /// Name of the stage.
    pub name: String,
    /// Wall seconds.
    pub seconds: f64,
    /// Planes gone through.
    pub planes: u64,
    /// Cells of these planes.
    pub cells: u64,
    /// Bytes read: by this process as the system counts, else as was told.
    pub read: u64,
    /// Bytes written, the same way.
    pub written: u64,
}

/// An observer that forwards and measures.
pub struct Clock<'a> {
    inner: &'a dyn Observe,
    began: Instant,
    moved: Option<(u64, u64)>,
    state: Mutex<State>,
}

#[derive(Default)]
struct State {
    stages: Vec<StageTime>,
    running: Option<Running>,
    plane_cells: u64,
    /// Bytes read and written as told.
    told: (u64, u64),
}

/// The stage that goes on, and where the counters stood when it began.
struct Running {
    stage: usize,
    since: Instant,
    moved: Option<(u64, u64)>,
    told: (u64, u64),
}

impl State {
    fn end(&mut self) -> bool {
        let Some(r) = self.running.take() else { return false };
        let moved = difference(r.moved, transferred()).unwrap_or((self.told.0 - r.told.0, self.told.1 - r.told.1));
        let stage = &mut self.stages[r.stage];
        stage.seconds += r.since.elapsed().as_secs_f64();
        stage.read += moved.0;
        stage.written += moved.1;
        true
    }
}

fn difference(before: Option<(u64, u64)>, now: Option<(u64, u64)>) -> Option<(u64, u64)> {
    let ((r0, w0), (r1, w1)) = (before?, now?);
    Some((r1.saturating_sub(r0), w1.saturating_sub(w0)))
}

impl<'a> Clock<'a> {
    /// Forwards to `inner`; the whole begins now.
    pub fn new(inner: &'a dyn Observe) -> Self {
        Clock { inner, began: Instant::now(), moved: transferred(), state: Mutex::new(State::default()) }
    }

    /// Says how many cells a plane of what follows has.
    pub fn plane_cells(&self, cells: u64) {
        if let Ok(mut s) = self.state.lock() {
            s.plane_cells = cells;
        }
    }

    /// The stages so far, in the order in which they first ran.
    pub fn stages(&self) -> Vec<StageTime> {
        self.state.lock().map(|s| s.stages.clone()).unwrap_or_default()
    }

    /// Everything since the beginning, within stages and outside them. Planes and cells are those of all stages.
    pub fn whole(&self) -> StageTime {
        let Ok(s) = self.state.lock() else { return StageTime::default() };
        let (read, written) = difference(self.moved, transferred()).unwrap_or(s.told);
        StageTime {
            name: String::new(),
            seconds: self.began.elapsed().as_secs_f64(),
            planes: s.stages.iter().map(|t| t.planes).sum(),
            cells: s.stages.iter().map(|t| t.cells).sum(),
            read,
            written,
        }
    }
}

impl Observe for Clock<'_> {
    fn snapshot(&self, name: &str, k: u64, n: u64) {
        self.inner.snapshot(name, k, n);
    }

    fn stage(&self, name: &str, total: u64) {
        // One that failed on the way has not said that it is over.
        self.done();
        if let Ok(mut s) = self.state.lock() {
            let stage = s.stages.iter().position(|t| t.name == name).unwrap_or_else(|| {
                s.stages.push(StageTime { name: name.to_string(), ..StageTime::default() });
                s.stages.len() - 1
            });
            s.running = Some(Running { stage, since: Instant::now(), moved: transferred(), told: s.told });
        }
        self.inner.stage(name, total);
    }

    fn advance(&self, units: u64) {
        if let Ok(mut s) = self.state.lock() {
            let cells = units * s.plane_cells;
            if let Some(k) = s.running.as_ref().map(|r| r.stage) {
                s.stages[k].planes += units;
                s.stages[k].cells += cells;
            }
        }
        self.inner.advance(units);
    }

    fn read(&self, bytes: u64) {
        if let Ok(mut s) = self.state.lock() {
            s.told.0 += bytes;
        }
        self.inner.read(bytes);
    }

    fn wrote(&self, bytes: u64) {
        if let Ok(mut s) = self.state.lock() {
            s.told.1 += bytes;
        }
        self.inner.wrote(bytes);
    }

    fn done(&self) {
        let ended = self.state.lock().is_ok_and(|mut s| s.end());
        if ended {
            self.inner.done();
        }
    }

    fn warning(&self, text: &str) {
        self.inner.warning(text);
    }

    fn failure(&self, text: &str) {
        self.inner.failure(text);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Notes what it is told.
    #[derive(Default)]
    struct Notes(Mutex<Vec<String>>);

    impl Observe for Notes {
        fn stage(&self, name: &str, total: u64) {
            self.0.lock().unwrap().push(format!("{name} {total}"));
        }

        fn done(&self) {
            self.0.lock().unwrap().push("done".into());
        }
    }

    #[test]
    fn stages_are_summed_by_name_and_a_failed_one_is_ended() {
        let notes = Notes::default();
        let clock = Clock::new(&notes);
        clock.plane_cells(100);
        clock.stage("survey", 4);
        clock.advance(3);
        // A failure: the next stage begins without an end of this one.
        clock.plane_cells(10);
        clock.stage("survey", 8);
        std::thread::sleep(std::time::Duration::from_millis(20));
        clock.advance(8);
        clock.done();
        clock.done();
        clock.stage("tables", 0);
        clock.done();
        assert_eq!(*notes.0.lock().unwrap(), ["survey 4", "done", "survey 8", "done", "tables 0", "done"]);
        let stages = clock.stages();
        assert_eq!(stages.iter().map(|s| s.name.as_str()).collect::<Vec<_>>(), ["survey", "tables"]);
        assert_eq!((stages[0].planes, stages[0].cells), (11, 380));
        assert!(stages[0].seconds >= 0.02 && stages[1].seconds < stages[0].seconds);
        let whole = clock.whole();
        assert_eq!((whole.planes, whole.cells), (11, 380));
        assert!(whole.seconds >= stages.iter().map(|s| s.seconds).sum());
    }

    /// Files of a size that is known, against the counters of the system.
    #[cfg(target_os = "linux")]
    #[test]
    fn bytes_are_those_of_the_system() {
        let notes = Notes::default();
        let clock = Clock::new(&notes);
        let place = tempfile::tempdir().unwrap();
        let path = place.path().join("a");
        clock.stage("out", 0);
        std::fs::write(&path, vec![1_u8; 3_000_000]).unwrap();
        clock.stage("in", 0);
        assert_eq!(std::fs::read(&path).unwrap().len(), 3_000_000);
        clock.done();
        let stages = clock.stages();
        // Other tests of this process read and write meanwhile.
        assert!(stages[0].written >= 3_000_000 && stages[1].read >= 3_000_000, "{stages:?}");
    }
}
