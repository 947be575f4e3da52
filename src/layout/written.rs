//! What stands in a layout file, key by key, before anything is compared with anything
//! else: types, units, ranges and the form of names are judged here, and every fault is
//! kept. References, sums and what excludes what are judged by `read`.

mod document;
mod keys;
mod nodes;
mod section;
mod syntax;
mod tables;

use compact_str::CompactString;

use super::fault::Spot;
use super::{AccelerationUncertainty, Clock, Epoch, Note, Positions, Shape, SpanKind, Uncertainty};
use crate::model::array_time::ArrayTime;

pub(crate) use document::read_document;
pub(crate) use nodes::{NodeKey, NodeValues, set_from_text, set_number};
pub(crate) use syntax::parse as parse_toml;

/// A value that may be absent, or present but faulty (and then reported already).
#[derive(Clone, Debug, Default, PartialEq)]
pub(crate) enum Field<T> {
    #[default]
    Absent,
    Faulty,
    Stated(T, Spot),
}

impl<T> Field<T> {
    pub(crate) fn value(&self) -> Option<&T> {
        match self {
            Field::Stated(value, _) => Some(value),
            _ => None,
        }
    }

    pub(crate) fn stated(&self) -> Option<(&T, Spot)> {
        match self {
            Field::Stated(value, spot) => Some((value, *spot)),
            _ => None,
        }
    }

    pub(crate) fn into_value(self) -> Option<T> {
        match self {
            Field::Stated(value, _) => Some(value),
            _ => None,
        }
    }

    pub(crate) fn map<U>(self, change: impl FnOnce(T) -> U) -> Field<U> {
        match self {
            Field::Stated(value, spot) => Field::Stated(change(value), spot),
            Field::Faulty => Field::Faulty,
            Field::Absent => Field::Absent,
        }
    }

    pub(crate) fn spot(&self) -> Option<Spot> {
        self.stated().map(|(_, spot)| spot)
    }

    pub(crate) fn is_absent(&self) -> bool {
        matches!(self, Field::Absent)
    }
}

/// A layout as written.
#[derive(Clone, Debug, Default)]
pub(crate) struct Written {
    pub(crate) name: Field<String>,
    pub(crate) revision: Option<String>,
    pub(crate) reference: Field<String>,
    pub(crate) epoch: Option<Epoch>,
    pub(crate) positions: Field<Positions>,
    pub(crate) design_acceleration: Field<f64>,
    pub(crate) nodes: Vec<WrittenNode>,
    pub(crate) series: Vec<WrittenSeries>,
    pub(crate) survey: Option<WrittenTable>,
    pub(crate) spans: Vec<WrittenSpan>,
    pub(crate) engines: Vec<WrittenEngine>,
    pub(crate) phases: Vec<WrittenPhase>,
    pub(crate) acceleration: Option<WrittenAcceleration>,
    pub(crate) standing: Option<WrittenStanding>,
    pub(crate) clocks: Vec<Clock>,
    pub(crate) links: Vec<WrittenLink>,
    pub(crate) stations: Vec<WrittenStation>,
    pub(crate) limits: Vec<WrittenLimit>,
    pub(crate) notes: Vec<Note>,
    /// Whether every table was understood: what an unknown one holds is not reported as
    /// missing.
    pub(crate) tables_are_known: bool,
    /// Whether every kind of clock was.
    pub(crate) clocks_are_whole: bool,
}

/// A `[[node]]`.
#[derive(Clone, Debug, Default)]
pub(crate) struct WrittenNode {
    pub(crate) spot: Spot,
    pub(crate) name: Field<CompactString>,
    pub(crate) position_m: Field<f64>,
    pub(crate) values: NodeValues,
}

/// A `[[series]]`.
#[derive(Clone, Debug)]
pub(crate) struct WrittenSeries {
    pub(crate) prefix: Field<String>,
    pub(crate) count: Field<usize>,
    pub(crate) from_m: Field<f64>,
    pub(crate) to_m: Field<f64>,
    pub(crate) spacing: Field<Spacing>,
    pub(crate) values: NodeValues,
}

