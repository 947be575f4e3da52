//! Light on the line of a run: signals between its nodes, with what has been changed on
//! the way.
//!
//! [`Light::end`] is the one place that says where the end of a link stands; everything
//! that sends or receives a signal asks it.

use std::borrow::Cow;
use std::sync::Arc;

use crate::layout::Course;
use crate::model::array_time::{ATTOSECONDS_PER_SECOND, ArrayTime};
use crate::model::dd::Dd;
use crate::model::links::{
    End, Extremes, Flight, Moved as Displaced, NoFlight, Rays, standing_flight,
};
use crate::model::loads::Loads;
use crate::model::plan::Plan;

use super::{LinkState, Run};

/// What is added to the position of a node at rest, as a function of array time.
type Displacement<'a> = Box<dyn Fn(ArrayTime) -> Displaced + Send + Sync + 'a>;

/// The same without the second derivative.
type Placement<'a> = Box<dyn Fn(ArrayTime) -> (f64, f64) + Send + Sync + 'a>;

/// Where a node stands as an end of signals.
pub struct NodeEnd<'a> {
    /// Its position at rest, m from the reference node, + towards the fore end.
    pub rest_m: Dd,
    /// How a line that stretches displaces it; `None` for a node that stays.
    pub displacement: Option<Displacement<'a>>,
    /// The same without the second derivative, which costs more than all the rest.
    placement: Option<Placement<'a>>,
}

impl NodeEnd<'_> {
    /// As an end of a link.
    #[must_use]
    pub fn end(&self) -> End<'_> {
        match &self.displacement {
            Some(displacement) => {
                let mut end = End::moving(self.rest_m, displacement);
                if let Some(placement) = &self.placement {
                    end.placed = Some(placement);
                }
                end
            }
            None => End::fixed(self.rest_m),
        }
    }

    /// Its position at a moment, m.
    #[must_use]
    pub fn position_m(&self, at: ArrayTime) -> Dd {
        let rest = self.rest_m;
        self.displacement.as_ref().map_or(rest, |moved| rest + moved(at).displacement_m)
    }
}

/// Why there is no signal, or none that can be told.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum NoSignal {
    /// An end has been released.
    Released,
    /// An end is released while the signal is under way.
    ReleasedOnTheWay,
    /// An end is put elsewhere while the signal is under way.
    MovedOnTheWay,
    /// The link has failed.
    Failed,
    /// The link fails while the signal is under way.
    FailedOnTheWay,
    /// The signal itself.
    Flight(NoFlight),
}

impl NoSignal {
    /// The reason in words.
    #[must_use]
    pub fn why(self) -> Cow<'static, str> {
        match self {
            NoSignal::Released => "released: the node no longer belongs to the line".into(),
            NoSignal::ReleasedOnTheWay => "a node is released while the signal is under way".into(),
            NoSignal::MovedOnTheWay => "a node is moved while the signal is under way".into(),
            NoSignal::Failed => "failed: the link does not work".into(),
            NoSignal::FailedOnTheWay => "the link fails while the signal is under way".into(),
            NoSignal::Flight(why) => why.to_string().into(),
        }
    }
}

impl From<NoFlight> for NoSignal {
    fn from(why: NoFlight) -> NoSignal {
        NoSignal::Flight(why)
    }
}

/// A signal from one node to another, and what came back.
#[derive(Clone, Copy, Debug)]
pub struct Signal {
    /// Proper distance of the ends at the emission, m.
    pub separation_m: f64,
    /// Reception; `None` after the domain of array time.
    pub received: Option<ArrayTime>,
    /// Flight in array time, s.
    pub flight_array_s: f64,
    /// Flight on the clock of the emitter, s.
    pub flight_emitter_s: f64,
    /// Flight on the clock of the receiver, s.
    pub flight_receiver_s: f64,
    /// Received over emitted frequency, minus one.
    pub received_shift: f64,
    /// Its derivative by the receiver's clock, 1/s.
    pub shift_rate_per_s: f64,
    /// The way back, answered at once.
    pub answer: Result<Answer, NoSignal>,
}

