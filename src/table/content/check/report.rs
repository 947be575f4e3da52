//! The report of `check`: what to know at a glance, then the rules, then the phases.

use std::borrow::Cow;
use std::sync::Arc;

use super::{Check, JudgedOver, Judgement, RuleState, phases};
use crate::layout::{Course, Layout};
use crate::table::content::loads::DRY;
use crate::table::content::{NO_RAPIDITY, OVERFLOW, column};
use crate::table::{Cell, Column, Measure, Report, Scalar, Table};

const COLUMNS: [Column; 11] = [
    column("rule", "rule", Measure::Word),
    column("subject", "subject", Measure::Word),
    column("phase", "phase", Measure::Count),
    column("at_s", "at", Measure::Various),
    column("broken_from_s", "broken from", Measure::Various),
    column("value", "value", Measure::Various),
    column("limit", "limit", Measure::Various),
    column("unit", "unit", Measure::Unit),
    column("margin", "margin", Measure::Ratio),
    column("state", "state", Measure::Word),
    column("remedy", "remedy", Measure::Word),
];

const NEVER: &str = "below any number: never resolved";
const NOT_JUDGED: &str = "not judged";

/// The check report of a layout.
#[must_use]
pub fn check_report<'a>(check: Arc<Check<'a>>) -> Report<'a> {
    let layout = check.layout();
    let mut report = head(layout, check.span());
    report.scalars = scalars(&check);
    if check.limits.grows() {
        report.remarks.push(
            "On a standing line clocks part without end: clock offsets are judged over 1 d."
                .to_owned(),
        );
    }
    if check.limits.resolves() {
        report.remarks.push(
            "A pair is resolved when its rate difference is at least one standard deviation of \
             its noise, under the held design acceleration or else the strongest thrust."
                .to_owned(),
        );
    }
    if check.span() == JudgedOver::Plan && check.placed.runs_dry() {
        report.remarks.push(DRY.to_owned());
    }
    let judged = Arc::clone(&check);
    report.tables.push(Table {
        name: "rules",
        columns: COLUMNS.to_vec(),
        rows: check.rows(),
        marked: None,
        fill: Box::new(move |row, cells| fill(&judged, &judged.judgement(row), cells)),
    });
    if check.span() == JudgedOver::Plan {
        report.tables.push(phases::table(layout, &check.line));
    }
    report
}

/// Counts, the smallest margin, and what would widen it.
fn scalars<'a>(check: &Check<'a>) -> Vec<Scalar<'a>> {
    let summary = check.summary();
    let smallest = &summary.smallest;
    let scalar = |key, heading, measure, value| Scalar { key, heading, measure, value };
    let counted = |key, heading, number: usize| {
        let value = Cell::Integer(i64::try_from(number).unwrap_or(i64::MAX));
        scalar(key, heading, Measure::Count, value)
    };
    let word = |key, heading, text| scalar(key, heading, Measure::Word, Cell::Text(text));
    vec![
        counted("kept", "kept", summary.kept),
        counted("broken", "broken", summary.broken),
        counted("not_judged", "not judged", summary.not_judged),
        scalar("smallest_margin", "smallest margin", Measure::Ratio, margin(smallest)),
        scalar("smallest_margin_used", "of its limit used", Measure::Ratio, used(smallest)),
        word("smallest_margin_rule", "of the rule", smallest.rule.word().into()),
        word("smallest_margin_subject", "for", smallest.subject.name(check.layout())),
        scalar("smallest_margin_phase", "in phase", Measure::Count, phase(smallest)),
        scalar("smallest_margin_at_s", "at", Measure::Various, at(smallest)),
        word("widen", "what would widen it", Cow::Owned(check.widen(smallest))),
    ]
}

fn margin(judgement: &Judgement) -> Cell<'static> {
    match judgement.margin {
        Some(f64::NEG_INFINITY) => Cell::Absent(NEVER.into()),
        Some(margin) => Cell::finite(margin, OVERFLOW),
        None if judgement.state == RuleState::NotJudged => Cell::Absent(NOT_JUDGED.into()),
        None => Cell::Absent("a limit of zero has no margin".into()),
    }
}

/// What is left of a margin where its own digits are used up: `1.000000` says nothing.
fn used(judgement: &Judgement) -> Cell<'static> {
    match judgement.used() {
        Some(used) => Cell::Number(used),
        None => Cell::Absent("the value and its limit have no quotient".into()),
    }
}

fn at(judgement: &Judgement) -> Cell<'static> {
    judgement.at.map_or_else(|why| Cell::Absent(why.into()), Cell::Computed)
}

fn phase(judgement: &Judgement) -> Cell<'static> {
    match judgement.phase {
        Ok(phase) => Cell::Integer(i64::try_from(phase + 1).unwrap_or(i64::MAX)),
        Err(why) => Cell::Absent(why.into()),
    }
}

/// The head: a line that reaches the horizon has no state, so it is made from the plan.
fn head(layout: &Layout, span: JudgedOver) -> Report<'_> {
    const WHOLE: &str = "the rules are judged over the whole plan";
    let (at, acceleration, rapidity) = match (span, &layout.course) {
        (JudgedOver::Plan, _) => (Err(WHOLE), Err(WHOLE), Err(WHOLE)),
        (JudgedOver::Moment(at), Course::Thrust(plan)) => {
            let moment = plan.moment(at);
            let acceleration = moment.acceleration_m_s2.to_f64();
            (Ok(at), Ok(acceleration), Ok(moment.rapidity.to_f64()))
        }
        (JudgedOver::Moment(at), Course::Standing(standing)) => {
            (Ok(at), Ok(standing.gravity_m_s2), Err(NO_RAPIDITY))
        }
    };
    Report {
        command: "check",
        schema_version: 1,
        layout: &layout.name,
        revision: layout.revision.as_deref(),
        layout_sha256: &layout.source.sha256,
        at,
        reference_acceleration_m_s2: acceleration,
        rapidity,
        scalars: Vec::new(),
        tables: Vec::new(),
        remarks: Vec::new(),
    }
}

fn fill<'a>(check: &Check<'a>, judgement: &Judgement, cells: &mut Vec<Cell<'a>>) {
    let word = |word: &'static str| Cell::Text(Cow::Borrowed(word));
    let (unit, measure) = judgement.rule.unit();
    let measured = |value: f64| match value.is_finite() {
        true => Cell::Measured(value, measure),
        false => Cell::Absent(OVERFLOW.into()),
    };
    cells.push(word(judgement.rule.word()));
    cells.push(Cell::Text(judgement.subject.name(check.layout())));
    cells.push(phase(judgement));
    cells.push(at(judgement));
    cells.push(judgement.broken_from.map_or_else(|why| Cell::Absent(why.into()), Cell::Computed));
    cells.push(match &judgement.value {
        Ok(value) => measured(*value),
        Err(why) => Cell::Absent(why.clone()),
    });
    cells.push(match judgement.limit {
        Ok(limit) => measured(limit),
        Err(why) => Cell::Absent(why.into()),
    });
    cells.push(word(unit));
    cells.push(margin(judgement));
    cells.push(word(judgement.state.word()));
    cells.push(match (check.remedy(judgement), judgement.state) {
        (Some(remedy), _) if !remedy.is_empty() => Cell::Text(Cow::Owned(remedy)),
        (_, RuleState::NotJudged) => Cell::Absent(NOT_JUDGED.into()),
        _ => Cell::Absent("nothing to mend".into()),
    });
}
