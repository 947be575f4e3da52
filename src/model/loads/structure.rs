//! What the loads need to know of a line: a plain description, by row from fore to aft.

use std::fmt;

use crate::layout::{Layout, Positions, SpanKind};
use crate::model::constants::SPEED_OF_LIGHT_M_S;

/// The mechanical side of a line. Rows go fore to aft, so positions never increase.
#[derive(Clone, Debug, PartialEq)]
pub struct Structure {
    /// Row of the reference node, which stands at position 0.
    pub reference: usize,
    /// The nodes.
    pub nodes: Vec<Joint>,
    /// What joins row `i` to row `i + 1`: one fewer than there are nodes.
    pub members: Vec<Member>,
    /// The engines, or the supports of a standing line. Empty: an ideal one at the
    /// reference, which burns nothing.
    pub engines: Vec<Engine>,
    /// The acceleration of the reference node under which the positions hold, m/s²:
    /// "as flown". `None`: the positions are lengths with no force on them.
    pub flown_at_m_s2: Option<f64>,
}

/// A node as its neighbours feel it.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Joint {
    /// Position as given, m, + towards the fore end.
    pub position_m: f64,
    /// Mass without propellant, kg.
    pub mass_kg: f64,
    /// The acceleration it is built for, m/s²; `None` is unlimited.
    pub rating_m_s2: Option<f64>,
}

/// What joins two neighbours. The default is massless, rigid, unlimited and carries
/// forces of both signs: a gap of which the layout says nothing.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Member {
    /// Whether it can push.
    pub is_tether: bool,
    /// Mass per unloaded length, kg/m.
    pub linear_density_kg_m: f64,
    /// `EA`, N; `None` is rigid.
    pub axial_stiffness_n: Option<f64>,
    /// Strength, N; `None` is unlimited.
    pub strength_n: Option<f64>,
    /// The force allowed is the strength divided by this.
    pub safety_factor: f64,
    /// Thermal strain `κ ΔT`: a rigid member takes it too.
    pub thermal_strain: f64,
}

impl Default for Member {
    fn default() -> Member {
        Member {
            is_tether: false,
            linear_density_kg_m: 0.0,
            axial_stiffness_n: None,
            strength_n: None,
            safety_factor: 1.0,
            thermal_strain: 0.0,
        }
    }
}

/// An engine, or the support of a standing line.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Engine {
    /// Row of the node it pushes.
    pub row: usize,
    /// Its share of the thrust. Shares are divided by their sum.
    pub share: f64,
    /// Exhaust speed, m/s; `None` burns nothing.
    pub exhaust_speed_m_s: Option<f64>,
    /// Propellant aboard at array time zero, kg; `None`: its use is reported, but it
    /// weighs nothing.
    pub propellant_kg: Option<f64>,
}

/// Why a description is not a line.
#[derive(Clone, Debug, PartialEq)]
pub enum StructureFault {
    /// There is no node, the reference is not a row, or the numbers of nodes and members
    /// do not fit.
    Shape,
    /// A number of a node is not finite, a mass is negative, the reference is not at
    /// position 0, or a position lies fore of the one before it.
    Node {
        /// The row.
        row: usize,
    },
    /// A number of a member is not finite, or its density is negative, its stiffness or
    /// strength not above zero, its safety factor below one or its thermal strain not
    /// above −1.
    Member {
        /// The row of its fore end.
        row: usize,
    },
    /// An engine stands at no row, has a negative share, an exhaust speed outside (0, c]
    /// or negative propellant; or no share is above zero.
    Engine {
        /// Index of the engine.
        engine: usize,
    },
}

impl fmt::Display for StructureFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            StructureFault::Shape => {
                write!(f, "the line has no node, or a gap too many or too few")
            }
            StructureFault::Node { row } => {
                write!(f, "row {} has a mass or a position that cannot be", row + 1)
            }
            StructureFault::Member { row } => write!(
                f,
                "the span between rows {} and {} has a property that cannot be",
                row + 1,
                row + 2
            ),
            StructureFault::Engine { engine } => {
                write!(f, "engine {} has a property that cannot be", engine + 1)
            }
        }
    }
}

