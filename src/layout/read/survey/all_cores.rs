//! A long survey, read on all cores.

use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Mutex, MutexGuard, PoisonError};

use rayon::prelude::*;

use super::{Survey, join, read_row, read_row_into};
use crate::cores;
use crate::layout::Node;
use crate::layout::fault::{Collector, Spot};
use crate::layout::read::MOST_NODES;
use crate::layout::read::csv::Rows;
use crate::layout::read::nodes::{Origin, Place, Places, node_as_written};
use crate::layout::written::WrittenNode;

/// Lines beyond this number are read one by one, whatever stands in them, so that their
/// beginnings take little memory.
const MOST_LINES: usize = MOST_NODES + 1000;

/// Rows a core takes at a time, at the least.
const ROWS_AT_A_TIME: usize = 256;

/// What a line of the survey comes to.
enum Found {
    /// A new node.
    New(Node),
    /// A node the layout lists.
    Listed,
    /// A blank line or a remark.
    Nothing,
    /// Something only the reading row by row can judge.
    Odd,
}

impl Survey<'_> {
    /// Reads the rows that are left; `None`, with the nodes of no use, where any of them is
    /// faulty, quoted or without a position.
    pub(super) fn read_on_all_cores(
        &self,
        rows: &Rows<'_>,
        listed: &mut Vec<WrittenNode>,
        nodes: &mut Vec<Node>,
    ) -> Option<Places> {
        let starts = line_starts(rows.text(), rows.at())?;
        let before = nodes.len();
        let is_odd = AtomicBool::new(false);
        let has_gaps = AtomicBool::new(false);
        let of_listed = Mutex::new(Vec::new());
        let read = starts.par_windows(2).with_min_len(ROWS_AT_A_TIME).map_init(
            || (rows.clone(), WrittenNode::default(), Collector::default()),
            |(rows, written, faults), line| {
                rows.turn_to(line[0] as usize..line[1] as usize - 1);
                match self.read_line(rows, written, faults) {
                    Found::New(node) => return node,
                    Found::Listed => lock(&of_listed).push(line[0]),
                    Found::Nothing => {}
                    Found::Odd => is_odd.store(true, Ordering::Relaxed),
                }
                // A line that is no new node leaves one without a name in its place.
                has_gaps.store(true, Ordering::Relaxed);
                Node::default()
            },
        );
        cores::pool()?.install(|| nodes.par_extend(read));
        if is_odd.into_inner() {
            return None;
        }
        if has_gaps.into_inner() {
            nodes.extract_if(before.., |node| node.name.is_empty()).for_each(drop);
        }
        let count = nodes.len() - before;
        let mut of_listed = of_listed.into_inner().unwrap_or_else(PoisonError::into_inner);
        of_listed.sort_unstable();
        *listed = self.joined(rows.clone(), &of_listed, listed)?;
        (count <= MOST_NODES).then(|| anywhere_in_the_survey(rows.file, count))
    }

    /// Reads the next row, of one line, by way of what there is room for.
    fn read_line(
        &self,
        rows: &mut Rows<'_>,
        written: &mut WrittenNode,
        faults: &mut Collector,
    ) -> Found {
        let Some(row) = rows.next(faults) else {
            return if faults.is_empty() { Found::Nothing } else { Found::Odd };
        };
        if !row.is_as_wide_as(self.columns.len(), faults) {
            return Found::Odd;
        }
        *written = WrittenNode::default();
        if !read_row_into(written, row, &self.columns, faults) {
            return Found::Odd;
        }
        if self.listed(written).is_some() {
            return Found::Listed;
        }
        let has_position = written.position_m.value().is_some();
        let clock = self.clocks.index(&written.values, faults);
        match node_as_written(written, clock) {
            Some(node) if has_position && faults.is_empty() => Found::New(node),
            _ => Found::Odd,
        }
    }

    /// The listed nodes with what the lines that begin at these bytes add to them.
    fn joined(
        &self,
        mut rows: Rows<'_>,
        starts: &[u32],
        listed: &[WrittenNode],
    ) -> Option<Vec<WrittenNode>> {
        let mut joined = listed.to_vec();
        let mut surveyed = vec![false; listed.len()];
        let mut faults = Collector::default();
        for start in starts {
            rows.turn_to(*start as usize..rows.text().len());
            let row = rows.next(&mut faults)?;
            let node = read_row(row, &self.columns, &mut faults)?;
            let index = self.listed(&node)?;
            if std::mem::replace(&mut surveyed[index], true) {
                return None;
            }
            join(&mut joined[index], node, row, &self.columns, &mut faults);
        }
        faults.is_empty().then_some(joined)
    }
}

