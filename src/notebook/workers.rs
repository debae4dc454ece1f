//! Work on many items at once, in threads that share nothing.

use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::mpsc;

/// Stack of a worker (bytes): typesetting and formulas recurse.
const STACK: usize = 16 << 20;

/// Works on every item in up to `workers` threads. `done` gets what is finished, in the calling thread, in batches and in
/// no particular order: the index of each item with its result, or what a worker said when it broke down over it.
pub(super) fn each<T: Sync, R: Send>(
    workers: usize,
    items: &[T],
    work: impl Fn(&T) -> R + Sync,
    mut done: impl FnMut(Vec<(usize, Result<R, String>)>),
) {
    let next = AtomicUsize::new(0);
    let one = || {
        let index = next.fetch_add(1, Ordering::Relaxed);
        let item = items.get(index)?;
        Some((index, catch_unwind(AssertUnwindSafe(|| work(item))).map_err(|panic| said(&*panic))))
    };
    let (send, receive) = mpsc::channel();
    std::thread::scope(|scope| {
        for _ in 0..workers.clamp(1, items.len().max(1)) {
            let (send, one) = (send.clone(), &one);
            let run = move || {
                while let Some(result) = one() {
                    if send.send(result).is_err() {
                        break;
                    }
                }
            };
            // A machine that has no thread left works with those it has.
            if std::thread::Builder::new().stack_size(STACK).spawn_scoped(scope, run).is_err() {
                break;
            }
        }
        drop(send);
        while let Ok(first) = receive.recv() {
            done(std::iter::once(first).chain(receive.try_iter()).collect());
        }
    });
    // Where not a single thread could be made, the calling one does it all.
    while let Some(result) = one() {
        done(vec![result]);
    }
}

/// [`each`], with the results in the order of the items.
pub(super) fn map<T: Sync, R: Send>(
    workers: usize,
    items: &[T],
    work: impl Fn(&T) -> R + Sync,
) -> Vec<Result<R, String>> {
    let mut all: Vec<(usize, Result<R, String>)> = Vec::with_capacity(items.len());
    each(workers, items, work, |batch| all.extend(batch));
    all.sort_by_key(|(index, _)| *index);
    all.into_iter().map(|(_, result)| result).collect()
}

fn said(panic: &(dyn std::any::Any + Send)) -> String {
    let text = panic.downcast_ref::<&str>().copied().map(str::to_owned);
    text.or_else(|| panic.downcast_ref::<String>().cloned()).unwrap_or_else(|| "no reason given".to_owned())
}