/// What the emitter learns from the answer.
#[derive(Clone, Copy, Debug)]
pub struct Answer {
    /// Duration of the trip on the emitter's clock, s.
    pub round_trip_s: f64,
    /// `c/2` times that, m.
    pub radar_distance_m: f64,
    /// Array time of the trip's midpoint on the emitter's clock, minus array time of the
    /// reception, s.
    pub two_way_error_s: f64,
    /// Array time of the return; `None` after the domain.
    pub returned: Option<ArrayTime>,
}

/// How light runs along the line.
enum Way {
    /// Under thrust, or in gravity that is the same everywhere.
    Thrust(Arc<Rays>),
    /// In gravity with a gradient.
    Gravity { gravity_m_s2: f64, gradient_per_s2: f64 },
}

/// Light on the line of a run. Made once for a report; every row asks it.
pub struct Light<'a> {
    run: &'a Run,
    way: Way,
}

impl<'a> Light<'a> {
    /// Prepares the plan as it is being flown, or the gravity the line stands in.
    #[must_use]
    pub fn of(run: &'a Run) -> Light<'a> {
        let way = match (run.plan(), &run.layout.course) {
            (Some(plan), _) => {
                Way::Thrust(Arc::clone(run.rays.get_or_init(|| Arc::new(Rays::new(plan)))))
            }
            (None, Course::Standing(standing)) if standing.gradient_per_s2 != 0.0 => Way::Gravity {
                gravity_m_s2: standing.gravity_m_s2,
                gradient_per_s2: standing.gradient_per_s2,
            },
            (None, Course::Standing(standing)) => {
                Way::Thrust(Arc::new(Rays::held(standing.gravity_m_s2)))
            }
            (None, Course::Thrust(plan)) => Way::Thrust(Arc::new(Rays::new(plan))),
        };
        Light { run, way }
    }

    /// The rays of the plan; `None` in gravity with a gradient.
    #[must_use]
    pub fn rays(&self) -> Option<&Rays> {
        match &self.way {
            Way::Thrust(rays) => Some(rays),
            Way::Gravity { .. } => None,
        }
    }

    /// Where the node of a row stands at a moment, as an end of signals.
    ///
    /// # Errors
    ///
    /// [`NoSignal::Released`] for a node that no longer belongs to the line.
    pub fn end(&self, row: usize, at: ArrayTime) -> Result<NodeEnd<'a>, NoSignal> {
        let placed_m = match self.run.moved.get(&row) {
            None => self.run.positions_m[row],
            Some(moved) if moved.released.is_some_and(|since| since <= at) => {
                return Err(NoSignal::Released);
            }
            Some(moved) => moved.place.position_m(at),
        };
        Ok(self.displaced(row, placed_m, at))
    }

