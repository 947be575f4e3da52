//! Why a run refuses a change or a moment.

use std::fmt;

use crate::layout::FARTHEST_POSITION_M;
use crate::model::array_time::ArrayTime;
use crate::model::plan::{LARGEST_ACCELERATION_M_S2, LARGEST_RAPIDITY};

use super::thrust::MOST_PHASES_FLOWN;

/// Why a run refuses a change or a moment. The run stays as it was.
#[derive(Clone, Debug, PartialEq)]
pub enum RunFault {
    /// An event lies before one that is already part of the run.
    OutOfOrder {
        /// Its moment.
        at: ArrayTime,
        /// The moment of the last event.
        last: ArrayTime,
    },
    /// A moment lies outside the domain of array time.
    OutsideTime {
        /// The moment.
        at: ArrayTime,
    },
    /// A moment lies after the last one the thrust in force can reach.
    PastRapidity {
        /// The moment.
        at: ArrayTime,
        /// The last moment of the run.
        last: ArrayTime,
        /// The acceleration held there, m/s².
        acceleration_m_s2: f64,
    },
    /// A change of thrust before array time zero.
    BeforeThrust {
        /// Its moment.
        at: ArrayTime,
    },
    /// A change of thrust on a line that stands in gravity.
    Standing,
    /// An acceleration outside the domain.
    TooStrong {
        /// The acceleration, m/s².
        acceleration_m_s2: f64,
    },
    /// A ramp without length.
    NoLength,
    /// A ramp that ends outside the domain of array time.
    TooLong {
        /// The first moment of the ramp.
        at: ArrayTime,
    },
    /// A change of thrust that takes the rapidity out of its domain at once or within a
    /// stated ramp or plan.
    TooFast {
        /// The rapidity it would reach.
        rapidity: f64,
    },
    /// Changes of thrust that make the run go through its plan too often.
    TooManyChanges,
    /// A node the layout does not have.
    UnknownNode {
        /// The name given.
        name: String,
    },
    /// The reference node cannot be moved or released.
    Reference {
        /// Its name.
        name: String,
    },
    /// A node that has left the line.
    Released {
        /// Its name.
        name: String,
        /// When it was released.
        since: ArrayTime,
    },
    /// A position outside the domain.
    OutsideLine {
        /// The position, m.
        position_m: f64,
    },
    /// A node would reach the horizon.
    Horizon(Box<HorizonFault>),
    /// A node would reach the horizon where load puts it.
    HorizonUnderLoad {
        /// Name of the node.
        name: String,
        /// The acceleration of the reference node at which it would, m/s².
        acceleration_m_s2: f64,
    },
    /// A span would be pushed shorter than nothing.
    Crushed {
        /// Names of its ends.
        between: [String; 2],
        /// The acceleration of the reference node at which it would, m/s².
        acceleration_m_s2: f64,
    },
    /// No unloaded lengths give the positions as flown.
    NotInvertible,
    /// The properties of a part make no line.
    NoStructure {
        /// Which part.
        what: String,
    },
    /// A node of a standing line would be where the gradient has turned gravity round.
    GravityTurned {
        /// Name of the node.
        name: String,
        /// The farthest position the gradient allows, either way, m.
        farthest_m: f64,
    },
    /// A link the layout does not have.
    UnknownLink {
        /// The names given.
        between: [String; 2],
    },
    /// A link that is already in the state asked for.
    LinkUnchanged {
        /// Names of its ends.
        between: [String; 2],
        /// Whether it has failed.
        failed: bool,
    },
    /// A note longer than a recording carries.
    LongNote {
        /// The most bytes it may have.
        most: usize,
    },
    /// A note with marks that could act on a terminal.
    UnsafeNote,
}

/// The particulars of a node that would reach the horizon.
#[derive(Clone, Debug, PartialEq)]
pub struct HorizonFault {
    /// Name of the node.
    pub name: String,
    /// The position it would have, m.
    pub position_m: f64,
    /// Index of the phase, from 0, in which its rate would reach zero; `None` when it stands.
    pub phase: Option<usize>,
    /// When its rate would reach zero, to the nearest attosecond.
    pub at: ArrayTime,
    /// The largest acceleration of the reference node, in that direction, that the node
    /// could stand, m/s²; itself allowed.
    pub largest_acceleration_m_s2: f64,
    /// The position nearest to its own that the thrust in force allows, m; itself allowed.
    pub nearest_position_m: f64,
    /// Whether the node was being moved; otherwise the thrust was being changed.
    pub moved: bool,
}

