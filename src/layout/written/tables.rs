//! The tables that are not nodes.

use toml::Spanned;
use toml::de::DeValue;

use super::keys;
use super::section::{Bound, Section, type_words};
use super::{
    Field, SpanValues, WrittenAcceleration, WrittenEngine, WrittenLimit, WrittenLink, WrittenPhase,
    WrittenSpan, WrittenStanding, WrittenStation, WrittenTable,
};
use crate::layout::date;
use crate::layout::quantity::Dimension;
use crate::layout::written::nodes::POSITION;
use crate::layout::{AccelerationUncertainty, Clock, Epoch, Note, SpanKind};
use crate::model::array_time::ArrayTime;
use crate::model::constants::SPEED_OF_LIGHT_M_S;
use crate::model::plan::LARGEST_ACCELERATION_M_S2;

/// Accelerations of the reference node lie within ±10⁶ m/s².
pub(super) const ACCELERATION: Bound = Bound::Within(LARGEST_ACCELERATION_M_S2, "1e6 m/s^2");

pub(super) fn read_survey(mut section: Section<'_, '_>) -> WrittenTable {
    let file = section.line_of_text("file", "\"as-built.csv\"");
    WrittenTable { file: section.required(file, "file", "\"as-built.csv\"") }
}

pub(super) fn read_span(mut section: Section<'_, '_>) -> WrittenSpan {
    let along = section.pair("along");
    let along = section.required(along, "along", "[\"hub\", \"s8\"]");
    let kind = section.choice("kind", &[("tether", SpanKind::Tether), ("boom", SpanKind::Boom)]);
    let kind = section.required(kind, "kind", "\"tether\"");
    let mut number = |key: &str, dimension: Dimension, bound: Bound| {
        section.quantity(key, dimension, bound).into_value()
    };
    let linear_density = number("linear_density", Dimension::LinearDensity, Bound::NotNegative);
    let axial_stiffness_n = number("axial_stiffness", Dimension::Force, Bound::Positive);
    let strength_n = number("strength", Dimension::Force, Bound::Positive);
    let safety_factor = number("safety_factor", Dimension::Number, Bound::AtLeastOne);
    let thermal_expansion = number("thermal_expansion", Dimension::PerTemperature, Bound::Any);
    let temperature_change = number("temperature_change", Dimension::Temperature, Bound::Any);
    let u_axial_stiffness_n = section.uncertainty(keys::U_AXIAL_STIFFNESS, Dimension::Force);
    if let Some(value) = section.get("u_axial_stiffness")
        && !section.has("axial_stiffness")
    {
        section.fault_at(
            value.span(),
            "`u_axial_stiffness` stands beside `axial_stiffness`; a span without it is rigid",
            "add `axial_stiffness`, or take its uncertainty away",
        );
    }
    let values = SpanValues {
        kind: kind.into_value().unwrap_or(SpanKind::Tether),
        linear_density_kg_m: linear_density.unwrap_or(0.0),
        axial_stiffness_n,
        u_axial_stiffness_n,
        strength_n,
        safety_factor: safety_factor.unwrap_or(1.0),
        thermal_expansion_per_k: thermal_expansion.unwrap_or(0.0),
        u_thermal_expansion_per_k: section
            .uncertainty(keys::U_THERMAL_EXPANSION, Dimension::PerTemperature),
        temperature_change_k: temperature_change.unwrap_or(0.0),
        u_temperature_change_k: section
            .uncertainty(keys::U_TEMPERATURE_CHANGE, Dimension::Temperature),
    };
    WrittenSpan { along, values }
}

pub(super) fn read_engine(mut section: Section<'_, '_>) -> WrittenEngine {
    let node = section.reference_to("node", "\"hub\"");
    let light = Bound::PositiveUpTo(SPEED_OF_LIGHT_M_S, "299792458 m/s, the speed of light");
    WrittenEngine {
        spot: section.spot,
        node: section.required(node, "node", "\"hub\""),
        share: section.quantity("share", Dimension::Number, Bound::NotNegative),
        exhaust_speed_m_s: section.quantity("exhaust_speed", Dimension::Speed, light).into_value(),
        propellant_kg: section
            .quantity("propellant", Dimension::Mass, Bound::NotNegative)
            .into_value(),
    }
}

