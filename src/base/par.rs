//! The only file that names the thread library: fixed-order maps over work items, and the pool they run in.

use std::cell::RefCell;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::mpsc::{Receiver, RecvTimeoutError, TryRecvError, sync_channel};
use std::sync::{Arc, Mutex, OnceLock, Weak};
use std::time::Duration;

use rayon::prelude::*;

use crate::base::error::{Error, Result};

/// Bytes of stack that every thread here is started with: where address space is limited, they count from the start.
pub const STACK_BYTES: usize = 2 << 20;

/// How long one who waits for what is read sleeps before looking for work in the pool again.
const PAUSE: Duration = Duration::from_micros(100);

/// The pool of a thread, known to its workers before it is built.
type Home = Arc<OnceLock<Weak<rayon::ThreadPool>>>;

thread_local! {
    /// The pool this thread is a worker of, or reads for.
    static HOME: RefCell<Option<Home>> = const { RefCell::new(None) };
}

/// A thread pool of a settled size. Everything inside [`Pool::run`] uses its threads, and so does who reads ahead for it.
pub struct Pool(Arc<rayon::ThreadPool>);

impl Pool {
    /// `threads` = 0 takes one per available core.
    ///
    /// # Errors
    /// `Limit` when the system refuses to start threads.
    pub fn new(threads: usize) -> Result<Pool> {
        let home = Home::default();
        let of_workers = Arc::clone(&home);
        let pool = rayon::ThreadPoolBuilder::new()
            .num_threads(threads)
            .thread_name(|i| format!("ropewalk-{i}"))
            .stack_size(STACK_BYTES)
            .start_handler(move |_| settle(Some(Arc::clone(&of_workers))))
            .build()
            .map_err(|e| Error::limit("cannot start worker threads").found(e.to_string()).hint("take fewer: --threads 1"))?;
        let pool = Arc::new(pool);
        home.get_or_init(|| Arc::downgrade(&pool));
        Ok(Pool(pool))
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

/// Says which pool this thread belongs to.
fn settle(home: Option<Home>) {
    HOME.with(|h| *h.borrow_mut() = home);
}

/// Runs `f` in the pool of this thread: where it is, if that is a worker; else on a worker of the pool it reads for.
fn at_home<R: Send>(f: impl FnOnce() -> R + Send) -> R {
    if rayon::current_thread_index().is_some() {
        return f();
    }
    match HOME.with(|h| h.borrow().as_ref().and_then(|home| home.get()?.upgrade())) {
        Some(pool) => pool.install(f),
        None => f(),
    }
}

/// Threads that a pool has where nobody says how many.
pub fn default_threads() -> usize {
    std::thread::available_parallelism().map_or(1, std::num::NonZero::get)
}

/// Threads that work at the same time in the pool of this thread.
pub fn threads() -> usize {
    at_home(rayon::current_num_threads)
}

/// Maps every item; results come back in item order whatever the number of threads.
pub fn map<T: Sync, R: Send>(items: &[T], f: impl Fn(usize, &T) -> R + Sync + Send) -> Vec<R> {
    items.par_iter().enumerate().with_max_len(1).map(|(i, t)| f(i, t)).collect()
}

/// Maps the indices `0..n`; results come back in index order.
pub fn map_range<R: Send>(n: usize, f: impl Fn(usize) -> R + Sync + Send) -> Vec<R> {
    (0..n).into_par_iter().with_max_len(1).map(f).collect()
}

/// Consumes and maps every item; results come back in item order. Called from a thread that reads ahead, it uses the pool read for.
pub fn map_owned<T: Send, R: Send>(items: Vec<T>, f: impl Fn(usize, T) -> R + Sync + Send) -> Vec<R> {
    at_home(|| items.into_par_iter().enumerate().with_max_len(1).map(|(i, t)| f(i, t)).collect())
}

/// Calls `f(chunk index, chunk)` on consecutive chunks of `size` items (the last may be shorter).
///
/// # Panics
/// When `size` is 0.
pub fn for_chunks<T: Send>(data: &mut [T], size: usize, f: impl Fn(usize, &mut [T]) + Sync + Send) {
    data.par_chunks_mut(size).enumerate().for_each(|(i, c)| f(i, c));
}

/// Runs two closures, at the same time when threads allow.
pub fn join<A: Send, B: Send>(a: impl FnOnce() -> A + Send, b: impl FnOnce() -> B + Send) -> (A, B) {
    rayon::join(a, b)
}

/// Calls `next` on a thread of its own until it returns `None`, at most `depth` items ahead of `each`, which runs here
/// and ends the work early by returning `false`. What `next` maps with [`map_owned`] is done by the pool of this thread, which
/// helps while it waits. Where the system refuses a thread, both take turns here.
pub fn read_ahead<T: Send>(depth: usize, next: impl FnMut() -> Option<T> + Send, mut each: impl FnMut(T) -> bool) {
    let home = HOME.with(|h| h.borrow().clone());
    let stop = AtomicBool::new(false);
    // Shared, so that it is still here when no thread can be started.
    let next = Mutex::new(next);
    let call = || next.lock().ok().and_then(|mut next| next());
    std::thread::scope(|scope| {
        let (send, receive) = sync_channel(depth);
        let ahead = Ahead { receive, stop: &stop };
        let (stop, call) = (&stop, &call);
        let reading = move || {
            settle(home);
            // The sender goes with this thread, so that its end is seen.
            while !stop.load(Ordering::Relaxed)
                && let Some(item) = call()
                && send.send(item).is_ok()
            {}
        };
        let started = std::thread::Builder::new().stack_size(STACK_BYTES).spawn_scoped(scope, reading).is_ok();
        while let Some(item) = if started { ahead.next() } else { call() } {
            if !each(item) {
                break;
            }
        }
    });
}

/// What arrives from who reads ahead.
struct Ahead<'a, T> {
    receive: Receiver<T>,
    stop: &'a AtomicBool,
}

impl<T> Ahead<'_, T> {
    /// Waits for an item, and works for the pool meanwhile: a worker that only waited would be missing there, and if it is the
    /// only one, who reads would wait for it.
    fn next(&self) -> Option<T> {
        loop {
            match self.receive.try_recv() {
                Ok(item) => return Some(item),
                Err(TryRecvError::Disconnected) => return None,
                Err(TryRecvError::Empty) if rayon::yield_now() == Some(rayon::Yield::Executed) => {}
                Err(TryRecvError::Empty) => match self.receive.recv_timeout(PAUSE) {
                    Ok(item) => return Some(item),
                    Err(RecvTimeoutError::Timeout) => {}
                    Err(RecvTimeoutError::Disconnected) => return None,
                },
            }
        }
    }
}

