//! What the chart shows: worldlines, stations, the horizon and the signals of the chosen
//! row, as events of the launch frame reckoned from one of them.

use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::{C2_M2_S2, SPEED_OF_LIGHT_M_S};
use clockspar::model::dd::Dd;
use clockspar::model::motion::{LAUNCH_SCALE, cosh_sinh};
use clockspar::model::plan::Plan;
use clockspar::run::{Light, Run};
use clockspar::table::content::{link_way, station_row};

use super::LARGEST_M;
use crate::program::desk::state::Desk;

/// Worldlines beside the chosen ones.
const MOST_NODES: usize = 8;

/// An event of the launch frame, from the event everything is reckoned from.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Event {
    /// Towards the fore end, m.
    pub z_m: f64,
    /// Launch time as light travels, m.
    pub ct_m: f64,
}

impl Event {
    /// Whether it can be drawn; false for what is no number.
    pub fn is_drawable(self) -> bool {
        self.z_m.abs() <= LARGEST_M && self.ct_m.abs() <= LARGEST_M
    }
}

/// A light ray without end.
#[derive(Clone, Copy, Debug)]
pub struct Line {
    through: Event,
    /// +1 towards the fore end, −1 towards the aft end.
    sign: f64,
}

impl Line {
    /// Where it is at a launch time.
    pub fn crossing(&self, ct_m: f64) -> Event {
        Event { z_m: self.through.z_m + self.sign * (ct_m - self.through.ct_m), ct_m }
    }
}

/// A station.
#[derive(Clone, Copy, Debug)]
pub struct Station<'a> {
    /// Its name.
    pub name: &'a str,
    /// Where it rests.
    pub z_m: f64,
}

/// The worldline of a node.
pub struct Worldline<'a> {
    /// Its name.
    pub name: &'a str,
    /// Whether it belongs to the chosen row.
    pub is_chosen: bool,
    frame: Origin<'a>,
    /// Where it stands on the line.
    position_m: f64,
    /// When it was let go.
    released: Option<ArrayTime>,
}

/// The plan, and the event everything is reckoned from.
#[derive(Clone, Copy)]
struct Origin<'a> {
    run: &'a Run,
    plan: &'a Plan,
    at: ArrayTime,
    /// Launch position and time as light travels, m, scaled.
    scaled: [Dd; 2],
}

impl<'a> Origin<'a> {
    fn of(run: &'a Run, plan: &'a Plan, position_m: f64, at: ArrayTime) -> Origin<'a> {
        let origin = Origin { run, plan, at, scaled: [Dd::ZERO; 2] };
        Origin { scaled: origin.place(position_m, at), ..origin }
    }

    fn place(&self, position_m: f64, at: ArrayTime) -> [Dd; 2] {
        let launch = self.plan.launch(at);
        let (cosh, sinh) = cosh_sinh(self.run.instant_at(at).moment.rapidity);
        let scaled = Dd::new(position_m).scale(LAUNCH_SCALE);
        [launch.position_m + scaled * cosh, launch.time_s * SPEED_OF_LIGHT_M_S + scaled * sinh]
    }

    fn event(&self, position_m: f64, at: ArrayTime) -> Event {
        let [z, ct] = self.place(position_m, at);
        let shown = |value: Dd, origin: Dd| (value - origin).to_f64() / LAUNCH_SCALE;
        Event { z_m: shown(z, self.scaled[0]), ct_m: shown(ct, self.scaled[1]) }
    }

    /// A place of the launch frame at a launch time.
    fn rest(&self, z_m: f64, launch_s: f64) -> Event {
        let shown = |value: f64, origin: Dd| {
            (Dd::new(value).scale(LAUNCH_SCALE) - origin).to_f64() / LAUNCH_SCALE
        };
        Event {
            z_m: shown(z_m, self.scaled[0]),
            ct_m: shown(launch_s * SPEED_OF_LIGHT_M_S, self.scaled[1]),
        }
    }
}

