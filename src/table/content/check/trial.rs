//! Advice tried out: a layout with one node put elsewhere, judged again.
//!
//! On a line that stretches every place follows from every other, so no formula says where a
//! node has to be filed for a rule to be kept. A copy is judged instead.

use std::cell::RefCell;

use super::{Check, JudgedOver, Judgement, Rule, RuleState, Subject};
use crate::layout::{Course, Layout, Limit, LimitSubject};
use crate::table::content::words::LENGTH;

/// Nodes and phases up to which a layout is copied and judged for one piece of advice, and
/// for all of them together.
const MOST: usize = 20_000;
const MOST_TOGETHER: usize = 400_000;

/// Rounds in which a place is brought near to its limit.
const ROUNDS: usize = 12;

/// A copy of a layout with one limit, whose nodes can be put elsewhere.
pub(super) struct Trial {
    copy: RefCell<Layout>,
    span: JudgedOver,
    rule: Rule,
}

impl Trial {
    /// For one limit; `None` where judging a copy would take long, or where the limit binds
    /// none.
    pub(super) fn of(
        layout: &Layout,
        span: JudgedOver,
        rule: Rule,
        subject: Subject,
        limit_s: f64,
    ) -> Option<Trial> {
        let phases = match &layout.course {
            Course::Thrust(plan) => plan.phases().len(),
            Course::Standing(_) => 0,
        };
        let size = layout.nodes.len() + phases;
        if size > MOST || size * layout.limits.len() > MOST_TOGETHER {
            return None;
        }
        let subject = match subject {
            Subject::Node(row) => LimitSubject::Node(row),
            Subject::Pair(pair) => LimitSubject::Pair(pair),
            Subject::Line | Subject::Engine(_) | Subject::Parts(..) => return None,
        };
        let is_offset = rule == Rule::ClockOffset;
        let limit = Limit {
            subject,
            clock_offset_s: is_offset.then_some(limit_s),
            resolve_within_s: (!is_offset).then_some(limit_s),
        };
        let mut copy = layout.clone();
        copy.limits = vec![limit];
        Some(Trial { copy: RefCell::new(copy), span, rule })
    }

    /// The limit judged with a node elsewhere; `None` where that would change the order of the
    /// nodes, and with it what the spans join, or where the line could not be flown.
    fn judged_at(&self, row: usize, position_m: f64) -> Option<Judgement> {
        let mut copy = self.copy.borrow_mut();
        let nodes = &copy.nodes;
        let is_aft_of = |other: usize| position_m < nodes[other].position_m;
        let is_fore_of = |other: usize| position_m > nodes[other].position_m;
        let is_in_order = row.checked_sub(1).is_none_or(is_aft_of)
            && (row + 1 >= nodes.len() || is_fore_of(row + 1));
        if row == copy.reference || !is_in_order || !position_m.is_finite() {
            return None;
        }
        let filed_m = std::mem::replace(&mut copy.nodes[row].position_m, position_m);
        let check = Check::new(&copy, self.span);
        let last = check.rows() - 1;
        let judgement = check.placed.is_elastic().then(|| check.judgement(last));
        drop(check);
        copy.nodes[row].position_m = filed_m;
        judgement.filter(|judgement| judgement.rule == self.rule)
    }

    /// How far from another node, on its own side of it, a node may be filed at most, or has
    /// to be at least, for the limit to be kept.
    pub(super) fn distance(&self, row: usize, other: usize, is_most: bool) -> Option<String> {
        let place = |row: usize| self.copy.borrow().nodes[row].position_m;
        let (from_m, filed_m) = (place(other), place(row));
        let side = (filed_m - from_m).signum();
        let judged = |apart_m: f64| self.judged_at(row, from_m + apart_m * side);
        let mut apart_m = (filed_m - from_m).abs();
        if apart_m == 0.0 {
            return None;
        }
        let mut nearest: Option<f64> = None;
        for _ in 0..ROUNDS {
            let judgement = judged(apart_m)?;
            let limit = judgement.limit.ok()?;
            let Ok(value) = judgement.value else { break };
            if value.is_nan() || value <= 0.0 {
                break;
            }
            nearest = Some(apart_m);
            // An offset grows with the distance; the time to resolve falls with its square or
            // more slowly.
            let share = limit / value;
            let step = if is_most { share } else { (1.0 / share).sqrt() };
            if (step - 1.0).abs() < 1e-12 {
                break;
            }
            apart_m *= step;
        }
        let apart_m = nearest?;
        let keeps = |apart_m: f64| {
            judged(apart_m).is_some_and(|judgement| judgement.state == RuleState::Kept)
        };
        if is_most { LENGTH.at_most(apart_m, keeps) } else { LENGTH.at_least(apart_m, keeps) }
    }
}
