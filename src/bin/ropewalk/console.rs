//! The only file that prints: results to standard output, everything else to standard error.
#![allow(clippy::print_stdout, clippy::print_stderr)]

use std::io::{IsTerminal, Write};
use std::process::ExitCode;
use std::sync::Mutex;

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use ropewalk::base::error::{Error, Result};
use ropewalk::base::observe::Observe;

use crate::args::Talk;
use crate::exit;

/// Prints help, version or a usage error where each belongs.
pub fn usage(e: &clap::Error) -> ExitCode {
    let shown = e.print().is_ok();
    if e.use_stderr() || !shown { ExitCode::from(exit::USAGE) } else { ExitCode::SUCCESS }
}

/// Prints the error that ends the run, each of its faults on a line.
pub fn error(e: &Error) {
    for fault in e.parts() {
        eprintln!("error: {fault}");
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

/// Shows progress on a terminal and warnings everywhere.
pub struct Console {
    talk: Talk,
    bar: Mutex<Option<ProgressBar>>,
}

impl Console {
    /// Talks as much as asked.
    pub fn new(talk: Talk) -> Console {
        Console { talk, bar: Mutex::new(None) }
    }
}

impl Observe for Console {
    fn stage(&self, name: &str, total: u64) {
        if self.talk.verbose {
            eprintln!("{name}: {total} planes");
        }
        if self.talk.quiet || !std::io::stderr().is_terminal() {
            return;
        }
        let bar = ProgressBar::with_draw_target(Some(total), ProgressDrawTarget::stderr_with_hz(10));
        if let Ok(style) = ProgressStyle::with_template("{msg:>10} {wide_bar} {pos}/{len} planes, {eta} left") {
            bar.set_style(style);
        }
        bar.set_message(name.to_string());
        if let Ok(mut slot) = self.bar.lock() {
            *slot = Some(bar);
        }
    }

    fn advance(&self, units: u64) {
        if let Ok(slot) = self.bar.lock()
            && let Some(bar) = &*slot
        {
            bar.inc(units);
        }
    }

    fn done(&self) {
        if let Ok(mut slot) = self.bar.lock()
            && let Some(bar) = slot.take()
        {
            bar.finish_and_clear();
        }
    }

    fn warning(&self, text: &str) {
        if !self.talk.quiet {
            eprintln!("warning: {text}");
        }
    }

    fn failure(&self, text: &str) {
        eprintln!("error: {text}");
    }
}
