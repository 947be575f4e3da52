//! The head: what is shown, when, and how things stand.

use clockspar::table::content::SpanLoad;
use clockspar::table::{Measure, readable_time};
use ratatui::layout::Rect;

use super::geometry::{Extent, Geometry};
use super::painter::{CHOSEN, PLAIN, Painter, QUIET, STRONG, state_style, width_of};
use super::state::Desk;
use super::views::VIEWS;
use super::words;

/// Digits of the hash that are shown.
const HASH_DIGITS: usize = 12;

/// Draws the head.
pub fn draw(desk: &Desk, geometry: &Geometry, painter: &mut Painter<'_>) {
    let area = geometry.head;
    let line =
        |index: u16| Rect { y: area.y + index, height: u16::from(index < area.height), ..area };
    let is_full = geometry.extent == Extent::Full;
    draw_name(desk, line(0), is_full, painter);
    draw_moment(desk, line(1), painter);
    if is_full {
        draw_thrust(desk, line(2), painter);
        draw_views(desk, line(3), painter);
    }
}

/// Name, revision, hash; on the right what is recorded, or else, where there is no line
/// for it, the acceleration.
fn draw_name(desk: &Desk, line: Rect, is_full: bool, painter: &mut Painter<'_>) {
    let (mut text, word) = recording_words(desk);
    if !is_full && word.is_empty() {
        text = thrust(desk).unwrap_or_default();
    }
    let right = painter.put_right(line, line.y, &text, PLAIN);
    let word_area = Rect { x: right, width: width_of(word), ..line };
    painter.restyle(word_area.intersection(line), state_style(word));
    let left = Rect { width: right.saturating_sub(line.x + 2), ..line };
    let layout = desk.layout();
    let hash = layout.source.sha256.get(..HASH_DIGITS).unwrap_or("");
    let revision = match &layout.revision {
        Some(revision) => format!(", revision {revision}"),
        None => String::new(),
    };
    let after = painter.put(left, left.x, left.y, &layout.name, STRONG);
    painter.put(left, after, left.y, &format!("{revision}, {hash}"), PLAIN);
}

/// What is recorded or replayed, and the word in it that is a state.
fn recording_words(desk: &Desk) -> (String, &'static str) {
    if let Some(replay) = &desk.replay {
        let frame = match &replay.frame {
            Some(frame) => format!(", frame {}", frame.index),
            None => String::new(),
        };
        return (
            format!("{} recording {}{frame}", replay.condition, replay.path),
            replay.condition,
        );
    }
    match &desk.recording {
        None => match &desk.failed {
            Some(path) => (format!("failed recording {path}"), "failed"),
            None => ("not recording".to_owned(), ""),
        },
        Some(recording) if desk.at < recording.reached => (
            format!("recording {} waits at {}", recording.path, words::time(recording.reached)),
            "recording",
        ),
        Some(recording) => {
            // The frame of the present moment counts: it is written when it is left.
            let frames = recording.frames + u64::from(recording.is_waiting());
            (
                format!("recording {}, {}", recording.path, words::count(frames, "frame")),
                "recording",
            )
        }
    }
}

/// The moment; on the right what the line is doing.
fn draw_moment(desk: &Desk, line: Rect, painter: &mut Painter<'_>) {
    let states = states(desk);
    let right = painter.put_right(line, line.y, &states.join(", "), PLAIN);
    let mut x = right;
    for state in &states {
        let width = width_of(&painter.signs(state));
        painter.restyle(Rect { x, width, ..line }.intersection(line), state_style(state));
        x = x.saturating_add(width + 2);
    }
    let left = Rect { width: right.saturating_sub(line.x + 2), ..line };
    // Both forms of the moment are exact; the seconds go where there is no room for both.
    let forms = [words::moment(desk.at), readable_time(desk.at)];
    let date = words::date(desk.at, desk.layout()).unwrap_or_default();
    let dated = forms.iter().find(|form| {
        !date.is_empty() && width_of(form).saturating_add(2 + width_of(&date)) <= left.width
    });
    let alone = forms.iter().find(|form| width_of(form) <= left.width);
    let moment = dated.or(alone).unwrap_or(&forms[1]);
    let after = painter.put(left, left.x, left.y, moment, STRONG);
    if dated.is_some() {
        painter.put(left, after + 2, left.y, &date, QUIET);
    }
}

/// The states, each in words.
pub fn states(desk: &Desk) -> Vec<String> {
    let mut states = vec![desk.doing().to_owned()];
    if desk.is_what_if() {
        states.push("what-if".to_owned());
    }
    states.extend(load_words(desk).map(str::to_owned));
    if let Some(running) = &desk.running {
        let slower = if running.is_behind { ", slower for every frame" } else { "" };
        states.push(format!("running at pace {}{slower}", words::rounded(desk.pace)));
    }
    states
}

