//! One signal from one node to another.

use std::fmt;

use super::rays::{Landing, Place, Ray, Rays};
use super::shift::{self, Side};
use crate::model::array_time::ArrayTime;
use crate::model::constants::{INVERSE_C_S_M, SPEED_OF_LIGHT_M_S};
use crate::model::dd::Dd;

/// How far an end stands from its position at rest, at one moment of array time.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Moved {
    /// Displacement along the line, m, + towards the fore end.
    pub displacement_m: f64,
    /// Its derivative by array time, m/s.
    pub velocity_m_s: f64,
    /// Its second derivative, m/s²; enters the shift rate alone.
    pub acceleration_m_s2: f64,
}

/// An end of a link.
#[derive(Clone, Copy)]
pub struct End<'a> {
    /// Position at rest, m, + towards the fore end from the reference node.
    pub rest_m: Dd,
    /// What is added to it as the line stretches; `None` for an end that stays.
    ///
    /// The displacement may jump only where the thrust does.
    pub moved: Option<&'a (dyn Fn(ArrayTime) -> Moved + Sync)>,
    /// The displacement and its first derivative alone, where they cost less: a flight asks for
    /// them many times, and for the second derivative twice.
    pub placed: Option<&'a (dyn Fn(ArrayTime) -> (f64, f64) + Sync)>,
}

impl fmt::Debug for End<'_> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let moved = if self.moved.is_some() { ", moving" } else { "" };
        write!(f, "End({} m{moved})", self.rest_m.to_f64())
    }
}

impl<'a> End<'a> {
    /// An end that stays at one position.
    #[must_use]
    pub fn fixed(position_m: impl Into<Dd>) -> End<'a> {
        End { rest_m: position_m.into(), moved: None, placed: None }
    }

    /// An end with a displacement along the line.
    #[must_use]
    pub fn moving(
        rest_m: impl Into<Dd>,
        moved: &'a (dyn Fn(ArrayTime) -> Moved + Sync),
    ) -> End<'a> {
        End { rest_m: rest_m.into(), moved: Some(moved), placed: None }
    }

    /// The displacement and its first derivative at a moment; zero for an end that stays.
    pub(crate) fn placed_at(&self, at: ArrayTime) -> (f64, f64) {
        match self.placed {
            Some(placed) => placed(at),
            None => {
                let moved = self.moved_at(at);
                (moved.displacement_m, moved.velocity_m_s)
            }
        }
    }

    /// The displacement at a moment; zero for an end that stays.
    pub(crate) fn moved_at(&self, at: ArrayTime) -> Moved {
        self.moved.map_or(Moved::default(), |moved| moved(at))
    }

    /// Position, as light time, at a moment at which the displacement is known.
    pub(crate) fn light_time(&self, moved: &Moved) -> Dd {
        let position =
            if self.moved.is_some() { self.rest_m + moved.displacement_m } else { self.rest_m };
        position * INVERSE_C_S_M
    }
}

/// One signal that arrives.
#[derive(Clone, Copy, Debug)]
pub struct Flight {
    /// Which way it runs; `None` between ends at one position.
    pub ray: Option<Ray>,
    /// Emission.
    pub emitted: ArrayTime,
    /// Reception, to the nearest attosecond; `None` after the domain of array time.
    pub received: Option<ArrayTime>,
    /// Flight in array time, s.
    pub flight_array_s: f64,
    /// Flight on the clock of the emitter, s.
    pub flight_emitter_s: f64,
    /// Flight on the clock of the receiver, s.
    pub flight_receiver_s: f64,
    /// Received over emitted frequency, minus one.
    pub received_shift: f64,
    /// Derivative of the shift by the receiver's clock, 1/s; exactly 0 under one hold.
    pub shift_rate_per_s: f64,
    pub(crate) course: Course,
}

/// What a flight leaves for the leg that follows it.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Course {
    pub departure: Place,
    pub arrival: Place,
    pub elapsed: Dd,
    /// Rapidity gained on the way.
    pub swing: Dd,
    /// Flight on the clocks of the emitter and of the receiver, s.
    pub on_clocks: [Dd; 2],
    /// One thrust is held all the way, between ends that stand still.
    pub is_one_hold: bool,
}