impl std::error::Error for StructureFault {}

impl Structure {
    /// The mechanical side of a checked layout. The design acceleration counts only where
    /// positions are "as flown".
    #[must_use]
    pub fn from_layout(layout: &Layout) -> Structure {
        let nodes = layout
            .nodes
            .iter()
            .map(|node| Joint {
                position_m: node.position_m,
                mass_kg: node.mass_kg,
                rating_m_s2: node.rating_m_s2,
            })
            .collect();
        let mut members = vec![Member::default(); layout.nodes.len().saturating_sub(1)];
        for span in &layout.spans {
            members[span.fore] = Member {
                is_tether: span.kind == SpanKind::Tether,
                linear_density_kg_m: span.linear_density_kg_m,
                axial_stiffness_n: span.axial_stiffness_n,
                strength_n: span.strength_n,
                safety_factor: span.safety_factor,
                thermal_strain: span.thermal_expansion_per_k * span.temperature_change_k,
            };
        }
        let engines = layout
            .engines
            .iter()
            .map(|engine| Engine {
                row: engine.node,
                share: engine.share,
                exhaust_speed_m_s: engine.exhaust_speed_m_s,
                propellant_kg: engine.propellant_kg,
            })
            .collect();
        let flown_at_m_s2 = match layout.positions {
            Positions::Unloaded => None,
            Positions::AsFlown => layout.design_acceleration_m_s2,
        };
        Structure { reference: layout.reference, nodes, members, engines, flown_at_m_s2 }
    }

    /// Whether the description is that of a line.
    ///
    /// # Errors
    ///
    /// The first fault found.
    pub fn check(&self) -> Result<(), StructureFault> {
        if self.reference >= self.nodes.len() || self.members.len() + 1 != self.nodes.len() {
            return Err(StructureFault::Shape);
        }
        for (row, node) in self.nodes.iter().enumerate() {
            let is_in_order = row == 0 || node.position_m <= self.nodes[row - 1].position_m;
            let is_placed = row != self.reference || node.position_m == 0.0;
            if !(node.position_m.is_finite() && is_weight(node.mass_kg) && is_in_order && is_placed)
            {
                return Err(StructureFault::Node { row });
            }
        }
        for (row, member) in self.members.iter().enumerate() {
            let is_sound = is_weight(member.linear_density_kg_m)
                && member.axial_stiffness_n.is_none_or(|value| value > 0.0 && value.is_finite())
                && member.strength_n.is_none_or(|value| value > 0.0 && value.is_finite())
                && member.safety_factor >= 1.0
                && member.safety_factor.is_finite()
                && member.thermal_strain > -1.0
                && member.thermal_strain.is_finite();
            if !is_sound {
                return Err(StructureFault::Member { row });
            }
        }
        for (index, engine) in self.engines.iter().enumerate() {
            let is_sound = engine.row < self.nodes.len()
                && is_weight(engine.share)
                && engine
                    .exhaust_speed_m_s
                    .is_none_or(|speed| speed > 0.0 && speed <= SPEED_OF_LIGHT_M_S)
                && engine.propellant_kg.is_none_or(is_weight);
            if !is_sound {
                return Err(StructureFault::Engine { engine: index });
            }
        }
        if !self.engines.is_empty() && self.engines.iter().all(|engine| engine.share == 0.0) {
            return Err(StructureFault::Engine { engine: 0 });
        }
        Ok(())
    }

    /// The engines, or the ideal one at the reference where none is given.
    #[must_use]
    pub fn engines_or_ideal(&self) -> Vec<Engine> {
        if self.engines.is_empty() {
            return vec![Engine {
                row: self.reference,
                share: 1.0,
                exhaust_speed_m_s: None,
                propellant_kg: None,
            }];
        }
        self.engines.clone()
    }
}

fn is_weight(value: f64) -> bool {
    value >= 0.0 && value.is_finite()
}