/// Longest line whose loads are looked through for every picture.
const MOST_WATCHED: usize = 5_000;

/// `slack` and `over`, when some span or node of the line is so at this moment.
fn load_words(desk: &Desk) -> impl Iterator<Item = &'static str> {
    let (mut is_slack, mut is_over) = (false, false);
    let layout = desk.layout();
    if !layout.spans.is_empty()
        && layout.nodes.len() <= MOST_WATCHED
        && let Some(state) = desk.state()
        && let Ok(loads) = desk.run.loads()
    {
        let now = loads.state_of_instant(*state.instant());
        let nodes: Vec<_> = state.nodes().map(|node| node.aboard()).collect();
        for (row, aboard) in nodes.iter().enumerate() {
            let Some(aboard) = aboard else { continue };
            let felt = state.instant().felt_acceleration_m_s2(aboard.position_m).to_f64().abs();
            is_over |= layout.nodes[row].rating_m_s2.is_some_and(|rating| felt > rating);
            if nodes.get(row + 1).is_some_and(Option::is_some) {
                let load = SpanLoad::of(&loads, &now, row);
                is_slack |= load == SpanLoad::Slack;
                is_over |= load == SpanLoad::Over;
            }
        }
    }
    is_slack.then_some("slack").into_iter().chain(is_over.then_some("over"))
}

/// The phase: its number among those in force.
fn phase(desk: &Desk) -> String {
    let Some(plan) = desk.run.plan() else { return String::new() };
    let phases = plan.phases();
    let instant = desk.run.instant_at(desk.at.min(desk.run.last_moment()));
    match instant.moment.phase {
        Some(index) if desk.plan_shape.is_open && index + 1 == phases.len() => {
            "for good".to_owned()
        }
        Some(index) => format!("phase {} of {}", index + 1, phases.len()),
        None if phases.is_empty() => "no plan".to_owned(),
        None if desk.at < phases[0].start => "before the plan".to_owned(),
        None => "after the plan".to_owned(),
    }
}

/// Acceleration of the reference, or the gravity it stands in.
fn thrust(desk: &Desk) -> Option<String> {
    let state = desk.state()?;
    let acceleration = words::acceleration(state.reference_acceleration_m_s2());
    Some(match state.rapidity() {
        Some(_) => format!("α {acceleration}"),
        None => format!("gravity {acceleration}"),
    })
}

/// Acceleration and rapidity; on the right the phase and what the numbers are against.
fn draw_thrust(desk: &Desk, line: Rect, painter: &mut Painter<'_>) {
    let mut right = phase(desk);
    if let Some(node) = desk.against.and_then(|row| desk.layout().nodes.get(row)) {
        right = format!("against {}, {right}", node.name);
    }
    let right = painter.put_right(line, line.y, &right, PLAIN);
    let left = Rect { width: right.saturating_sub(line.x + 2), ..line };
    let mut text = thrust(desk).unwrap_or_default();
    if let Some(rapidity) = desk.state().and_then(|state| state.rapidity()) {
        text = format!("{text}   φ {}", words::rounded(rapidity));
    }
    painter.put(left, left.x, left.y, &text, PLAIN);
}

/// The views with their digits.
fn draw_views(desk: &Desk, line: Rect, painter: &mut Painter<'_>) {
    let mut x = line.x;
    for (place, view) in VIEWS.iter().enumerate().filter(|(_, view)| view.table.is_some()) {
        let text = format!(" {} {} ", view.digit, view.name);
        let style = if place == desk.view { CHOSEN } else { PLAIN };
        x = painter.put(line, x, line.y, &text, style);
    }
}

/// Everything in one line, for an area too small for a table.
pub fn draw_one_line(desk: &Desk, area: Rect, painter: &mut Painter<'_>) {
    let row = desk.nodes.row.min(desk.layout().nodes.len().saturating_sub(1));
    let mut text = format!("{} {}", words::time(desk.at), desk.doing());
    if let Some(node) = desk.layout().nodes.get(row) {
        text = format!("{text}; {}", node.name);
        if let Some(aboard) = desk.state().and_then(|state| state.node(row).aboard()) {
            let rate = words::rounded(aboard.rate_minus_one.to_f64());
            let offset = aboard.clock_offset_s.to_f64();
            text = format!("{text} {rate} {}", words::value(Measure::Time, offset));
        }
    }
    painter.put(area, area.x, area.y, &text, PLAIN);
}
