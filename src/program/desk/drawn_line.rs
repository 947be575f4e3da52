//! The line itself, drawn down the left margin: nodes, what joins them, the horizon.

use clockspar::layout::SpanKind;
use clockspar::run::NodeState;
use clockspar::table::Measure;
use clockspar::table::content::SpanLoad;
use ratatui::layout::Rect;

use super::painter::{PLAIN, Painter, QUIET, STRONG, state_style};
use super::state::Desk;
use super::words;

/// Columns of the margin: the chosen row, the node, what joins it to the next, a blank.
pub const WIDTH: u16 = 5;
const NODE: u16 = 2;
const GAP: u16 = 3;

/// Draws the node of a row and what joins it to the next one aft.
pub fn draw_row(
    desk: &Desk,
    row: usize,
    area: Rect,
    y: u16,
    is_spread: bool,
    painter: &mut Painter<'_>,
) {
    let glyphs = painter.glyphs;
    let layout = desk.layout();
    let is_aboard = desk.run.released(row).is_none_or(|since| since > desk.at);
    let (mark, style) = match is_aboard {
        false => (glyphs.released, QUIET),
        true if row == layout.reference => (glyphs.reference, STRONG),
        true => (glyphs.node, PLAIN),
    };
    painter.put(area, area.x + NODE, y, mark, style);
    if row + 1 == layout.nodes.len() {
        return;
    }
    let span = layout.spans.binary_search_by_key(&row, |span| span.fore).ok();
    let (joined, style) = match (span_load(desk, row), span.map(|index| layout.spans[index].kind)) {
        (Some(SpanLoad::Slack), _) => (glyphs.slack, state_style("slack")),
        (Some(SpanLoad::Over), _) => (glyphs.over, state_style("over")),
        (_, Some(SpanKind::Tether)) => (glyphs.tether_down, QUIET),
        (_, Some(SpanKind::Boom)) => (glyphs.boom_down, QUIET),
        (_, None) => (glyphs.gap_down, QUIET),
    };
    if is_spread {
        painter.put(area, area.x + NODE, y + 1, joined, style);
    } else {
        painter.put(area, area.x + GAP, y, joined, style);
    }
}

/// How the span aft of a row stands; `None` on a line without spans, whose loads are not
/// worked out for a mark, and where there is nothing between the two.
fn span_load(desk: &Desk, row: usize) -> Option<SpanLoad> {
    if desk.layout().spans.is_empty() {
        return None;
    }
    let state = desk.state()?;
    state.node(row).aboard()?;
    state.node(row + 1).aboard()?;
    let loads = desk.run.loads().ok()?;
    Some(SpanLoad::of(&loads, &loads.state_of_instant(*state.instant()), row))
}

/// The horizon of the line at the present moment.
pub struct Horizon {
    /// It lies beyond the fore end.
    pub is_fore: bool,
    text: String,
}

/// The horizon as seen from the end of the line nearest to it; `None` without thrust, and
/// in gravity with a gradient.
pub fn horizon(desk: &Desk) -> Option<Horizon> {
    let state = desk.state()?;
    let acceleration = state.instant().moment.acceleration_m_s2;
    if acceleration.is_zero() {
        return None;
    }
    let is_fore = acceleration.is_negative();
    let is_aboard = |row: &usize| matches!(state.node(*row), NodeState::Aboard(_));
    let row = if is_fore {
        (0..state.rows()).find(is_aboard)
    } else {
        (0..state.rows()).rev().find(is_aboard)
    }?;
    let position_m = state.node(row).aboard()?.position_m;
    let distance = state.instant().horizon_m(position_m)?.to_f64();
    let side = if is_fore { "fore" } else { "aft" };
    let name = &desk.layout().nodes[row].name;
    let text = format!("horizon {} {side} of {name}", words::value(Measure::Length, distance));
    Some(Horizon { is_fore, text })
}

/// Draws the row of the horizon, or says that there is none.
pub fn draw_horizon(horizon: Option<&Horizon>, area: Rect, y: u16, painter: &mut Painter<'_>) {
    let glyphs = painter.glyphs;
    match horizon {
        Some(horizon) => {
            painter.put(area, area.x + NODE, y, glyphs.horizon, STRONG);
            painter.put(area, area.x + WIDTH, y, &horizon.text, QUIET);
        }
        None => {
            painter.put(area, area.x + WIDTH, y, "no horizon at this moment", QUIET);
        }
    }
}