    /// The end of a node that stands at a place, displaced as load and temperature displace
    /// it in its place of the layout.
    fn displaced(&self, row: usize, placed_m: f64, at: ArrayTime) -> NodeEnd<'a> {
        let run = self.run;
        let placed_m = Dd::new(placed_m);
        let Some(loads) = run.loads_at(at) else {
            return NodeEnd { rest_m: placed_m, displacement: None, placement: None };
        };
        let filed_m = Dd::new(run.layout.nodes[row].position_m);
        let Some(plan) = run.plan().filter(|_| loads.is_elastic()) else {
            // Gravity never changes, and a temperature that was filed does not either.
            let (position_m, _) = loads.end_motion(None, at, row);
            let rest_m = placed_m + (position_m - filed_m);
            return NodeEnd { rest_m, displacement: None, placement: None };
        };
        let placed = Arc::clone(&loads);
        let displacement = move |at: ArrayTime| {
            if let Some(latest) = run.latest_loads_at(at) {
                return motion(latest, plan, at, row, filed_m);
            }
            let earlier = run.loads_at(at);
            motion(earlier.as_ref().unwrap_or(&loads), plan, at, row, filed_m)
        };
        let placement = move |at: ArrayTime| {
            let end = |loads: &Loads| loads.end_motion(plan.phase_at(at), at, row);
            let (position_m, velocity_m_s) = match run.latest_loads_at(at) {
                Some(latest) => end(latest),
                None => end(run.loads_at(at).as_ref().unwrap_or(&placed)),
            };
            ((position_m - filed_m).to_f64(), velocity_m_s)
        };
        NodeEnd {
            rest_m: placed_m,
            displacement: Some(Box::new(displacement)),
            placement: Some(Box::new(placement)),
        }
    }

    /// Where a released node stood when it was let go, as an end of signals, and when.
    #[must_use]
    pub fn released_end(&self, row: usize, at: ArrayTime) -> Option<(NodeEnd<'a>, ArrayTime)> {
        let moved = self.run.moved.get(&row)?;
        let since = moved.released.filter(|since| *since <= at)?;
        Some((self.displaced(row, moved.place.position_m(since), since), since))
    }

    /// The signal between two rows that leaves at a moment, with its answer.
    ///
    /// # Errors
    ///
    /// Why nothing is received, or why it cannot be told.
    pub fn signal(&self, [from, to]: [usize; 2], at: ArrayTime) -> Result<Signal, NoSignal> {
        let (here, there) = (self.end(from, at)?, self.end(to, at)?);
        if self.run.link_state([from, to], at) == LinkState::Failed {
            return Err(NoSignal::Failed);
        }
        let separation_m = (there.position_m(at) - here.position_m(at)).abs().to_f64();
        let rays = match &self.way {
            Way::Thrust(rays) => rays,
            Way::Gravity { gravity_m_s2, gradient_per_s2 } => {
                let ends = (here.position_m(at), there.position_m(at));
                let flight = standing_flight(*gravity_m_s2, *gradient_per_s2, ends.0, ends.1)?;
                let after = |seconds: f64| {
                    ArrayTime::nearest(Dd::new(seconds)).and_then(|gone| at.checked_add(gone))
                };
                let received = after(flight.flight_array_s);
                self.check_way([from, to], to, at, received)?;
                let returned = after(2.0 * flight.flight_array_s);
                let answer = self.check_way([from, to], from, at, returned).map(|()| Answer {
                    round_trip_s: flight.round_trip_s,
                    radar_distance_m: flight.radar_distance_m,
                    two_way_error_s: 0.0,
                    returned,
                });
                return Ok(Signal {
                    separation_m,
                    received,
                    flight_array_s: flight.flight_array_s,
                    flight_emitter_s: flight.flight_emitter_s,
                    flight_receiver_s: flight.flight_receiver_s,
                    received_shift: flight.received_shift,
                    shift_rate_per_s: 0.0,
                    answer,
                });
            }
        };
        let (out, answer) = match rays.two_way(here.end(), there.end(), at) {
            Ok(trip) => {
                let answer = Answer {
                    round_trip_s: trip.round_trip_s,
                    radar_distance_m: trip.radar_distance_m,
                    two_way_error_s: trip.two_way_error_s,
                    returned: trip.back.received,
                };
                let checked = self.check_way([from, to], from, at, trip.back.received);
                (trip.out, checked.map(|()| answer))
            }
            // The way back alone may have come to nothing.
            Err(why) => (rays.one_way(here.end(), there.end(), at)?, Err(why.into())),
        };
        self.check_way([from, to], to, at, out.received)?;
        Ok(signal_of(separation_m, &out, answer))
    }

    /// The extremes of a link over the whole plan, as the line is filed: what events change
    /// after array time zero is left out.
    ///
    /// # Errors
    ///
    /// When no signal of the plan has a flight.
    pub fn extremes(&self, [from, to]: [usize; 2]) -> Result<Extremes, NoSignal> {
        let at = ArrayTime::ZERO;
        let (here, there) = (self.end(from, at)?, self.end(to, at)?);
        match &self.way {
            Way::Thrust(rays) => Ok(rays.extremes_over_plan(here.end(), there.end())?),
            Way::Gravity { .. } => Ok(constant(&self.signal([from, to], at)?, at)),
        }
    }

    /// Whether anything is done to the link or its receiving end while a signal is under
    /// way.
    fn check_way(
        &self,
        rows: [usize; 2],
        receiver: usize,
        sent: ArrayTime,
        received: Option<ArrayTime>,
    ) -> Result<(), NoSignal> {
        self.check_receiver(receiver, sent, received)?;
        if self.run.links.is_empty() {
            return Ok(());
        }
        match self.run.link_state(rows, received.unwrap_or(ArrayTime::LIMIT)) {
            LinkState::Working => Ok(()),
            LinkState::Failed => Err(NoSignal::FailedOnTheWay),
        }
    }

    /// Whether the node that receives a signal stays where it is while it is under way.
    ///
    /// # Errors
    ///
    /// What is done to it.
    pub fn check_receiver(
        &self,
        row: usize,
        sent: ArrayTime,
        received: Option<ArrayTime>,
    ) -> Result<(), NoSignal> {
        let Some(moved) = self.run.moved.get(&row) else {
            return Ok(());
        };
        let received = received.unwrap_or(ArrayTime::LIMIT);
        if moved.released.is_some_and(|since| since <= received) {
            return Err(NoSignal::ReleasedOnTheWay);
        }
        if moved.place.position_m(sent) != moved.place.position_m(received) {
            return Err(NoSignal::MovedOnTheWay);
        }
        Ok(())
    }
}

