//! All nodes of a layout in one list: those written, those of the survey, those of series.

use std::ops::Range;

use compact_str::CompactString;

use super::index::ByName;
use super::rows::not_found;
use super::{MOST_NODES, series, survey};
use crate::layout::Node;
use crate::layout::fault::{Collector, Spot};
use crate::layout::written::{NodeValues, Written, WrittenNode};

/// The nodes in the order of the file: nodes, new ones of the survey, members of series.
#[derive(Default)]
pub(super) struct Gathered {
    pub(super) nodes: Vec<Node>,
    /// Where each was written.
    pub(super) places: Places,
    /// The reference when none is named.
    pub(super) default_reference: Option<usize>,
    /// Whether a faulty part may have hidden nodes, so that a name that is not found is
    /// not reported.
    pub(super) hides_nodes: bool,
}

/// What a node comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Origin {
    Node,
    Survey,
    Series,
}

/// Where a node was written.
#[derive(Clone, Copy, Debug)]
pub(super) struct Place {
    pub(super) spot: Spot,
    /// Where its position stands, when it has one.
    pub(super) position: Option<Spot>,
    /// Whether it was given none at all, not even a faulty one.
    pub(super) has_no_position: bool,
    pub(super) origin: Origin,
}

impl Place {
    pub(super) fn of(written: &WrittenNode, origin: Origin) -> Place {
        Place {
            spot: written.name.spot().unwrap_or(written.spot),
            position: written.position_m.spot(),
            has_no_position: written.position_m.is_absent(),
            origin,
        }
    }

    pub(super) fn remedy_for_no_position(&self) -> &'static str {
        match self.origin {
            Origin::Survey => "fill in its `position_m`, metres ahead of the reference",
            _ => "add its distance ahead of the reference, for example `position = \"120 m\"`",
        }
    }

    pub(super) fn remedy_for_same_name(&self, other: &Place) -> &'static str {
        match (self.origin, other.origin) {
            (Origin::Series, Origin::Survey) => {
                "a series places its members; take them out of the survey, or drop the series"
            }
            (Origin::Series, _) => "choose another prefix, or rename the other node",
            _ => "rename one of the two",
        }
    }
}

/// Where the nodes were written, by their number; many in a row may share one place.
#[derive(Default)]
pub(super) struct Places {
    /// The number of the first node of each run, and its place.
    runs: Vec<(u32, Place)>,
    count: u32,
}

impl Places {
    /// Adds the place of so many nodes; a line has fewer than 2³².
    pub(super) fn push(&mut self, place: Place, count: usize) {
        if count > 0 {
            self.runs.push((self.count, place));
            self.count = self.count.saturating_add(u32::try_from(count).unwrap_or(u32::MAX));
        }
    }

    /// Adds the places of the nodes behind these.
    fn append(&mut self, behind: Places) {
        let moved = behind.runs.into_iter().map(|(first, place)| (self.count + first, place));
        self.runs.extend(moved);
        self.count += behind.count;
    }

    /// The place of a node; `None` when there is no node of this number.
    pub(super) fn of(&self, number: u32) -> Option<&Place> {
        let run = self.runs.partition_point(|(first, _)| *first <= number).checked_sub(1)?;
        (number < self.count).then(|| &self.runs[run].1)
    }

    /// How many nodes there are.
    fn count(&self) -> usize {
        self.count as usize
    }

    /// The nodes that share a place, as ranges of their numbers.
    pub(super) fn runs(&self) -> impl Iterator<Item = (Range<u32>, &Place)> {
        let ends = self.runs.iter().skip(1).map(|(first, _)| *first).chain([self.count]);
        self.runs.iter().zip(ends).map(|((first, place), end)| (*first..end, place))
    }
}

/// Looks up clocks by name.
pub(super) struct Clocks<'w> {
    names: Vec<&'w str>,
    by_name: ByName,
    whole: bool,
}

