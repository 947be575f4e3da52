//! The rows of a line: nodes fore to aft, found by name.

use super::index::NameIndex;
use super::nodes::{Gathered, Place};
use super::{Named, named};
use crate::cores;
use crate::layout::Node;
use crate::layout::fault::{Collector, Spot};
use crate::layout::nearest::nearest;
use crate::layout::quantity::short;
use crate::layout::written::Written;

/// Lines up to this many nodes are searched for the name that was meant.
const SEARCHED_FOR_NAMES: usize = 20_000;

/// After this many faults no name is searched for any more.
const FAULTS_SEARCHED_FOR: usize = 200;

/// The nodes of a line, fore to aft, with an index of their names.
pub(super) struct Rows {
    pub(super) nodes: Vec<Node>,
    pub(super) reference: usize,
    by_name: NameIndex,
    /// Whether a name that is not found may be one of a faulty node; it is then not
    /// reported.
    hides_nodes: bool,
}

impl Rows {
    /// Puts the nodes in order; `None` when there is no line without a reference.
    pub(super) fn arrange(
        gathered: Gathered,
        written: &Written,
        faults: &mut Collector,
    ) -> Option<Rows> {
        let Gathered { mut nodes, places, default_reference, hides_nodes } = gathered;
        let (by_name, mut twice) =
            NameIndex::of(nodes.len(), |number| nodes[number as usize].name.as_str());
        twice.sort_unstable();
        for (later, first) in twice {
            if let (Some(place), Some(other)) = (places.of(later), places.of(first)) {
                let rule =
                    format!("names are unique; `{}` names two nodes", nodes[later as usize].name);
                faults.fault(place.spot, rule, place.remedy_for_same_name(other));
            }
        }
        let mut rows = Rows { nodes: Vec::new(), reference: 0, by_name, hides_nodes };
        let reference = match named(&written.reference) {
            Some(name) => rows.find(name, &nodes, faults),
            None if written.reference.is_absent() => default_reference,
            None => None,
        };
        // Only a known reference tells which node may go without a position.
        if let Some(reference) = reference {
            for (range, place) in places.runs() {
                if place.has_no_position {
                    let others = range.clone().filter(|index| *index as usize != reference);
                    others
                        .for_each(|index| tell_no_position(&nodes[index as usize], place, faults));
                }
                if range.contains(&(reference as u32)) {
                    judge_reference(&nodes[reference], place, faults);
                }
            }
        }
        let reference = reference?;
        rows.reference = reference;
        if let Some(order) = order(&nodes) {
            let mut row_of = vec![0_u32; nodes.len()];
            for (row, index) in (0_u32..).zip(&order) {
                row_of[*index as usize] = row;
            }
            rows.reference = row_of[reference] as usize;
            rows.by_name.renumber(|index| row_of[index as usize]);
            permute(&mut nodes, row_of);
        }
        rows.nodes = nodes;
        Some(rows)
    }

    /// The row of a name; a name that is not there is a fault.
    pub(super) fn row(&self, name: Named<'_>, faults: &mut Collector) -> Option<usize> {
        self.find(name, &self.nodes, faults)
    }

    fn find(
        &self,
        (name, spot): Named<'_>,
        nodes: &[Node],
        faults: &mut Collector,
    ) -> Option<usize> {
        if let Some(row) = self.by_name.find(name, |row| nodes[row as usize].name.as_str()) {
            return Some(row as usize);
        }
        if !self.hides_nodes {
            let searched = if nodes.len() <= SEARCHED_FOR_NAMES { nodes } else { &[] };
            let names = searched.iter().map(|node| node.name.as_str());
            not_found("node", name, spot, names, faults);
        }
        None
    }

    /// The rows of a pair.
    pub(super) fn pair(
        &self,
        pair: &[(String, Spot); 2],
        faults: &mut Collector,
    ) -> Option<[usize; 2]> {
        let [first, second] = pair;
        let first = self.row((&first.0, first.1), faults);
        let second = self.row((&second.0, second.1), faults);
        Some([first?, second?])
    }
}

/// Every node but the reference states its position.
fn tell_no_position(node: &Node, place: &Place, faults: &mut Collector) {
    let rule = format!("`{}` states its position", node.name);
    faults.fault(place.spot, rule, place.remedy_for_no_position());
}

/// The reference stands at 0.
fn judge_reference(node: &Node, place: &Place, faults: &mut Collector) {
    if let Some(spot) = place.position
        && node.position_m != 0.0
    {
        let rule = format!(
            "the reference stands at position 0; `{}` is given {} m",
            node.name, node.position_m
        );
        let remedy = format!("count all positions from `{}`, or name another reference", node.name);
        faults.fault(spot, rule, remedy);
    }
}

/// The rows fore to aft as indices, ties in the order given; `None` when they stand in
/// that order already.
fn order(nodes: &[Node]) -> Option<Vec<u32>> {
    let neighbours = nodes.len().saturating_sub(1);
    if cores::all(neighbours, cores::MANY, |row| nodes[row].position_m >= nodes[row + 1].position_m)
    {
        return None;
    }
    let mut order: Vec<u32> = (0..).take(nodes.len()).collect();
    order.sort_by(|a, b| nodes[*b as usize].position_m.total_cmp(&nodes[*a as usize].position_m));
    Some(order)
}

/// Moves every node to its row.
fn permute(nodes: &mut [Node], mut row_of: Vec<u32>) {
    for place in 0..nodes.len() {
        // Each swap brings one node to where it belongs.
        while row_of[place] as usize != place {
            let row = row_of[place] as usize;
            nodes.swap(place, row);
            row_of.swap(place, row);
        }
    }
}

/// Notes that a name is not there, with the one that was meant.
pub(super) fn not_found<'n>(
    what: &str,
    name: &str,
    spot: Spot,
    all: impl Iterator<Item = &'n str>,
    faults: &mut Collector,
) {
    let searched = faults.total() < FAULTS_SEARCHED_FOR;
    let all: Vec<&str> = if searched { all.collect() } else { Vec::new() };
    let remedy = match nearest(name, all.iter().copied()) {
        Some(meant) => format!("write `{meant}`"),
        None if all.is_empty() || all.len() > 8 => format!("write the name of a {what}"),
        None => format!("write one of {}", all.join(", ")),
    };
    faults.fault(spot, format!("no {what} is called `{}`", short(name)), remedy);
}
