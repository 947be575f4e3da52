//! A signal out and back: round trip, radar distance, and what a two-way comparison of
//! clocks gets wrong.

use super::one_way::{End, Flight, NoFlight};
use super::rays::{Place, Ray, Rays};
use crate::model::array_time::ArrayTime;
use crate::model::constants::SPEED_OF_LIGHT_M_S;
use crate::model::dd::Dd;

/// A trip from → to → from; the turn-round at `to` takes no time.
#[derive(Clone, Copy, Debug)]
pub struct RoundTrip {
    /// The outward leg.
    pub out: Flight,
    /// The way back, emitted when the outward leg arrives.
    pub back: Flight,
    /// Duration on the clock of `from`, s.
    pub round_trip_s: f64,
    /// `c/2` times that, m.
    pub radar_distance_m: f64,
    /// Array time of the trip's midpoint on the clock of `from`, minus array time of the
    /// reception at `to`, s: what a two-way comparison that halves the round trip is off
    /// by. Zero under one held thrust.
    pub two_way_error_s: f64,
}

impl Rays {
    /// The trip that leaves `from` at a moment, is answered by `to` at once, and returns.
    ///
    /// Round trip and radar distance are within 8 u of themselves under one held thrust, 1e-14
    /// otherwise. The two-way error is good to 1e-6 of itself inside one ramp, where it has
    /// its own form, and else to that or 1e-22 s. To leading order it is
    /// `−(dα/dτ)(h_j − h_i)³/(6c⁴)` in a ramp and `−Δα L|L|/(4c³)` when the thrust steps by
    /// `Δα` at the reception, `L = h_j − h_i`.
    ///
    /// # Errors
    ///
    /// [`NoFlight`] of either leg.
    pub fn two_way(&self, from: End, to: End, emitted: ArrayTime) -> Result<RoundTrip, NoFlight> {
        let out = self.one_way(from, to, emitted)?;
        let received = out.received.unwrap_or(ArrayTime::LIMIT);
        let back = self.flight(to, from, received, out.course.arrival)?;
        let [out_clock, back_clock] = [out.course.on_clocks[0], back.course.on_clocks[1]];
        let round_trip = out_clock + back_clock;
        Ok(RoundTrip {
            round_trip_s: round_trip.to_f64(),
            radar_distance_m: (round_trip * (0.5 * SPEED_OF_LIGHT_M_S)).to_f64(),
            two_way_error_s: self.two_way_error(from, received, &out, &back),
            out,
            back,
        })
    }

    fn two_way_error(&self, from: End, received: ArrayTime, out: &Flight, back: &Flight) -> f64 {
        let Some(ray) = out.ray else {
            return 0.0;
        };
        let turn = out.course.arrival;
        let piece = |place: Place| &self.pieces()[place.piece];
        let is_one_line = piece(out.course.departure).line == piece(back.course.arrival).line;
        // Nothing changes during the trip, and both ways take the same time.
        if is_one_line && out.course.is_one_hold && back.course.is_one_hold {
            return 0.0;
        }
        let is_moving = from.moved.is_some();
        let [before, after] = [out.course.on_clocks[0], back.course.on_clocks[1]];
        let position = from.light_time(&from.moved_at(received));
        let half = (after - before).scale(0.5);
        if is_one_line && !is_moving {
            let slope = piece(turn).slope;
            if slope.is_zero() {
                return 0.0;
            }
            let swings = out.course.swing.hi.abs() + back.course.swing.hi.abs();
            // A larger error stands well above the last digit of the two clock times.
            if swings <= 1.0 && half.abs().hi < 1e-9 * before.hi {
                return self.error_in_ramp(ray, turn, position, before);
            }
        }
        self.array_time_of_clock(turn, position, half)
    }

