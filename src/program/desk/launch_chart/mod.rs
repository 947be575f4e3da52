//! The launch frame drawn beside the tables of links and of reach: worldlines, the horizon,
//! and the signals of the chosen row. The fore end is to the right and time runs upwards, a
//! second as long as a light second, so light runs at 45°.
//!
//! Everything is reckoned from one event, the present one of the node that sends, so that
//! a line of metres is drawn as well far out as near its start.

mod raster;
mod scene;

use clockspar::model::constants::SPEED_OF_LIGHT_M_S;
use clockspar::table::Measure;
use ratatui::layout::Rect;

use super::painter::{Painter, QUIET, width_of};
use super::state::Desk;
use super::words;
use raster::{Kind, Raster, Spot};
use scene::{Event, Scene};

/// Which part of the launch frame is shown, against the part that fits everything.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Frame {
    /// Doublings of the scale.
    pub zoom: i32,
    /// How far it has been moved towards the fore end, m.
    pub fore_m: f64,
    /// How far it has been moved to later times, s.
    pub later_s: f64,
}

/// Doublings and halvings that are of any use.
const MOST_ZOOM: i32 = 60;
/// The largest coordinates that are drawn, m: beyond them squares overflow.
const LARGEST_M: f64 = 1e150;
/// The part of the chart that is kept free around what it is fitted to.
const MARGIN: f64 = 0.12;
/// Bisections of a worldline between two places that are drawn.
const DEEPEST: u32 = 12;

impl Frame {
    /// One step nearer or farther.
    #[must_use]
    pub fn zoomed(self, by: i32) -> Frame {
        Frame { zoom: (self.zoom + by).clamp(-MOST_ZOOM, MOST_ZOOM), ..self }
    }

    /// Moved by a distance towards the fore end and a time.
    #[must_use]
    pub fn panned(self, fore_m: f64, later_s: f64) -> Frame {
        let kept = |value: f64| value.clamp(-LARGEST_M, LARGEST_M);
        Frame { fore_m: kept(self.fore_m + fore_m), later_s: kept(self.later_s + later_s), ..self }
    }
}

/// Draws the chart into an area.
pub fn draw(desk: &Desk, area: Rect, painter: &mut Painter<'_>) {
    if area.width < 8 || area.height < 4 {
        return;
    }
    let long = "launch frame, time up, fore right";
    // A blank column between the table and the chart; two where the title has room.
    let gap = if width_of(long) + 2 <= area.width { 2 } else { 1 };
    let area = Rect { x: area.x + gap, width: area.width - gap, ..area };
    let top = Rect { height: 1, ..area };
    let inside = Rect { y: area.y + 1, height: area.height - 2, ..area };
    let bottom = Rect { y: area.bottom() - 1, height: 1, ..area };
    let title = if width_of(long) <= top.width { long } else { "time up, fore right" };
    painter.put(top, top.x, top.y, title, QUIET);
    let scene = match Scene::of(desk) {
        Ok(scene) => scene,
        Err(why) => {
            painter.put(inside, inside.x, inside.y, why, QUIET);
            return;
        }
    };
    let Some(window) = Window::fitting(&scene, desk.chart, inside) else {
        painter.put(inside, inside.x, inside.y, "too far out to be drawn", QUIET);
        return;
    };
    let mut raster = Raster::new(inside);
    draw_scene(&scene, &window, desk, &mut raster);
    raster.paint(inside, painter);
    draw_scale(&window, desk.chart, bottom, painter);
}

/// Where the launch frame lies on the raster.
#[derive(Clone, Copy)]
struct Window {
    /// The event in the middle.
    middle: Event,
    /// Metres a square.
    scale_m: f64,
    columns: f64,
    halves: f64,
}

impl Window {
    /// The window that holds what the scene is fitted to, zoomed and moved.
    fn fitting(scene: &Scene<'_>, frame: Frame, area: Rect) -> Option<Window> {
        let (columns, halves) = (f64::from(area.width), 2.0 * f64::from(area.height));
        let mut low = Event { z_m: f64::INFINITY, ct_m: f64::INFINITY };
        let mut high = Event { z_m: f64::NEG_INFINITY, ct_m: f64::NEG_INFINITY };
        for event in scene.fitted.iter().filter(|event| event.is_drawable()) {
            low.z_m = low.z_m.min(event.z_m);
            low.ct_m = low.ct_m.min(event.ct_m);
            high.z_m = high.z_m.max(event.z_m);
            high.ct_m = high.ct_m.max(event.ct_m);
        }
        if !(low.is_drawable() && high.is_drawable()) {
            return None;
        }
        let room = 1.0 - 2.0 * MARGIN;
        let wide = (high.z_m - low.z_m) / (columns * room);
        let tall = (high.ct_m - low.ct_m) / (halves * room);
        let fit = wide.max(tall);
        let fit = if fit > 0.0 { fit } else { 1.0 };
        let scale_m = (fit * libm::exp2(f64::from(-frame.zoom))).clamp(1e-12, LARGEST_M);
        let middle = Event {
            z_m: 0.5 * (low.z_m + high.z_m) + frame.fore_m,
            ct_m: 0.5 * (low.ct_m + high.ct_m) + frame.later_s * SPEED_OF_LIGHT_M_S,
        };
        middle.is_drawable().then_some(Window { middle, scale_m, columns, halves })
    }

