//! Propellant: the relativistic rocket equation for a line with several engines.

use super::balance::normalised_shares;
use super::structure::{Engine, Structure};
use crate::model::array_time::ArrayTime;
use crate::model::dd::{Dd, RunningSum};
use crate::model::plan::{Phase, Plan};

/// What the engines burn and what is left of the line.
///
/// ```text
/// dm_k/dτ = −s_k |α| M / w_k          M(τ) = M(0) e^(−V/w),   V = ∫ |α| dτ,   1/w = Σ s_k/w_k
/// used_k  = (s_k / w_k) ∫ |α| M dτ    = (s_k w / w_k) (M(0) − M(τ))
/// ```
///
/// exact at any exhaust speed up to that of light: the rate `N_k` of an engine cancels
/// between its local force and its local clock (Ackeret, Helv. Phys. Acta 19 (1946) 103,
/// for one engine). The sum in `1/w` runs over the engines that carry propellant. One
/// that has an exhaust speed but no propellant burns by the same law, `s_k V M / w_k` on a
/// line whose mass stays, but what it burns weighs nothing. One without an exhaust speed
/// burns nothing.
///
/// Accuracy: 1e-15 of the value times `1 + V/w`.
#[derive(Clone, Debug)]
pub struct Propulsion {
    engines: Vec<Engine>,
    shares: Vec<Dd>,
    mass_kg: Dd,
    /// `1/w` of the engines that carry propellant, s/m.
    inverse_speed: Dd,
    /// `1/w` of every engine with an exhaust speed, s/m.
    inverse_speed_of_all: Dd,
}

/// What one engine has used up to a moment.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Use {
    /// Propellant used since array time zero, kg.
    pub used_kg: f64,
    /// What is left of its propellant, kg; below zero is what was missing. `None` when the
    /// layout gives none.
    pub left_kg: Option<f64>,
}

/// An engine that runs dry before the plan ends.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RunsDry {
    /// Index of the engine.
    pub engine: usize,
    /// Index of the phase in which it does.
    pub phase: usize,
    /// The moment.
    pub at: ArrayTime,
    /// Propellant aboard, kg.
    pub aboard_kg: f64,
    /// Propellant it would need for the whole plan, kg, when every engine that runs dry is
    /// given what it needs (which makes the line heavier); infinite above the largest double.
    pub needed_kg: f64,
    /// Common logarithm of that, always finite.
    pub log10_needed_kg: f64,
}

impl Propulsion {
    /// The engines of a line, and its mass at array time zero.
    #[must_use]
    pub fn new(structure: &Structure, mass_kg: Dd) -> Propulsion {
        let engines = structure.engines_or_ideal();
        let shares = normalised_shares(structure);
        let inverse = |counts: &dyn Fn(&Engine) -> bool| {
            let mut sum = RunningSum::default();
            for (engine, share) in engines.iter().zip(&shares) {
                if let Some(speed) = engine.exhaust_speed_m_s.filter(|_| counts(engine)) {
                    sum.add(*share / speed);
                }
            }
            sum.value()
        };
        let inverse_speed = inverse(&|engine| engine.propellant_kg.is_some());
        let inverse_speed_of_all = inverse(&|_| true);
        Propulsion { engines, shares, mass_kg, inverse_speed, inverse_speed_of_all }
    }

    /// The engines, in the order of the structure; the ideal one where it had none.
    #[must_use]
    pub fn engines(&self) -> &[Engine] {
        &self.engines
    }

    /// Shares of the thrust, divided by their sum.
    #[must_use]
    pub fn shares(&self) -> &[Dd] {
        &self.shares
    }

    /// Mass of the line at array time zero, kg, propellant included.
    #[must_use]
    pub fn mass_at_start_kg(&self) -> Dd {
        self.mass_kg
    }

    /// Whether the mass of the line falls while it is under thrust.
    #[must_use]
    pub fn is_falling(&self) -> bool {
        self.inverse_speed.hi > 0.0 && self.mass_kg.hi > 0.0
    }

    /// `1/w` of the engines that carry propellant, s/m; zero when none does.
    #[must_use]
    pub fn inverse_speed_s_m(&self) -> f64 {
        self.inverse_speed.to_f64()
    }

    /// The fraction of the mass at array time zero that is gone once the engines have
    /// delivered `V = ∫ |α| dτ`, `1 − e^(−V/w)`.
    #[must_use]
    pub fn burned_fraction(&self, spent_m_s: Dd) -> f64 {
        -expm1(-(spent_m_s * self.inverse_speed))
    }

