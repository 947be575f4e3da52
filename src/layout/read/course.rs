//! What moves the line, or holds it up.

use super::history::{self, History};
use super::rows::Rows;
use crate::layout::fault::{Collector, Spot};
use crate::layout::written::{Written, WrittenPhase};
use crate::layout::{AccelerationUncertainty, Course, Standing};
use crate::model::array_time::ArrayTime;
use crate::model::plan::{Phase, Plan, PlanFault};

/// The course of the line with the uncertainty of its acceleration; `None` after a fault.
pub(super) fn check(
    written: &Written,
    history: Option<(u32, &str)>,
    faults: &mut Collector,
) -> Option<(Course, AccelerationUncertainty)> {
    let before = faults.total();
    exclude(written, faults);
    let uncertainty = written.acceleration.as_ref().map(|part| part.uncertainty);
    let uncertainty = uncertainty.unwrap_or_default();
    if let Some(standing) = &written.standing {
        let course = Course::Standing(Standing {
            gravity_m_s2: *standing.gravity_m_s2.value()?,
            u_gravity_m_s2: standing.u_gravity_m_s2,
            gradient_per_s2: standing.gradient_per_s2.value().copied().unwrap_or(0.0),
            u_gradient_per_s2: standing.u_gradient_per_s2,
        });
        return (faults.total() == before).then_some((course, uncertainty));
    }
    let history_is_named =
        written.acceleration.as_ref().is_some_and(|part| !part.history.is_absent());
    let (phases, spots) = if history_is_named {
        let (file, text) = history?;
        let History { phases, spots } = history::read(file, text, faults)?;
        (phases, spots)
    } else {
        from_phases(&written.phases, faults)?
    };
    match Plan::new(phases) {
        Ok(plan) if faults.total() == before => Some((Course::Thrust(plan), uncertainty)),
        Ok(_) => None,
        Err(fault) => {
            report(&fault, &spots, faults);
            None
        }
    }
}

/// Phases, a history and gravity exclude each other.
fn exclude(written: &Written, faults: &mut Collector) {
    let history = written.acceleration.as_ref().and_then(|part| part.history.spot());
    if let (Some(spot), Some(_)) = (history, written.phases.first()) {
        faults.fault(
            spot,
            "the acceleration comes from [[phase]] or from a history, not from both",
            "take the history away, or every [[phase]]",
        );
    }
    let Some(standing) = &written.standing else {
        return;
    };
    if !written.phases.is_empty() || history.is_some() {
        faults.fault(
            standing.spot,
            "a line stands in gravity or is under thrust, not both",
            "take [standing] away, or every [[phase]] and the history",
        );
    } else if let Some(acceleration) = &written.acceleration {
        faults.fault(
            acceleration.spot,
            "[acceleration] goes with thrust; a standing line has `u_gravity` and `u_gradient`",
            "take [acceleration] away",
        );
    }
}

/// The phases one after another from array time zero, with the place of each.
fn from_phases(
    written: &[WrittenPhase],
    faults: &mut Collector,
) -> Option<(Vec<Phase>, Vec<Spot>)> {
    let mut phases = Vec::with_capacity(written.len());
    let mut start = ArrayTime::ZERO;
    for phase in written {
        let (length, length_spot) = phase.length.stated()?;
        let [from_m_s2, to_m_s2] = *phase.acceleration_m_s2.value()?;
        let Some(end) = start.checked_add(*length) else {
            faults.fault(
                length_spot,
                "the phases end within 1e11 s of array time, about 3168 years",
                "shorten this phase, or those before it",
            );
            return None;
        };
        phases.push(Phase::whole(start, *length, from_m_s2, to_m_s2));
        start = end;
    }
    Some((phases, written.iter().map(|phase| phase.spot).collect()))
}

fn report(fault: &PlanFault, spots: &[Spot], faults: &mut Collector) {
    let (PlanFault::Empty { phase }
    | PlanFault::Gap { phase }
    | PlanFault::TooLong { phase }
    | PlanFault::TooStrong { phase, .. }
    | PlanFault::TooFast { phase, .. }) = *fault;
    let remedy = match fault {
        PlanFault::TooFast { .. } => "shorten the thrust before it, or lower its acceleration",
        PlanFault::TooStrong { .. } => "lower the acceleration",
        _ => "change its length",
    };
    let spot = spots.get(phase).copied().unwrap_or_default();
    faults.fault(spot, fault.to_string(), remedy);
}

/// Refuses a standing line so long that its gravity would turn: `|Γ h| > |g|`.
pub(super) fn check_gradient(written: &Written, line: &Rows, faults: &mut Collector) {
    let Some(standing) = &written.standing else {
        return;
    };
    let (Some(gravity), Some((gradient, spot))) =
        (standing.gravity_m_s2.value(), standing.gradient_per_s2.stated())
    else {
        return;
    };
    let farthest =
        line.nodes.iter().max_by(|a, b| a.position_m.abs().total_cmp(&b.position_m.abs()));
    if let Some(node) = farthest
        && (gradient * node.position_m).abs() > gravity.abs()
    {
        let rule = format!(
            "the gradient changes gravity by at most gravity itself; at `{}`, {} m, it does by more",
            node.name, node.position_m
        );
        faults.fault(spot, rule, "lower the gradient, or shorten the line");
    }
}