impl<'w> Clocks<'w> {
    pub(super) fn new(written: &'w Written) -> Clocks<'w> {
        let names: Vec<&str> = written.clocks.iter().map(|clock| clock.name.as_str()).collect();
        let by_name = ByName::of(names.iter().map(|name| CompactString::from(*name)));
        Clocks { names, by_name, whole: written.clocks_are_whole && written.tables_are_known }
    }

    pub(super) fn index(&self, values: &NodeValues, faults: &mut Collector) -> Option<u32> {
        let (name, spot) = values.clock.stated()?;
        let index = self.by_name.find(name);
        if index.is_none() && self.whole {
            not_found("clock", name, spot, self.names.iter().copied(), faults);
        }
        u32::try_from(index?).ok()
    }
}

/// A node as written, with its clock found; `None` without a name.
pub(super) fn node_as_written(written: &WrittenNode, clock: Option<u32>) -> Option<Node> {
    let position_m = written.position_m.value().copied().unwrap_or(0.0);
    Some(node(written.name.value()?.clone(), position_m, &written.values, clock))
}

/// A node of its parts.
pub(super) fn node(
    name: CompactString,
    position_m: f64,
    values: &NodeValues,
    clock: Option<u32>,
) -> Node {
    Node {
        name,
        position_m,
        u_position_m: values.u_position_m,
        mass_kg: values.mass_kg,
        clock,
        rating_m_s2: values.rating_m_s2,
        bias: values.bias,
        u_bias: values.u_bias,
        reading_at_start_s: values.reading_at_start_s,
    }
}

/// Gathers every node.
///
/// `None` when the survey was read fast and has something that is better read with care.
pub(super) fn gather(
    written: &mut Written,
    survey: Option<survey::Table<'_>>,
    faults: &mut Collector,
) -> Option<Gathered> {
    let mut listed = std::mem::take(&mut written.nodes);
    let listed_count = listed.len();
    let clocks = Clocks::new(written);
    let survey_is_lost = written.survey.is_some() && survey.is_none();
    let mut hides_nodes = survey_is_lost || !written.tables_are_known;
    listed.retain(|node| {
        let is_named = node.name.value().is_some();
        if !is_named {
            hides_nodes = true;
            clocks.index(&node.values, faults);
        }
        is_named
    });
    // The survey may add to what a listed node states, so the nodes listed only keep their
    // places in front while it is read.
    let mut gathered =
        Gathered { nodes: vec![Node::default(); listed.len()], hides_nodes, ..Gathered::default() };
    let before_survey = faults.total();
    let surveyed = match survey {
        Some(table) => survey::read(table, &mut listed, &clocks, &mut gathered.nodes, faults)?,
        None => Places::default(),
    };
    gathered.hides_nodes |= faults.total() > before_survey;
    if let Some(spot) = too_many(written, listed_count, surveyed.count()) {
        faults.fault(
            spot,
            format!("a line has at most {MOST_NODES} nodes"),
            "lower the count of a series, or divide the line",
        );
        return Some(Gathered { hides_nodes: true, ..Gathered::default() });
    }
    for (kept, node) in gathered.nodes.iter_mut().zip(listed) {
        gathered.places.push(Place::of(&node, Origin::Node), 1);
        let clock = clocks.index(&node.values, faults);
        *kept = node_as_written(&node, clock).unwrap_or_default();
    }
    gathered.places.append(surveyed);
    let first_of_series = gathered.nodes.len();
    for series in &written.series {
        let clock = clocks.index(&series.values, faults);
        if series::expand(series, clock, written, &mut gathered, faults).is_none() {
            gathered.hides_nodes = true;
        }
    }
    // The first node, else the first member of a series, else the first row of a survey.
    let any = !gathered.nodes.is_empty();
    gathered.default_reference = if listed_count > 0 || first_of_series == gathered.nodes.len() {
        any.then_some(0)
    } else {
        Some(first_of_series)
    };
    if !any && !gathered.hides_nodes {
        faults.fault(
            Spot::new(0, 0..1),
            "a line has at least one node",
            match &written.survey {
                Some(_) => "add rows to the survey",
                None => "add a [[node]], a [[series]] or a [survey]",
            },
        );
    }
    Some(gathered)
}

/// The place to blame when the line has too many nodes.
fn too_many(written: &Written, listed: usize, new: usize) -> Option<Spot> {
    let mut sum = listed.saturating_add(new);
    if sum > MOST_NODES {
        let survey = written.survey.as_ref().and_then(|survey| survey.file.spot());
        return Some(survey.unwrap_or(Spot::new(0, 0..1)));
    }
    for series in &written.series {
        let (count, spot) = series.count.stated()?;
        sum += count;
        if sum > MOST_NODES {
            return Some(spot);
        }
    }
    None
}
