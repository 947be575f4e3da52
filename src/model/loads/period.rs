//! The line's own axial period, and what ramps and steps of thrust leave ringing.

use std::f64::consts::{FRAC_PI_2, PI};

use super::march::Rods;
use super::structure::Structure;
use crate::model::constants::SPEED_OF_LIGHT_M_S;

/// The lowest axial mode of a line whose reference node's motion is given.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Period {
    /// The period `T₁`, s.
    pub period_s: f64,
    /// Whether it is the part fore of the reference that swings, or the part aft of it.
    pub is_fore: bool,
}

/// A change of thrust against the line's own period.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Ringing {
    /// Index of the ramp's phase; for a step, of the phase that begins with it, one past
    /// the last for the step at the end of the plan.
    pub phase: usize,
    /// Length of the ramp, s; 0 for a step.
    pub ramp_s: f64,
    /// Share of the change of static stretch that is left ringing: at most
    /// `T₁/(π T_r)`, all of it after a step.
    pub share: f64,
    /// The row that rings most.
    pub row: usize,
    /// Its amplitude, m: the share times the change of its static position.
    pub amplitude_m: f64,
    /// First-order Doppler amplitude of that row, `2π amplitude/(T₁ c)`.
    pub doppler: f64,
}

impl Ringing {
    /// Whether stretch may be called quasi-static: the ramp is at least as long as the
    /// line's own period, so that under a third of the change rings.
    #[must_use]
    pub fn is_quasi_static(&self, period_s: f64) -> bool {
        self.ramp_s >= period_s
    }

    pub(super) fn new(
        phase: usize,
        ramp_s: f64,
        period_s: f64,
        changes_m: &[(usize, f64)],
    ) -> Ringing {
        let share = if ramp_s > 0.0 { (period_s / (PI * ramp_s)).min(1.0) } else { 1.0 };
        let (row, largest) = changes_m
            .iter()
            .map(|&(row, change)| (row, change.abs()))
            .fold((0, 0.0), |most, here| if here.1 > most.1 { here } else { most });
        let amplitude_m = share * largest;
        let doppler = 2.0 * PI * amplitude_m / (period_s * SPEED_OF_LIGHT_M_S);
        Ringing { phase, ramp_s, share, row, amplitude_m, doppler }
    }
}

/// The lowest axial period, with the masses given for the nodes (propellant included);
/// `None` when nothing can swing: a rigid line, or no mass beyond the first spring.
///
/// Nodes are lumped, spans distributed: along a span `u″ + (μ ω²/EA) u = 0` with `s` the
/// unloaded length, at a node `EA u′` jumps by `−m ω² u`; the outer end is free and the
/// reference clamped, since its motion is given. Seen from the free end, the dynamic
/// stiffness `D = EA u′/u` grows with `ω`, and the lowest frequency is the first at which
/// it becomes infinite at the clamp: an angle reaching π/2 (Rayleigh, *Theory of Sound*,
/// sections 150 to 155; Blevins, *Formulas for Natural Frequency and Mode Shape*,
/// table 8-16, for the uniform rod). Solved to 1e-14 of the period.
///
/// Left out: the rates inside the line, `|N − 1|` of the period (below 1e-10 for any known
/// material), damping, and everything transverse. Masses fall as propellant burns, so the
/// period at array time zero is the longest.
#[must_use]
pub fn lowest_period(structure: &Structure, masses_kg: &[f64]) -> Option<Period> {
    let rods = Rods::new(structure);
    let lengths: Vec<f64> = rods.lengths_m.iter().map(|length| length.to_f64()).collect();
    lowest_period_of(structure, masses_kg, &lengths)
}

pub(super) fn lowest_period_of(
    structure: &Structure,
    masses_kg: &[f64],
    lengths_m: &[f64],
) -> Option<Period> {
    let side = |is_fore: bool| {
        let chain = Chain::new(structure, masses_kg, lengths_m, is_fore);
        chain.lowest().map(|frequency| Period { period_s: 2.0 * PI / frequency, is_fore })
    };
    match (side(true), side(false)) {
        (Some(fore), Some(aft)) => Some(if fore.period_s > aft.period_s { fore } else { aft }),
        (fore, aft) => fore.or(aft),
    }
}

/// One side of the line, from its free end to the clamp.
struct Chain {
    links: Vec<Link>,
}

