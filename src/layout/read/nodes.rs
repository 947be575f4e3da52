//! All nodes of a layout in one list: those written, those of the survey, those of series.

use std::collections::HashMap;

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
    pub(super) places: Vec<Place>,
    /// The reference when none is named.
    pub(super) default_reference: Option<usize>,
    /// Whether a faulty part may have hidden nodes, so that a name that is not found is
    /// not reported.
    pub(super) hides_nodes: bool,
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

/// What a node comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Origin {
    Node,
    Survey,
    Series,
}

impl Place {
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

impl Gathered {
    /// Adds a node as written.
    pub(super) fn add(
        &mut self,
        written: WrittenNode,
        origin: Origin,
        clocks: &Clocks<'_>,
        faults: &mut Collector,
    ) {
        let clock = clocks.index(&written.values, faults);
        let place = Place {
            spot: written.name.spot().unwrap_or(written.spot),
            position: written.position_m.spot(),
            has_no_position: written.position_m.is_absent(),
            origin,
        };
        let position_m = written.position_m.into_value().unwrap_or(0.0);
        if let Some(name) = written.name.into_value() {
            self.push(node(name, position_m, &written.values, clock), place);
        } else {
            self.hides_nodes = true;
        }
    }

    /// Adds the nodes of a survey behind those listed, of which there are few as a rule.
    fn append(&mut self, mut new: Gathered) {
        new.nodes.splice(0..0, self.nodes.drain(..));
        new.places.splice(0..0, self.places.drain(..));
        (self.nodes, self.places) = (new.nodes, new.places);
    }

    /// A list with room for a number of nodes.
    pub(super) fn with_room_for(count: usize) -> Gathered {
        let (nodes, places) = (Vec::with_capacity(count), Vec::with_capacity(count));
        Gathered { nodes, places, ..Gathered::default() }
    }

    pub(super) fn push(&mut self, node: Node, place: Place) {
        self.nodes.push(node);
        self.places.push(place);
    }
}

/// Looks up clocks by name.
pub(super) struct Clocks<'w> {
    names: Vec<&'w str>,
    by_name: HashMap<&'w str, usize>,
    whole: bool,
}

impl<'w> Clocks<'w> {
    pub(super) fn new(written: &'w Written) -> Clocks<'w> {
        let names: Vec<&str> = written.clocks.iter().map(|clock| clock.name.as_str()).collect();
        let by_name = names.iter().enumerate().map(|(index, name)| (*name, index)).collect();
        Clocks { names, by_name, whole: written.clocks_are_whole && written.tables_are_known }
    }

    pub(super) fn index(&self, values: &NodeValues, faults: &mut Collector) -> Option<usize> {
        let (name, spot) = values.clock.stated()?;
        let index = self.by_name.get(name.as_str()).copied();
        if index.is_none() && self.whole {
            not_found("clock", name, spot, self.names.iter().copied(), faults);
        }
        index
    }
}

/// A node of its parts.
pub(super) fn node(
    name: String,
    position_m: f64,
    values: &NodeValues,
    clock: Option<usize>,
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
pub(super) fn gather(
    written: &mut Written,
    survey: Option<(u32, &str)>,
    faults: &mut Collector,
) -> Gathered {
    let mut listed = std::mem::take(&mut written.nodes);
    let listed_count = listed.len();
    let clocks = Clocks::new(written);
    let before_survey = faults.total();
    let new = survey.map(|(file, text)| survey::read(file, text, &mut listed, &clocks, faults));
    let new = new.unwrap_or_default();
    let survey_is_lost = written.survey.is_some() && survey.is_none();
    let mut gathered = Gathered {
        hides_nodes: survey_is_lost || faults.total() > before_survey || !written.tables_are_known,
        ..Gathered::default()
    };
    if let Some(spot) = too_many(written, listed_count, new.nodes.len()) {
        faults.fault(
            spot,
            format!("a line has at most {MOST_NODES} nodes"),
            "lower the count of a series, or divide the line",
        );
        gathered.hides_nodes = true;
        return gathered;
    }
    for node in listed {
        gathered.add(node, Origin::Node, &clocks, faults);
    }
    gathered.append(new);
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
            "add a [[node]], a [[series]] or a [survey]",
        );
    }
    gathered
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
