//! What the desk says: moments, steps, events and values in words.

use clockspar::layout::Layout;
use clockspar::layout::date::format_date;
use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::STANDARD_GRAVITY_M_S2;
use clockspar::run::EventKind;
use clockspar::table::{Cell, Column, Measure, fit, readable_time};

use super::step::Step;

/// A moment or a length of array time: `6 h 10 min`.
pub fn time(at: ArrayTime) -> String {
    readable_time(at)
}

/// A moment with its exact seconds: `6 h 10 min = 22200 s`.
pub fn moment(at: ArrayTime) -> String {
    let readable = readable_time(at);
    let exact = format!("{at} s");
    if readable == exact { exact } else { format!("{readable} = {exact}") }
}

/// The date of a moment, when the layout has an epoch.
pub fn date(at: ArrayTime, layout: &Layout) -> Option<String> {
    let epoch = layout.epoch.as_ref()?;
    format_date(epoch.tai_since_2000.checked_add(at)?, epoch.scale)
}

/// A value by itself, in the unit and digits its table would give it.
pub fn value(measure: Measure, value: f64) -> String {
    let column = Column { key: "value", heading: "", measure };
    let cell = Cell::Number(value);
    let format = fit(&column, [&cell], true);
    let unit = format.unit();
    let blank = if unit.is_empty() { "" } else { " " };
    format!("{}{blank}{unit}", format.cell(&cell).trim())
}

/// An acceleration in both units: `0.196133 m/s² = 0.02 g0`.
pub fn acceleration(value_m_s2: f64) -> String {
    let si = format!("{} m/s²", rounded(value_m_s2));
    if value_m_s2 == 0.0 {
        return si;
    }
    let (parts, unit) = match value_m_s2.abs() / STANDARD_GRAVITY_M_S2 {
        size if size >= 1e-3 => (1.0, "g0"),
        size if size >= 1e-6 => (1e-3, "mg0"),
        _ => (1e-6, "µg0"),
    };
    format!("{si} = {} {unit}", rounded(value_m_s2 / STANDARD_GRAVITY_M_S2 / parts))
}

/// A number to nine digits at most, without zeros at its end.
pub fn rounded(value: f64) -> String {
    let nine: f64 = format!("{value:.8e}").parse().unwrap_or(value);
    if nine == 0.0 || (1e-4..1e9).contains(&nine.abs()) {
        format!("{nine}")
    } else {
        format!("{nine:e}")
    }
}

/// A step: `10 min`, `1 s of s5`.
pub fn step(step: Step, layout: &Layout) -> String {
    match step.of.and_then(|row| layout.nodes.get(row)) {
        Some(node) => format!("{} of {}", time(step.length), node.name),
        None => time(step.length),
    }
}

/// A pace: `60`, `0.5`.
pub fn pace(pace: f64) -> String {
    format!("{} s", rounded(pace))
}

/// A number of things: `1 frame`, `2 frames`.
pub fn count(number: u64, thing: &str) -> String {
    format!("{number} {thing}{}", if number == 1 { "" } else { "s" })
}

/// An event in words.
pub fn event(kind: &EventKind) -> String {
    match kind {
        EventKind::Hold { acceleration_m_s2 } => {
            format!("hold {}", acceleration(*acceleration_m_s2))
        }
        EventKind::Ramp { to_m_s2, length } => {
            format!("ramp to {} for {}", acceleration(*to_m_s2), time(*length))
        }
        EventKind::Plan => "back to the plan as filed".to_owned(),
        EventKind::Move { node, position_m } => {
            format!("move {node} to {}", value(Measure::Length, *position_m))
        }
        EventKind::Release { node } => format!("release {node}"),
        EventKind::Fail { between: [one, other] } => format!("fail {one} and {other}"),
        EventKind::Mend { between: [one, other] } => format!("mend {one} and {other}"),
        EventKind::Note { text } => format!("note {text}"),
    }
}