/// How a node of a line that stretches moves along it at a moment.
///
/// Its acceleration is a difference of two speeds close by in the same phase: a smooth
/// quantity, which enters the shift rate alone and is far below the felt acceleration.
fn motion(loads: &Loads, plan: &Plan, at: ArrayTime, row: usize, filed_m: Dd) -> Displaced {
    let phase = plan.phase_at(at);
    let (position_m, velocity_m_s) = loads.end_motion(phase, at, row);
    let acceleration_m_s2 = phase.map_or(0.0, |index| {
        let phase = plan.phases()[index];
        let length = phase.end.attoseconds() - phase.start.attoseconds();
        let step = (length / 1024).min(ATTOSECONDS_PER_SECOND);
        let near = |offset: i128| {
            let count = (at.attoseconds() + offset)
                .clamp(phase.start.attoseconds(), phase.end.attoseconds() - 1);
            ArrayTime::from_attoseconds(count)
        };
        let (before, after) = (near(-step), near(step));
        if phase.is_hold() && !loads.propulsion().is_falling() || after <= before {
            return 0.0;
        }
        let speed = |at| loads.end_motion(Some(index), at, row).1;
        (speed(after) - speed(before)) / after.seconds_since(before).to_f64()
    });
    let displacement_m = (position_m - filed_m).to_f64();
    Displaced { displacement_m, velocity_m_s, acceleration_m_s2 }
}

fn signal_of(separation_m: f64, out: &Flight, answer: Result<Answer, NoSignal>) -> Signal {
    Signal {
        separation_m,
        received: out.received,
        flight_array_s: out.flight_array_s,
        flight_emitter_s: out.flight_emitter_s,
        flight_receiver_s: out.flight_receiver_s,
        received_shift: out.received_shift,
        shift_rate_per_s: out.shift_rate_per_s,
        answer,
    }
}

/// The extremes of what never changes.
fn constant(signal: &Signal, at: ArrayTime) -> Extremes {
    use crate::model::links::{Extreme, Range};
    let range = |value: f64| {
        let extreme = Extreme { value, emitted: at, received: signal.received, is_limit: false };
        Range { least: extreme, greatest: extreme }
    };
    Extremes {
        received_shift: range(signal.received_shift),
        shift_rate_per_s: range(0.0),
        flight_array_s: range(signal.flight_array_s),
        is_partial: false,
        is_screened: false,
    }
}
