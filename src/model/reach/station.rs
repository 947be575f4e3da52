//! Signals between the line and a transponder that rests in the launch frame.

use std::fmt;

use crate::model::array_time::ArrayTime;
use crate::model::constants::SPEED_OF_LIGHT_M_S;
use crate::model::dd::Dd;
use crate::model::links::rays::{ENDLESS, Piece, Place, Ray, Rays};
use crate::model::links::series::exp;
use crate::model::links::way::{Drift, advance};
use crate::model::links::{End, Moved};
use crate::model::motion::LAUNCH_SCALE;

/// Why a value does not exist.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Absent {
    /// Array time beyond ±10¹¹ s.
    OutsideDomain,
    /// Above the largest double.
    Overflow,
    /// The line outruns the signal for ever, under a thrust without end.
    Never,
}

impl fmt::Display for Absent {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Absent::OutsideDomain => "outside the domain of array time, 1e11 s either way",
            Absent::Overflow => "above the largest number that can be written",
            Absent::Never => "the line outruns the signal while this thrust is held",
        })
    }
}

impl std::error::Error for Absent {}

/// One signal between a station and a node.
///
/// Launch times are readings of the station's own clock. What is sent by the line has an
/// exact array time at its start, what is sent by a station an exact launch time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct StationSignal {
    /// Which way the signal runs along the line.
    pub ray: Ray,
    /// Launch time of sending, s.
    pub sent_launch_s: Result<f64, Absent>,
    /// Array time of the event at the node: the sending for signals to a station, the arrival
    /// for signals to the line, to the nearest attosecond.
    pub node_array: Result<ArrayTime, Absent>,
    /// Launch time of arrival, s.
    pub arrives_launch_s: Result<f64, Absent>,
    /// Launch time between sending and arrival, s: how stale the news is.
    pub age_launch_s: Result<f64, Absent>,
    /// Logarithm of received over emitted frequency.
    pub ln_ratio: f64,
    /// Received over emitted frequency, minus one.
    pub received_shift: Result<f64, Absent>,
}

/// The last moment at which a station can send and still be heard.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum LastCall {
    /// The line does not thrust: everything arrives.
    None,
    /// The moment, the same for every node.
    At {
        /// Launch time, the station's own clock, s.
        launch_s: Result<f64, Absent>,
        /// Whether it lies before the launch time of the reference node at the present moment.
        is_past: bool,
    },
}

/// A launch coordinate carried times [`LAUNCH_SCALE`], as it is shown.
fn shown(scaled: Dd) -> Result<f64, Absent> {
    let value = scaled.to_f64() / LAUNCH_SCALE;
    if value.is_finite() { Ok(value) } else { Err(Absent::Overflow) }
}

fn shift_of(ln_ratio: f64) -> Result<f64, Absent> {
    let shift = libm::expm1(ln_ratio);
    if shift.is_finite() { Ok(shift) } else { Err(Absent::Overflow) }
}

fn is_before(first: Place, second: Place) -> bool {
    (first.piece, first.offset) < (second.piece, second.offset)
}

impl Rays {
    /// `∫ e^(∓φ) dτ` from array time zero to a place, s, times [`LAUNCH_SCALE`]: first for rays
    /// towards the fore end, then aft.
    pub(crate) fn null(&self, place: Place) -> [Dd; 2] {
        let piece = &self.pieces()[place.piece];
        let (origin, push, seconds) = if self.pieces().len() == 1 {
            // One thrust from ever to ever: reckoned from array time zero.
            (&Piece { rapidity: Dd::ZERO, null: [Dd::ZERO; 2], ..*piece }, piece.push, {
                place.offset + piece.start.seconds()
            })
        } else if place.piece > 0 {
            (piece, piece.push, place.offset)
        } else {
            // Array time zero is nearer than the start of the domain.
            (&self.pieces()[1], piece.end_push, -place.room)
        };
        let mut null = origin.null;
        for (side, sign) in [1.0, -1.0].into_iter().enumerate() {
            let over = advance(push.scale(sign), piece.slope.scale(sign), seconds);
            let factor = exp(-origin.rapidity.scale(sign)).scale(LAUNCH_SCALE);
            null[side] = null[side] + factor * over.sum;
        }
        null
    }

    /// The null coordinates of a node at a place, in light time times [`LAUNCH_SCALE`].
    fn null_of_node(&self, place: Place, position: Dd) -> [Dd; 2] {
        let [u, v] = self.null(place);
        let rapidity = self.rapidity(place);
        let scaled = position.scale(LAUNCH_SCALE);
        [u - scaled * exp(-rapidity), v + scaled * exp(rapidity)]
    }