/// Why a link has no flight.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum NoFlight {
    /// A node is at or behind the horizon.
    Horizon,
    /// The thrust steps while the signal is under way and the line stretches.
    Step,
    /// The receiver outruns the signal for ever, which only a thrust without end can do.
    Outrun,
}

impl fmt::Display for NoFlight {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            NoFlight::Horizon => "a node is at or behind the horizon",
            NoFlight::Step => {
                "the thrust steps while the signal is under way on a line that stretches"
            }
            NoFlight::Outrun => "the receiver outruns the signal while this thrust is held",
        })
    }
}

impl std::error::Error for NoFlight {}

impl Rays {
    /// The signal that `from` sends to `to` at a moment of array time.
    ///
    /// Flight times are within 8 u (u = 2⁻⁵³) of themselves and the shift within 4 u under one
    /// held thrust; through ramps and boundaries times are good to 1e-14, the shift to 1e-14
    /// of `expm1 ∫|α|dτ/c`, its rate to 1e-14 of `(|a_j| + |a_i|)(1 + shift)/c` and, inside a
    /// ramp, far better. Domain: ends with `N > 0` at every moment of the flight, `N ≥ 10⁻⁶`
    /// for the accuracy stated.
    ///
    /// # Errors
    ///
    /// [`NoFlight`] says why nothing arrives, or why it cannot be told.
    pub fn one_way(&self, from: End, to: End, emitted: ArrayTime) -> Result<Flight, NoFlight> {
        let place = self.place(emitted);
        self.flight(from, to, emitted, place)
    }

    /// The same from a place, of which `emitted` is the nearest attosecond.
    pub(crate) fn flight(
        &self,
        from: End,
        to: End,
        emitted: ArrayTime,
        place: Place,
    ) -> Result<Flight, NoFlight> {
        let (from_moved, to_moved) = (from.moved_at(emitted), to.moved_at(emitted));
        let (start, end) = (from.light_time(&from_moved), to.light_time(&to_moved));
        let apart = if from.moved.is_none() && to.moved.is_none() {
            to.rest_m - from.rest_m
        } else {
            (to.rest_m - from.rest_m) + to_moved.displacement_m - from_moved.displacement_m
        };
        let push = self.push(place);
        let start_rate = push * start + 1.0;
        let is_beyond = |rate: Dd| rate.is_negative() || rate.is_zero();
        if is_beyond(start_rate) || is_beyond(push * end + 1.0) {
            return Err(NoFlight::Horizon);
        }
        if apart.is_zero() {
            return Ok(at_one_place(emitted, place));
        }
        let ray = if apart.is_negative() { Ray::Aft } else { Ray::Fore };
        let sign = ray.sign();
        let gap = apart.scale(sign) * INVERSE_C_S_M;
        let drift = |elapsed: f64| {
            let (displacement_m, velocity_m_s) = to.placed_at(later(emitted, elapsed));
            let moved = displacement_m - to_moved.displacement_m;
            (sign * moved / SPEED_OF_LIGHT_M_S, sign * velocity_m_s / SPEED_OF_LIGHT_M_S)
        };
        let drift: Option<&dyn Fn(f64) -> (f64, f64)> =
            if to.moved.is_some() { Some(&drift) } else { None };
        let landing =
            self.travel(ray, place, end.scale(sign), gap, drift).ok_or(NoFlight::Outrun)?;
        let is_moving = from.moved.is_some() || to.moved.is_some();
        let steps = |place: Place| self.pieces()[place.piece].steps;
        if is_moving && steps(landing.place) != steps(place) {
            return Err(NoFlight::Step);
        }

        let swing = landing.swing.scale(sign);
        let mut on_clocks = [landing.elapsed + start * swing, landing.elapsed + end * swing];
        let arrival_push = self.push(landing.place);
        let mut sides = [
            Side::fixed(push.scale(sign), start_rate),
            Side::fixed(arrival_push.scale(sign), arrival_push * end + 1.0),
        ];
        if is_moving {
            let received = to.moved_at(later(emitted, landing.elapsed.hi));
            for (index, (end, moved, at)) in
                [(from, from_moved, place), (to, received, landing.place)].into_iter().enumerate()
            {
                let slope = self.pieces()[at.piece].slope.hi * sign;
                let position = end.light_time(&moved).scale(sign);
                sides[index] = Side::moving(sides[index].push, slope, position, &moved, sign);
                on_clocks[index] =
                    on_clocks[index] + self.clock_of_displacement(end, emitted, place, &landing);
            }
        }
        if is_beyond(sides[1].rate) {
            return Err(NoFlight::Horizon);
        }
        // Ends that could move but do not, as on a stretched tether while the thrust is held.
        let is_still = sides.iter().all(|side| side.tilt == 0.0 && side.tilt_speed == 0.0);
        let is_one_hold = is_still
            && landing.place.piece == place.piece
            && self.pieces()[place.piece].slope.is_zero();
        let shift = shift::shift(landing.change, &sides[0], &sides[1]);
        Ok(Flight {
            ray: Some(ray),
            emitted,
            received: ArrayTime::nearest(landing.elapsed)
                .and_then(|elapsed| emitted.checked_add(elapsed)),
            flight_array_s: landing.elapsed.to_f64(),
            flight_emitter_s: on_clocks[0].to_f64(),
            flight_receiver_s: on_clocks[1].to_f64(),
            received_shift: shift.to_f64(),
            shift_rate_per_s: if is_one_hold {
                0.0
            } else {
                shift::shift_rate_per_s(shift, &sides[0], &sides[1])
            },
            course: Course {
                departure: place,
                arrival: landing.place,
                elapsed: landing.elapsed,
                swing,
                on_clocks,
                is_one_hold,
            },
        })
    }

