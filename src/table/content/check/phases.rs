//! The margins of each phase: the smallest rate and the smallest rating margin of the line.
//!
//! `N = 1 + αh/c²` is extreme at an end of the phase for a node at an end of the line, so
//! two products decide the first. The felt acceleration of a node grows with `|α|` on either
//! side of zero, so the ends of a phase decide the second as well; the node there is the one
//! with the least `rating · N = r + (α/c²) r h`, the lowest of as many straight lines over
//! `α` as there are rated nodes. Their lower envelope is made once.

use super::line::Line;
use crate::layout::{Course, Layout};
use crate::model::array_time::ArrayTime;
use crate::model::constants::C2_M2_S2;
use crate::model::dd::Dd;
use crate::model::plan::Phase;
use crate::model::rates::is_realisable;
use crate::table::content::{OVERFLOW, column};
use crate::table::{Cell, Column, Measure, Table};

const COLUMNS: [Column; 10] = [
    column("phase", "phase", Measure::Count),
    column("kind", "kind", Measure::Word),
    column("from_s", "from", Measure::Time),
    column("until_s", "until", Measure::Time),
    column("from_m_s2", "thrust from", Measure::Acceleration),
    column("to_m_s2", "thrust to", Measure::Acceleration),
    column("smallest_rate", "smallest N", Measure::Ratio),
    column("smallest_rate_node", "of node", Measure::Word),
    column("rating_margin", "rating margin", Measure::Ratio),
    column("rating_margin_node", "of node", Measure::Word),
];

/// The table of the margins of each phase.
pub(super) fn table<'a>(layout: &'a Layout, line: &Line<'a>) -> Table<'a> {
    let phases: &'a [Phase] = match &layout.course {
        Course::Thrust(plan) => plan.phases(),
        Course::Standing(_) => &[],
    };
    let envelope = Envelope::of(layout);
    let instant = line.instant(Dd::ZERO, ArrayTime::ZERO);
    Table {
        name: "phases",
        columns: COLUMNS.to_vec(),
        rows: phases.len(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let phase = &phases[row];
            let ends = [phase.acceleration(phase.start), phase.acceleration(phase.end)];
            let name = |row: usize| Cell::Text(layout.nodes[row].name.as_str().into());
            cells.push(Cell::Integer(i64::try_from(row + 1).unwrap_or(i64::MAX)));
            cells.push(Cell::Text(kind(phase).into()));
            cells.push(Cell::Time(phase.start));
            cells.push(Cell::Time(phase.end));
            cells.extend(ends.map(|end| Cell::finite(end.to_f64(), OVERFLOW)));
            let (rate, node) = smallest_rate(layout, ends);
            cells.push(Cell::finite(rate, OVERFLOW));
            cells.push(name(node));
            let felt = |end: Dd, row: usize| {
                let mut instant = instant;
                instant.moment.acceleration_m_s2 = end;
                let position_m = layout.nodes[row].position_m;
                is_realisable(end, position_m).then(|| {
                    let felt = instant.felt_acceleration_m_s2(Dd::new(position_m));
                    felt.abs().to_f64()
                })
            };
            match envelope.smallest_margin(layout, ends, felt) {
                Ok((margin, node)) => {
                    cells.push(Cell::finite(margin, OVERFLOW));
                    cells.push(name(node));
                }
                Err(why) => cells.extend([Cell::Absent(why.into()), Cell::Absent(why.into())]),
            }
        }),
    }
}

fn kind(phase: &Phase) -> &'static str {
    match (phase.is_hold(), phase.line.from_m_s2 == 0.0) {
        (true, true) => "coast",
        (true, false) => "hold",
        (false, _) => "ramp",
    }
}

/// The smallest `N` of a phase and the row of its node; the reference, which has one, where
/// no node runs slower.
fn smallest_rate(layout: &Layout, ends: [Dd; 2]) -> (f64, usize) {
    let mut found = (Dd::ZERO, layout.reference);
    for row in [0, layout.nodes.len() - 1] {
        for end in ends {
            let drive = end * layout.nodes[row].position_m;
            if drive < found.0 {
                found = (drive, row);
            }
        }
    }
    ((found.0 / C2_M2_S2 + 1.0).to_f64(), found.1)
}

/// The straight line `rating + x · slope` of a rated node over `x = α/c²`.
#[derive(Clone, Copy, Debug)]
struct Straight {
    rating: f64,
    slope: f64,
    row: usize,
}

impl Straight {
    fn at(&self, x: f64) -> f64 {
        self.rating + x * self.slope
    }
}

/// The rated nodes that are nearest to their rating under some thrust, from the strongest
/// thrust aft to the strongest thrust fore.
struct Envelope(Vec<Straight>);

impl Envelope {
    /// Lower envelope of the lines, by falling slope: a line that is nowhere the lowest is
    /// dropped.
    fn of(layout: &Layout) -> Envelope {
        let rated = layout.nodes.iter().enumerate().filter_map(|(row, node)| {
            let rating = node.rating_m_s2?;
            Some(Straight { rating, slope: rating * node.position_m, row })
        });
        let mut lines: Vec<Straight> = rated.collect();
        lines.sort_by(|a, b| {
            b.slope.total_cmp(&a.slope).then_with(|| a.rating.total_cmp(&b.rating))
        });
        let mut kept: Vec<Straight> = Vec::new();
        for line in lines {
            if kept.last().is_some_and(|last| last.slope == line.slope) {
                continue;
            }
            while let [.., before, last] = kept.as_slice()
                && crossing(before, &line) <= crossing(before, last)
            {
                kept.pop();
            }
            kept.push(line);
        }
        Envelope(kept)
    }

    /// The smallest `1 − felt/rating` at the ends of a phase, and its row.
    fn smallest_margin(
        &self,
        layout: &Layout,
        ends: [Dd; 2],
        felt: impl Fn(Dd, usize) -> Option<f64>,
    ) -> Result<(f64, usize), &'static str> {
        let mut found: Option<(f64, usize)> = None;
        for end in ends {
            let x = (end / C2_M2_S2).to_f64();
            // From where the next line is lower, this one is not the lowest any more.
            let Some(last) = self.0.len().checked_sub(1) else {
                return Err("no node has a rating");
            };
            let place = partition(last, |index| crossing(&self.0[index], &self.0[index + 1]) <= x);
            let row = self.0[place].row;
            let rating = layout.nodes[row].rating_m_s2.unwrap_or(f64::INFINITY);
            let felt = felt(end, row).filter(|_| self.0[place].at(x) > 0.0);
            let margin = 1.0 - felt.ok_or("a node reaches the horizon")? / rating;
            if found.is_none_or(|(smallest, _)| margin < smallest) {
                found = Some((margin, row));
            }
        }
        found.ok_or("no node has a rating")
    }
}

/// Where two lines of different slopes meet.
fn crossing(before: &Straight, after: &Straight) -> f64 {
    (after.rating - before.rating) / (before.slope - after.slope)
}

/// The first index up to a count for which a condition that holds first no longer does.
fn partition(count: usize, holds: impl Fn(usize) -> bool) -> usize {
    let (mut low, mut high) = (0, count);
    while low < high {
        let middle = low + (high - low) / 2;
        if holds(middle) { low = middle + 1 } else { high = middle }
    }
    low
}
