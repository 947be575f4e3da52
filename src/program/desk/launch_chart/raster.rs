//! Lines and labels on a raster of half cells.
//!
//! A cell of a terminal is about twice as high as it is wide, so half a cell is a square,
//! and a light ray at 45° runs through the squares diagonally: the aspect is true.

use ratatui::layout::Rect;

use crate::program::desk::painter::{PLAIN, Painter, QUIET, STRONG, width_of};

/// What a line is; where lines cross, the later kind is seen.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Kind {
    /// The horizon of the present moment.
    Horizon,
    /// A station, which rests in the launch frame.
    Station,
    /// A node beside the chosen ones.
    Node,
    /// A chosen node.
    Chosen,
    /// A signal.
    Signal,
}

/// A place of the launch frame on the raster, in half cells from the upper left corner.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Spot {
    /// Columns, to the right.
    pub x: f64,
    /// Half rows, downwards.
    pub y: f64,
}

/// A raster with what has been drawn on it.
pub struct Raster {
    columns: usize,
    /// Two a row.
    halves: usize,
    drawn: Vec<Option<Kind>>,
    marks: Vec<(u16, u16, &'static str)>,
    labels: Vec<(u16, u16, String)>,
}

impl Raster {
    /// An empty raster for an area of cells.
    pub fn new(area: Rect) -> Raster {
        let (columns, halves) = (usize::from(area.width), 2 * usize::from(area.height));
        Raster {
            columns,
            halves,
            drawn: vec![None; columns * halves],
            marks: Vec::new(),
            labels: Vec::new(),
        }
    }

    /// Draws a straight line, clipped to the raster; returns the highest place of it that
    /// is seen. Places that are not numbers draw nothing.
    pub fn line(&mut self, kind: Kind, from: Spot, to: Spot) -> Option<Spot> {
        let (start, end) = self.clipped(from, to)?;
        let length = (end.x - start.x).abs().max((end.y - start.y).abs());
        // The raster has a few hundred squares a side, and the line has been clipped.
        let steps = length.ceil().max(1.0) as usize;
        for step in 0..=steps {
            // The horizon is dotted.
            if kind == Kind::Horizon && step % 4 >= 2 {
                continue;
            }
            let part = step as f64 / steps as f64;
            let x = start.x + (end.x - start.x) * part;
            let y = start.y + (end.y - start.y) * part;
            self.dot(kind, Spot { x, y });
        }
        Some(if start.y <= end.y { start } else { end })
    }

    fn dot(&mut self, kind: Kind, spot: Spot) {
        if !(spot.x >= 0.0 && spot.y >= 0.0) {
            return;
        }
        let (x, y) = (spot.x as usize, spot.y as usize);
        if x < self.columns && y < self.halves {
            let drawn = &mut self.drawn[y * self.columns + x];
            *drawn = (*drawn).max(Some(kind));
        }
    }

    /// The part of a line inside the raster (Liang & Barsky, ACM Trans. Graphics 3 (1984) 1).
    fn clipped(&self, from: Spot, to: Spot) -> Option<(Spot, Spot)> {
        let (dx, dy) = (to.x - from.x, to.y - from.y);
        if !(from.x.is_finite() && from.y.is_finite() && dx.is_finite() && dy.is_finite()) {
            return None;
        }
        let (right, bottom) = (self.columns as f64 - 1e-6, self.halves as f64 - 1e-6);
        let (mut enters, mut leaves) = (0.0_f64, 1.0_f64);
        for (step, room) in
            [(-dx, from.x), (dx, right - from.x), (-dy, from.y), (dy, bottom - from.y)]
        {
            if step == 0.0 {
                if room < 0.0 {
                    return None;
                }
            } else if step < 0.0 {
                enters = enters.max(room / step);
            } else {
                leaves = leaves.min(room / step);
            }
        }
        if enters > leaves {
            return None;
        }
        let at = |part: f64| Spot { x: from.x + dx * part, y: from.y + dy * part };
        Some((at(enters), at(leaves)))
    }

    fn cell_of(&self, spot: Spot) -> Option<(u16, u16)> {
        let inside = spot.x >= 0.0
            && spot.y >= 0.0
            && spot.x < self.columns as f64
            && spot.y < self.halves as f64;
        inside.then(|| (spot.x as u16, (spot.y / 2.0) as u16))
    }

    /// Puts a mark on an event, if it is in sight.
    pub fn mark(&mut self, spot: Spot, mark: &'static str) {
        if let Some((x, y)) = self.cell_of(spot) {
            self.marks.retain(|(left, row, _)| (*left, *row) != (x, y));
            self.marks.push((x, y, mark));
        }
    }

    /// Puts a label beside a place, where it covers neither another label nor a mark, and
    /// no line if that can be helped; a label without room is left out.
    pub fn label(&mut self, spot: Spot, text: &str) {
        let Some((x, y)) = self.cell_of(spot) else { return };
        let width = width_of(text);
        let (right, left) = (i32::from(x) + 2, i32::from(x) - 1 - i32::from(width));
        let row = i32::from(y);
        let mut places = Vec::new();
        for down in [0, 1, -1, 2, -2, 3, 4] {
            places.extend([(right, row + down), (left, row + down)]);
        }
        for may_cover in [false, true] {
            for (x, y) in &places {
                if let Some((x, y)) = self.has_room(*x, *y, width, may_cover) {
                    self.labels.push((x, y, text.to_owned()));
                    return;
                }
            }
        }
    }

