//! Work shared among the cores, where there is enough of it to wake them.
//!
//! Work that is part of shared work is not shared again: a thread that waits for a part of
//! it never takes up anything else that could wait for this thread.

use std::sync::OnceLock;

use rayon::prelude::*;
use rayon::{ThreadPool, ThreadPoolBuilder};

/// Checks of a few nanoseconds each that are worth the other cores.
pub(crate) const MANY: usize = 20_000;

/// The threads, one a core, started when they are first needed; `None` on one core, on one
/// of these threads, and where the system gives no more threads.
pub(crate) fn threads() -> Option<&'static ThreadPool> {
    static THREADS: OnceLock<Option<ThreadPool>> = OnceLock::new();
    if rayon::current_thread_index().is_some() {
        return None;
    }
    let start = || ThreadPoolBuilder::new().build().ok();
    THREADS.get_or_init(start).as_ref().filter(|threads| threads.current_num_threads() > 1)
}

/// The threads for so much of some work, where it is worth them.
fn threads_for(count: usize, worth: usize) -> Option<&'static ThreadPool> {
    if count < worth { None } else { threads() }
}

/// How many pieces are worth cutting something into.
pub(crate) fn pieces(size: usize, worth: usize) -> usize {
    threads_for(size, worth).map_or(1, ThreadPool::current_num_threads)
}

/// What `find` finds for each number below a count, in order; on all cores from a count on
/// that is worth it.
pub(crate) fn map<T: Send>(
    count: usize,
    worth: usize,
    find: impl Fn(usize) -> T + Sync + Send,
) -> Vec<T> {
    match threads_for(count, worth) {
        Some(threads) => threads.install(|| (0..count).into_par_iter().map(find).collect()),
        None => (0..count).map(find).collect(),
    }
}

/// Whether something holds for each number below a count.
pub(crate) fn all(count: usize, worth: usize, holds: impl Fn(usize) -> bool + Sync + Send) -> bool {
    match threads_for(count, worth) {
        Some(threads) => threads.install(|| (0..count).into_par_iter().all(holds)),
        None => (0..count).all(holds),
    }
}

/// Puts numbers in order.
pub(crate) fn sort(numbers: &mut [u64]) {
    match threads_for(numbers.len(), MANY) {
        Some(threads) => threads.install(|| numbers.par_sort_unstable()),
        None => numbers.sort_unstable(),
    }
}

/// Some work of this thread, with other work beside it.
pub(crate) fn both<A, B: Send>(
    own: impl FnOnce() -> A,
    other: impl FnOnce() -> B + Send,
) -> (A, B) {
    let Some(threads) = threads() else {
        return (own(), other());
    };
    let mut found = None;
    let own = threads.in_place_scope(|scope| {
        scope.spawn(|_| found = Some(other()));
        own()
    });
    (own, found.expect("the scope waits for it"))
}

/// What is gathered over the numbers below a count: `see` adds one, `join` what was gathered
/// over the numbers behind. The result is that of one after the other.
pub(crate) fn fold<T: Clone + Send + Sync>(
    count: usize,
    worth: usize,
    nothing: T,
    see: impl Fn(&mut T, usize) + Sync + Send,
    join: impl Fn(T, T) -> T + Sync + Send,
) -> T {
    let one_more = |mut part: T, number| {
        see(&mut part, number);
        part
    };
    match threads_for(count, worth) {
        Some(threads) => threads.install(|| {
            let parts = (0..count).into_par_iter().fold(|| nothing.clone(), one_more);
            parts.reduce(|| nothing.clone(), join)
        }),
        None => (0..count).fold(nothing.clone(), one_more),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn shared_work_comes_to_what_one_core_finds() {
        for count in [0, 1, 999, 100_000] {
            let square = |number: usize| number * number;
            assert!(map(count, 0, square).into_iter().eq((0..count).map(square)));
            assert!(all(count, 0, |number| number < count));
            assert_eq!(all(count, 0, |number| number != 500), count <= 500);
            let see = |all: &mut Vec<usize>, number| all.push(number);
            let join = |mut front: Vec<usize>, behind| {
                front.extend::<Vec<usize>>(behind);
                front
            };
            assert_eq!(both(|| square(count), || count + 1), (square(count), count + 1));
            assert!(fold(count, 0, Vec::new(), see, join).into_iter().eq(0..count));
            let mut numbers: Vec<u64> = (0..count as u64).rev().collect();
            sort(&mut numbers);
            assert!(numbers.into_iter().eq(0..count as u64));
        }
    }

    #[test]
    fn what_is_found_once_may_be_found_within_shared_work() {
        let once = OnceLock::new();
        let find = || map(1000, 0, |number| number);
        let seen = map(1000, 0, |number| once.get_or_init(find)[number]);
        assert!(seen.into_iter().eq(0..1000));
    }
}