    /// What the displacement of an end since the emission adds to the time on its clock
    /// during a flight, s: `∫ a (δ(s) − δ(0))/c ds`, three points to each piece crossed. The
    /// displacement follows the thrust, so it is smooth between boundaries.
    fn clock_of_displacement(
        &self,
        end: End,
        emitted: ArrayTime,
        from: Place,
        landing: &Landing,
    ) -> f64 {
        if end.moved.is_none() {
            return 0.0;
        }
        let at_start = end.placed_at(emitted).0;
        let (mut sum, mut gone, mut place) = (0.0, 0.0, from);
        loop {
            let piece = &self.pieces()[place.piece];
            let width = if place.piece == landing.place.piece {
                (landing.place.offset - place.offset).hi
            } else {
                place.room.hi
            };
            let first = self.push(place).hi;
            for (node, weight) in NODES.into_iter().zip(WEIGHTS) {
                let push = first + piece.slope.hi * node * width;
                let away = end.placed_at(later(emitted, gone + node * width)).0 - at_start;
                sum += weight * width * push * away / SPEED_OF_LIGHT_M_S;
            }
            gone += width;
            if place.piece == landing.place.piece {
                break;
            }
            place = self.start_of(place.piece + 1);
        }
        sum
    }
}

/// Gauss–Legendre nodes on [0, 1], 3 points (roots of P_3, DLMF section 3.5(v)).
const NODES: [f64; 3] = [0.112_701_665_379_258_3, 0.5, 0.887_298_334_620_741_7];
/// Their weights.
const WEIGHTS: [f64; 3] = [5.0 / 18.0, 8.0 / 18.0, 5.0 / 18.0];

/// Some seconds after a moment, to the attosecond; the end of the domain when beyond it.
pub(crate) fn later(at: ArrayTime, seconds: f64) -> ArrayTime {
    ArrayTime::nearest(Dd::new(seconds))
        .and_then(|seconds| at.checked_add(seconds))
        .unwrap_or(ArrayTime::LIMIT)
}

/// Between clocks in one bay a signal takes no time and keeps its frequency.
fn at_one_place(emitted: ArrayTime, place: Place) -> Flight {
    Flight {
        ray: None,
        emitted,
        received: Some(emitted),
        flight_array_s: 0.0,
        flight_emitter_s: 0.0,
        flight_receiver_s: 0.0,
        received_shift: 0.0,
        shift_rate_per_s: 0.0,
        course: Course {
            departure: place,
            arrival: place,
            elapsed: Dd::ZERO,
            swing: Dd::ZERO,
            on_clocks: [Dd::ZERO; 2],
            is_one_hold: false,
        },
    }
}