    /// Where a ray with a given null coordinate meets a node; the error says why that cannot be
    /// told.
    fn meeting(&self, ray: Ray, coordinate: Dd, node: End) -> Result<Place, Absent> {
        let (sign, side) = (ray.sign(), usize::from(ray == Ray::Aft));
        let pieces = self.pieces();
        let position = |at: ArrayTime| node.light_time(&node.moved_at(at)).scale(sign);
        // The node's coordinate at the start of a piece; it rises from piece to piece.
        let start = |index: usize| {
            let piece = &pieces[index];
            let factor = exp(-piece.rapidity.scale(sign)).scale(LAUNCH_SCALE);
            piece.null[side] - position(piece.start) * factor
        };
        let (mut low, mut high) = (0, pieces.len());
        while high - low > 1 {
            let middle = (low + high) / 2;
            if start(middle) <= coordinate { low = middle } else { high = middle }
        }
        if low == 0 && pieces[0].push.is_zero() {
            // The line rests: the coordinate is array time less the position.
            let at = coordinate.scale(1.0 / LAUNCH_SCALE) + position(pieces[0].start);
            let room = pieces.get(1).map_or(ENDLESS, |next| next.start.seconds() - at);
            return Ok(Place { piece: 0, offset: at - pieces[0].start.seconds(), room });
        }
        if pieces.len() == 1 {
            // One thrust from ever to ever: reckoned from array time zero.
            let origin = position(ArrayTime::ZERO);
            let gap = coordinate.scale(1.0 / LAUNCH_SCALE) + origin;
            if gap.is_negative() {
                return Err(Absent::OutsideDomain);
            }
            let zero = self.place(ArrayTime::ZERO);
            let landing = self.travel(ray, zero, origin, gap, None);
            return landing.map(|landing| landing.place).ok_or(Absent::Never);
        }
        let piece = &pieces[low];
        let left = (coordinate - start(low)).scale(1.0 / LAUNCH_SCALE);
        let gap = left * exp(piece.rapidity.scale(sign));
        if gap.hi.is_nan() || gap.hi >= 1e299 {
            return Err(Absent::OutsideDomain);
        }
        let origin = node.moved_at(piece.start);
        let drift = |elapsed: f64| {
            let now = node.moved_at(crate::model::links::later(piece.start, elapsed));
            let moved = now.displacement_m - origin.displacement_m;
            (sign * moved / SPEED_OF_LIGHT_M_S, sign * now.velocity_m_s / SPEED_OF_LIGHT_M_S)
        };
        let drift: Option<Drift> = if node.moved.is_some() { Some(&drift) } else { None };
        let landing = self.travel(ray, self.start_of(low), position(piece.start), gap, drift);
        landing.map(|landing| landing.place).ok_or(Absent::Never)
    }

    /// The signal that a station sends at a launch time, as a node receives it.
    ///
    /// The plan is the one filed: after its end the line coasts, so everything arrives, though
    /// perhaps outside the domain of array time. The arrival is within 1e-14 of the sum of the
    /// moduli `|t| + |z|/c + ∫e^(∓φ)dτ + |h|/c e^(∓φ)` over the slope `N e^(∓φ)`.
    #[must_use]
    pub fn from_station(&self, station_m: f64, node: End, sent_launch_s: f64) -> StationSignal {
        let place_s = Dd::new(station_m) / SPEED_OF_LIGHT_M_S;
        let sent = Dd::new(sent_launch_s);
        // Of the two rays through the sending that meet the node's worldline, the later is the
        // one that leaves the station; the earlier one arrives there.
        let coordinates =
            [(sent - place_s).scale(LAUNCH_SCALE), (sent + place_s).scale(LAUNCH_SCALE)];
        let fore = self.meeting(Ray::Fore, coordinates[0], node);
        let aft = self.meeting(Ray::Aft, coordinates[1], node);
        let (ray, place) = match (fore, aft) {
            (Ok(fore), Ok(aft)) if is_before(fore, aft) => (Ray::Aft, Ok(aft)),
            (Err(why), Ok(_)) => (Ray::Fore, Err(why)),
            (_, Err(why)) => (Ray::Aft, Err(why)),
            (Ok(fore), Ok(_)) => (Ray::Fore, Ok(fore)),
        };
        let sent_launch_s = Ok(sent_launch_s);
        let place = match place {
            Ok(place) => place,
            Err(why) => {
                // It arrives in the coast after the plan, if at all.
                let rapidity = self.pieces()[self.pieces().len() - 1].rapidity.to_f64();
                let ln_ratio = -ray.sign() * rapidity;
                return StationSignal {
                    ray,
                    sent_launch_s,
                    node_array: Err(why),
                    arrives_launch_s: Err(why),
                    age_launch_s: Err(why),
                    ln_ratio,
                    received_shift: shift_of(ln_ratio),
                };
            }
        };
        let at = self.moment(place);
        let moved = self.moved_at(node, place);
        let (side, sign) = (usize::from(ray == Ray::Aft), ray.sign());
        // The ray's own coordinate is exact; the other one is the node's.
        let other = self.null_of_node(place, node.light_time(&moved))[1 - side];
        let arrives = (other + coordinates[side]).scale(0.5);
        let age = (other - coordinates[1 - side]).scale(0.5);
        let ln_ratio = -(self.rapidity(place).to_f64() + self.tilt(node, place, &moved)) * sign;
        StationSignal {
            ray,
            sent_launch_s,
            node_array: at.ok_or(Absent::OutsideDomain),
            arrives_launch_s: shown(arrives),
            age_launch_s: shown(age),
            ln_ratio,
            received_shift: shift_of(ln_ratio),
        }
    }

