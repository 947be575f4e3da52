//! The thrust plan drawn as a chart of the acceleration of the reference over array time,
//! with the present moment on it.

use clockspar::layout::Course;
use clockspar::model::array_time::ArrayTime;
use clockspar::model::plan::Plan;
use clockspar::table::{Cell, Column, Measure, fit};
use ratatui::layout::Rect;

use super::geometry::{Extent, Geometry};
use super::keys::Focus;
use super::painter::{CHOSEN, PLAIN, Painter, QUIET, STRONG, width_of};
use super::state::Desk;
use super::words;

/// Columns for the labels of the upright axis.
const LABELS: u16 = 12;
/// Phase boundaries are marked up to so many columns per boundary.
const LEAST_COLUMNS_A_PHASE: usize = 3;

/// Draws the plan into its part of the screen.
pub fn draw(desk: &Desk, geometry: &Geometry, painter: &mut Painter<'_>) {
    let area = geometry.plan;
    let label = if desk.focus == Focus::Plan { CHOSEN } else { QUIET };
    let Some(plan) = desk.run.plan() else {
        painter.put(area, area.x, area.y, "plan", label);
        if let Course::Standing(standing) = &desk.layout().course {
            let gravity = words::acceleration(standing.gravity_m_s2);
            let text = format!("the line stands in a gravity of {gravity}");
            painter.put(area, area.x + LABELS, area.y, &text, QUIET);
        }
        return;
    };
    if geometry.extent == Extent::Narrow {
        painter.put(area, area.x, area.y, "plan", label);
        draw_strip(desk, plan, area, painter);
        return;
    }
    let chart = Chart::new(desk, area);
    chart.draw_labels(desk, area, painter);
    chart.draw_axis(plan, area, painter);
    chart.draw_line(plan, painter);
    chart.draw_present(desk, area, painter);
    painter.put(area, area.x, area.bottom() - 1, "plan", label);
}

/// The part of array time that is drawn: the plan, and the present moment in a hold for
/// good that has gone on past what is drawn at first.
fn shown_until(desk: &Desk) -> ArrayTime {
    let mut until = desk.plan_shape.until.max(SHORTEST);
    while desk.plan_shape.is_open && until < desk.at {
        // Twice as much at a time, so that the chart stands still in between.
        let doubled = until.attoseconds().saturating_mul(2);
        until = ArrayTime::from_attoseconds(doubled.min(ArrayTime::LIMIT.attoseconds()));
    }
    until
}

/// What is shown of a plan that has no length.
const SHORTEST: ArrayTime = ArrayTime::from_attoseconds(1);

/// The end of what is shown, in words.
fn end_of(until: ArrayTime) -> String {
    if until == SHORTEST { "no plan".to_owned() } else { words::time(until) }
}

/// The columns of array time.
#[derive(Clone, Copy)]
struct TimeAxis {
    left: u16,
    columns: u16,
    until: ArrayTime,
}

impl TimeAxis {
    /// The moment at a part of the axis, in columns and halves of columns.
    fn moment(&self, halves: u16) -> ArrayTime {
        let all = i128::from(self.columns.max(1)) * 2;
        ArrayTime::from_attoseconds(self.until.attoseconds() / all * i128::from(halves))
    }

    /// The column of a moment, and whether it lies left or right of all columns.
    fn column(&self, at: ArrayTime) -> (u16, i8) {
        let last = self.columns.saturating_sub(1);
        if at < ArrayTime::ZERO {
            return (self.left, -1);
        }
        if at > self.until {
            return (self.left + last, 1);
        }
        let part = at.attoseconds() as f64 / self.until.attoseconds() as f64;
        let column = (part * f64::from(self.columns)) as u16;
        (self.left + column.min(last), 0)
    }
}

struct Chart {
    time: TimeAxis,
    top: u16,
    rows: u16,
    lowest_m_s2: f64,
    highest_m_s2: f64,
}