    fn spot(&self, event: Event) -> Spot {
        Spot {
            x: 0.5 * self.columns + (event.z_m - self.middle.z_m) / self.scale_m,
            y: 0.5 * self.halves - (event.ct_m - self.middle.ct_m) / self.scale_m,
        }
    }

    /// Launch times of the lower and the upper edge, as lengths.
    fn times_m(&self) -> [f64; 2] {
        let half = 0.5 * self.halves * self.scale_m;
        [self.middle.ct_m - half, self.middle.ct_m + half]
    }
}

/// A label waits until every line has been drawn.
struct Label<'s> {
    spot: Spot,
    text: &'s str,
}

fn draw_scene(scene: &Scene<'_>, window: &Window, desk: &Desk, raster: &mut Raster) {
    let mut labels: Vec<Label<'_>> = Vec::new();
    if let Some(ray) = &scene.horizon {
        let highest = raster.line(
            Kind::Horizon,
            window.spot(ray.crossing(window.times_m()[0])),
            window.spot(ray.crossing(window.times_m()[1])),
        );
        labels.extend(highest.map(|spot| Label { spot, text: "horizon" }));
    }
    for station in &scene.stations {
        let at = |ct_m: f64| window.spot(Event { z_m: station.z_m, ct_m });
        let [lower, upper] = window.times_m();
        let highest = raster.line(Kind::Station, at(lower), at(upper));
        labels.extend(highest.map(|spot| Label { spot, text: station.name }));
    }
    let mut named: Vec<Label<'_>> = Vec::new();
    for node in &scene.nodes {
        let kind = if node.is_chosen { Kind::Chosen } else { Kind::Node };
        let highest = draw_worldline(node, window, kind, raster);
        let label = highest.map(|spot| Label { spot, text: node.name });
        if node.is_chosen {
            labels.extend(label);
        } else {
            named.extend(label);
        }
    }
    for [from, to] in &scene.signals {
        raster.line(Kind::Signal, window.spot(*from), window.spot(*to));
    }
    for (event, text) in &scene.events {
        raster.mark(window.spot(*event), desk.glyphs.node);
        labels.insert(0, Label { spot: window.spot(*event), text });
    }
    // What was chosen is named first; of the rest those that stand apart from the others.
    let mut taken: Vec<Spot> = Vec::new();
    for label in labels {
        raster.label(label.spot, label.text);
        taken.push(label.spot);
    }
    for label in named {
        let is_near = |other: &Spot| {
            (other.x - label.spot.x).abs() < 2.0 && (other.y - label.spot.y).abs() < 2.0
        };
        if !taken.iter().any(is_near) {
            raster.label(label.spot, label.text);
            taken.push(label.spot);
        }
    }
}

/// Draws the worldline of a node through the window; returns its highest place in sight.
fn draw_worldline(
    node: &scene::Worldline<'_>,
    window: &Window,
    kind: Kind,
    raster: &mut Raster,
) -> Option<Spot> {
    let [lower, upper] = window.times_m();
    let ends = [node.moment_at(lower), node.moment_at(upper)];
    let mut highest: Option<Spot> = None;
    let mut line = |from: Spot, to: Spot| {
        if let Some(spot) = raster.line(kind, from, to)
            && highest.is_none_or(|found| spot.y < found.y)
        {
            highest = Some(spot);
        }
    };
    let spot = |at: f64| node.event(at).map(|event| window.spot(event));
    // Halved until the middle lies on the straight line to a quarter of a square.
    let mut parts = vec![(ends[0], ends[1], 0)];
    while let Some((start, end, depth)) = parts.pop() {
        let middle = start + 0.5 * (end - start);
        let (Some(from), Some(to)) = (spot(start), spot(end)) else { continue };
        let Some(between) = spot(middle) else { continue };
        let bend =
            (0.5 * (from.x + to.x) - between.x).abs() + (0.5 * (from.y + to.y) - between.y).abs();
        // Two halvings at least: a line may bend to both sides alike.
        if depth >= DEEPEST || (depth >= 2 && bend < 0.25) {
            line(from, to);
        } else {
            parts.push((start, middle, depth + 1));
            parts.push((middle, end, depth + 1));
        }
    }
    highest
}

/// The scale below the chart: a bar of a round length, and how long light takes for it.
fn draw_scale(window: &Window, frame: Frame, area: Rect, painter: &mut Painter<'_>) {
    let quarter = 0.3 * window.columns * window.scale_m;
    let power = libm::floor(libm::log10(quarter));
    let unit = libm::pow(10.0, power);
    let count = [5.0, 2.0, 1.0].into_iter().find(|count| count * unit <= quarter).unwrap_or(1.0);
    let length_m = count * unit;
    let columns = (length_m / window.scale_m).round().clamp(1.0, window.columns);
    let glyphs = painter.glyphs;
    let bar = glyphs.horizontal.repeat((columns as usize).saturating_sub(2));
    let bar = format!("{}{bar}{}", glyphs.aft_end, glyphs.fore_end);
    let length = words::value(Measure::Length, length_m);
    let time = words::value(Measure::Time, length_m / SPEED_OF_LIGHT_M_S);
    let moved = if frame == Frame::default() { "" } else { ", moved" };
    let x = painter.put(area, area.x, area.y, &bar, QUIET);
    let text = format!(" {length} = {time}{moved}");
    let room = area.right().saturating_sub(x);
    let short = format!(" {length}{moved}");
    let text = if width_of(&painter.signs(&text)) <= room { text } else { short };
    painter.put(area, x, area.y, &text, QUIET);
}