/// A node and the span between it and the clamp.
struct Link {
    mass_kg: f64,
    length_m: f64,
    density_kg_m: f64,
    /// `EA`, N; infinite where rigid.
    stiffness_n: f64,
}

impl Chain {
    fn new(structure: &Structure, masses_kg: &[f64], lengths_m: &[f64], is_fore: bool) -> Chain {
        let reference = structure.reference;
        let gaps: Vec<(usize, usize)> = if is_fore {
            (0..reference).map(|gap| (gap, gap)).collect()
        } else {
            (reference..lengths_m.len()).rev().map(|gap| (gap + 1, gap)).collect()
        };
        let mut links: Vec<Link> = gaps
            .into_iter()
            .map(|(row, gap)| {
                let member = &structure.members[gap];
                let length_m = lengths_m[gap];
                Link {
                    mass_kg: masses_kg[row],
                    length_m,
                    density_kg_m: member.linear_density_kg_m,
                    stiffness_n: match member.axial_stiffness_n {
                        Some(stiffness) if length_m > 0.0 => stiffness,
                        _ => f64::INFINITY,
                    },
                }
            })
            .collect();
        // Whatever is rigidly joined to the reference moves with it.
        while links.last().is_some_and(|link| link.stiffness_n.is_infinite()) {
            links.pop();
        }
        Chain { links }
    }

    /// How much of the quarter turn the innermost spring has left at a frequency: above zero
    /// below the lowest mode; minus infinity when a spring further out has none left.
    fn left(&self, square: f64) -> f64 {
        let frequency = libm::sqrt(square);
        let mut stiffness = 0.0;
        let mut left = f64::INFINITY;
        for link in &self.links {
            if left <= 0.0 {
                return f64::NEG_INFINITY;
            }
            stiffness += link.mass_kg * square;
            if link.stiffness_n.is_infinite() {
                stiffness += link.density_kg_m * link.length_m * square;
                continue;
            }
            if link.density_kg_m == 0.0 {
                // A massless spring in series: compliances add, with the sign of inertia.
                left = 1.0 - stiffness * link.length_m / link.stiffness_n;
                stiffness /= left;
                continue;
            }
            let wave = frequency * libm::sqrt(link.density_kg_m / link.stiffness_n);
            let impedance = link.stiffness_n * wave;
            let angle = libm::atan(stiffness / impedance) + wave * link.length_m;
            left = FRAC_PI_2 - angle;
            stiffness = impedance * libm::tan(angle);
        }
        left
    }

    /// The lowest frequency, rad/s.
    fn lowest(&self) -> Option<f64> {
        let mass: f64 =
            self.links.iter().map(|link| link.mass_kg + link.density_kg_m * link.length_m).sum();
        if self.links.is_empty() || mass == 0.0 {
            return None;
        }
        // All the mass at the free end of all the springs swings more slowly than the line.
        let compliance: f64 = self.links.iter().map(|link| link.length_m / link.stiffness_n).sum();
        let mut low = 1.0 / (mass * compliance);
        let mut low_left = self.left(low);
        if low_left <= 0.0 {
            return Some(libm::sqrt(low));
        }
        let mut high = 2.0 * low;
        let mut high_left = self.left(high);
        let mut doublings = 0;
        while high_left > 0.0 {
            (low, low_left) = (high, high_left);
            high *= 2.0;
            high_left = self.left(high);
            doublings += 1;
            if doublings > 400 {
                // The mass sits where it cannot swing.
                return None;
            }
        }
        // False position in ω², where the remainder is nearly straight, halving the kept end
        // (Dowell & Jarratt, BIT 11 (1971) 168); bisection where the upper end is past a pole.
        let mut last = None;
        for _ in 0..200 {
            if high - low <= 4.0 * f64::EPSILON * high {
                break;
            }
            let slide = low + (high - low) * (low_left / (low_left - high_left));
            let trial = if high_left.is_finite() && slide > low && slide < high {
                slide
            } else {
                0.5 * (low + high)
            };
            let left = self.left(trial);
            if left == 0.0 {
                return Some(libm::sqrt(trial));
            }
            let side = left > 0.0;
            if side {
                (low, low_left) = (trial, left);
            } else {
                (high, high_left) = (trial, left);
            }
            match last {
                Some(true) if side => high_left *= 0.5,
                Some(false) if !side => low_left *= 0.5,
                _ => {}
            }
            last = Some(side);
        }
        Some(libm::sqrt(0.5 * (low + high)))
    }
}
