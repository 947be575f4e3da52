//! The line at one moment.

use crate::model::array_time::ArrayTime;
use crate::model::dd::Dd;
use crate::model::rates::Instant;

use super::Run;

/// The line at one moment: what every node needs, and the few nodes that have been
/// changed. Made in a time that does not depend on the number of nodes.
#[derive(Clone, Debug)]
pub struct State<'a> {
    run: &'a Run,
    instant: Instant,
    /// Nodes that have been moved or released up to the moment, by row.
    changed: Vec<(usize, NodeState)>,
}

/// A node at a moment.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum NodeState {
    /// It is part of the line.
    Aboard(Aboard),
    /// It was let go.
    Released {
        /// When.
        since: ArrayTime,
        /// Where on the line it was then, m.
        position_m: f64,
    },
}

/// A node that is part of the line.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Aboard {
    /// Position, m from the reference node, + towards the fore end.
    pub position_m: f64,
    /// `N − 1`.
    pub rate_minus_one: Dd,
    /// `τ_h − τ`, s.
    pub clock_offset_s: Dd,
}

impl NodeState {
    /// What there is of a node that is part of the line; `None` for a released one.
    #[must_use]
    pub fn aboard(&self) -> Option<Aboard> {
        match self {
            NodeState::Aboard(aboard) => Some(*aboard),
            NodeState::Released { .. } => None,
        }
    }
}

impl<'a> State<'a> {
    pub(super) fn new(run: &'a Run, instant: Instant) -> State<'a> {
        let at = instant.moment.at;
        let mut changed = Vec::with_capacity(run.moved.len());
        for (row, moved) in &run.moved {
            let position_m = moved.place.position_m(at);
            let state = match moved.released {
                Some(since) if since <= at => NodeState::Released { since, position_m },
                _ => NodeState::Aboard(Aboard {
                    position_m,
                    rate_minus_one: instant.rate_minus_one(Dd::new(position_m)),
                    clock_offset_s: moved
                        .place
                        .clock_offset_s(&instant, |moment| run.instant_at(moment)),
                }),
            };
            changed.push((*row, state));
        }
        State { run, instant, changed }
    }

    /// The run it is a moment of.
    #[must_use]
    pub fn run(&self) -> &'a Run {
        self.run
    }

    /// The moment.
    #[must_use]
    pub fn at(&self) -> ArrayTime {
        self.instant.moment.at
    }

    /// What moves or holds the line.
    #[must_use]
    pub fn instant(&self) -> &Instant {
        &self.instant
    }

    /// Acceleration of the reference node, or the gravity it stands in, m/s².
    #[must_use]
    pub fn reference_acceleration_m_s2(&self) -> f64 {
        self.instant.moment.acceleration_m_s2.to_f64()
    }

    /// Rapidity; `None` for a standing line.
    #[must_use]
    pub fn rapidity(&self) -> Option<f64> {
        self.run.plan().map(|_| self.instant.moment.rapidity.to_f64())
    }

    /// Number of nodes, released ones included.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.run.layout.nodes.len()
    }

    /// Whether a node has been moved or released up to the moment, or will be later: its
    /// offset is then not that of a node that has always stood where it stands.
    #[must_use]
    pub fn is_changed(&self, row: usize) -> bool {
        self.changed.binary_search_by_key(&row, |(row, _)| *row).is_ok()
    }

    /// One node, by its row.
    #[must_use]
    pub fn node(&self, row: usize) -> NodeState {
        match self.changed.binary_search_by_key(&row, |(row, _)| *row) {
            Ok(index) => self.changed[index].1,
            Err(_) => self.unchanged(row),
        }
    }

    /// All nodes, in the order of their rows.
    pub fn nodes(&self) -> impl Iterator<Item = NodeState> + '_ {
        let mut changed = self.changed.iter().peekable();
        (0..self.rows()).map(move |row| match changed.next_if(|(next, _)| *next == row) {
            Some((_, state)) => *state,
            None => self.unchanged(row),
        })
    }

    fn unchanged(&self, row: usize) -> NodeState {
        let position_m = self.run.positions_m[row];
        NodeState::Aboard(Aboard {
            position_m,
            rate_minus_one: self.instant.rate_minus_one(Dd::new(position_m)),
            clock_offset_s: self.instant.clock_offset_s(Dd::new(position_m)),
        })
    }
}
