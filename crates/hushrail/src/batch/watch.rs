//! Long work watched from the calling thread: progress and a way to stop, no matter how many threads do the work.

use std::ops::ControlFlow;
use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};
use std::time::Duration;

/// Called on the calling thread about twenty times a second with points done and points in all.
pub type Progress<'a> = dyn FnMut(usize, usize) -> ControlFlow<()> + 'a;

/// Counts and the wish to stop, shared with the workers.
#[derive(Debug, Default)]
pub struct Watch {
    /// Points done.
    pub done: AtomicUsize,
    /// Raised when the work should end.
    pub stop: AtomicBool,
}

/// Runs `work` on another thread while the calling thread reports progress; a break of `progress` raises `stop` and the
/// work's own answer to that is returned.
pub fn watched<T: Send>(
    total: usize,
    progress: &mut Progress<'_>,
    work: impl FnOnce(&Watch) -> T + Send,
) -> T {
    let watch = Watch::default();
    std::thread::scope(|s| {
        let handle = s.spawn(|| work(&watch));
        let mut wait = Duration::from_micros(200);
        while !handle.is_finished() {
            std::thread::sleep(wait);
            wait = (wait * 2).min(Duration::from_millis(50));
            if progress(watch.done.load(Ordering::Relaxed), total).is_break() {
                watch.stop.store(true, Ordering::Relaxed);
            }
        }
        match handle.join() {
            Ok(v) => v,
            Err(p) => std::panic::resume_unwind(p),
        }
    })
}
