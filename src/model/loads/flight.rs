//! The state of a line under thrust at a moment, and the integrals its clocks need.

use std::sync::{Arc, Mutex, OnceLock, PoisonError};

use super::compliance::{Basis, Compliance};
use super::propellant::Propulsion;
use crate::cores;
use crate::model::array_time::ArrayTime;
use crate::model::constants::{C2_M2_S2, INVERSE_C2_S2_M2};
use crate::model::dd::{Dd, RunningSum};
use crate::model::motion::{NODES_10, WEIGHTS_10};
use crate::model::plan::{Phase, Plan};

/// Foldings by e of the line's mass after which what is left shows in no double.
const ALL_GONE: f64 = 46.0;

/// Phases whose gains are held before they are summed.
const AT_ONCE: usize = 1 << 16;

/// A thrust plan with the stretch of the line tabulated over it.
#[derive(Clone, Debug)]
pub(super) struct Flight {
    pub plan: Arc<Plan>,
    pub compliance: Arc<Compliance>,
    /// `∫ α² T_t dτ` up to the start of each phase and to the end, term by term, once it
    /// has been asked for.
    until: OnceLock<Vec<RunningSum>>,
    /// The first of them, where they are known from a plan of the same beginning.
    begun: Begun,
}

/// Integrals that wait for the others.
#[derive(Debug, Default)]
struct Begun(Mutex<Vec<RunningSum>>);

impl Begun {
    fn take(&self) -> Vec<RunningSum> {
        std::mem::take(&mut *self.0.lock().unwrap_or_else(PoisonError::into_inner))
    }
}

impl Clone for Begun {
    fn clone(&self) -> Begun {
        Begun(Mutex::new(self.0.lock().unwrap_or_else(PoisonError::into_inner).clone()))
    }
}

/// The acceleration, how fast it changes and what has burned, at a moment of a phase.
#[derive(Clone, Copy, Debug)]
pub(super) struct Drive {
    pub acceleration_m_s2: Dd,
    pub slope_m_s3: f64,
    pub burned: f64,
    /// `dx/dτ = |α| (1 − x)/w`, 1/s.
    pub burning_per_s: f64,
}

/// The drive at a moment of a plan; in a phase that is named, its end meaning the limit from
/// below, or wherever the moment falls.
pub(super) fn drive(plan: &Plan, mass: &Propulsion, phase: Option<usize>, at: ArrayTime) -> Drive {
    // A plan that was changed after its end has a coast more than the one before the change.
    let (acceleration_m_s2, slope_m_s3) = match phase.and_then(|index| plan.phases().get(index)) {
        Some(phase) => (phase.acceleration(at), slope(phase)),
        None => (Dd::ZERO, 0.0),
    };
    if !mass.is_falling() {
        return Drive { acceleration_m_s2, slope_m_s3, burned: 0.0, burning_per_s: 0.0 };
    }
    let spent = plan.velocity_spent_m_s(at);
    let burned = mass.burned_fraction(spent);
    let left = mass.mass_fraction(spent);
    let burning_per_s = acceleration_m_s2.to_f64().abs() * mass.inverse_speed_s_m() * left;
    Drive { acceleration_m_s2, slope_m_s3, burned, burning_per_s }
}

impl Flight {
    /// A plan with the stretch over it. `begun` holds the integrals up to the first phases,
    /// as [`Flight::into_begun`] gives them; it may be empty.
    pub fn new(plan: Arc<Plan>, compliance: Arc<Compliance>, begun: Vec<RunningSum>) -> Flight {
        let begun = Begun(Mutex::new(begun));
        Flight { plan, compliance, until: OnceLock::new(), begun }
    }

    /// The integrals of the first phases, for another plan that has these phases and the
    /// same stretch.
    pub fn into_begun(self, phases: usize) -> Vec<RunningSum> {
        let mut until = self.until.into_inner().unwrap_or_else(|| self.begun.take());
        until.truncate((phases + 1) * self.compliance.terms());
        until
    }

    /// The integrals up to the start of each phase and to the end.
    fn until(&self, propulsion: &Propulsion) -> &[RunningSum] {
        self.until.get_or_init(|| {
            let terms = self.compliance.terms();
            let mut until = self.begun.take();
            if terms == 0 {
                return until;
            }
            if until.is_empty() {
                until.resize(terms, RunningSum::default());
            }
            let count = self.plan.phases().len();
            // The gains of many phases are found on all cores, and summed in their order.
            for first in (until.len() / terms - 1..count).step_by(AT_ONCE) {
                let gains = cores::map((count - first).min(AT_ONCE), cores::MANY, |index| {
                    let index = first + index;
                    self.gains(propulsion, index, self.plan.phases()[index].end)
                });
                for gain in gains.into_iter().flatten() {
                    // The same term up to the phase before.
                    let mut sum = until[until.len() - terms];
                    sum.add(gain);
                    until.push(sum);
                }
            }
            until
        })
    }