impl RunFault {
    /// What is wrong, in one clause.
    #[must_use]
    pub fn what(&self) -> String {
        match self {
            RunFault::OutOfOrder { at, last } => {
                format!("an event at {at} s would come before the one at {last} s")
            }
            RunFault::OutsideTime { at } => format!("{at} s is outside array time"),
            RunFault::PastRapidity { at, last, acceleration_m_s2 } => format!(
                "{at} s cannot be reached: holding {} m/s^2 takes the rapidity to its limit \
                 soon after {last} s",
                number(*acceleration_m_s2)
            ),
            RunFault::BeforeThrust { at } => format!("the thrust cannot change at {at} s"),
            RunFault::Standing => "a standing line has no thrust to change".to_owned(),
            RunFault::TooStrong { acceleration_m_s2 } => {
                format!("an acceleration of {} m/s^2 is too large", number(*acceleration_m_s2))
            }
            RunFault::NoLength => "the ramp has no length".to_owned(),
            RunFault::TooManyChanges => "the thrust is changed too often".to_owned(),
            RunFault::TooLong { at } => {
                format!("a ramp from {at} s would end outside array time")
            }
            RunFault::TooFast { rapidity } => {
                format!("the rapidity would reach {rapidity:.1}")
            }
            RunFault::UnknownNode { name } => format!("there is no node `{name}`"),
            RunFault::Reference { name } => {
                format!("`{name}` is the reference node and stays where it is")
            }
            RunFault::Released { name, since } => format!("`{name}` was released at {since} s"),
            RunFault::OutsideLine { position_m } => {
                format!("a position of {} m is outside the line", number(*position_m))
            }
            RunFault::Horizon(fault) => format!(
                "`{}` at {} m would reach the horizon{} at {} s",
                fault.name,
                number(fault.position_m),
                fault.phase.map_or(String::new(), |phase| format!(" in phase {}", phase + 1)),
                nine_digits(fault.at)
            ),
            RunFault::HorizonUnderLoad { name, acceleration_m_s2 } => format!(
                "`{name}` would reach the horizon where load puts it, at {} m/s^2",
                number(*acceleration_m_s2)
            ),
            RunFault::Crushed { between: [first, second], acceleration_m_s2 } => format!(
                "the span from `{first}` to `{second}` would be pushed shorter than nothing at \
                 {} m/s^2",
                number(*acceleration_m_s2)
            ),
            RunFault::NotInvertible => {
                "no lengths without load give the positions as flown".to_owned()
            }
            RunFault::NoStructure { what } => what.clone(),
            RunFault::GravityTurned { name, .. } => {
                format!("the gradient would turn gravity round at `{name}`")
            }
            RunFault::UnknownLink { between: [first, second] } => {
                format!("there is no link between `{first}` and `{second}`")
            }
            RunFault::LinkUnchanged { between: [first, second], failed } => format!(
                "the link between `{first}` and `{second}` {}",
                if *failed { "has already failed" } else { "is not failed" }
            ),
            RunFault::LongNote { .. } => "the note is too long".to_owned(),
            RunFault::UnsafeNote => "the note has marks that cannot be seen".to_owned(),
        }
    }

    /// The rule that holds.
    #[must_use]
    pub fn rule(&self) -> String {
        match self {
            RunFault::OutOfOrder { .. } => "events are in order of array time".to_owned(),
            RunFault::OutsideTime { .. } | RunFault::TooLong { .. } => {
                "array time goes from -1e11 s to 1e11 s".to_owned()
            }
            RunFault::PastRapidity { .. } | RunFault::TooFast { .. } => {
                format!("the rapidity stays within {LARGEST_RAPIDITY} either way")
            }
            RunFault::BeforeThrust { .. } => "there is no thrust before array time zero".to_owned(),
            RunFault::Standing => "a standing line is held up by constant gravity".to_owned(),
            RunFault::TooStrong { .. } => format!(
                "the reference node's acceleration is at most {} m/s^2 either way",
                number(LARGEST_ACCELERATION_M_S2)
            ),
            RunFault::NoLength => "a ramp takes time".to_owned(),
            RunFault::TooManyChanges => format!(
                "all changes of a run go through at most {} million phases of its plan",
                MOST_PHASES_FLOWN / 1_000_000
            ),
            RunFault::UnknownNode { .. } => "a node goes by its name in the layout".to_owned(),
            RunFault::Reference { .. } => {
                "positions and array time are counted from the reference node".to_owned()
            }
            RunFault::Released { .. } => "a released node is no longer part of the line".to_owned(),
            RunFault::OutsideLine { .. } => format!(
                "a position is at most {} m from the reference node",
                number(FARTHEST_POSITION_M)
            ),
            RunFault::Horizon(_) | RunFault::HorizonUnderLoad { .. } => {
                "the rate of every node is above zero at every moment".to_owned()
            }
            RunFault::Crushed { .. } | RunFault::NotInvertible => {
                "a span keeps a length above zero under every load of the plan".to_owned()
            }
            RunFault::NoStructure { .. } => {
                "masses, lengths and strains are those of a line that can be built".to_owned()
            }
            RunFault::GravityTurned { .. } => {
                "the gradient times the height is at most the gravity".to_owned()
            }
            RunFault::UnknownLink { .. } => {
                "links are those of the layout; when it names none, every pair of neighbours"
                    .to_owned()
            }
            RunFault::LinkUnchanged { failed: true, .. } => "a link fails once".to_owned(),
            RunFault::LinkUnchanged { failed: false, .. } => {
                "only a failed link can be mended".to_owned()
            }
            RunFault::LongNote { most } => format!("a note has at most {most} bytes"),
            RunFault::UnsafeNote => {
                "a note is one line without control, invisible or bidirectional marks".to_owned()
            }
        }
    }