impl Worldline<'_> {
    /// Its event some seconds of array time after the origin; for a node that was let go,
    /// of its own time from then on. `None` where that cannot be drawn.
    pub fn event(&self, after_s: f64) -> Option<Event> {
        let event = self.event_anywhere(after_s);
        event.is_drawable().then_some(event)
    }

    fn event_anywhere(&self, after_s: f64) -> Event {
        let at = moment(self.frame.at, after_s);
        match self.released {
            Some(since) if at > since => {
                let start = self.frame.event(self.position_m, since);
                let (cosh, sinh) = cosh_sinh(self.frame.run.instant_at(since).moment.rapidity);
                let gone_m =
                    SPEED_OF_LIGHT_M_S * (after_s - since.seconds_since(self.frame.at).to_f64());
                Event { z_m: start.z_m + gone_m * sinh, ct_m: start.ct_m + gone_m * cosh }
            }
            _ => self.frame.event(self.position_m, at),
        }
    }

    /// The seconds after the origin at which it comes to a launch time, which rises with
    /// them; the end of the domain where it never does.
    pub fn moment_at(&self, ct_m: f64) -> f64 {
        let limit = 2.0 * ArrayTime::LIMIT.to_f64();
        let is_late = |after_s: f64| {
            let found = self.event_anywhere(after_s).ct_m;
            if found.is_finite() { found > ct_m } else { after_s > 0.0 }
        };
        let mut width = 1e-12;
        let (mut low, mut high) = (0.0, 0.0);
        while is_late(low) && low > -limit {
            (high, low) = (low, low - width);
            width *= 8.0;
        }
        width = 1e-12;
        while !is_late(high) && high < limit {
            (low, high) = (f64::max(low, high), high + width);
            width *= 8.0;
        }
        // A thousandth of what is shown would do; a part in 10¹² costs little more.
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            if is_late(middle) {
                high = middle;
            } else {
                low = middle;
            }
        }
        low.clamp(-limit, limit)
    }
}

/// A moment some seconds after another, inside the domain.
fn moment(at: ArrayTime, after_s: f64) -> ArrayTime {
    let limit = ArrayTime::LIMIT;
    let far = if after_s < 0.0 { ArrayTime::from_attoseconds(-limit.attoseconds()) } else { limit };
    ArrayTime::nearest(Dd::new(after_s)).and_then(|gone| at.checked_add(gone)).unwrap_or(far)
}

/// Everything that is drawn.
pub struct Scene<'a> {
    /// Worldlines, those chosen first.
    pub nodes: Vec<Worldline<'a>>,
    /// Stations.
    pub stations: Vec<Station<'a>>,
    /// The horizon of the present moment.
    pub horizon: Option<Line>,
    /// Signals from event to event.
    pub signals: Vec<[Event; 2]>,
    /// Events with their names.
    pub events: Vec<(Event, &'static str)>,
    /// What the window is fitted to.
    pub fitted: Vec<Event>,
}

impl<'a> Scene<'a> {
    /// The scene of the chosen row of the view.
    pub fn of(desk: &'a Desk) -> Result<Scene<'a>, &'static str> {
        let run = &desk.run;
        let plan = run.plan().ok_or("no launch frame in gravity")?;
        let at = desk.at.min(run.last_moment());
        let light = Light::of(run);
        let row = desk.cursor().row;
        let (chosen, station) = match (desk.view().name, desk.reach_of) {
            ("links", _) => {
                let way = link_way(run.layout(), row).ok_or("no link to draw")?;
                (way.to_vec(), None)
            }
            (_, Some(node)) => (vec![node], None),
            _ => match station_row(run.layout(), row) {
                Some((station, node, is_to_line)) => (vec![node], Some((station, is_to_line))),
                None => (vec![run.layout().reference], None),
            },
        };
        let position_m = |row: usize| run.place(row).position_m(at);
        let first = chosen.first().copied().unwrap_or(run.layout().reference);
        let frame = Origin::of(run, plan, position_m(first), at);
        let mut scene = Scene {
            nodes: worldlines(run, frame, &chosen),
            stations: Vec::new(),
            horizon: horizon(frame),
            signals: Vec::new(),
            events: Vec::new(),
            fitted: Vec::new(),
        };
        if desk.view().name == "links" {
            if let [from, to] = chosen[..] {
                scene.add_link(&light, frame, [from, to]);
            }
        } else {
            scene.add_stations(&light, frame, station, first);
            if desk.reach_of.is_some() {
                scene.fit_line(run, frame);
            }
        }
        Ok(scene)
    }