    /// The drive at a moment; in a phase that is named, its end meaning the limit from
    /// below, or wherever the moment falls.
    pub fn drive(&self, propulsion: &Propulsion, phase: Option<usize>, at: ArrayTime) -> Drive {
        drive(&self.plan, propulsion, phase, at)
    }

    /// `∫ α² T_t dτ` from array time zero to a moment, term by term, m²/s³.
    pub fn integrals(&self, propulsion: &Propulsion, at: ArrayTime) -> Vec<Dd> {
        let terms = self.compliance.terms();
        let until = self.until(propulsion);
        let stored = |index: usize| -> Vec<Dd> {
            until[index * terms..(index + 1) * terms].iter().map(RunningSum::value).collect()
        };
        match self.plan.phase_at(at) {
            None if at < ArrayTime::ZERO => stored(0),
            None => stored(self.plan.phases().len()),
            Some(index) => {
                let gains = self.gains(propulsion, index, at);
                stored(index).into_iter().zip(gains).map(|(sum, gain)| sum + gain).collect()
            }
        }
    }

    /// The same from the start of a phase. A hold of constant mass in closed form;
    /// otherwise Gauss–Legendre over pieces so short that ten points are exact to rounding
    /// (which they are for any polynomial in a ramp of constant mass).
    fn gains(&self, propulsion: &Propulsion, index: usize, until: ArrayTime) -> Vec<Dd> {
        let phase = &self.plan.phases()[index];
        let terms = self.compliance.terms();
        if terms == 0 || until <= phase.start {
            return vec![Dd::ZERO; terms];
        }
        if phase.is_hold() && !propulsion.is_falling() {
            let alpha = phase.acceleration(phase.start);
            let weight = alpha * alpha * until.seconds_since(phase.start);
            let values = self.compliance.values(alpha.to_f64(), 0.0);
            return values.iter().map(|value| weight * *value).collect();
        }
        let mut sums = vec![RunningSum::default(); terms];
        self.pieces(propulsion, index, until, &mut |point| {
            let weight = point.width_s * point.acceleration_m_s2 * point.acceleration_m_s2;
            let values = self.compliance.values(point.acceleration_m_s2, point.burned);
            for (sum, value) in sums.iter_mut().zip(&values) {
                sum.add(Dd::product(weight, *value));
            }
        });
        sums.iter().map(RunningSum::value).collect()
    }

    /// Visits the quadrature points of a phase up to a moment.
    pub fn pieces(
        &self,
        propulsion: &Propulsion,
        index: usize,
        until: ArrayTime,
        visit: &mut dyn FnMut(&Point),
    ) {
        let phase = &self.plan.phases()[index];
        let degrees = self.compliance.degrees();
        let length = until.seconds_since(phase.start).to_f64();
        let first = phase.acceleration(phase.start).to_f64();
        let slope_m_s3 = slope(phase);
        let spent_before = self.plan.velocity_spent_m_s(phase.start).to_f64();
        let inverse = if propulsion.is_falling() { propulsion.inverse_speed_s_m() } else { 0.0 };
        let mut spent_here = spent_before;
        let mut begin = 0.0;
        // |α| has a corner where a ramp passes through zero.
        let corner = sections(phase).filter(|zero| *zero < length);
        let alpha = |s: f64| first + slope_m_s3 * s;
        let mut ends: Vec<f64> = corner.into_iter().chain([length]).rev().collect();
        while let Some(mut finish) = ends.pop() {
            let (from, mut to) = (alpha(begin), alpha(finish));
            let spend = |s: f64| 0.5 * (from + alpha(s)).abs() * (s - begin);
            let gone = |s: f64| (spent_here + spend(s)) * inverse >= ALL_GONE;
            let mut fall = spend(finish) * inverse;
            if gone(begin) {
                fall = 0.0;
            } else if gone(finish) {
                // What is left of a hold for good, say, needs no more pieces: nothing falls.
                let (mut low, mut high) = (begin, finish);
                for _ in 0..60 {
                    let middle = 0.5 * (low + high);
                    if gone(middle) { high = middle } else { low = middle }
                }
                if high < finish {
                    ends.push(finish);
                    (finish, to) = (high, alpha(high));
                    fall = spend(high) * inverse;
                }
            }
            let travel = self.compliance.distance(from, to) * degrees.0 as f64;
            let count = (fall + fall * degrees.1 as f64 * 0.2).max(travel * 0.25).ceil().max(1.0);
            let width = (finish - begin) / count;
            let mut piece = 0.0;
            while piece < count {
                for (node, weight) in NODES_10.iter().zip(&WEIGHTS_10) {
                    let s = begin + (piece + node) * width;
                    let drop = (spent_here + spend(s)) * inverse;
                    visit(&Point {
                        acceleration_m_s2: alpha(s),
                        slope_m_s3,
                        burned: -libm::expm1(-drop),
                        burning_per_s: alpha(s).abs() * inverse * libm::exp(-drop),
                        width_s: width * weight,
                    });
                }
                piece += 1.0;
            }
            spent_here += spend(finish);
            begin = finish;
        }
    }
}

