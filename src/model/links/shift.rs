//! Shift and shift rate of a signal from what happens at its two ends.

use super::one_way::Moved;
use crate::model::constants::SPEED_OF_LIGHT_M_S;
use crate::model::dd::Dd;

/// One end of a flight at its own moment, mirrored for a signal towards the aft end.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Side {
    /// `α/c`, 1/s.
    pub push: Dd,
    /// `N`.
    pub rate: Dd,
    /// `η = artanh(ḣ/(cN))`, the rapidity of the end along the line.
    pub tilt: f64,
    /// `dη/dτ`, 1/s.
    pub tilt_speed: f64,
}

impl Side {
    /// An end that stays.
    pub fn fixed(push: Dd, rate: Dd) -> Side {
        Side { push, rate, tilt: 0.0, tilt_speed: 0.0 }
    }

    /// An end that moves along the line; `slope` is the derivative of `push`, `position`
    /// the position as light time.
    pub fn moving(push: Dd, slope: f64, position: Dd, moved: &Moved, sign: f64) -> Side {
        let rate = push * position + 1.0;
        let speed = sign * moved.velocity_m_s / SPEED_OF_LIGHT_M_S;
        let beta = speed / rate.hi;
        let rate_speed = slope * position.hi + push.hi * speed;
        let push_of_speed = sign * moved.acceleration_m_s2 / SPEED_OF_LIGHT_M_S;
        let beta_speed = (push_of_speed - beta * rate_speed) / rate.hi;
        let tilt_speed = beta_speed / (1.0 - beta * beta);
        Side { push, rate, tilt: libm::atanh(beta), tilt_speed }
    }
}

/// Received over emitted frequency, minus one: `e^(−(ψ + η_j − η_i)) − 1`, from
/// `change = e^(−ψ) − 1`.
pub(crate) fn shift(change: Dd, from: &Side, to: &Side) -> Dd {
    let turn = to.tilt - from.tilt;
    if turn == 0.0 {
        return change;
    }
    let tilted = libm::expm1(-turn);
    change + (change + 1.0) * tilted
}

/// Derivative of the shift by the receiver's clock, 1/s:
///
/// ```text
/// −(1 + shift) [ (a_j + dη_j/dτ)/N_j − (1 + shift) (a_i + dη_i/dτ)/N_i ]
/// ```
///
/// The bracket nearly cancels in a ramp. Its terms come as double-doubles good to 1e-29,
/// so at least the tolerance's fourteen digits are left even for a link of a millimetre.
pub(crate) fn shift_rate_per_s(shift: Dd, from: &Side, to: &Side) -> f64 {
    let ratio = shift + 1.0;
    let felt_from = (from.push + from.tilt_speed) / from.rate;
    let felt_to = (to.push + to.tilt_speed) / to.rate;
    -(ratio * (felt_to - felt_from * ratio)).to_f64()
}