/// Where the lines from a byte on begin, and where one more would; `None` when there are too
/// many, or quotes in which a line may end without ending its row.
fn line_starts(text: &str, from: usize) -> Option<Vec<u32>> {
    let rest = text.as_bytes().get(from..)?;
    if memchr::memchr(b'"', rest).is_some() {
        return None;
    }
    let last_end = (!rest.ends_with(b"\n")).then_some(rest.len());
    let ends = memchr::memchr_iter(b'\n', rest).chain(last_end).take(MOST_LINES + 1);
    let starts = [from].into_iter().chain(ends.map(|end| from + end + 1));
    let starts: Option<Vec<u32>> = starts.map(|start| u32::try_from(start).ok()).collect();
    starts.filter(|starts| starts.len() <= MOST_LINES)
}

/// A place for all rows of the survey: where each stands is not kept.
fn anywhere_in_the_survey(file: u32, count: usize) -> Places {
    let spot = Spot::new(file, 0..0);
    let place =
        Place { spot, position: Some(spot), has_no_position: false, origin: Origin::Survey };
    let mut places = Places::default();
    places.push(place, count);
    places
}

/// What a panic of another thread left is as good as what it found.
fn lock<T>(mutex: &Mutex<T>) -> MutexGuard<'_, T> {
    mutex.lock().unwrap_or_else(PoisonError::into_inner)
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::super::{Reading, Table, read};
    use super::*;
    use crate::layout::read::nodes::Clocks;
    use crate::layout::written::{Field, Written};

    fn listed(names: &[&str]) -> Vec<WrittenNode> {
        let name = |name: &&str| Field::Stated((*name).into(), Spot::default());
        names
            .iter()
            .map(|listed| WrittenNode { name: name(listed), ..Default::default() })
            .collect()
    }

    /// What a reading comes to, and how many faults it found.
    fn nodes(text: &str, reading: Reading) -> Option<(Vec<String>, usize)> {
        let written = Written::default();
        let mut faults = Collector::default();
        let mut listed = listed(&["hub", "mast"]);
        let mut nodes = vec![Node::default()];
        let table = Table { file: 1, text, reading };
        let clocks = Clocks::new(&written);
        let places = read(table, &mut listed, &clocks, &mut nodes, &mut faults)?;
        let told = nodes.iter().map(|node| format!("{node:?}"));
        // The places of the rows differ between the two, those of the listed nodes do not.
        let told = told.chain(listed.iter().map(|node| format!("{node:?}"))).collect();
        assert!(places.runs().map(|(range, _)| range.len()).sum::<usize>() == nodes.len() - 1);
        Some((told, faults.total()))
    }

    fn line() -> impl Strategy<Value = &'static str> {
        prop_oneof![
            8 => prop_oneof![
                Just("a,1,0.5,2 kg"), Just("b2,-7.25e3,0,"), Just(" c ,\t0.1,,1e3"),
                Just("d,-0,1e-3,0.25 t\r"), Just("long-name-of-a-far-away-sensor-1,4,,")
            ],
            2 => prop_oneof![
                Just(""), Just("# a remark"), Just("  \r"), Just("hub,,0.25,3"),
                Just("mast,12,,5 kg")
            ],
            1 => prop_oneof![
                Just("\"e\",1,2,3"), Just("f,1"), Just("g,1 m,0,1"), Just("h,,,"), Just("i=,1,,"),
                Just("k,1,-1,1"), Just("l,1,2,3 s"), Just("\"m\nn\",1,2,3"), Just("灯\"台,1,,")
            ],
        ]
    }

    proptest! {
        #[test]
        fn reads_what_the_reading_by_row_reads(
            lines in prop::collection::vec(line(), 0..12),
            remark in any::<bool>(),
            end in any::<bool>(),
        ) {
            let mut text = String::from(if remark { "# built\n" } else { "\u{feff}" });
            text += "name,position_m,u_position_m,mass\n";
            text += &lines.join("\n");
            text += if end { "\n" } else { "" };
            let (by_row, faults) = nodes(&text, Reading::RowByRow).expect("always read");
            match nodes(&text, Reading::OnAllCores) {
                Some((nodes, told)) => {
                    prop_assert_eq!(nodes, by_row);
                    prop_assert_eq!((told, faults), (0, 0));
                }
                None => {
                    let is_plain = !text.contains('"') && !lines.contains(&"h,,,");
                    let may_be_read = faults == 0 && is_plain && cores::pool().is_some();
                    prop_assert!(!may_be_read, "{text:?} should be read");
                }
            }
        }
    }
}