    /// What is left of the line's mass, `M(τ)/M(0) = e^(−V/w)`.
    #[must_use]
    pub fn mass_fraction(&self, spent_m_s: Dd) -> f64 {
        let drop = spent_m_s * self.inverse_speed;
        libm::exp(-drop.hi) * (1.0 - drop.lo)
    }

    /// Share of an engine in what the line loses, `s_k w / w_k`; zero when it carries no
    /// propellant.
    #[must_use]
    pub fn burning_share(&self, engine: usize) -> Dd {
        let filed = &self.engines[engine];
        match (filed.exhaust_speed_m_s, filed.propellant_kg) {
            (Some(speed), Some(_)) if self.inverse_speed.hi > 0.0 => {
                self.shares[engine] / speed / self.inverse_speed
            }
            _ => Dd::ZERO,
        }
    }

    /// What an engine has used once the engines together have delivered `V`; zero when it
    /// has no exhaust speed.
    #[must_use]
    pub fn used(&self, engine: usize, spent_m_s: Dd) -> Use {
        let filed = &self.engines[engine];
        let used_kg = filed.exhaust_speed_m_s.map_or(0.0, |speed| {
            let drop = (spent_m_s * self.inverse_speed).to_f64();
            // ∫ |α| M dτ = M(0) V (1 − e^(−y))/y, which is M(0) V where nothing falls.
            let mean = if drop == 0.0 { 1.0 } else { -libm::expm1(-drop) / drop };
            (self.mass_kg * self.shares[engine] * spent_m_s / speed).to_f64() * mean
        });
        Use { used_kg, left_kg: filed.propellant_kg.map(|aboard| aboard - used_kg) }
    }

    /// `ln(M(0)/M(τ)) = V/w` over every engine with an exhaust speed: the ratio of masses
    /// a line would need that carries all its propellant; zero when no engine burns any.
    #[must_use]
    pub fn ln_mass_ratio(&self, spent_m_s: Dd) -> f64 {
        (spent_m_s * self.inverse_speed_of_all).to_f64()
    }

    /// The mass ratio itself, infinite above the largest double.
    #[must_use]
    pub fn mass_ratio(&self, spent_m_s: Dd) -> f64 {
        let rise = spent_m_s * self.inverse_speed_of_all;
        libm::exp(rise.hi) * (1.0 + rise.lo)
    }

    /// Its common logarithm, always finite.
    #[must_use]
    pub fn log10_mass_ratio(&self, spent_m_s: Dd) -> f64 {
        self.ln_mass_ratio(spent_m_s) * std::f64::consts::LOG10_E
    }

    /// The engines that run dry before the plan ends, in the order of the moments.
    #[must_use]
    pub fn running_dry(&self, plan: &Plan) -> Vec<RunsDry> {
        self.running_dry_until(plan, plan.end())
    }

    /// The same by a moment, with what the engines need up to it.
    #[must_use]
    pub fn running_dry_until(&self, plan: &Plan, until: ArrayTime) -> Vec<RunsDry> {
        if !self.is_falling() {
            return Vec::new();
        }
        let spent = plan.velocity_spent_m_s(until);
        let mut dry: Vec<RunsDry> = (0..self.engines.len())
            .filter_map(|engine| {
                let aboard_kg = self.engines[engine].propellant_kg?;
                let moment = self.dry_at(engine, aboard_kg, spent, plan)?;
                Some(RunsDry {
                    engine,
                    phase: moment.0,
                    at: moment.1,
                    aboard_kg,
                    needed_kg: 0.0,
                    log10_needed_kg: 0.0,
                })
            })
            .collect();
        self.fill_needs(&mut dry, spent);
        dry.sort_by(|a, b| a.at.cmp(&b.at).then(a.engine.cmp(&b.engine)));
        dry
    }

    fn dry_at(
        &self,
        engine: usize,
        aboard_kg: f64,
        spent: Dd,
        plan: &Plan,
    ) -> Option<(usize, ArrayTime)> {
        let burning = self.burning_share(engine);
        // A tank filled to the last digit is not dry.
        if burning.is_zero() || self.used(engine, spent).used_kg <= aboard_kg * (1.0 + 1e-14) {
            return None;
        }
        let fraction = (Dd::new(aboard_kg) / (burning * self.mass_kg)).to_f64();
        self.when_burned(plan, fraction)
    }