pub(super) fn read_phase(mut section: Section<'_, '_>) -> WrittenPhase {
    let acceleration_m_s2 = match (section.get("hold"), section.get("ramp")) {
        (Some(hold), None) => {
            match section.quantity_of(hold, "hold", Dimension::Acceleration, ACCELERATION) {
                Field::Stated(value, spot) => Field::Stated([value, value], spot),
                _ => Field::Faulty,
            }
        }
        (None, Some(ramp)) => read_ramp(&mut section, ramp),
        (Some(_), Some(ramp)) => {
            section.fault_at(
                ramp.span(),
                "a phase is a `hold` or a `ramp`, not both",
                "take one of them away, or write two phases",
            );
            Field::Faulty
        }
        (None, None) => {
            let spot = section.spot;
            if !section.faults.has_syntax() {
                section.faults.fault(
                    spot,
                    "a phase is a `hold` or a `ramp`",
                    "add `hold = \"0.02 g0\"` or `ramp = [\"0 g0\", \"0.02 g0\"]`",
                );
            }
            Field::Faulty
        }
    };
    let length = section.length_of_time("for");
    let length = section.required(length, "for", "\"10 min\"");
    WrittenPhase { spot: section.spot, acceleration_m_s2, length }
}

fn read_ramp(section: &mut Section<'_, '_>, ramp: &Spanned<DeValue<'_>>) -> Field<[f64; 2]> {
    let span = ramp.span();
    let rule = "`ramp` is a list of two accelerations, at its start and at its end";
    let remedy = "write for example `ramp = [\"0 g0\", \"0.02 g0\"]`";
    let DeValue::Array(array) = ramp.get_ref() else {
        section.fault_at(span, format!("{rule}, not {}", type_words(ramp.get_ref())), remedy);
        return Field::Faulty;
    };
    let [from, to] = array.as_ref() else {
        section.fault_at(span, format!("{rule}; this one has {}", array.len()), remedy);
        return Field::Faulty;
    };
    let mut end = |value| {
        section.quantity_of(value, "ramp", Dimension::Acceleration, ACCELERATION).into_value()
    };
    match (end(from), end(to)) {
        (Some(from), Some(to)) => {
            Field::Stated([from, to], crate::layout::fault::Spot::new(0, span))
        }
        _ => Field::Faulty,
    }
}

pub(super) fn read_acceleration(mut section: Section<'_, '_>) -> WrittenAcceleration {
    WrittenAcceleration {
        spot: section.spot,
        history: section.line_of_text("history", "\"run.csv\""),
        uncertainty: AccelerationUncertainty {
            scale: section.uncertainty(keys::U_SCALE, Dimension::Number),
            zero_m_s2: section.uncertainty(keys::U_ZERO, Dimension::Acceleration),
        },
    }
}

pub(super) fn read_standing(mut section: Section<'_, '_>) -> WrittenStanding {
    let gravity = section.quantity("gravity", Dimension::Acceleration, ACCELERATION);
    WrittenStanding {
        spot: section.spot,
        gravity_m_s2: section.required(gravity, "gravity", "\"9.81 m/s^2\""),
        u_gravity_m_s2: section.uncertainty(keys::U_GRAVITY, Dimension::Acceleration),
        gradient_per_s2: section.quantity("gradient", Dimension::PerTimeSquared, Bound::Any),
        u_gradient_per_s2: section.uncertainty(keys::U_GRADIENT, Dimension::PerTimeSquared),
    }
}

