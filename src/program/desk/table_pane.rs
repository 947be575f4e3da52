//! The table of a view: its headings, the rows in the window, the line drawn beside them.

use clockspar::table::{Cell, Column, ColumnFormat, Table, fit};
use ratatui::layout::Rect;
use ratatui::style::Style;

use super::drawn_line;
use super::geometry::{Geometry, HEADINGS};
use super::keys::Focus;
use super::painter::{CHOSEN, PLAIN, Painter, QUIET, STRONG, state_style, width_of};
use super::state::Desk;

/// Columns between two columns.
const GAP: u16 = 2;
/// Columns before the table for the mark of the chosen row.
const MARGIN: u16 = 2;

/// A column as it is shown.
struct Shown {
    place: usize,
    format: ColumnFormat,
    width: u16,
}

/// Draws the table of the view; returns the whole text of the chosen row's last cell when
/// there was no room for it.
pub fn draw(desk: &Desk, geometry: &Geometry, painter: &mut Painter<'_>) -> Option<String> {
    let area = geometry.table;
    let view = desk.view();
    let Some(table) = view.table.and_then(|table| table(desk)) else {
        let text = if desk.replay.is_some() { "no frame has been read" } else { "no numbers" };
        painter.put(area, area.x + MARGIN, area.y, text, QUIET);
        return None;
    };
    let visible = usize::from(geometry.visible_rows());
    let cursor = desk.cursor();
    let top = cursor.window(table.rows, visible);
    let rows: Vec<usize> = (top..table.rows.min(top + visible)).collect();
    let cells: Vec<Vec<Cell<'_>>> = rows
        .iter()
        .map(|row| {
            let mut cells = Vec::with_capacity(table.columns.len());
            (table.fill)(*row, &mut cells);
            cells
        })
        .collect();
    let margin = if view.nodes { drawn_line::WIDTH } else { MARGIN };
    let body = Rect {
        x: area.x + margin.min(area.width),
        width: area.width.saturating_sub(margin),
        ..area
    };
    let columns = choose(desk, &table, &cells, body.width);
    let mut y = area.y;
    draw_headings(&table, &columns, body, y, painter);
    y += HEADINGS;
    let horizon = view.nodes.then(|| drawn_line::horizon(desk)).flatten();
    let is_fore = horizon.as_ref().is_some_and(|horizon| horizon.is_fore);
    if view.nodes && is_fore {
        drawn_line::draw_horizon(horizon.as_ref(), area, y, painter);
        y += 1;
    }
    // With room to spare, each gap of the line has a row of its own.
    let is_spread = view.nodes && rows.len() == table.rows && 2 * rows.len() <= visible + 1;
    for (row, cells) in rows.iter().zip(&cells) {
        let is_chosen = *row == cursor.row;
        let style = row_style(is_chosen, desk.focus, table.marked == Some(*row));
        draw_row(&columns, cells, body, y, style, painter);
        let mark = if is_chosen { painter.glyphs.selected } else { " " };
        painter.put(area, area.x, y, mark, STRONG);
        if is_chosen {
            painter.restyle(Rect { y, height: 1, ..body }, style);
        }
        if view.nodes {
            drawn_line::draw_row(desk, *row, area, y, is_spread, painter);
        }
        y += if is_spread { 2 } else { 1 };
    }
    let below = area.bottom().saturating_sub(1);
    if view.nodes {
        if !is_fore {
            let last = if is_spread { y.saturating_sub(1) } else { y };
            drawn_line::draw_horizon(horizon.as_ref(), area, last.min(below), painter);
        }
        if top > 0 {
            painter.put(area, area.x + 1, area.y + 1, painter.glyphs.more_above, STRONG);
        } else {
            painter.put(area, area.x, area.y + 1, "fore", QUIET);
        }
        if top + rows.len() < table.rows {
            painter.put(area, area.x, below, painter.glyphs.more_below, STRONG);
        }
        return None;
    }
    if top > 0 {
        painter.put(area, area.x, area.y + 1, painter.glyphs.more_above, STRONG);
    }
    if top + rows.len() < table.rows {
        painter.put(area, area.right().saturating_sub(1), below, painter.glyphs.more_below, STRONG);
    }
    if table.rows == 0 {
        painter.put(area, body.x, area.y + HEADINGS, nothing_in(desk), QUIET);
    }
    let chosen = rows.iter().position(|row| *row == cursor.row)?;
    match cells.get(chosen)?.last()? {
        Cell::Text(text) => {
            let is_cut = columns.last().is_none_or(|shown| {
                shown.place + 1 < table.columns.len() || width_of(text) > shown.width
            });
            is_cut.then(|| text.clone().into_owned())
        }
        _ => None,
    }
}

