//! Why loads cannot be told.

use std::fmt;

use super::structure::StructureFault;

/// Why a line has no loads.
#[derive(Clone, Debug, PartialEq)]
pub enum LoadsFault {
    /// The description is not that of a line.
    Structure(StructureFault),
    /// A node reaches the horizon, at its loaded position.
    Horizon {
        /// Its row.
        row: usize,
        /// The acceleration of the reference node at which it was seen, m/s².
        acceleration_m_s2: f64,
    },
    /// A span would be pushed shorter than nothing: its stiffness is far too small.
    Crushed {
        /// Row of its fore end.
        gap: usize,
        /// The acceleration of the reference node at which it was seen, m/s².
        acceleration_m_s2: f64,
    },
    /// No unloaded lengths give the positions "as flown": a span would stretch without end.
    NotInvertible,
    /// Gravity would vanish at a row of a standing line: `|Γ h| > g`, where the first-order
    /// form of the gradient means nothing.
    Gradient {
        /// The row.
        row: usize,
    },
}

impl fmt::Display for LoadsFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            LoadsFault::Structure(fault) => fault.fmt(f),
            LoadsFault::Horizon { row, acceleration_m_s2 } => write!(
                f,
                "row {} reaches the horizon under load, at {acceleration_m_s2:e} m/s^2",
                row + 1
            ),
            LoadsFault::Crushed { gap, acceleration_m_s2 } => write!(
                f,
                "the span between rows {} and {} is pushed shorter than nothing at \
                 {acceleration_m_s2:e} m/s^2: its stiffness is too small",
                gap + 1,
                gap + 2
            ),
            LoadsFault::NotInvertible => {
                write!(f, "no unloaded lengths give the positions as flown")
            }
            LoadsFault::Gradient { row } => write!(
                f,
                "gravity would vanish before row {}: the gradient times the height exceeds it",
                row + 1
            ),
        }
    }
}

impl std::error::Error for LoadsFault {}

impl From<StructureFault> for LoadsFault {
    fn from(fault: StructureFault) -> LoadsFault {
        LoadsFault::Structure(fault)
    }
}