/// Acceleration at a moment, the later phase counting at a boundary, and how it changes.
fn slope(plan: &Plan, at: ArrayTime) -> (f64, i8) {
    let moment = plan.moment(at);
    let acceleration = moment.acceleration_m_s2.to_f64();
    let direction = match moment.phase.and_then(|index| plan.phases().get(index)) {
        Some(phase) if !phase.is_hold() => {
            if phase.line.to_m_s2 > phase.line.from_m_s2 {
                1
            } else {
                -1
            }
        }
        _ => 0,
    };
    (acceleration, direction)
}

impl Chart {
    fn new(desk: &Desk, area: Rect) -> Chart {
        let shape = &desk.plan_shape;
        let (mut lowest, mut highest) = (shape.smallest_m_s2.min(0.0), shape.largest_m_s2.max(0.0));
        if highest == lowest {
            (lowest, highest) = (0.0, 1.0);
        }
        let time = TimeAxis {
            left: area.x + LABELS,
            columns: area.width.saturating_sub(LABELS + 1),
            until: shown_until(desk),
        };
        Chart {
            time,
            top: area.y + 1,
            rows: area.height.saturating_sub(3),
            lowest_m_s2: lowest,
            highest_m_s2: highest,
        }
    }

    /// The row of an acceleration.
    fn row(&self, acceleration_m_s2: f64) -> u16 {
        let part = (self.highest_m_s2 - acceleration_m_s2) / (self.highest_m_s2 - self.lowest_m_s2);
        let last = self.rows.saturating_sub(1);
        let row = (part.clamp(0.0, 1.0) * f64::from(last)).round() as u16;
        self.top + row.min(last)
    }

    fn inside(&self) -> Rect {
        Rect { x: self.time.left, y: self.top, width: self.time.columns, height: self.rows }
    }

    fn draw_labels(&self, desk: &Desk, area: Rect, painter: &mut Painter<'_>) {
        let shape = &desk.plan_shape;
        let values = [shape.largest_m_s2, shape.smallest_m_s2, 0.0];
        let cells = values.map(Cell::Number);
        let column = Column { key: "acceleration", heading: "", measure: Measure::Acceleration };
        let format = fit(&column, &cells, !desk.glyphs.ascii_only);
        let labels = Rect { width: LABELS - 1, ..area };
        painter.put(labels, area.x, area.y, &format!("α {}", format.unit()), QUIET);
        let mut taken: Vec<u16> = Vec::new();
        for (value, cell) in values.into_iter().zip(&cells) {
            let y = self.row(value);
            if self.rows > 0 && !taken.contains(&y) {
                taken.push(y);
                painter.put_right(labels, y, format.cell(cell).trim(), QUIET);
            }
        }
    }

    /// The level axis with the boundaries of phases, and its labels.
    fn draw_axis(&self, plan: &Plan, area: Rect, painter: &mut Painter<'_>) {
        let glyphs = painter.glyphs;
        let y = self.top + self.rows;
        let right = self.time.left + self.time.columns;
        for x in self.time.left..right {
            painter.put(area, x, y, glyphs.horizontal, QUIET);
        }
        if plan.phases().len() * LEAST_COLUMNS_A_PHASE <= usize::from(self.time.columns) {
            let ends = plan.phases().iter().map(|phase| phase.end);
            for end in ends.filter(|end| *end < self.time.until) {
                let (x, _) = self.time.column(end);
                painter.put(area, x, y, glyphs.branch_up, QUIET);
            }
        }
        painter.put(area, self.time.left, y, glyphs.bottom_left, QUIET);
        let until = end_of(self.time.until);
        let end = painter.put_right(area, y + 1, &until, QUIET);
        let middle = format!("τ, phase ends {}", glyphs.branch_up);
        painter.put(area, self.time.left, y + 1, "0 s", QUIET);
        let x = self.time.left + self.time.columns / 2;
        let x = x.saturating_sub(width_of(&painter.signs(&middle)) / 2);
        if x + width_of(&painter.signs(&middle)) + 2 <= end {
            painter.put(area, x, y + 1, &middle, QUIET);
        }
    }

