//! What a node states beside its name and place, in a layout or in a survey.

use compact_str::CompactString;

use super::keys;
use super::section::{Bound, Section};
use super::{Field, SHAPES, Spacing, WrittenNode, WrittenSeries};
use crate::layout::Uncertainty;
use crate::layout::fault::Spot;
use crate::layout::quantity::{self, Dimension, QuantityFault};
use crate::layout::read::{FARTHEST_POSITION_M, MOST_NODES};

/// Positions lie within ±10¹⁹ m.
pub(super) const POSITION: Bound = Bound::Within(FARTHEST_POSITION_M, "1e19 m, about 1057 ly");

/// Keys a node may state beside its name and position.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum NodeKey {
    UPosition,
    DofPosition,
    ShapePosition,
    Mass,
    Clock,
    Rating,
    Bias,
    UBias,
    DofBias,
    ShapeBias,
    ReadingAtStart,
}

impl NodeKey {
    /// Every key, with its word.
    pub(crate) const ALL: [(&'static str, NodeKey); 11] = [
        ("u_position", NodeKey::UPosition),
        ("dof_position", NodeKey::DofPosition),
        ("shape_position", NodeKey::ShapePosition),
        ("mass", NodeKey::Mass),
        ("clock", NodeKey::Clock),
        ("rating", NodeKey::Rating),
        ("bias", NodeKey::Bias),
        ("u_bias", NodeKey::UBias),
        ("dof_bias", NodeKey::DofBias),
        ("shape_bias", NodeKey::ShapeBias),
        ("reading_at_start", NodeKey::ReadingAtStart),
    ];

    /// Its place in a set of keys.
    fn bit(self) -> u16 {
        1 << self as u16
    }

    /// What kind of value it takes.
    fn dimension_and_bound(self) -> (Dimension, Bound) {
        match self {
            NodeKey::UPosition => (Dimension::Length, Bound::NotNegative),
            NodeKey::Mass => (Dimension::Mass, Bound::NotNegative),
            NodeKey::Rating => (Dimension::Acceleration, Bound::Positive),
            NodeKey::UBias => (Dimension::Number, Bound::NotNegative),
            NodeKey::DofPosition | NodeKey::DofBias => (Dimension::Number, Bound::Positive),
            NodeKey::ReadingAtStart => (Dimension::Time, Bound::Any),
            NodeKey::Bias | NodeKey::Clock | NodeKey::ShapePosition | NodeKey::ShapeBias => {
                (Dimension::Number, Bound::Any)
            }
        }
    }
}

/// The values of those keys, with the defaults for what was not said.
#[derive(Clone, Debug, Default)]
pub(crate) struct NodeValues {
    stated: u16,
    pub(crate) u_position_m: Uncertainty,
    pub(crate) mass_kg: f64,
    pub(crate) clock: Field<CompactString>,
    pub(crate) rating_m_s2: Option<f64>,
    pub(crate) bias: f64,
    pub(crate) u_bias: Uncertainty,
    pub(crate) reading_at_start_s: f64,
}

impl NodeValues {
    /// Whether a key was stated.
    pub(crate) fn states(&self, key: NodeKey) -> bool {
        self.stated & key.bit() != 0
    }

    /// Takes over what another states.
    pub(crate) fn add(&mut self, other: NodeValues) {
        for (_, key) in NodeKey::ALL {
            if !other.states(key) {
                continue;
            }
            self.stated |= key.bit();
            match key {
                NodeKey::UPosition => self.u_position_m.u = other.u_position_m.u,
                NodeKey::DofPosition => self.u_position_m.dof = other.u_position_m.dof,
                NodeKey::ShapePosition => self.u_position_m.shape = other.u_position_m.shape,
                NodeKey::Mass => self.mass_kg = other.mass_kg,
                NodeKey::Clock => self.clock = other.clock.clone(),
                NodeKey::Rating => self.rating_m_s2 = other.rating_m_s2,
                NodeKey::Bias => self.bias = other.bias,
                NodeKey::UBias => self.u_bias.u = other.u_bias.u,
                NodeKey::DofBias => self.u_bias.dof = other.u_bias.dof,
                NodeKey::ShapeBias => self.u_bias.shape = other.u_bias.shape,
                NodeKey::ReadingAtStart => self.reading_at_start_s = other.reading_at_start_s,
            }
        }
    }