    /// The moment at which a fraction of the mass has burned, and its phase; `None` when the
    /// plan ends before.
    pub(super) fn when_burned(&self, plan: &Plan, fraction: f64) -> Option<(usize, ArrayTime)> {
        if fraction >= 1.0 || self.inverse_speed.is_zero() {
            return None;
        }
        let spent = Dd::new(-libm::log1p(-fraction)) / self.inverse_speed;
        let phases = plan.phases();
        let index = phases.partition_point(|phase| plan.velocity_spent_m_s(phase.end) < spent);
        let phase = phases.get(index)?;
        let ahead = spent - plan.velocity_spent_m_s(phase.start);
        let after = time_to_spend(phase, ahead);
        let at = ArrayTime::nearest(phase.start.seconds() + after)?;
        Some((index, at.clamp(phase.start, phase.end)))
    }

    /// With `R` the mass of everything but the short tanks and `B` the burning share of
    /// those, the line starts at `R / (1 − B (1 − e^(−y)))`, and a short tank takes its
    /// share of what is lost. A heavier line may empty further tanks, which then count too.
    fn fill_needs(&self, dry: &mut [RunsDry], spent: Dd) {
        let drop = spent * self.inverse_speed;
        let mut short: Vec<bool> =
            (0..self.engines.len()).map(|k| dry.iter().any(|row| row.engine == k)).collect();
        loop {
            let (mut rest, mut burning, mut lasting) = (self.mass_kg, Dd::ZERO, Dd::ZERO);
            for (k, engine) in self.engines.iter().enumerate() {
                if short[k] {
                    rest = rest - engine.propellant_kg.unwrap_or(0.0);
                    burning = burning + self.burning_share(k);
                } else {
                    lasting = lasting + self.burning_share(k);
                }
            }
            let left = lasting.to_f64() + burning.to_f64() * libm::exp(-drop.to_f64());
            let lost = -libm::expm1(-drop.to_f64()) * rest.to_f64();
            let need = |k: usize| self.burning_share(k).to_f64() * lost / left;
            // The start M'(0) = R / (lasting + burning e^(−y)) may exceed the largest double.
            let log10_need = |k: usize| {
                log10(self.burning_share(k).to_f64() * lost) - log10_blend(lasting, burning, drop)
            };
            let further = (0..self.engines.len()).find(|&k| {
                !short[k]
                    && !self.burning_share(k).is_zero()
                    && self.engines[k]
                        .propellant_kg
                        .is_some_and(|aboard| log10_need(k) > log10(aboard) + 1e-13)
            });
            if let Some(k) = further {
                short[k] = true;
                continue;
            }
            for row in dry.iter_mut() {
                row.log10_needed_kg = log10_need(row.engine);
                row.needed_kg = need(row.engine);
            }
            return;
        }
    }
}

/// `log10(lasting + burning e^(−drop))`, without underflow.
fn log10_blend(lasting: Dd, burning: Dd, drop: Dd) -> f64 {
    if lasting.hi <= 1e-300 {
        return log10(burning.to_f64()) - drop.to_f64() * std::f64::consts::LOG10_E;
    }
    log10(lasting.to_f64() + burning.to_f64() * libm::exp(-drop.to_f64()))
}

fn log10(value: f64) -> f64 {
    libm::log10(value)
}

/// `e^x − 1` of a double-double, to a few units of 2⁻⁵³.
fn expm1(x: Dd) -> f64 {
    let whole = libm::expm1(x.hi);
    whole + (whole + 1.0) * x.lo
}

/// How long after the start of a phase `∫ |α| dτ` reaches a value, s.
///
/// On a straight line `t = 2 v / (|a| + sqrt(a² ± 2 s v))`, which does not cancel; beyond a
/// zero of the ramp the second triangle counts from that zero.
fn time_to_spend(phase: &Phase, spent: Dd) -> Dd {
    let length = phase.end.seconds_since(phase.start);
    let (first, last) = (phase.acceleration(phase.start), phase.acceleration(phase.end));
    let slope = ((last.abs() - first.abs()) / length).to_f64();
    let (a, v) = (first.to_f64().abs(), spent.to_f64());
    if v <= 0.0 {
        return Dd::ZERO;
    }
    let crossing = phase.moment_of(Dd::ZERO).filter(|_| {
        !phase.is_hold() && first.is_negative() != last.is_negative() && !first.is_zero()
    });
    let time = match crossing {
        None => 2.0 * v / (a + libm::sqrt((a * a + 2.0 * slope * v).max(0.0))),
        Some(zero) => {
            let steep = ((last - first) / length).abs().to_f64();
            let before = (first.abs() * zero * 0.5).to_f64();
            if v <= before {
                2.0 * v / (a + libm::sqrt((a * a - 2.0 * steep * v).max(0.0)))
            } else {
                zero.to_f64() + libm::sqrt(2.0 * (v - before) / steep)
            }
        }
    };
    Dd::new(time)
}
