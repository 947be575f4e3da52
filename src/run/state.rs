//! The line at one moment.

use crate::model::array_time::ArrayTime;
use crate::model::dd::Dd;
use crate::model::rates::Instant;

use super::Run;
use super::loaded::{Displaced, Loaded};

/// The line at one moment: what every node needs, and the few nodes that have been
/// changed. Made in a time that does not depend on the number of nodes.
#[derive(Clone, Debug)]
pub struct State<'a> {
    pub(super) run: &'a Run,
    instant: Instant,
    /// What displaces the nodes; `None` on a rigid line.
    pub(super) loaded: Option<Loaded>,
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
    /// Position, m from the reference node, + towards the fore end: where load and
    /// temperature put it.
    pub position_m: Dd,
    /// `N − 1`.
    pub rate_minus_one: Dd,
    /// `τ_h − τ`, s; on a line that stretches it leaves out the motion along the line.
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
        let loaded = Loaded::at(run, instant);
        let mut changed = Vec::with_capacity(run.moved.len());
        for (row, moved) in &run.moved {
            let position_m = moved.place.position_m(at);
            let state = match moved.released {
                Some(since) if since <= at => {
                    let position_m = (Dd::new(position_m) + moved.released_by_m).to_f64();
                    NodeState::Released { since, position_m }
                }
                _ => {
                    let Displaced { by_m, settled_m, extra_s } = loaded
                        .as_ref()
                        .map_or(Displaced::NOT, |loaded| loaded.displaced(run, *row));
                    let position_m = Dd::new(position_m) + by_m;
                    let rate_minus_one = instant.rate_minus_one(position_m);
                    let clock_offset_s = match &loaded {
                        // Before its first move a node has the bits of one that never moves.
                        Some(loaded) if !moved.place.has_moved(at) => loaded.offset_s(*row),
                        _ => {
                            let instant_at = |moment| run.instant_at(moment);
                            moved.place.clock_offset_s(&instant, settled_m, instant_at) + extra_s
                        }
                    };
                    NodeState::Aboard(Aboard { position_m, rate_minus_one, clock_offset_s })
                }
            };
            changed.push((*row, state));
        }
        State { run, instant, loaded, changed }
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

    /// `τ_to − τ_from` of two nodes of the line, s.
    ///
    /// Of nodes that have stood still, from the difference of their positions: two clocks
    /// side by side far from the reference lose no digit to the distance.
    #[must_use]
    pub fn offset_difference_s(&self, from: usize, to: usize) -> Option<Dd> {
        let (first, second) = (self.node(from).aboard()?, self.node(to).aboard()?);
        let has_stood = self.loaded.is_none() || self.run.plan().is_none();
        Some(if has_stood && !self.is_changed(from) && !self.is_changed(to) {
            self.instant.clock_offset_difference_s(first.position_m, second.position_m)
        } else {
            second.clock_offset_s - first.clock_offset_s
        })
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
        let (position_m, clock_offset_s) = match &self.loaded {
            None => {
                let position_m = Dd::new(self.run.positions_m[row]);
                (position_m, self.instant.clock_offset_s(position_m))
            }
            Some(loaded) => (loaded.position_m(row), loaded.offset_s(row)),
        };
        let rate_minus_one = self.instant.rate_minus_one(position_m);
        NodeState::Aboard(Aboard { position_m, rate_minus_one, clock_offset_s })
    }
}
