//! The noise of the links over which two clocks are compared.

use std::cmp::Reverse;
use std::collections::{BinaryHeap, HashMap};

use crate::layout::Layout;

/// Looks up the noise of the links between two nodes.
#[derive(Clone, Debug)]
pub struct LinkNoise {
    /// From each end: the other end and the Allan variance at 1 s. Empty when the layout
    /// writes no link: then every neighbour pair has one, free of noise.
    links: HashMap<usize, Vec<(usize, f64)>>,
}

impl LinkNoise {
    /// The links of a layout.
    #[must_use]
    pub fn of(layout: &Layout) -> LinkNoise {
        let mut links: HashMap<usize, Vec<(usize, f64)>> = HashMap::new();
        for link in &layout.links {
            let [first, second] = link.between;
            let variance = link.instability * link.instability;
            links.entry(first).or_default().push((second, variance));
            links.entry(second).or_default().push((first, variance));
        }
        LinkNoise { links }
    }

    /// Allan deviation at 1 s (white phase noise) of the comparison of two nodes.
    ///
    /// The link between the two when it is written; else the quietest chain of links, whose
    /// variances add, each node on the way passing on what it receives without noise of its
    /// own. `None` when no chain joins the two.
    #[must_use]
    pub fn between(&self, first: usize, second: usize) -> Option<f64> {
        if self.links.is_empty() || first == second {
            return Some(0.0);
        }
        let direct = self.links.get(&first)?.iter().find(|(end, _)| *end == second);
        if let Some((_, variance)) = direct {
            return Some(variance.sqrt());
        }
        self.quietest_chain(first, second).map(f64::sqrt)
    }

    /// Dijkstra's rule over the variances, which are not negative: their bits are in the
    /// order of their values.
    fn quietest_chain(&self, first: usize, second: usize) -> Option<f64> {
        let mut settled: HashMap<usize, f64> = HashMap::new();
        let mut waiting = BinaryHeap::from([Reverse((0_u64, first))]);
        while let Some(Reverse((bits, row))) = waiting.pop() {
            let variance = f64::from_bits(bits);
            if row == second {
                return Some(variance);
            }
            if settled.contains_key(&row) {
                continue;
            }
            settled.insert(row, variance);
            for &(next, more) in self.links.get(&row).map_or(&[][..], Vec::as_slice) {
                if !settled.contains_key(&next) {
                    waiting.push(Reverse(((variance + more).to_bits(), next)));
                }
            }
        }
        None
    }
}
