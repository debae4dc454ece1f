//! Independent work on two threads: the smallest machine that notes are issued on has two cores.

use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::{Mutex, PoisonError};

/// What `work` makes of each item, in their order, on two threads: the result does not depend on which of them did what.
pub fn on_two<I: Sync, T: Send>(items: &[I], work: impl Fn(&I) -> T + Sync) -> Vec<T> {
    if items.len() < 2 {
        return items.iter().map(work).collect();
    }
    let next = AtomicUsize::new(0);
    let slots: Vec<Mutex<Option<T>>> = items.iter().map(|_| Mutex::new(None)).collect();
    let take = || {
        loop {
            let i = next.fetch_add(1, Ordering::Relaxed);
            let (Some(item), Some(slot)) = (items.get(i), slots.get(i)) else { return };
            let found = work(item);
            *slot.lock().unwrap_or_else(PoisonError::into_inner) = Some(found);
        }
    };
    std::thread::scope(|scope| {
        scope.spawn(take);
        take();
    });
    // A thread that broke down has broken the scope down with it: every slot is filled.
    slots.into_iter().filter_map(|slot| slot.into_inner().unwrap_or_else(PoisonError::into_inner)).collect()
}