    /// The two-way error inside one ramp.
    ///
    /// With x on the clock of `from`, counted from the reception at `to`, the outward leg takes
    /// B and the way back A, where `∫_0^B e^(φ_r − φ(−x)) dx = L/c = ∫_0^A e^(φ(x) − φ_r) dx`
    /// (fore-going outward leg; the other is its mirror image). The midpoint is at (A − B)/2,
    /// and
    ///
    /// ```text
    /// ∫_B^A e^(φ(x)−φ_r) dx = ∫_0^B e^(φ(x)−φ_r) (e^(D(x)) − 1) dx,   D = 2φ_r − φ(x) − φ(−x)
    /// ```
    ///
    /// The second difference D is formed without cancellation: with `t±` the array times from
    /// the reception to ±x, `D = −(da/dτ)(t₊² + t₋²)/(2 N_i)`.
    fn error_in_ramp(&self, ray: Ray, turn: Place, position: Dd, before: Dd) -> f64 {
        let sign = ray.sign();
        let push = self.push(turn).hi * sign;
        let slope = self.pieces()[turn.piece].slope.hi * sign;
        let place = position.hi * sign;
        let rate = (self.push(turn) * position + 1.0).hi;
        // Array time from the reception to x, by the stable root of x = N t + ℓ a' t²/2.
        let array_time =
            |x: f64| 2.0 * x / (rate + libm::sqrt(rate * rate + 2.0 * place * slope * x));
        let gained = |t: f64| (push + 0.5 * slope * t) * t;
        let end = array_time(before.hi);
        // The variable is array time on the side of the reception on which the rate is the
        // smaller: the clock is a polynomial of it, and the square root for the other side
        // stays away from its branch point.
        let side = if place * slope > 0.0 { -1.0 } else { 1.0 };
        let whole = if side < 0.0 { -array_time(-before.hi) } else { end };
        let mut lead = 0.0;
        for (node, weight) in NODES.into_iter().zip(WEIGHTS) {
            let near = side * node * whole;
            let x = (rate + 0.5 * place * slope * near) * near;
            let far = array_time(-x);
            let after = if side < 0.0 { far } else { near };
            let second = -slope * (near * near + far * far) / (2.0 * rate);
            let width = weight * whole * (rate + place * slope * near);
            lead += width * libm::exp(gained(after)) * libm::expm1(second);
        }
        let scaled = lead * libm::exp(-gained(end));
        // Over the short stretch from B to A the clock of `from` feels one acceleration.
        let felt = (push + slope * end) / (rate + place * slope * end);
        let y = felt * scaled;
        let difference = if y.abs() < 1e-8 { scaled } else { scaled * libm::log1p(y) / y };
        array_time(0.5 * difference)
    }

    /// Array time that passes, from a place on, while a clock at a fixed position counts
    /// `clock` seconds, either sign; `∫ N dτ = τ + ℓ φ` is inverted piece by piece.
    fn array_time_of_clock(&self, from: Place, position: Dd, clock: Dd) -> f64 {
        let pieces = self.pieces();
        let start = pieces[from.piece].start;
        let rapidity = self.rapidity(from);
        // The clock, and array time, from the place to the start of a piece.
        let reach = |index: usize| {
            let piece = &pieces[index];
            let since = piece.start.seconds_since(start) - from.offset;
            (since + position * (piece.rapidity - rapidity), since)
        };
        let is_before = |index: usize| reach(index).0 <= clock;
        let (mut low, mut high) = (0, pieces.len());
        while high - low > 1 {
            let middle = (low + high) / 2;
            if is_before(middle) { low = middle } else { high = middle }
        }
        if low == from.piece {
            // Reckoned from the place itself, the smallest result keeps its digits.
            let slope = pieces[low].slope.hi;
            let rate = (self.push(from) * position + 1.0).hi;
            let x = clock.to_f64();
            return 2.0 * x / (rate + libm::sqrt(rate * rate + 2.0 * position.hi * slope * x));
        }
        // Else from the edge of the piece that is nearer to the place.
        let is_earlier = low < from.piece;
        let (reached, since) = reach(if is_earlier { low + 1 } else { low });
        let push = if is_earlier { pieces[low].end_push } else { pieces[low].push };
        let slope = pieces[low].slope.hi;
        let rate = (push * position + 1.0).hi;
        let x = (clock - reached).to_f64();
        (since + 2.0 * x / (rate + libm::sqrt(rate * rate + 2.0 * position.hi * slope * x)))
            .to_f64()
    }
}

/// Gauss–Legendre nodes on [0, 1], 10 points (roots of P_10, DLMF section 3.5(v)).
const NODES: [f64; 10] = [
    0.013_046_735_741_414_14,
    0.067_468_316_655_507_75,
    0.160_295_215_850_487_8,
    0.283_302_302_935_376_4,
    0.425_562_830_509_184_4,
    0.574_437_169_490_815_6,
    0.716_697_697_064_623_6,
    0.839_704_784_149_512_2,
    0.932_531_683_344_492_2,
    0.986_953_264_258_585_9,
];
/// Their weights.
const WEIGHTS: [f64; 10] = [
    0.033_335_672_154_344_07,
    0.074_725_674_575_290_3,
    0.109_543_181_257_991_02,
    0.134_633_359_654_998_17,
    0.147_762_112_357_376_44,
    0.147_762_112_357_376_44,
    0.134_633_359_654_998_17,
    0.109_543_181_257_991_02,
    0.074_725_674_575_290_3,
    0.033_335_672_154_344_07,
];
