//! Work shared among the cores, where there is enough of it to wake them.

use rayon::prelude::*;

/// Checks of a few nanoseconds each that are worth the other cores.
pub(crate) const MANY: usize = 20_000;

/// What `find` finds for each number below a count, in order; on all cores from a count on
/// that is worth it.
pub(crate) fn map<T: Send>(
    count: usize,
    worth: usize,
    find: impl Fn(usize) -> T + Sync + Send,
) -> Vec<T> {
    if count < worth {
        return (0..count).map(find).collect();
    }
    (0..count).into_par_iter().map(find).collect()
}

/// Whether something holds for each number below a count.
pub(crate) fn all(count: usize, holds: impl Fn(usize) -> bool + Sync + Send) -> bool {
    if count < MANY {
        return (0..count).all(holds);
    }
    (0..count).into_par_iter().all(holds)
}

/// Puts numbers in order.
pub(crate) fn sort(numbers: &mut [u64]) {
    if numbers.len() < MANY {
        numbers.sort_unstable();
    } else {
        numbers.par_sort_unstable();
    }
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
    if count < worth {
        let mut all = nothing;
        (0..count).for_each(|number| see(&mut all, number));
        return all;
    }
    let one_more = |mut part: T, number| {
        see(&mut part, number);
        part
    };
    let parts = (0..count).into_par_iter().fold(|| nothing.clone(), one_more);
    parts.reduce(|| nothing.clone(), join)
}
