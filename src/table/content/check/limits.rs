//! The limits a layout sets for itself with `[[limit]]`.

use std::sync::OnceLock;

use super::line::Line;
use super::offset::Parting;
use super::placed::Placed;
use super::resolve::Resolving;
use super::{Check, JudgedOver, Judgement, Rule, RuleState, Subject};
use crate::layout::{Layout, Limit, LimitSubject};

/// Judged limits, and what they were judged under.
pub(super) struct Limits<'a> {
    pub judgements: Vec<Judgement>,
    remedies: Vec<OnceLock<Option<String>>>,
    resolving: Option<Resolving>,
    parting: Option<Parting<'a>>,
}

impl<'a> Limits<'a> {
    pub(super) fn judge(
        layout: &'a Layout,
        span: JudgedOver,
        line: &Line<'a>,
        placed: &Placed,
    ) -> Limits<'a> {
        let resolve = in_order(&layout.limits, |limit| limit.resolve_within_s);
        let offset = in_order(&layout.limits, |limit| limit.clock_offset_s);
        // Nothing goes through the plan for a layout without limits.
        let resolving = (!resolve.is_empty()).then(|| Resolving::of(layout, span, line));
        let parting = (!offset.is_empty()).then(|| Parting::of(layout, span));
        let mut judgements = Vec::with_capacity(resolve.len() + offset.len());
        for (subject, limit_s) in resolve {
            let judge = |resolving: &Resolving| resolving.judge(layout, placed, subject, limit_s);
            judgements.extend(resolving.as_ref().map(judge));
        }
        for (subject, limit_s) in offset {
            let judge = |parting: &Parting| parting.judge(layout, placed, subject, limit_s);
            judgements.extend(parting.as_ref().map(judge));
        }
        let remedies = judgements.iter().map(|_| OnceLock::new()).collect();
        Limits { judgements, remedies, resolving, parting }
    }

    /// Whether a clock offset was judged that grows for ever.
    pub(super) fn grows(&self) -> bool {
        matches!(self.parting, Some(Parting::Standing(_)))
    }

    /// Whether rates were judged.
    pub(super) fn resolves(&self) -> bool {
        self.resolving.is_some()
    }

    /// What would mend a broken limit, or let one be judged. It may take a trial, and a page
    /// asks more than once.
    pub(super) fn remedy(&self, check: &Check<'_>, place: usize) -> Option<String> {
        let judgement = &self.judgements[place];
        let (layout, placed) = (check.layout(), &check.placed);
        let find = || match judgement.rule {
            Rule::Resolve => {
                self.resolving.as_ref()?.remedy(layout, check.span(), placed, judgement)
            }
            _ if judgement.state != RuleState::Broken => None,
            _ => Some(self.parting.as_ref()?.remedy(layout, check.span(), placed, judgement)),
        };
        self.remedies[place].get_or_init(find).clone()
    }

    pub(super) fn offset_widen(
        &self,
        layout: &Layout,
        placed: &Placed,
        judgement: &Judgement,
    ) -> Option<String> {
        self.parting.as_ref().map(|parting| parting.widen(layout, placed, judgement))
    }

    pub(super) fn resolve_widen(
        &self,
        layout: &Layout,
        placed: &Placed,
        judgement: &Judgement,
    ) -> Option<String> {
        self.resolving.as_ref().map(|resolving| resolving.widen(layout, placed, judgement))
    }
}

/// The limits of a kind, fore to aft by their foremost node, ties in the order of the file.
fn in_order(limits: &[Limit], kind: impl Fn(&Limit) -> Option<f64>) -> Vec<(Subject, f64)> {
    let mut all: Vec<(Subject, f64)> = limits
        .iter()
        .filter_map(|limit| {
            let subject = match limit.subject {
                LimitSubject::Node(row) => Subject::Node(row),
                LimitSubject::Pair(pair) => Subject::Pair(pair),
            };
            Some((subject, kind(limit)?))
        })
        .collect();
    all.sort_by_key(|(subject, _)| match *subject {
        Subject::Node(row) => row,
        Subject::Pair([from, to]) => from.min(to),
        Subject::Line | Subject::Engine(_) | Subject::Parts(..) => usize::MAX,
    });
    all
}
