//! Work shared among the cores, where there is enough of it to wake them.
//!
//! What is found for each of many numbers is found on threads of its own, which end with the
//! call: such work may wait for what another thread finds once for all, and a thread of a
//! pool that waits holds up whoever needs the pool. Only work that waits for nothing goes to
//! the pool.

use std::num::NonZero;
use std::ops::Range;
use std::sync::OnceLock;
use std::thread;

use rayon::prelude::*;
use rayon::{ThreadPool, ThreadPoolBuilder};

/// Checks of a few nanoseconds each that are worth the other cores.
pub(crate) const MANY: usize = 20_000;

/// The pool, a thread a core, started when it is first needed; `None` on one core, on one of
/// its threads, and where the system gives no more threads.
pub(crate) fn pool() -> Option<&'static ThreadPool> {
    static POOL: OnceLock<Option<ThreadPool>> = OnceLock::new();
    if rayon::current_thread_index().is_some() {
        return None;
    }
    let start = || ThreadPoolBuilder::new().build().ok();
    POOL.get_or_init(start).as_ref().filter(|pool| pool.current_num_threads() > 1)
}

/// How many pieces something is worth cutting into.
pub(crate) fn pieces(size: usize, worth: usize) -> usize {
    if size < worth { 1 } else { thread::available_parallelism().map_or(1, NonZero::get) }
}

/// What `find` finds for consecutive ranges that cover the numbers below a count, in order:
/// one range on one core, or as many as there are cores.
fn shared<T: Send>(count: usize, worth: usize, find: impl Fn(Range<usize>) -> T + Sync) -> Vec<T> {
    let share = count.div_ceil(pieces(count, worth)).max(1);
    let ranges = (0..count).step_by(share).map(|start| start..count.min(start + share));
    if count <= share {
        return ranges.map(find).collect();
    }
    let find = &find;
    thread::scope(|scope| {
        let begun: Vec<_> = ranges
            .map(|range| {
                let own = range.clone();
                let worker = thread::Builder::new().spawn_scoped(scope, move || find(own));
                (range, worker)
            })
            .collect();
        let ended = begun.into_iter().map(|(range, worker)| match worker {
            // What went wrong there goes wrong here.
            Ok(worker) => worker.join().unwrap_or_else(|panic| std::panic::resume_unwind(panic)),
            // There is no thread to be had.
            Err(_) => find(range),
        });
        ended.collect()
    })
}

/// What `find` finds for each number below a count, in order; on all cores from a count on
/// that is worth it.
pub(crate) fn map<T: Send>(count: usize, worth: usize, find: impl Fn(usize) -> T + Sync) -> Vec<T> {
    let mut parts = shared(count, worth, |range| range.map(&find).collect::<Vec<T>>()).into_iter();
    let mut all = parts.next().unwrap_or_default();
    all.reserve(count - all.len());
    all.extend(parts.flatten());
    all
}

/// Whether something holds for each number below a count.
pub(crate) fn all(count: usize, worth: usize, holds: impl Fn(usize) -> bool + Sync) -> bool {
    shared(count, worth, |mut range| range.all(&holds)).into_iter().all(|holds| holds)
}

/// What is gathered over the numbers below a count: `see` adds one, `join` what was gathered
/// over the numbers behind. The result is that of one after the other.
pub(crate) fn fold<T: Clone + Send + Sync>(
    count: usize,
    worth: usize,
    nothing: &T,
    see: impl Fn(&mut T, usize) + Sync,
    join: impl Fn(T, T) -> T,
) -> T {
    let gather = |range: Range<usize>| {
        range.fold(nothing.clone(), |mut part, number| {
            see(&mut part, number);
            part
        })
    };
    let parts = shared(count, worth, gather).into_iter();
    parts.reduce(join).unwrap_or_else(|| nothing.clone())
}

/// Puts numbers in order.
pub(crate) fn sort(numbers: &mut [u64]) {
    let pool = if numbers.len() < MANY { None } else { pool() };
    match pool {
        Some(pool) => pool.install(|| numbers.par_sort_unstable()),
        None => numbers.sort_unstable(),
    }
}

/// Some work of this thread, with other work beside it.
pub(crate) fn both<A, B: Send>(
    own: impl FnOnce() -> A,
    other: impl FnOnce() -> B + Send,
) -> (A, B) {
    let Some(pool) = pool() else {
        return (own(), other());
    };
    let mut found = None;
    let own = pool.in_place_scope(|scope| {
        scope.spawn(|_| found = Some(other()));
        own()
    });
    (own, found.expect("the scope waits for it"))
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
            assert!(fold(count, 0, &Vec::new(), see, join).into_iter().eq(0..count));
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