pub(super) fn read_clock(name: String, mut section: Section<'_, '_>) -> Clock {
    let mut number = |key: &str, dimension: Dimension, bound: Bound| {
        section.quantity(key, dimension, bound).into_value()
    };
    let mut noise = |key: &str| number(key, Dimension::Number, Bound::NotNegative).unwrap_or(0.0);
    let (white_pm, flicker_pm) = (noise("white_pm"), noise("flicker_pm"));
    let (white_fm, flicker_fm) = (noise("white_fm"), noise("flicker_fm"));
    let random_walk_fm = noise("random_walk_fm");
    let sensitivity = number("acceleration_sensitivity", Dimension::PerAcceleration, Bound::Any);
    Clock {
        frequency_hz: number("frequency", Dimension::Frequency, Bound::Positive),
        white_pm,
        flicker_pm,
        white_fm,
        flicker_fm,
        random_walk_fm,
        bandwidth_hz: number("bandwidth", Dimension::Frequency, Bound::Positive),
        acceleration_sensitivity: sensitivity.unwrap_or(0.0),
        drift_per_s: number("drift", Dimension::PerTime, Bound::Any).unwrap_or(0.0),
        steer_step: number("steer_step", Dimension::Number, Bound::Positive),
        u_bias: section.uncertainty(keys::U_BIAS, Dimension::Number),
        name,
    }
}

pub(super) fn read_link(mut section: Section<'_, '_>) -> WrittenLink {
    let between = section.pair("between");
    let between = section.required(between, "between", "[\"hub\", \"s1\"]");
    let mut number = |key: &str, dimension: Dimension, bound: Bound| {
        section.quantity(key, dimension, bound).into_value()
    };
    WrittenLink {
        between,
        carrier_hz: number("carrier", Dimension::Frequency, Bound::Positive),
        delay_out_s: number("delay_out", Dimension::Time, Bound::NotNegative).unwrap_or(0.0),
        delay_back_s: number("delay_back", Dimension::Time, Bound::NotNegative).unwrap_or(0.0),
        instability: number("instability", Dimension::Number, Bound::NotNegative).unwrap_or(0.0),
    }
}

pub(super) fn read_station(mut section: Section<'_, '_>) -> WrittenStation {
    let name = section.name("name", "\"quay\"");
    let name = section.required(name, "name", "\"quay\"");
    let position_m = section.quantity("position", Dimension::Length, POSITION);
    let position_m = section.required(position_m, "position", "\"-1.2 au\"");
    WrittenStation { name, position_m }
}

pub(super) fn read_limit(mut section: Section<'_, '_>) -> WrittenLimit {
    let node = section.reference_to("node", "\"s8\"");
    let pair = section.pair("pair");
    let spot = section.spot;
    if let (Some(_), Some(value)) = (section.get("node"), section.get("pair")) {
        section.fault_at(
            value.span(),
            "a limit binds a `node` or a `pair`, not both",
            "write two limits",
        );
    }
    let silent = !section.faults.has_syntax();
    if silent && !section.has("node") && !section.has("pair") {
        section.faults.fault(
            spot,
            "a limit binds a `node` or a `pair`",
            "add `node = \"s8\"` or `pair = [\"s1\", \"s8\"]`",
        );
    }
    if silent && !section.has("clock_offset") && !section.has("resolve_within") {
        section.faults.fault(
            spot,
            "a limit states a `clock_offset`, a `resolve_within`, or both",
            "add for example `clock_offset = \"5 us\"`",
        );
    }
    let mut time = |key: &str| section.quantity(key, Dimension::Time, Bound::Positive).into_value();
    WrittenLimit {
        node,
        pair,
        clock_offset_s: time("clock_offset"),
        resolve_within_s: time("resolve_within"),
    }
}

/// A note; `None` when a part of it is missing or faulty.
pub(super) fn read_note(mut section: Section<'_, '_>, epoch: Option<&Epoch>) -> Option<Note> {
    let at = match section.get("at") {
        None => {
            section.missing("at", "\"30 min\"");
            Field::Absent
        }
        Some(value) => section.scalar(value, Dimension::Time, |text| {
            if date::looks_like_a_date(text.trim_matches(' ')) {
                date::parse_moment(text, epoch, ArrayTime::ZERO)
            } else {
                crate::layout::quantity::parse_duration(text)
            }
        }),
    };
    let text = section.line_of_text("text", "\"tether paid out\"");
    let text = section.required(text, "text", "\"tether paid out\"");
    Some(Note { at: at.into_value()?, text: text.into_value()? })
}