    fn has_room(&self, x: i32, y: i32, width: u16, may_cover: bool) -> Option<(u16, u16)> {
        let (x, y) = (u16::try_from(x).ok()?, u16::try_from(y).ok()?);
        let end = usize::from(x) + usize::from(width);
        if end > self.columns || usize::from(y) * 2 >= self.halves {
            return None;
        }
        // A blank column on either side keeps labels apart.
        let (first, last) = (usize::from(x).saturating_sub(1), end);
        let overlaps = |left: u16, columns: u16| {
            usize::from(left) <= last && usize::from(left) + usize::from(columns) > first
        };
        let taken = self
            .labels
            .iter()
            .any(|(left, row, text)| *row == y && overlaps(*left, width_of(text)))
            || self.marks.iter().any(|(left, row, _)| *row == y && overlaps(*left, 1));
        if taken {
            return None;
        }
        let is_free = |half: usize| {
            let start = half * self.columns;
            self.drawn[start + usize::from(x)..start + end].iter().all(Option::is_none)
        };
        let upper = 2 * usize::from(y);
        (may_cover || (is_free(upper) && is_free(upper + 1))).then_some((x, y))
    }

    /// Puts everything into its area.
    pub fn paint(&self, area: Rect, painter: &mut Painter<'_>) {
        let glyphs = painter.glyphs;
        for y in 0..area.height {
            for x in 0..area.width {
                let half = |half: usize| {
                    self.drawn
                        .get((2 * usize::from(y) + half) * self.columns + usize::from(x))
                        .copied()
                        .flatten()
                };
                let (upper, lower) = (half(0), half(1));
                let Some(kind) = upper.max(lower) else { continue };
                let is_upper = upper == Some(kind);
                let pick = |marks: [&'static str; 3]| match (is_upper, lower == Some(kind)) {
                    (true, true) => marks[2],
                    (true, false) => marks[0],
                    _ => marks[1],
                };
                let (mark, style) = match kind {
                    Kind::Horizon => (glyphs.horizon_dot, QUIET),
                    Kind::Station => (glyphs.vertical, QUIET),
                    // A line that leans is dotted, so that many of them stay apart.
                    Kind::Node => (pick([glyphs.slack, glyphs.slack, glyphs.vertical]), QUIET),
                    Kind::Chosen => {
                        (pick([glyphs.track_upper, glyphs.track_lower, glyphs.track_both]), PLAIN)
                    }
                    Kind::Signal => {
                        (pick([glyphs.ray_upper, glyphs.ray_lower, glyphs.ray_both]), STRONG)
                    }
                };
                painter.put(area, area.x + x, area.y + y, mark, style);
            }
        }
        for (x, y, mark) in &self.marks {
            painter.put(area, area.x + x, area.y + y, mark, STRONG);
        }
        for (x, y, text) in &self.labels {
            painter.put(area, area.x + x, area.y + y, text, PLAIN);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_light_ray_is_a_diagonal_of_squares() {
        let mut raster = Raster::new(Rect::new(0, 0, 10, 5));
        raster.line(Kind::Signal, Spot { x: 0.5, y: 9.5 }, Spot { x: 9.5, y: 0.5 });
        let drawn: Vec<usize> = (0..100).filter(|place| raster.drawn[*place].is_some()).collect();
        let wanted: Vec<usize> = (0..10).map(|half| half * 10 + 9 - half).collect();
        assert_eq!(drawn, wanted);
    }

    #[test]
    fn nothing_is_drawn_of_what_is_no_number_or_out_of_sight() {
        let mut raster = Raster::new(Rect::new(0, 0, 10, 5));
        for far in [f64::NAN, f64::INFINITY, f64::MAX] {
            let from = Spot { x: far, y: -far };
            let to = Spot { x: -far, y: 5.0 };
            raster.line(Kind::Node, from, to);
            raster.mark(from, "x");
            raster.label(from, "far");
        }
        raster.line(Kind::Node, Spot { x: 20.0, y: 0.0 }, Spot { x: 30.0, y: 9.0 });
        assert!(raster.marks.is_empty() && raster.labels.is_empty());
    }

    #[test]
    fn labels_keep_apart() {
        let mut raster = Raster::new(Rect::new(0, 0, 30, 6));
        let spot = Spot { x: 3.0, y: 4.0 };
        raster.mark(spot, "x");
        for _ in 0..20 {
            raster.label(spot, "name");
        }
        assert!(raster.labels.len() > 1);
        for (index, (x, y, text)) in raster.labels.iter().enumerate() {
            for (other_x, other_y, other) in &raster.labels[..index] {
                let apart = x > &(other_x + width_of(other)) || other_x > &(x + width_of(text));
                assert!(y != other_y || apart);
            }
        }
    }
}
