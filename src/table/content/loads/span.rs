//! How a span stands at one moment, in a word.

use crate::model::loads::{Loads, State};

/// How a span stands at one moment.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SpanLoad {
    /// It is pulled, within its strength.
    Taut,
    /// A boom that is pushed, within its strength.
    Pushed,
    /// It carries nothing.
    Unloaded,
    /// A tether that would be pushed.
    Slack,
    /// It carries more than its strength over its safety factor.
    Over,
}

impl SpanLoad {
    /// The word for it.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            SpanLoad::Taut => "taut",
            SpanLoad::Pushed => "pushed",
            SpanLoad::Unloaded => "unloaded",
            SpanLoad::Slack => "slack",
            SpanLoad::Over => "over",
        }
    }

    /// How the span between a row and the next stands. What is pushed by less than the
    /// rounding of the balance is unloaded.
    #[must_use]
    pub fn of(loads: &Loads, state: &State, gap: usize) -> SpanLoad {
        let member = &loads.structure().members[gap];
        let [fore_n, aft_n] = loads.span_force_n(state, gap);
        let (most, least) = (fore_n.max(aft_n), fore_n.min(aft_n));
        let drive = state.instant.moment.acceleration_m_s2.to_f64().abs();
        let rounding_n = 1e-14 * state.mass_kg * drive;
        let counts = if member.is_tether { most } else { most.max(-least) };
        if member.strength_n.is_some_and(|limit| counts > limit / member.safety_factor) {
            SpanLoad::Over
        } else if member.is_tether && least < -rounding_n {
            SpanLoad::Slack
        } else if most.max(-least) <= rounding_n {
            SpanLoad::Unloaded
        } else if most + least >= 0.0 {
            SpanLoad::Taut
        } else {
            SpanLoad::Pushed
        }
    }

    /// The margin of the force a span carries at one moment against its strength; `None`
    /// where no strength is given.
    #[must_use]
    pub fn margin(loads: &Loads, state: &State, gap: usize) -> Option<f64> {
        let member = &loads.structure().members[gap];
        let [fore_n, aft_n] = loads.span_force_n(state, gap);
        let counts = if member.is_tether {
            fore_n.max(aft_n).max(0.0)
        } else {
            fore_n.abs().max(aft_n.abs())
        };
        Some(1.0 - counts / (member.strength_n? / member.safety_factor))
    }
}
