//! The layout as flown: the text of the layout with its plan and its notes brought up to
//! date.
//!
//! What is written is the layout file itself, comments and all. When the thrust has been
//! changed, its phases (or its logged history) give way to the phases in force; a hold for
//! good is written until the present moment or the end of the plan as filed, whichever is
//! later. Notes made at the desk are added. Moves, releases and failed links have no place
//! in a layout and are left out, which is said in a comment. With nothing changed, the
//! text is byte for byte the layout's own.

use std::fmt::Write as _;

use clockspar::layout::{self, Layout};
use clockspar::run::{Event, EventKind};

use super::message::Notice;
use super::sentences::end_of_plan;
use super::state::Desk;
use super::words;

/// The layout as flown.
#[derive(Debug)]
pub struct AsFlown {
    /// Its text.
    pub text: String,
    /// How many changes a layout cannot hold.
    pub left_out: usize,
}

/// The text of the layout as flown.
pub fn layout_as_flown(desk: &Desk) -> Result<AsFlown, Notice> {
    let layout = desk.layout();
    let source = &layout.source.text;
    let events = if desk.replay.is_some() { &desk.journal[..] } else { desk.run.events() };
    let is_thrust = |event: &&Event| {
        matches!(event.kind, EventKind::Hold { .. } | EventKind::Ramp { .. } | EventKind::Plan)
    };
    let is_flown_otherwise = events.iter().any(|event| is_thrust(&event));
    let notes: Vec<&Event> = events
        .iter()
        .filter(|event| matches!(event.kind, EventKind::Note { .. }) && !is_filed(event, layout))
        .collect();
    let left_out: Vec<&Event> = events
        .iter()
        .filter(|event| !is_thrust(event) && !matches!(event.kind, EventKind::Note { .. }))
        .collect();
    let mut text = if is_flown_otherwise { without_plan(source) } else { source.clone() };
    let mut added = String::new();
    if !left_out.is_empty() {
        added.push_str("# What was flown and a layout cannot hold:\n");
    }
    for event in &left_out {
        let _ = writeln!(added, "# {}: {}", words::moment(event.at), words::event(&event.kind));
    }
    if is_flown_otherwise {
        push_phases(&mut added, desk);
    }
    for note in notes {
        push_note(&mut added, note);
    }
    if !added.is_empty() {
        if !text.is_empty() && !text.ends_with('\n') {
            text.push('\n');
        }
        text.push('\n');
        text.push_str(&added);
    }
    check(&text, layout)?;
    Ok(AsFlown { text, left_out: left_out.len() })
}

fn is_filed(event: &Event, layout: &Layout) -> bool {
    let EventKind::Note { text } = &event.kind else { return false };
    layout.notes.iter().any(|note| note.at == event.at && note.text == *text)
}

/// The text without the tables of its phases, and without the name of its history.
fn without_plan(source: &str) -> String {
    let mut kept = String::with_capacity(source.len());
    let (mut is_phase, mut is_history) = (false, false);
    for line in source.split_inclusive('\n') {
        let start = line.trim_start();
        if start.starts_with('[') {
            let header: String =
                start.split(['#', '\n']).next().unwrap_or("").split_whitespace().collect();
            is_phase = header == "[[phase]]";
            is_history = header == "[acceleration]";
        }
        let names_history = is_history
            && start.strip_prefix("history").is_some_and(|rest| rest.trim_start().starts_with('='));
        if !is_phase && !names_history {
            kept.push_str(line);
        }
    }
    kept
}

fn push_phases(text: &mut String, desk: &Desk) {
    let Some(plan) = desk.run.plan() else { return };
    let shown_until = desk.at.max(end_of_plan(desk.layout()));
    for phase in plan.phases() {
        let is_for_good = desk.plan_shape.is_open && phase.end == plan.end();
        let end = if is_for_good { phase.end.min(shown_until) } else { phase.end };
        let Some(length) = end.checked_sub(phase.start) else { continue };
        if length.attoseconds() <= 0 {
            continue;
        }
        let (first, last) =
            (phase.acceleration(phase.start).to_f64(), phase.acceleration(end).to_f64());
        let _ = if phase.is_hold() {
            writeln!(text, "[[phase]]\nhold = {first:?}\nfor = \"{length} s\"")
        } else {
            writeln!(text, "[[phase]]\nramp = [{first:?}, {last:?}]\nfor = \"{length} s\"")
        };
    }
}

fn push_note(text: &mut String, note: &Event) {
    let EventKind::Note { text: words } = &note.kind else { return };
    let mut quoted = String::with_capacity(words.len());
    for sign in words.chars() {
        match sign {
            '"' | '\\' => quoted.extend(['\\', sign]),
            _ if sign.is_control() => {
                let _ = write!(quoted, "\\u{:04X}", u32::from(sign));
            }
            _ => quoted.push(sign),
        }
    }
    let _ = writeln!(text, "[[note]]\nat = \"{} s\"\ntext = \"{quoted}\"", note.at);
}

/// Reads the text again: a plan that stands in it in another form than tables of their own
/// would be there twice.
fn check(text: &str, layout: &Layout) -> Result<(), Notice> {
    let files = |name: &str| {
        let found = layout.source.files.iter().find(|file| file.name == name);
        found.map(|file| file.text.clone()).ok_or_else(|| "it is not known".to_owned())
    };
    match layout::read("layout as flown", text, &files) {
        Ok(read) if read.nodes.len() == layout.nodes.len() => Ok(()),
        _ => Err(Notice::refused(
            "the plan cannot be taken out of the text of this layout",
            "phases and notes are tables of their own, `[[phase]]` and `[[note]]`",
            "write them so in the layout first",
        )),
    }
}
