//! The only file that names the thread library: fixed-order maps over work items, and the pool they run in.

use std::sync::Mutex;

use rayon::prelude::*;

use crate::base::error::{Error, Result};

/// Bytes of stack that every thread here is started with: where address space is limited, they count from the start.
pub const STACK_BYTES: usize = 2 << 20;

/// A thread pool of a settled size. Everything inside [`Pool::run`] uses its threads.
pub struct Pool(rayon::ThreadPool);

impl Pool {
    /// `threads` = 0 takes one per available core.
    ///
    /// # Errors
    /// `Limit` when the system refuses to start threads.
    pub fn new(threads: usize) -> Result<Pool> {
        rayon::ThreadPoolBuilder::new()
            .num_threads(threads)
            .thread_name(|i| format!("ropewalk-{i}"))
            .stack_size(STACK_BYTES)
            .build()
            .map(Pool)
            .map_err(|e| Error::limit("cannot start worker threads").found(e.to_string()).hint("take fewer: --threads 1"))
    }

    /// Runs `f` inside the pool.
    pub fn run<R: Send>(&self, f: impl FnOnce() -> R + Send) -> R {
        self.0.install(f)
    }

    /// Number of threads.
    pub fn threads(&self) -> usize {
        self.0.current_num_threads()
    }
}

/// Maps every item; results come back in item order whatever the number of threads.
pub fn map<T: Sync, R: Send>(items: &[T], f: impl Fn(usize, &T) -> R + Sync + Send) -> Vec<R> {
    items.par_iter().enumerate().with_max_len(1).map(|(i, t)| f(i, t)).collect()
}

/// Maps the indices `0..n`; results come back in index order.
pub fn map_range<R: Send>(n: usize, f: impl Fn(usize) -> R + Sync + Send) -> Vec<R> {
    (0..n).into_par_iter().with_max_len(1).map(f).collect()
}

/// Consumes and maps every item; results come back in item order.
pub fn map_owned<T: Send, R: Send>(items: Vec<T>, f: impl Fn(usize, T) -> R + Sync + Send) -> Vec<R> {
    items.into_par_iter().enumerate().with_max_len(1).map(|(i, t)| f(i, t)).collect()
}

/// Calls `f(chunk index, chunk)` on consecutive chunks of `size` items (the last may be shorter).
///
/// # Panics
/// When `size` is 0.
pub fn for_chunks<T: Send>(data: &mut [T], size: usize, f: impl Fn(usize, &mut [T]) + Sync + Send) {
    data.par_chunks_mut(size).enumerate().for_each(|(i, c)| f(i, c));
}

/// Threads that a pool has where nobody says how many.
pub fn default_threads() -> usize {
    std::thread::available_parallelism().map_or(1, std::num::NonZero::get)
}

/// Runs two closures, at the same time when threads allow.
pub fn join<A: Send, B: Send>(a: impl FnOnce() -> A + Send, b: impl FnOnce() -> B + Send) -> (A, B) {
    rayon::join(a, b)
}

/// Calls `next` on a thread of its own until it returns `None`, at most `depth` items ahead of `each`, which runs here
/// and ends the work early by returning `false`. Where the system refuses a thread, both take turns here.
pub fn read_ahead<T: Send>(depth: usize, next: impl FnMut() -> Option<T> + Send, mut each: impl FnMut(T) -> bool) {
    // Shared, so that it is still here when no thread can be started.
    let next = Mutex::new(next);
    let call = || next.lock().ok().and_then(|mut next| next());
    std::thread::scope(|scope| {
        let (send, receive) = std::sync::mpsc::sync_channel(depth);
        let ahead = move || {
            while let Some(item) = call() {
                if send.send(item).is_err() {
                    break;
                }
            }
        };
        if std::thread::Builder::new().stack_size(STACK_BYTES).spawn_scoped(scope, ahead).is_ok() {
            for item in receive {
                if !each(item) {
                    break;
                }
            }
        } else {
            while let Some(item) = call() {
                if !each(item) {
                    break;
                }
            }
        }
    });
}
