//! Where a phase of a logged history stands in its file.

use crate::layout::quantity::{parse_duration, plain_seconds};
use crate::layout::{Course, Layout, SourceFile};
use crate::model::array_time::ArrayTime;

/// The line of the file, in words, at which a phase of a history begins; `None` for a plan of
/// phases, which are counted as they stand in the layout.
pub(super) fn place(layout: &Layout, phase: usize) -> Option<String> {
    let Course::Thrust(plan) = &layout.course else { return None };
    let phase = plan.phases().get(phase)?;
    let file = layout.source.files.last()?;
    let (line, is_row) = line_of(file, phase.start)?;
    let before = if is_row { "" } else { "before " };
    Some(format!("{before}line {line} of `{}`", file.name))
}

/// The last line that states a moment, or else the first line of all.
fn line_of(file: &SourceFile, start: ArrayTime) -> Option<(usize, bool)> {
    let is_said = |line: &str| !line.trim().is_empty() && !line.starts_with('#');
    let mut lines = file.text.lines().enumerate().filter(|(_, line)| is_said(line));
    let (_, header) = lines.next()?;
    let fields = |line: &str| -> Vec<String> {
        line.split(',').map(|field| field.trim().trim_matches('"').trim().to_owned()).collect()
    };
    let header = fields(header.trim_start_matches('\u{feff}'));
    if !header.iter().any(|column| column == "acceleration_m_s2") {
        return None;
    }
    let column = header.iter().position(|column| column == "at_s")?;
    let mut first = None;
    let mut found = None;
    for (index, line) in lines {
        let field = line.split(',').nth(column).unwrap_or_default();
        let field = field.trim().trim_matches('"').trim();
        let at = plain_seconds(field).or_else(|| parse_duration(field).ok());
        first = first.or(Some(index + 1));
        if at == Some(start) {
            found = Some(index + 1);
        } else if found.is_some() {
            break;
        }
    }
    found.map(|line| (line, true)).or(first.map(|line| (line, false)))
}