/// What to say of a table without a row.
fn nothing_in(desk: &Desk) -> &'static str {
    let layout = desk.layout();
    match desk.view().name {
        "links" if layout.nodes.len() < 2 => "a link takes two nodes",
        "reach" if layout.stations.is_empty() && desk.reach_of.is_none() => {
            "the layout has no [[station]]"
        }
        _ => "nothing yet",
    }
}

fn row_style(is_chosen: bool, focus: Focus, is_marked: bool) -> Style {
    match (is_chosen, focus) {
        (true, Focus::Table) => CHOSEN,
        (true, _) => STRONG,
        (false, _) if is_marked => STRONG,
        (false, _) => PLAIN,
    }
}

/// The columns there is room for, in the order of the table. Which they are is decided in
/// the order the view states; the first one always stays.
fn choose(desk: &Desk, table: &Table<'_>, cells: &[Vec<Cell<'_>>], room: u16) -> Vec<Shown> {
    let first = desk.view().first;
    let rank =
        |column: &Column| first.iter().position(|key| *key == column.key).unwrap_or(first.len());
    let mut order: Vec<usize> = (0..table.columns.len()).collect();
    order.sort_by_key(|place| rank(&table.columns[*place]));
    let mut chosen: Vec<Shown> = Vec::new();
    let mut taken = 0;
    for place in order {
        let column = &table.columns[place];
        let in_column = cells.iter().filter_map(|row| row.get(place));
        let format = fit(column, in_column, !desk.glyphs.ascii_only);
        let width = u16::try_from(format.width())
            .unwrap_or(u16::MAX)
            .max(width_of(column.heading))
            .max(width_of(format.unit()));
        let gap = if chosen.is_empty() { 0 } else { GAP };
        let left = room.saturating_sub(taken).saturating_sub(gap);
        // Words may be cut where a number may not.
        let width = match chosen.is_empty() {
            true => width.min(room),
            false if format.is_left() && left >= 12 => width.min(left),
            false => width,
        };
        if width > left {
            // What comes after in the order is less wanted, but may still be narrow.
            continue;
        }
        taken += gap + width;
        chosen.push(Shown { place, format, width });
    }
    chosen.sort_by_key(|shown| shown.place);
    chosen
}

fn draw_headings(
    table: &Table<'_>,
    columns: &[Shown],
    body: Rect,
    y: u16,
    painter: &mut Painter<'_>,
) {
    let mut x = body.x;
    for shown in columns {
        let heading = table.columns[shown.place].heading;
        for (line, text) in [(0, heading), (1, shown.format.unit())] {
            put_cell(shown, text, body, x, y + line, QUIET, painter);
        }
        x += shown.width + GAP;
    }
}

fn draw_row(
    columns: &[Shown],
    cells: &[Cell<'_>],
    body: Rect,
    y: u16,
    style: Style,
    painter: &mut Painter<'_>,
) {
    let mut x = body.x;
    for shown in columns {
        if let Some(cell) = cells.get(shown.place) {
            // A state that asks for attention has its colour behind the word.
            let style = match cell {
                Cell::Text(word) if ["slack", "over"].contains(&word.as_ref()) => {
                    style.patch(state_style(word))
                }
                _ => style,
            };
            put_cell(shown, &shown.format.cell(cell), body, x, y, style, painter);
        }
        x += shown.width + GAP;
    }
}

/// Puts a text into a column: words to the left, numbers to the right.
fn put_cell(
    shown: &Shown,
    text: &str,
    body: Rect,
    x: u16,
    y: u16,
    style: Style,
    painter: &mut Painter<'_>,
) {
    let column = Rect { x, y, width: shown.width, height: 1 }.intersection(body);
    if shown.format.is_left() {
        painter.put(column, x, y, text.trim_end(), style);
    } else {
        painter.put_right(column, y, text, style);
    }
}
