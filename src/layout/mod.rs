//! Layout files: TOML text to what was written, to a checked [`Layout`], with every
//! fault of a file collected at once.

pub mod date;
pub mod fault;
pub mod names;
pub(crate) mod nearest;
pub mod quantity;
mod read;
mod written;

use compact_str::CompactString;

use crate::model::array_time::ArrayTime;
use crate::model::plan::Plan;

pub use fault::{Fault, Faults};
pub use read::{
    FARTHEST_POSITION_M, LARGEST_LAYOUT_BYTES, LARGEST_TABLE_BYTES, MOST_NODES, Source, SourceFile,
    read, sha256,
};
pub(crate) use written::parse_toml;

/// A checked layout: every name unique, every reference resolved, rows fore to aft.
#[derive(Clone, Debug)]
pub struct Layout {
    /// Name of the line.
    pub name: String,
    /// Revision mark, printed on every output.
    pub revision: Option<String>,
    /// The date of array time zero.
    pub epoch: Option<Epoch>,
    /// What the positions mean.
    pub positions: Positions,
    /// Acceleration of the reference node the line is designed for, m/s².
    pub design_acceleration_m_s2: Option<f64>,
    /// Row of the reference node in `nodes`.
    pub reference: usize,
    /// The nodes, fore to aft; ties in the order of the file, nodes before series.
    pub nodes: Vec<Node>,
    /// Spans between neighbours, fore to aft; gaps without a span are absent.
    pub spans: Vec<Span>,
    /// Engines, in the order of the file. Empty: an ideal one at the reference.
    pub engines: Vec<Engine>,
    /// What moves the line, or holds it up.
    pub course: Course,
    /// Systematic uncertainty of the whole plan or history: `u_scale`, `u_zero`.
    pub acceleration_uncertainty: AccelerationUncertainty,
    /// Kinds of clock, in the order of their names.
    pub clocks: Vec<Clock>,
    /// Links as written; empty: every neighbour pair.
    pub links: Vec<Link>,
    /// Inertial stations at rest in the launch frame.
    pub stations: Vec<Station>,
    /// Limits `check` judges beside the built-in rules.
    pub limits: Vec<Limit>,
    /// Notes, in the order of the file.
    pub notes: Vec<Note>,
    /// Prefixes of the series placed by equal shift at the design acceleration.
    pub equal_shift: Vec<String>,
    /// The exact text the layout was read from, and the files it names.
    pub source: Source,
}

impl Layout {
    /// The kind of clock a node of this layout has.
    #[must_use]
    pub fn clock_of(&self, node: &Node) -> Option<&Clock> {
        self.clocks.get(node.clock? as usize)
    }
}

/// The date of array time zero, as written; the scale is always stated.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Epoch {
    /// The text of the layout, e.g. `2041-03-09T06:00:00 TAI`.
    pub text: String,
    /// Which time scale the text is in.
    pub scale: TimeScale,
    /// International Atomic Time of the epoch: attoseconds since 2000-01-01T00:00:00 TAI.
    pub tai_since_2000: ArrayTime,
}

/// Time scales an epoch may be stated in.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum TimeScale {
    /// International Atomic Time.
    Tai,
    /// Terrestrial Time, TAI + 32.184 s.
    Tt,
    /// Coordinated Universal Time.
    Utc,
}

/// What the positions of a layout mean.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Positions {
    /// Lengths with no force on them.
    Unloaded,
    /// Lengths under the design acceleration.
    AsFlown,
}

/// One node of the line.
///
/// A line may have a million of them, so each is kept small and in one piece: what a node
/// costs is mostly the memory it is written to.
#[derive(Clone, Debug, Default)]
pub struct Node {
    /// Unique name.
    pub name: CompactString,
    /// Proper distance from the reference node, m, + towards the fore end.
    pub position_m: f64,
    /// Standard uncertainty of the position and its distribution.
    pub u_position_m: Uncertainty,
    /// Mass without propellant, kg.
    pub mass_kg: f64,
    /// Number of its kind of clock in [`Layout::clocks`]; see [`Layout::clock_of`].
    pub clock: Option<u32>,
    /// Acceleration it is built for, m/s².
    pub rating_m_s2: Option<f64>,
    /// Known fractional frequency bias of its clock.
    pub bias: f64,
    /// Standard uncertainty of the bias beyond the clock's own.
    pub u_bias: Uncertainty,
    /// Known reading of its clock at array time zero, s.
    pub reading_at_start_s: f64,
}

/// A standard uncertainty, its degrees of freedom and its distribution.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Uncertainty {
    /// Standard uncertainty, in the unit of the quantity; 0 when nothing was said.
    pub u: f64,
    /// Degrees of freedom; infinite when nothing was said.
    pub dof: f64,
    /// Shape of the distribution.
    pub shape: Shape,
}

impl Default for Uncertainty {
    fn default() -> Uncertainty {
        Uncertainty { u: 0.0, dof: f64::INFINITY, shape: Shape::Normal }
    }
}

/// Shape of a distribution.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Shape {
    /// Normal.
    #[default]
    Normal,
    /// Rectangular, of the same standard deviation.
    Rectangular,
}

