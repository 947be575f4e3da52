//! What is changed on the way: one closed list of events.

use crate::model::array_time::ArrayTime;

/// A change of the line, or a remark, at a moment of array time.
#[derive(Clone, Debug, PartialEq)]
pub struct Event {
    /// The moment it acts from.
    pub at: ArrayTime,
    /// What happens.
    pub kind: EventKind,
}

/// The kinds of event. Nodes go by name, as in a recording: an event means the same in
/// every run of its layout.
#[derive(Clone, Debug, PartialEq)]
pub enum EventKind {
    /// The reference node holds an acceleration for good.
    Hold {
        /// Its acceleration, m/s², + towards the fore end.
        acceleration_m_s2: f64,
    },
    /// The reference node goes from the acceleration then in force to another one, in a
    /// straight line, and holds that for good.
    Ramp {
        /// The acceleration it goes to, m/s².
        to_m_s2: f64,
        /// How long it takes; above zero.
        length: ArrayTime,
    },
    /// The thrust goes back to the plan as filed, from this moment of it on.
    Plan,
    /// A node stands at another place from now on; the move itself takes no time.
    Move {
        /// Name of the node.
        node: String,
        /// Its new position, m from the reference node, + towards the fore end.
        position_m: f64,
    },
    /// A node is let go and coasts. It alone leaves the line.
    Release {
        /// Name of the node.
        node: String,
    },
    /// The link between two nodes stops working, in both directions.
    Fail {
        /// Names of its ends.
        between: [String; 2],
    },
    /// A link that failed works again.
    Mend {
        /// Names of its ends.
        between: [String; 2],
    },
    /// A remark.
    Note {
        /// Its text.
        text: String,
    },
}

impl EventKind {
    /// The word for the kind, as recordings and tables have it.
    #[must_use]
    pub fn word(&self) -> &'static str {
        match self {
            EventKind::Hold { .. } => "hold",
            EventKind::Ramp { .. } => "ramp",
            EventKind::Plan => "plan",
            EventKind::Move { .. } => "move",
            EventKind::Release { .. } => "release",
            EventKind::Fail { .. } => "fail",
            EventKind::Mend { .. } => "mend",
            EventKind::Note { .. } => "note",
        }
    }
}
