//! The only file that prints: results to standard output, everything else to standard error.
#![allow(clippy::print_stdout, clippy::print_stderr)]

use std::io::{IsTerminal, Write};
use std::process::ExitCode;
use std::sync::Mutex;
use std::time::Instant;

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use ropewalk::base::error::{Error, Result};
use ropewalk::base::observe::Observe;
use serde_json::json;

use crate::args::{Progress, Talk};
use crate::exit;
use crate::track::Track;

/// Prints help, version or a usage error where each belongs.
pub fn usage(e: &clap::Error) -> ExitCode {
    let shown = e.print().is_ok();
    if e.use_stderr() || !shown { ExitCode::from(exit::USAGE) } else { ExitCode::SUCCESS }
}

/// Prints the error that ends the run, each of its faults on a line.
pub fn error(e: &Error, progress: Progress) {
    for fault in e.parts() {
        match progress {
            Progress::Json => say(&json!({ "event": "error", "text": fault.to_string(), "exit_code": exit::number(e) }).to_string()),
            _ => say(&format!("error: {fault}")),
        }
    }
}

/// Prints results. A reader that stops listening is no error, a full disk is.
pub fn result(text: &str) -> Result<()> {
    let mut out = std::io::stdout().lock();
    match out.write_all(text.as_bytes()).and_then(|()| out.flush()) {
        Err(e) if e.kind() != std::io::ErrorKind::BrokenPipe => Err(Error::output("cannot write to standard output").found(e.to_string())),
        _ => Ok(()),
    }
}

/// A line to standard error. The run goes on when nobody reads it.
fn say(line: &str) {
    let _ = writeln!(std::io::stderr().lock(), "{line}");
}

/// Tells progress, on a terminal or as lines of JSON, and warnings everywhere.
pub struct Console {
    talk: Talk,
    bars: bool,
    state: Mutex<State>,
}

#[derive(Default)]
struct State {
    track: Track,
    bar: Option<ProgressBar>,
}

impl Console {
    /// Talks as much as asked.
    pub fn new(talk: Talk) -> Console {
        let bars = talk.progress == Progress::Auto && !talk.quiet && std::io::stderr().is_terminal();
        Console { talk, bars, state: Mutex::new(State::default()) }
    }

    fn json(&self) -> bool {
        self.talk.progress == Progress::Json
    }

    /// Lines of JSON about stages.
    fn lines(&self) -> bool {
        self.json() && !self.talk.quiet
    }

    fn with(&self, f: impl FnOnce(&mut State)) {
        if let Ok(mut state) = self.state.lock() {
            f(&mut state);
        }
    }

    fn event(&self, event: &str, text: &str) {
        let line = match (self.json(), event) {
            (true, _) => json!({ "event": event, "text": text }).to_string(),
            (false, "warning") => format!("warning: {text}"),
            (false, _) => format!("error: {text}"),
        };
        self.with(|s| match &s.bar {
            Some(bar) => bar.suspend(|| say(&line)),
            None => say(&line),
        });
    }
}

/// The bar of a stage, or a line without one where it does not go through planes.
fn bar(of_planes: u64) -> ProgressBar {
    let bar = ProgressBar::with_draw_target(Some(of_planes), ProgressDrawTarget::stderr_with_hz(10));
    let template = if of_planes == 0 { "{msg:>10}" } else { "{msg:>10} {wide_bar} {pos}/{len} planes{prefix}" };
    match ProgressStyle::with_template(template) {
        Ok(style) => bar.with_style(style),
        Err(_) => bar,
    }
}

impl Observe for Console {
    fn snapshot(&self, name: &str, k: u64, n: u64) {
        self.with(|s| s.track.snapshot(name, k, n));
    }

    fn stage(&self, name: &str, total: u64) {
        let now = Instant::now();
        self.with(|s| {
            s.track.begin(name, total, now);
            if self.lines() {
                s.track.line("begin", now).iter().for_each(|l| say(&l.to_string()));
            } else if self.talk.verbose {
                say(&if total == 0 { name.to_string() } else { format!("{name}: {total} planes") });
            }
            if self.bars {
                let bar = bar(total);
                bar.set_message(s.track.title());
                bar.tick();
                s.bar = Some(bar);
            }
        });
    }

    fn advance(&self, units: u64) {
        let now = Instant::now();
        self.with(|s| {
            let due = s.track.advance(units, now);
            if due && self.lines() {
                s.track.line("advance", now).iter().for_each(|l| say(&l.to_string()));
            }
            if let Some(bar) = &s.bar {
                bar.set_prefix(s.track.pace(now));
                bar.set_position(s.track.planes());
            }
        });
    }

    fn read(&self, bytes: u64) {
        self.with(|s| s.track.read(bytes));
    }

    fn done(&self) {
        let now = Instant::now();
        self.with(|s| {
            if self.lines() {
                s.track.line("end", now).iter().for_each(|l| say(&l.to_string()));
            }
            s.track.end();
            if let Some(bar) = s.bar.take() {
                bar.finish_and_clear();
            }
        });
    }

    fn warning(&self, text: &str) {
        if !self.talk.quiet {
            self.event("warning", text);
        }
    }

    fn failure(&self, text: &str) {
        self.event("failure", text);
    }
}