/// What joins two neighbouring rows.
#[derive(Clone, Debug)]
pub struct Span {
    /// Row of its fore end; the aft end is the next row.
    pub fore: usize,
    /// Whether it can push.
    pub kind: SpanKind,
    /// Mass per unloaded length, kg/m.
    pub linear_density_kg_m: f64,
    /// EA, N; `None` is rigid.
    pub axial_stiffness_n: Option<f64>,
    /// Uncertainty of the stiffness, N.
    pub u_axial_stiffness_n: Uncertainty,
    /// Strength, N; `None` is unlimited.
    pub strength_n: Option<f64>,
    /// Safety factor on the strength, ≥ 1.
    pub safety_factor: f64,
    /// Thermal expansion, 1/K.
    pub thermal_expansion_per_k: f64,
    /// Its uncertainty, 1/K.
    pub u_thermal_expansion_per_k: Uncertainty,
    /// Temperature change since the lengths were stated, K.
    pub temperature_change_k: f64,
    /// Its uncertainty, K.
    pub u_temperature_change_k: Uncertainty,
}

/// Kinds of span.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SpanKind {
    /// Pulls only; slack when it would be pushed.
    Tether,
    /// Pulls and pushes.
    Boom,
}

/// An engine, or the support of a standing line.
#[derive(Clone, Debug)]
pub struct Engine {
    /// Row of the node it sits at.
    pub node: usize,
    /// Its share of the thrust; all shares sum to 1.
    pub share: f64,
    /// Exhaust speed, m/s; `None` burns nothing.
    pub exhaust_speed_m_s: Option<f64>,
    /// Propellant aboard at array time zero, kg; `None` is reported but weighs nothing.
    pub propellant_kg: Option<f64>,
}

/// What moves the line, or holds it up.
#[derive(Clone, Debug)]
pub enum Course {
    /// A thrust plan from `[[phase]]`, or a logged `[acceleration]` history.
    Thrust(Plan),
    /// The line stands in gravity.
    Standing(Standing),
}

/// Gravity of a standing line.
#[derive(Clone, Debug)]
pub struct Standing {
    /// Local gravity at the reference node, m/s².
    pub gravity_m_s2: f64,
    /// Its uncertainty, m/s².
    pub u_gravity_m_s2: Uncertainty,
    /// Decrease of felt gravity per metre of height beyond g²/c², 1/s².
    pub gradient_per_s2: f64,
    /// Its uncertainty, 1/s².
    pub u_gradient_per_s2: Uncertainty,
}

/// Uncertainty common to a whole plan or history.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct AccelerationUncertainty {
    /// Relative uncertainty of the scale.
    pub scale: Uncertainty,
    /// Uncertainty of the zero, m/s².
    pub zero_m_s2: Uncertainty,
}

/// A kind of clock. Noise as the Allan deviation at 1 s of each power law
/// (IEEE Std 1139).
#[derive(Clone, Debug)]
pub struct Clock {
    /// Its name in the layout.
    pub name: String,
    /// Nominal frequency, Hz.
    pub frequency_hz: Option<f64>,
    /// White phase noise.
    pub white_pm: f64,
    /// Flicker phase noise.
    pub flicker_pm: f64,
    /// White frequency noise.
    pub white_fm: f64,
    /// Flicker frequency noise.
    pub flicker_fm: f64,
    /// Random-walk frequency noise.
    pub random_walk_fm: f64,
    /// Bandwidth of the phase noise, Hz.
    pub bandwidth_hz: Option<f64>,
    /// Fractional frequency per m/s² of felt acceleration.
    pub acceleration_sensitivity: f64,
    /// Known linear drift, 1/s.
    pub drift_per_s: f64,
    /// Standard uncertainty of the frequency.
    pub u_bias: Uncertainty,
    /// Smallest step of its synthesiser, fractional frequency.
    pub steer_step: Option<f64>,
}

/// A two-way link between two nodes.
#[derive(Clone, Debug)]
pub struct Link {
    /// Rows of its ends, as written.
    pub between: [usize; 2],
    /// Carrier, Hz.
    pub carrier_hz: Option<f64>,
    /// Known equipment delay first to second, s.
    pub delay_out_s: f64,
    /// Known equipment delay back, s.
    pub delay_back_s: f64,
    /// Allan deviation at 1 s, white phase noise.
    pub instability: f64,
}

/// An inertial transponder at rest in the launch frame.
#[derive(Clone, Debug)]
pub struct Station {
    /// Its name.
    pub name: String,
    /// Position in the launch frame, m.
    pub position_m: f64,
}

/// A limit for `check`.
#[derive(Clone, Debug)]
pub struct Limit {
    /// What it binds.
    pub subject: LimitSubject,
    /// Largest clock offset either way, s.
    pub clock_offset_s: Option<f64>,
    /// Longest averaging time to resolve the rate difference, s.
    pub resolve_within_s: Option<f64>,
}

/// What a limit binds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum LimitSubject {
    /// A node against the reference.
    Node(usize),
    /// A pair of nodes.
    Pair([usize; 2]),
}

/// A note at a moment.
#[derive(Clone, Debug)]
pub struct Note {
    /// Its moment.
    pub at: ArrayTime,
    /// Its text.
    pub text: String,
}