/// How the members of a series are placed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Spacing {
    /// Equal distances.
    Even,
    /// Rates in geometric progression at the design acceleration.
    EqualShift,
}

/// A `[survey]`: the name of its table.
#[derive(Clone, Debug)]
pub(crate) struct WrittenTable {
    pub(crate) file: Field<String>,
}

/// A `[[span]]`.
#[derive(Clone, Debug)]
pub(crate) struct WrittenSpan {
    pub(crate) along: Field<[(String, Spot); 2]>,
    /// The span, without its place.
    pub(crate) values: SpanValues,
}

/// What a `[[span]]` states beside its place.
#[derive(Clone, Debug)]
pub(crate) struct SpanValues {
    pub(crate) kind: SpanKind,
    pub(crate) linear_density_kg_m: f64,
    pub(crate) axial_stiffness_n: Option<f64>,
    pub(crate) u_axial_stiffness_n: Uncertainty,
    pub(crate) strength_n: Option<f64>,
    pub(crate) safety_factor: f64,
    pub(crate) thermal_expansion_per_k: f64,
    pub(crate) u_thermal_expansion_per_k: Uncertainty,
    pub(crate) temperature_change_k: f64,
    pub(crate) u_temperature_change_k: Uncertainty,
}

/// An `[[engine]]`.
#[derive(Clone, Debug)]
pub(crate) struct WrittenEngine {
    pub(crate) spot: Spot,
    pub(crate) node: Field<String>,
    pub(crate) share: Field<f64>,
    pub(crate) exhaust_speed_m_s: Option<f64>,
    pub(crate) propellant_kg: Option<f64>,
}

/// A `[[phase]]`.
#[derive(Clone, Debug)]
pub(crate) struct WrittenPhase {
    pub(crate) spot: Spot,
    /// Acceleration at its start and at its end, m/s².
    pub(crate) acceleration_m_s2: Field<[f64; 2]>,
    pub(crate) length: Field<ArrayTime>,
}

/// An `[acceleration]`.
#[derive(Clone, Debug)]
pub(crate) struct WrittenAcceleration {
    pub(crate) spot: Spot,
    pub(crate) history: Field<String>,
    pub(crate) uncertainty: AccelerationUncertainty,
}

/// A `[standing]`.
#[derive(Clone, Debug)]
pub(crate) struct WrittenStanding {
    pub(crate) spot: Spot,
    pub(crate) gravity_m_s2: Field<f64>,
    pub(crate) u_gravity_m_s2: Uncertainty,
    pub(crate) gradient_per_s2: Field<f64>,
    pub(crate) u_gradient_per_s2: Uncertainty,
}

/// A `[[link]]`.
#[derive(Clone, Debug)]
pub(crate) struct WrittenLink {
    pub(crate) between: Field<[(String, Spot); 2]>,
    pub(crate) carrier_hz: Option<f64>,
    pub(crate) delay_out_s: f64,
    pub(crate) delay_back_s: f64,
    pub(crate) instability: f64,
}

/// A `[[station]]`.
#[derive(Clone, Debug)]
pub(crate) struct WrittenStation {
    pub(crate) name: Field<String>,
    pub(crate) position_m: Field<f64>,
}

/// A `[[limit]]`.
#[derive(Clone, Debug)]
pub(crate) struct WrittenLimit {
    pub(crate) node: Field<String>,
    pub(crate) pair: Field<[(String, Spot); 2]>,
    pub(crate) clock_offset_s: Option<f64>,
    pub(crate) resolve_within_s: Option<f64>,
}

/// Shapes by their words.
pub(crate) const SHAPES: [(&str, Shape); 2] =
    [("normal", Shape::Normal), ("rectangular", Shape::Rectangular)];