    fn read(section: &mut Section<'_, '_>) -> NodeValues {
        let mut stated = 0;
        for (word, key) in NodeKey::ALL {
            if section.has(word) {
                stated |= key.bit();
            }
        }
        let mut number = |word: &str, key: NodeKey| {
            let (dimension, bound) = key.dimension_and_bound();
            section.quantity(word, dimension, bound).into_value()
        };
        let mass_kg = number("mass", NodeKey::Mass).unwrap_or(0.0);
        let rating_m_s2 = number("rating", NodeKey::Rating);
        let bias = number("bias", NodeKey::Bias).unwrap_or(0.0);
        let reading_at_start_s = number("reading_at_start", NodeKey::ReadingAtStart).unwrap_or(0.0);
        NodeValues {
            stated,
            u_position_m: section.uncertainty(keys::U_POSITION, Dimension::Length),
            mass_kg,
            clock: section.reference_to("clock", "\"lattice\"").map(CompactString::from),
            rating_m_s2,
            bias,
            u_bias: section.uncertainty(keys::U_BIAS, Dimension::Number),
            reading_at_start_s,
        }
    }
}

/// Sets one value from the text of a survey field.
///
/// # Errors
///
/// What is wrong with the text.
pub(crate) fn set_from_text(
    values: &mut NodeValues,
    key: NodeKey,
    text: &str,
    spot: Spot,
) -> Result<(), QuantityFault> {
    values.stated |= key.bit();
    if key == NodeKey::Clock {
        values.clock = Field::Stated(text.into(), spot);
        return Ok(());
    }
    if let NodeKey::ShapePosition | NodeKey::ShapeBias = key {
        let Some((_, shape)) = SHAPES.iter().find(|(word, _)| *word == text) else {
            return Err(QuantityFault::new(
                0..text.len(),
                "a shape is normal or rectangular",
                "write one of these words",
            ));
        };
        let uncertainty =
            if key == NodeKey::ShapeBias { &mut values.u_bias } else { &mut values.u_position_m };
        uncertainty.shape = *shape;
        return Ok(());
    }
    let (dimension, _) = key.dimension_and_bound();
    let number = match quantity::plain(text) {
        Some(number) => number,
        None => quantity::parse(text, dimension)?,
    };
    set_number(values, key, number)
        .map_err(|(rule, remedy)| QuantityFault::new(0..text.len(), rule, remedy))
}

/// Sets one value that is a number, in SI units.
///
/// # Errors
///
/// The rule and the remedy when it lies outside its range.
pub(crate) fn set_number(
    values: &mut NodeValues,
    key: NodeKey,
    number: f64,
) -> Result<(), (String, &'static str)> {
    values.stated |= key.bit();
    let (_, bound) = key.dimension_and_bound();
    if let Some(broken) = bound.broken_by(number) {
        return Err((format!("this value {broken}"), bound.remedy()));
    }
    match key {
        NodeKey::UPosition => values.u_position_m.u = number,
        NodeKey::DofPosition => values.u_position_m.dof = number,
        NodeKey::Mass => values.mass_kg = number,
        NodeKey::Rating => values.rating_m_s2 = Some(number),
        NodeKey::Bias => values.bias = number,
        NodeKey::UBias => values.u_bias.u = number,
        NodeKey::DofBias => values.u_bias.dof = number,
        NodeKey::ReadingAtStart => values.reading_at_start_s = number,
        NodeKey::Clock | NodeKey::ShapePosition | NodeKey::ShapeBias => {}
    }
    Ok(())
}

pub(super) fn read_node(mut section: Section<'_, '_>) -> WrittenNode {
    let name = section.name("name", "\"hub\"");
    let name = section.required(name, "name", "\"hub\"");
    WrittenNode {
        spot: section.spot,
        position_m: section.quantity("position", Dimension::Length, POSITION),
        values: NodeValues::read(&mut section),
        name: name.map(CompactString::from),
    }
}

pub(super) fn read_series(mut section: Section<'_, '_>) -> WrittenSeries {
    let prefix = section.reference_to("prefix", "\"s\"");
    let prefix = section.required(prefix, "prefix", "\"s\"");
    let count = section.count("count", MOST_NODES);
    let count = section.required(count, "count", "8");
    let from_m = section.quantity("from", Dimension::Length, POSITION);
    let from_m = section.required(from_m, "from", "\"-5 km\"");
    let to_m = section.quantity("to", Dimension::Length, POSITION);
    if to_m.is_absent() && count.value().is_some_and(|count| *count > 1) {
        section.missing("to", "\"-40 km\"");
    }
    let spacing =
        section.choice("spacing", &[("even", Spacing::Even), ("equal shift", Spacing::EqualShift)]);
    let values = NodeValues::read(&mut section);
    WrittenSeries { prefix, count, from_m, to_m, spacing, values }
}
