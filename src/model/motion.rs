//! Where the line is in the launch frame: the inertial frame in which it rests at
//! array time zero, with the reference node at the origin.
//!
//! `dt = cosh φ dτ`, `dz = c sinh φ dτ` for the reference node; a node at position `h`
//! is at `ct + h sinh φ`, `z + h cosh φ` (Born, Ann. Phys. 335 (1909) 1, section 4;
//! Misner, Thorne & Wheeler, *Gravitation* (1973), section 6.2).

use super::array_time::ArrayTime;
use super::constants::SPEED_OF_LIGHT_M_S;
use super::dd::Dd;
use super::plan::Phase;

/// Launch coordinates are carried times this, so that they stay finite up to a rapidity
/// of 700 and a result near the largest double is not lost in a sum. A power of two.
pub const LAUNCH_SCALE: f64 = f64::from_bits((1023 - 128) << 52);

/// Launch time and position of the reference node, both times [`LAUNCH_SCALE`].
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Launch {
    /// Launch time, s.
    pub time_s: Dd,
    /// Launch position, m.
    pub position_m: Dd,
}

/// `cosh φ` and `sinh φ`, to 2 units in the last place for `|φ| ≤ 700`.
///
/// The low half enters through the derivative: at `φ = 700` it is worth up to 6e-14
/// of the value.
#[must_use]
pub fn cosh_sinh(rapidity: Dd) -> (f64, f64) {
    let (size, low) =
        if rapidity.hi < 0.0 { (-rapidity.hi, -rapidity.lo) } else { (rapidity.hi, rapidity.lo) };
    let (cosh, sinh) = if size < 22.0 {
        (libm::cosh(size), libm::sinh(size))
    } else {
        // The other exponential is below half a unit in the last place.
        let half = 0.5 * libm::exp(size);
        (half, half)
    };
    let (cosh, sinh) = (cosh + sinh * low, sinh + cosh * low);
    (cosh, if rapidity.hi < 0.0 { -sinh } else { sinh })
}

/// `sinh x / x`, 1 at zero, to 3 units in the last place for `|x| ≤ 700`.
#[must_use]
pub fn sinh_over(x: Dd) -> f64 {
    if x.hi.abs() < 1e-4 {
        return 1.0 + x.hi * x.hi / 6.0;
    }
    cosh_sinh(x).1 / x.hi
}

/// What one phase adds to the reference node's launch coordinates between its start,
/// where the rapidity is given, and a moment, each to 1e-15 of the integral of the
/// modulus.
///
/// A hold in closed form, as products that stay smooth through `α = 0`:
/// `∫ cosh φ dτ = s cosh(φ + Δ/2) sinh(Δ/2)/(Δ/2)`, likewise with `sinh`, where
/// `Δ = α s / c`. A ramp by Gauss–Legendre quadrature over pieces in which the rapidity
/// changes by at most one.
#[must_use]
pub fn launch_gain(phase: &Phase, start_rapidity: Dd, until: ArrayTime) -> Launch {
    let elapsed = until.seconds_since(phase.start);
    if elapsed.is_zero() {
        return Launch::default();
    }
    let first = phase.acceleration(phase.start);
    if phase.is_hold() {
        let half = first * elapsed / (2.0 * SPEED_OF_LIGHT_M_S);
        let (cosh, sinh) = cosh_sinh(start_rapidity + half);
        let length = elapsed * (sinh_over(half) * LAUNCH_SCALE);
        return Launch { time_s: length * cosh, position_m: length * sinh * SPEED_OF_LIGHT_M_S };
    }
    let last = phase.acceleration(until);
    let swing = first.hi.abs().max(last.hi.abs()) * elapsed.hi / SPEED_OF_LIGHT_M_S;
    let pieces = swing.ceil().max(1.0);
    let (nodes, weights): (&[f64], &[f64]) =
        if swing < 3e-7 { (&NODES_3, &WEIGHTS_3) } else { (&NODES_10, &WEIGHTS_10) };
    // Three points leave φ² / 2400 of the position where a ramp starts from rest.
    let slope = (last - first) / elapsed;
    // A point of a logged history is one piece, which needs none of the divisions below.
    let width = if pieces > 1.0 { elapsed / pieces } else { elapsed };
    let mut sum = Launch::default();
    let mut index = 0.0;
    while index < pieces {
        let (here, rapidity) = if index > 0.0 {
            let begin = width * index;
            let here = first + slope * begin;
            (here, start_rapidity + (first + here) * begin / (2.0 * SPEED_OF_LIGHT_M_S))
        } else {
            (first, start_rapidity)
        };
        let (mut time, mut position) = (0.0, 0.0);
        for (node, weight) in nodes.iter().zip(weights) {
            let gone = node * width.hi;
            let further = (here.hi + slope.hi * gone / 2.0) * gone / SPEED_OF_LIGHT_M_S;
            let (cosh, sinh) = cosh_sinh(rapidity + further);
            time += weight * (cosh * LAUNCH_SCALE);
            position += weight * (sinh * LAUNCH_SCALE);
        }
        sum.time_s = sum.time_s + width * time;
        sum.position_m = sum.position_m + width * position * SPEED_OF_LIGHT_M_S;
        index += 1.0;
    }
    sum
}

/// Gauss–Legendre nodes on [0, 1], 3 points (roots of P_3, DLMF section 3.5(v)).
const NODES_3: [f64; 3] = [0.11270166537925831, 0.5, 0.8872983346207417];
/// Their weights.
const WEIGHTS_3: [f64; 3] = [0.2777777777777778, 0.4444444444444444, 0.2777777777777778];
/// Gauss–Legendre nodes on [0, 1], 10 points (roots of P_10, DLMF section 3.5(v)).
pub(super) const NODES_10: [f64; 10] = [
    0.01304673574141414,
    0.06746831665550775,
    0.1602952158504878,
    0.2833023029353764,
    0.4255628305091844,
    0.5744371694908156,
    0.7166976970646236,
    0.8397047841495122,
    0.9325316833444922,
    0.9869532642585859,
];
/// Their weights.
pub(super) const WEIGHTS_10: [f64; 10] = [
    0.03333567215434407,
    0.0747256745752903,
    0.10954318125799102,
    0.13463335965499817,
    0.14776211235737644,
    0.14776211235737644,
    0.13463335965499817,
    0.10954318125799102,
    0.0747256745752903,
    0.03333567215434407,
];