/// Lets the read under way come to its end, also when work ends early or in a panic.
impl<T> Drop for Ahead<'_, T> {
    fn drop(&mut self) {
        self.stop.store(true, Ordering::Relaxed);
        while self.next().is_some() {}
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn who_reads_ahead_uses_the_threads_of_its_pool() {
        for threads in [1, 2, 3] {
            let pool = Pool::new(threads).expect("threads start");
            let mut got = Vec::new();
            pool.run(|| {
                let mut left = 20;
                let next = || {
                    left -= 1;
                    let work = |_, i: usize| (i, rayon::current_num_threads(), std::thread::current().name().map(String::from));
                    (left >= 0).then(|| (super::threads(), map_owned((0..7).collect(), work)))
                };
                read_ahead(1, next, |(count, items)| {
                    assert_eq!(count, threads);
                    // Work of its own beside that of the reader.
                    got.push(items.len() + map_range(50, |i| i % 2).iter().sum::<usize>());
                    for (i, (item, count, name)) in items.into_iter().enumerate() {
                        assert_eq!((item, count), (i, threads));
                        assert!(name.is_some_and(|n| n.starts_with("ropewalk-")), "on a worker");
                    }
                    true
                });
            });
            assert_eq!(got, [32; 20]);
        }
    }

    /// Reads numbers through the pool until 5 is worked on.
    fn until_five(end: impl Fn() -> bool + Send) -> i32 {
        let (mut seen, mut i) = (0, 0);
        let next = || {
            i += 1;
            Some(map_owned(vec![i], |_, i| i)[0])
        };
        read_ahead(2, next, |item| {
            seen = item;
            item < 5 || end()
        });
        seen
    }

    #[test]
    fn reading_ahead_ends_early() {
        assert_eq!(until_five(|| false), 5);
        for threads in [1, 2] {
            let pool = Pool::new(threads).expect("threads start");
            assert_eq!(pool.run(|| until_five(|| false)), 5);
            let fail = std::panic::AssertUnwindSafe(|| pool.run(|| until_five(|| panic!("on purpose"))));
            assert!(std::panic::catch_unwind(fail).is_err());
        }
    }
}