    fn draw_line(&self, plan: &Plan, painter: &mut Painter<'_>) {
        let glyphs = painter.glyphs;
        let inside = self.inside();
        if self.rows == 0 {
            return;
        }
        let zero = self.row(0.0);
        for x in inside.left()..inside.right() {
            painter.put(inside, x, zero, glyphs.plan_zero, QUIET);
        }
        // Before the plan there is no thrust.
        let mut before = zero;
        for column in 0..self.time.columns {
            let x = self.time.left + column;
            let to = self.time.moment(2 * column + 2);
            let (acceleration, direction) = slope(plan, self.time.moment(2 * column + 1));
            let y = self.row(acceleration);
            let glyph = match direction {
                1 => glyphs.plan_rising,
                -1 => glyphs.plan_falling,
                _ => glyphs.plan_level,
            };
            if before.abs_diff(y) > 1 {
                // What happened between two columns: a jump, or a ramp too short to see.
                let since = self.time.moment((2 * column).saturating_sub(1));
                let upright = match between(plan, since, to) {
                    Between::Jump => glyphs.plan_jump,
                    Between::Ramp if before > y => glyphs.plan_rising,
                    Between::Ramp => glyphs.plan_falling,
                };
                for row in before.min(y) + 1..before.max(y) {
                    painter.put(inside, x, row, upright, PLAIN);
                }
            }
            painter.put(inside, x, y, glyph, PLAIN);
            before = y;
        }
    }

    fn draw_present(&self, desk: &Desk, area: Rect, painter: &mut Painter<'_>) {
        let glyphs = painter.glyphs;
        let (x, beyond) = self.time.column(desk.at);
        let mark = match beyond {
            0 => glyphs.present,
            1.. => glyphs.more_right,
            _ => glyphs.more_left,
        };
        painter.put(area, x, area.y, mark, STRONG);
        let told = words::time(desk.at);
        let width = width_of(&told);
        let beside =
            if x + 2 + width <= area.right() { x + 2 } else { x.saturating_sub(width + 1) };
        if beside >= self.time.left {
            painter.put(area, beside, area.y, &told, QUIET);
        }
        if beyond == 0 {
            painter.restyle(Rect { x, y: self.top, width: 1, height: self.rows }, CHOSEN);
        }
    }
}

/// What the plan does between two columns of the chart.
enum Between {
    Jump,
    Ramp,
}

fn between(plan: &Plan, from: ArrayTime, to: ArrayTime) -> Between {
    let first = plan.phases().partition_point(|phase| phase.end < from);
    let has_ramp = plan.phases()[first.min(plan.phases().len())..]
        .iter()
        .take_while(|phase| phase.start <= to)
        .any(|phase| !phase.is_hold());
    if has_ramp { Between::Ramp } else { Between::Jump }
}

/// The plan in one row: what the acceleration does, and the present moment.
fn draw_strip(desk: &Desk, plan: &Plan, area: Rect, painter: &mut Painter<'_>) {
    let glyphs = painter.glyphs;
    let until = end_of(shown_until(desk));
    let right = painter.put_right(area, area.y, &until, QUIET);
    let left = area.x + 6;
    let columns = right.saturating_sub(left + 1);
    let time = TimeAxis { left, columns, until: shown_until(desk) };
    for column in 0..columns {
        let (acceleration, direction) = slope(plan, time.moment(2 * column + 1));
        let glyph = match direction {
            1 => glyphs.plan_rising,
            -1 => glyphs.plan_falling,
            _ if acceleration == 0.0 => glyphs.plan_zero,
            _ => glyphs.plan_level,
        };
        painter.put(area, left + column, area.y, glyph, PLAIN);
    }
    if columns > 0 {
        let (x, beyond) = time.column(desk.at);
        let mark = match beyond {
            0 => glyphs.present,
            1.. => glyphs.more_right,
            _ => glyphs.more_left,
        };
        painter.put(area, x, area.y, mark, STRONG);
    }
}