    /// The signal that a node sends at an array time, as a station receives it.
    ///
    /// The ray runs aft when the node is fore of the station at the sending, else fore. Launch
    /// times are within 1e-14 of the sum of the moduli of their terms.
    #[must_use]
    pub fn to_station(&self, station_m: f64, node: End, sent: ArrayTime) -> StationSignal {
        let station = (Dd::new(station_m) / SPEED_OF_LIGHT_M_S).scale(LAUNCH_SCALE);
        let place = self.place(sent);
        let moved = node.moved_at(sent);
        let [u, v] = self.null_of_node(place, node.light_time(&moved));
        let ahead = (v - u).scale(0.5) - station;
        let (ray, arrives) =
            if ahead.is_negative() { (Ray::Fore, u + station) } else { (Ray::Aft, v - station) };
        let rapidity = self.rapidity(place).to_f64() + self.tilt(node, place, &moved);
        let ln_ratio = ray.sign() * rapidity;
        StationSignal {
            ray,
            sent_launch_s: shown((u + v).scale(0.5)),
            node_array: Ok(sent),
            arrives_launch_s: shown(arrives),
            age_launch_s: shown(ahead.abs()),
            ln_ratio,
            received_shift: shift_of(ln_ratio),
        }
    }

    /// The latest launch time at which a station can send and be received by a node at or before
    /// an array time, s: what it sends afterwards is not heard by then.
    ///
    /// # Errors
    ///
    /// [`Absent::Overflow`] where it exceeds the largest double.
    pub fn latest_sending(
        &self,
        station_m: f64,
        node: End,
        received_by: ArrayTime,
    ) -> Result<f64, Absent> {
        let station = (Dd::new(station_m) / SPEED_OF_LIGHT_M_S).scale(LAUNCH_SCALE);
        let place = self.place(received_by);
        let [u, v] = self.null_of_node(place, node.light_time(&node.moved_at(received_by)));
        let (fore, aft) = (u + station, v - station);
        shown(if fore < aft { fore } else { aft })
    }

    /// The last call of a station while the thrust of a moment is held for good: the horizon
    /// meets its worldline, `c t = ±z + (u or v) + (c²/|α|) e^(∓φ)`.
    ///
    /// The same for every node. Within 1e-14 of the sum of the moduli of the terms.
    #[must_use]
    pub fn last_call(&self, station_m: f64, at: ArrayTime) -> LastCall {
        let place = self.place(at);
        let push = self.push(place);
        if push.is_zero() {
            return LastCall::None;
        }
        let (side, sign) = if push.is_negative() { (1, -1.0) } else { (0, 1.0) };
        let station = (Dd::new(station_m) / SPEED_OF_LIGHT_M_S).scale(LAUNCH_SCALE * sign);
        let null = self.null(place);
        let factor = exp(-self.rapidity(place).scale(sign)).scale(LAUNCH_SCALE);
        let last = station + null[side] + factor / push.abs();
        let present = (null[0] + null[1]).scale(0.5);
        LastCall::At { launch_s: shown(last), is_past: last < present }
    }

    /// The displacement of a node at a place.
    fn moved_at(&self, node: End, place: Place) -> Moved {
        node.moved_at(self.moment(place).unwrap_or(ArrayTime::LIMIT))
    }

    /// The rapidity of a node along the line, `artanh(ḣ/(cN))`.
    pub(crate) fn tilt(&self, node: End, place: Place, moved: &Moved) -> f64 {
        if node.moved.is_none() {
            return 0.0;
        }
        let rate = (self.push(place) * node.light_time(moved) + 1.0).hi;
        libm::atanh(moved.velocity_m_s / (SPEED_OF_LIGHT_M_S * rate))
    }
}
