//! Times the stages of a run while passing progress on to whoever watches.

use std::sync::Mutex;
use std::time::Instant;

use crate::base::observe::Observe;

/// Seconds and units of one stage, over all snapshots.
#[derive(Debug, Clone, PartialEq)]
pub struct StageTime {
    /// Name of the stage.
    pub name: String,
    /// Wall seconds.
    pub seconds: f64,
    /// Planes gone through.
    pub planes: u64,
}

/// An observer that forwards and measures.
pub struct Clock<'a> {
    inner: &'a dyn Observe,
    state: Mutex<State>,
}

#[derive(Default)]
struct State {
    stages: Vec<StageTime>,
    running: Option<(String, Instant)>,
}

impl<'a> Clock<'a> {
    /// Forwards to `inner`.
    pub fn new(inner: &'a dyn Observe) -> Self {
        Clock { inner, state: Mutex::new(State::default()) }
    }

    /// The stages so far, in the order in which they first ran.
    pub fn stages(&self) -> Vec<StageTime> {
        self.state.lock().map(|s| s.stages.clone()).unwrap_or_default()
    }
}

impl Observe for Clock<'_> {
    fn stage(&self, name: &str, total: u64) {
        if let Ok(mut s) = self.state.lock() {
            s.running = Some((name.to_string(), Instant::now()));
            if !s.stages.iter().any(|t| t.name == name) {
                s.stages.push(StageTime { name: name.to_string(), seconds: 0.0, planes: 0 });
            }
        }
        self.inner.stage(name, total);
    }

    fn advance(&self, units: u64) {
        if let Ok(mut s) = self.state.lock() {
            let name = s.running.as_ref().map(|r| r.0.clone());
            if let Some(t) = s.stages.iter_mut().find(|t| Some(&t.name) == name.as_ref()) {
                t.planes += units;
            }
        }
        self.inner.advance(units);
    }

    fn done(&self) {
        let Ok(mut s) = self.state.lock() else { return };
        if let Some((name, since)) = s.running.take()
            && let Some(t) = s.stages.iter_mut().find(|t| t.name == name)
        {
            t.seconds += since.elapsed().as_secs_f64();
        }
        drop(s);
        self.inner.done();
    }

    fn warning(&self, text: &str) {
        self.inner.warning(text);
    }

    fn failure(&self, text: &str) {
        self.inner.failure(text);
    }
}