    /// What would be right instead.
    #[must_use]
    pub fn remedy(&self) -> String {
        match self {
            RunFault::OutOfOrder { .. } => "undo the later events first".to_owned(),
            RunFault::OutsideTime { .. } => "a moment inside".to_owned(),
            RunFault::PastRapidity { last, .. } => {
                format!("another thrust before {last} s, or a moment up to then")
            }
            RunFault::BeforeThrust { .. } => "a moment from 0 s on".to_owned(),
            RunFault::Standing => "a layout with phases instead of [standing]".to_owned(),
            RunFault::TooStrong { .. } => "a smaller acceleration".to_owned(),
            RunFault::NoLength => "a length above zero, or a hold".to_owned(),
            RunFault::TooManyChanges => "fewer changes, or a history of this course".to_owned(),
            RunFault::TooLong { .. } => "a shorter ramp".to_owned(),
            RunFault::TooFast { .. } => "less thrust that way, or for a shorter time".to_owned(),
            RunFault::UnknownNode { .. } => "the name of a node of this layout".to_owned(),
            RunFault::Reference { .. } => {
                "move the others, or a layout with another reference".to_owned()
            }
            RunFault::Released { .. } => "undo its release first, or another node".to_owned(),
            RunFault::OutsideLine { .. } => "a position inside".to_owned(),
            RunFault::Horizon(fault) => {
                let position = number(fault.nearest_position_m);
                let acceleration = number(fault.largest_acceleration_m_s2);
                if fault.moved {
                    format!("a position of {position} m, or nearer to the reference node")
                } else {
                    format!(
                        "an acceleration of {acceleration} m/s^2, or a smaller one, or the node \
                         at {position} m"
                    )
                }
            }
            RunFault::HorizonUnderLoad { .. } => {
                "less thrust, a stiffer line, or the node nearer to the reference node".to_owned()
            }
            RunFault::Crushed { .. } => "a larger axial stiffness, or less thrust".to_owned(),
            RunFault::NotInvertible => {
                "a larger axial stiffness, or positions `unloaded`".to_owned()
            }
            RunFault::NoStructure { .. } => "another value for that part".to_owned(),
            RunFault::GravityTurned { farthest_m, .. } => {
                format!("a height of {} m or nearer to the reference node", number(*farthest_m))
            }
            RunFault::UnknownLink { .. } => "the two ends of a link of this layout".to_owned(),
            RunFault::LinkUnchanged { failed: true, .. } => "mend it first".to_owned(),
            RunFault::LinkUnchanged { failed: false, .. } => "nothing to do".to_owned(),
            RunFault::LongNote { .. } => "a shorter note".to_owned(),
            RunFault::UnsafeNote => "type it again with visible characters only".to_owned(),
        }
    }
}

impl fmt::Display for RunFault {
    /// What is wrong; the rule and the remedy are for the caller to place.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.what())
    }
}

impl std::error::Error for RunFault {}

/// A computed moment in seconds, to nine digits: its last attosecond tells nobody more.
fn nine_digits(at: ArrayTime) -> String {
    let rounded = format!("{:.8e}", at.to_f64());
    rounded.parse().map_or(rounded, number)
}

/// The shortest decimal that reads back to the same double, so that a figure given as a
/// remedy is accepted when it is typed in.
fn number(value: f64) -> String {
    let mut digits = zmij::Buffer::new();
    let text = digits.format(value);
    text.strip_suffix(".0").unwrap_or(text).to_owned()
}
