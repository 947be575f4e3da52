//! Where everything stands: the parts of the screen for its size.

use ratatui::layout::Rect;

use super::painter::width_of;
use super::state::Desk;

/// How much of the desk there is room for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Extent {
    /// Head, table, drawn line, plan chart.
    Full,
    /// One narrow table, the plan in one row.
    Narrow,
    /// One line of text.
    OneLine,
}

/// Columns and rows from which on the desk is full.
const FULL: (u16, u16) = (80, 24);
/// Columns and rows from which on there is a table.
const NARROW: (u16, u16) = (60, 16);
/// Rows of headings: names and units.
pub const HEADINGS: u16 = 2;

/// The most rows a note takes.
const NOTE_ROWS: u16 = 3;

/// The parts of the screen; each lies inside the area, and may be empty.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Geometry {
    /// How much there is.
    pub extent: Extent,
    /// The head.
    pub head: Rect,
    /// The table with its headings and the drawn line.
    pub table: Rect,
    /// What a view draws beside its table; empty where there is no room.
    pub beside: Rect,
    /// What a view has to say under its table.
    pub note: Rect,
    /// The thrust plan.
    pub plan: Rect,
    /// The entry line; a message stands there too, or above it.
    pub entry: Rect,
    /// Whether the rows are nodes, with a row for the horizon.
    has_horizon: bool,
}

impl Geometry {
    /// The parts of an area of this size, with its corner at the origin.
    pub fn of(width: u16, height: u16, desk: &Desk) -> Geometry {
        Geometry::within(Rect::new(0, 0, width, height), desk)
    }

    /// The parts of an area.
    pub fn within(area: Rect, desk: &Desk) -> Geometry {
        let extent = if area.width >= FULL.0 && area.height >= FULL.1 {
            Extent::Full
        } else if area.width >= NARROW.0 && area.height >= NARROW.1 {
            Extent::Narrow
        } else {
            Extent::OneLine
        };
        let (head, plan) = match extent {
            // A taller screen gives the plan a fifth of what it has more.
            Extent::Full => (4, 6 + (area.height - FULL.1) / 5),
            Extent::Narrow => (2, 1),
            Extent::OneLine => (area.height.min(1), 0),
        };
        let plan = plan.min(12);
        let bottom = if extent == Extent::OneLine { 0 } else { 1 };
        let mut y = area.y;
        let mut take = |rows: u16| {
            let part = Rect { x: area.x, y, width: area.width, height: rows };
            y += rows;
            part
        };
        let head = take(head);
        let table = match extent {
            Extent::OneLine => take(0),
            _ => take(area.height - head.height - plan - bottom),
        };
        let note = match (extent, desk.note()) {
            (Extent::OneLine, _) | (_, None) => 0,
            (_, Some(note)) => (width_of(&note) / table.width.max(1) + 1).min(NOTE_ROWS),
        };
        let (table, note) = split_rows(table, table.height.saturating_sub(note));
        // A square of the launch frame is a column wide and half a row high.
        let beside = match (extent, desk.view().beside) {
            (Extent::Full, Some(_)) => (2 * table.height + 8).min(table.width * 9 / 20),
            _ => 0,
        };
        let (table, beside) = split_columns(table, table.width - beside);
        let plan = take(plan);
        let entry = take(bottom);
        Geometry { extent, head, table, beside, note, plan, entry, has_horizon: desk.view().nodes }
    }

    /// How many rows of the table are seen at once.
    pub fn visible_rows(&self) -> u16 {
        self.table.height.saturating_sub(HEADINGS + u16::from(self.has_horizon))
    }
}

/// The upper rows of an area and the rest.
fn split_rows(area: Rect, rows: u16) -> (Rect, Rect) {
    let upper = Rect { height: rows, ..area };
    (upper, Rect { y: area.y + rows, height: area.height - rows, ..area })
}

/// The left columns of an area and the rest.
fn split_columns(area: Rect, columns: u16) -> (Rect, Rect) {
    let left = Rect { width: columns, ..area };
    (left, Rect { x: area.x + columns, width: area.width - columns, ..area })
}