    /// The signal of a link and its answer.
    fn add_link(&mut self, light: &Light<'_>, frame: Origin<'a>, [from, to]: [usize; 2]) {
        let position_m = |row: usize, at| frame.run.place(row).position_m(at);
        let sent = frame.event(position_m(from, frame.at), frame.at);
        self.fitted.extend([sent, frame.event(position_m(to, frame.at), frame.at)]);
        let Ok(signal) = light.signal([from, to], frame.at) else { return };
        self.events.push((sent, "sent"));
        let Some(received) = signal.received else { return };
        let arrives = frame.event(position_m(to, received), received);
        self.add_signal(sent, arrives);
        self.events.push((arrives, "received"));
        let Some(returned) = signal.answer.ok().and_then(|answer| answer.returned) else { return };
        let back = frame.event(position_m(from, returned), returned);
        self.add_signal(arrives, back);
        self.events.push((back, "back"));
    }

    /// The stations, and the signal of the chosen one.
    fn add_stations(
        &mut self,
        light: &Light<'_>,
        frame: Origin<'a>,
        chosen: Option<(usize, bool)>,
        node: usize,
    ) {
        let layout = frame.run.layout();
        self.stations = layout
            .stations
            .iter()
            .map(|station| Station {
                name: &station.name,
                z_m: frame.rest(station.position_m, 0.0).z_m,
            })
            .collect();
        let reference = frame.event(0.0, frame.at);
        self.events.push((reference, "now"));
        self.fitted.push(reference);
        let Some((index, is_to_line)) = chosen else { return };
        let Some(rays) = light.rays() else { return };
        let station_m = layout.stations[index].position_m;
        let z_m = self.stations[index].z_m;
        self.fitted.push(Event { z_m, ct_m: reference.ct_m });
        let Ok(end) = light.end(node, frame.at) else { return };
        let (sent, arrives) = if is_to_line {
            let launch_s = frame.plan.launch(frame.at).time_s.to_f64() / LAUNCH_SCALE;
            let signal = rays.from_station(station_m, end.end(), launch_s);
            let sent = frame.rest(station_m, launch_s);
            let arrives = signal
                .node_array
                .ok()
                .map(|at| frame.event(frame.run.place(node).position_m(at), at));
            (sent, arrives)
        } else {
            let signal = rays.to_station(station_m, end.end(), frame.at);
            let sent = frame.event(end.position_m(frame.at).to_f64(), frame.at);
            let age = signal.age_launch_s.ok();
            let arrives =
                age.map(|age_s| Event { z_m, ct_m: sent.ct_m + age_s * SPEED_OF_LIGHT_M_S });
            (sent, arrives)
        };
        self.events.push((sent, "sent"));
        self.fitted.push(sent);
        let Some(arrives) = arrives.filter(|event| event.is_drawable()) else { return };
        self.add_signal(sent, arrives);
        self.events.push((arrives, "arrives"));
    }

    fn add_signal(&mut self, from: Event, to: Event) {
        self.signals.push([from, to]);
        self.fitted.extend([from, to]);
    }

    /// Fits the line itself and what a released node does beside it.
    fn fit_line(&mut self, run: &Run, frame: Origin<'_>) {
        let layout = run.layout();
        for row in [0, layout.nodes.len() - 1] {
            let event = frame.event(run.place(row).position_m(frame.at), frame.at);
            self.fitted.push(event);
        }
    }
}

/// Worldlines of the chosen nodes, the reference, both ends, and some between them.
fn worldlines<'a>(run: &'a Run, frame: Origin<'a>, chosen: &[usize]) -> Vec<Worldline<'a>> {
    let layout = run.layout();
    let last = layout.nodes.len() - 1;
    let mut rows = chosen.to_vec();
    let between = (0..MOST_NODES).map(|part| last * part / (MOST_NODES - 1).max(1));
    for row in [layout.reference].into_iter().chain(between) {
        if !rows.contains(&row) {
            rows.push(row);
        }
    }
    rows.into_iter()
        .map(|row| Worldline {
            name: &layout.nodes[row].name,
            is_chosen: chosen.contains(&row),
            frame,
            position_m: run.place(row).position_m(frame.at),
            released: run.released(row),
        })
        .collect()
}

/// The horizon of the present moment: the last ray that reaches the line while its thrust
/// is held.
fn horizon(frame: Origin<'_>) -> Option<Line> {
    let push = frame.run.instant_at(frame.at).moment.acceleration_m_s2;
    if push.is_zero() {
        return None;
    }
    let horizon_m = -(C2_M2_S2 / push).to_f64();
    let sign = if push.is_negative() { -1.0 } else { 1.0 };
    let through = frame.event(horizon_m, frame.at);
    through.is_drawable().then_some(Line { through, sign })
}