/// A point of a quadrature over array time.
pub(super) struct Point {
    pub acceleration_m_s2: f64,
    pub slope_m_s3: f64,
    pub burned: f64,
    pub burning_per_s: f64,
    /// Weight of the point, s.
    pub width_s: f64,
}

/// `dα/dτ` in a phase, m/s³.
pub(super) fn slope(phase: &Phase) -> f64 {
    if phase.is_hold() {
        return 0.0;
    }
    let line = phase.line;
    (Dd::difference(line.to_m_s2, line.from_m_s2) / line.length.seconds_since(ArrayTime::ZERO))
        .to_f64()
}

/// Where a ramp passes through zero inside a phase, s after its start.
pub(super) fn sections(phase: &Phase) -> Option<f64> {
    let (first, last) = (phase.acceleration(phase.start), phase.acceleration(phase.end));
    if phase.is_hold()
        || first.is_zero()
        || last.is_zero()
        || first.is_negative() == last.is_negative()
    {
        return None;
    }
    phase.moment_of(Dd::ZERO).map(Dd::to_f64)
}

/// Speed of a row along the line, `ḣ = α′ (C + α ∂C/∂α) + α x′ ∂C/∂x`, m/s.
pub(super) fn speed(
    compliance: &Compliance,
    row: usize,
    basis: &Basis,
    acceleration_m_s2: f64,
    slope_m_s3: f64,
    burning_per_s: f64,
) -> f64 {
    if compliance.terms() == 0 {
        return 0.0;
    }
    let values = speeds(basis, acceleration_m_s2, slope_m_s3, burning_per_s);
    compliance.sum(row, &values).to_f64()
}

/// The same term by term, per unit of the row's coefficient.
fn speeds(basis: &Basis, acceleration_m_s2: f64, slope_m_s3: f64, burning_per_s: f64) -> Vec<f64> {
    (0..basis.values.len())
        .map(|t| {
            slope_m_s3 * (basis.values[t] + acceleration_m_s2 * basis.by_acceleration[t])
                + acceleration_m_s2 * burning_per_s * basis.by_burned[t]
        })
        .collect()
}

/// `∫ v_t v_u/(2c²) dτ` from array time zero to a moment, of all pairs of terms: the motion
/// of every row is a sum of these, so a line of many nodes needs one quadrature.
pub(super) fn motion_products(flight: &Flight, propulsion: &Propulsion, at: ArrayTime) -> Vec<f64> {
    let compliance = &flight.compliance;
    let count = compliance.terms();
    let mut products = vec![0.0; count * count];
    for (index, phase) in flight.plan.phases().iter().enumerate() {
        if phase.start >= at || count == 0 {
            break;
        }
        if phase.is_hold() && !propulsion.is_falling() {
            continue;
        }
        flight.pieces(propulsion, index, phase.end.min(at), &mut |point| {
            let alpha = point.acceleration_m_s2;
            let basis = compliance.basis(alpha, point.burned);
            let speeds = speeds(&basis, alpha, point.slope_m_s3, point.burning_per_s);
            let weight = point.width_s / (2.0 * C2_M2_S2.hi);
            for (products, first) in products.chunks_mut(count).zip(&speeds) {
                for (product, second) in products.iter_mut().zip(&speeds) {
                    *product += weight * first * second;
                }
            }
        });
    }
    products
}

/// `∫ ḣ²/(2 c² N) dτ` of a row from array time zero to a moment, s: what the clock offset
/// leaves out, always slowing the node's clock.
pub(super) fn neglected_motion_s(
    flight: &Flight,
    propulsion: &Propulsion,
    row: usize,
    relaxed_m: f64,
    at: ArrayTime,
) -> f64 {
    let compliance = &flight.compliance;
    let mut sum = 0.0;
    for (index, phase) in flight.plan.phases().iter().enumerate() {
        if phase.start >= at || compliance.terms() == 0 {
            break;
        }
        if phase.is_hold() && !propulsion.is_falling() {
            continue;
        }
        flight.pieces(propulsion, index, phase.end.min(at), &mut |point| {
            let alpha = point.acceleration_m_s2;
            let basis = compliance.basis(alpha, point.burned);
            let speed =
                speed(compliance, row, &basis, alpha, point.slope_m_s3, point.burning_per_s);
            let position = relaxed_m + alpha * compliance.sum(row, &basis.values).to_f64();
            let rate = 1.0 + alpha * position * INVERSE_C2_S2_M2.hi;
            sum += point.width_s * speed * speed / (2.0 * C2_M2_S2.hi * rate);
        });
    }
    sum
}
