//! `check`: values and first moments against analytic results, remedies fed back, and the
//! quick ways against the slow ones.

use std::sync::Arc;

use clockspar::layout::{Course, Layout};
use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::{C2_M2_S2, SPEED_OF_LIGHT_M_S, STANDARD_GRAVITY_M_S2};
use clockspar::model::dd::Dd;
use clockspar::model::plan::Plan;
use clockspar::model::rates::Instant;
use clockspar::table::content::{
    Check, JudgedOver, Judgement, Rule, RuleState, check_report, judge,
};
use clockspar::table::{Cell, TextOptions, write_json, write_text};
use proptest::prelude::*;

use crate::clocks::near;
use crate::recording::layout;

const G0: f64 = STANDARD_GRAVITY_M_S2;

fn line(nodes: &str, rest: &str) -> Arc<Layout> {
    let clock = "[clock.c]\nwhite_fm = 1e-15\n";
    layout(&format!("name = \"t\"\nreference = \"hub\"\n{nodes}\n{rest}\n{clock}"))
}

fn node(name: &str, position_m: f64, more: &str) -> String {
    format!("[[node]]\nname = \"{name}\"\nposition = {position_m:?}\n{more}\n")
}

fn two(position_m: f64, more: &str, rest: &str) -> Arc<Layout> {
    line(&(node("hub", 0.0, "clock = \"c\"") + &node("far", position_m, more)), rest)
}

fn of_rule(layout: &Layout, rule: Rule) -> Vec<Judgement> {
    let all = judge(layout, JudgedOver::Plan);
    all.into_iter().filter(|judgement| judgement.rule == rule).collect()
}

fn one(layout: &Layout, rule: Rule) -> Judgement {
    let mut all = of_rule(layout, rule);
    assert_eq!(all.len(), 1, "{all:?}");
    all.remove(0)
}

fn plan(layout: &Layout) -> &Plan {
    match &layout.course {
        Course::Thrust(plan) => plan,
        Course::Standing(_) => panic!("thrust"),
    }
}

fn at(seconds: f64) -> ArrayTime {
    ArrayTime::nearest(Dd::new(seconds)).unwrap()
}

const RUN: &str = r#"
[[phase]]
ramp = ["0 g0", "1 g0"]
for = "1 h"
[[phase]]
hold = "1 g0"
for = "1 h"
[[phase]]
ramp = ["1 g0", "-1 g0"]
for = "2 h"
[[phase]]
hold = "-1 g0"
for = "4 h"
[[limit]]
node = "far"
clock_offset = LIMIT
"#;

fn run_with(limit_s: f64) -> Arc<Layout> {
    two(-3000.0, "", &RUN.replace("LIMIT", &format!("{limit_s:?}")))
}

#[test]
fn an_offset_is_largest_where_a_ramp_passes_zero_or_at_an_end() {
    // Gained: half an hour, one hour, half an hour at 1 g0 up to the zero at 3 h; then the
    // same half hour back and four hours of braking: −2.5 h at 1 g0 in the end.
    let judgement = one(&run_with(1.0), Rule::ClockOffset);
    let wanted = 3000.0 * 2.5 * 3600.0 * G0 / C2_M2_S2.to_f64();
    near(judgement.value.clone().unwrap(), wanted, 1e-15);
    assert_eq!((judgement.phase, judgement.at), (Ok(3), Ok(at(28_800.0))));
    assert_eq!(judgement.state, RuleState::Kept);
    near(judgement.margin.unwrap(), 1.0 - wanted, 1e-15);
}

#[test]
fn the_first_moment_beyond_a_limit_is_solved_in_every_kind_of_piece() {
    let per_second = 3000.0 * G0 / C2_M2_S2.to_f64();
    // Limits in seconds of thrust at 1 g0, and where they are first passed.
    for (gained_s, phase, wanted_s) in [
        // g t²/7200 in the first ramp.
        (450.0, 0, 1800.0),
        (1800.0 + 1234.5, 1, 3600.0 + 1234.5),
        // From the start of the turning ramp: t − t²/7200.
        (5400.0 + 1350.0, 2, 7200.0 + 1800.0),
        // Beyond what was gained forwards: braking to −2 h and more, 7 h + what is left.
        (7200.0 + 900.0, 3, 14_400.0 + 5400.0 + 8100.0),
    ] {
        let layout = run_with(gained_s * per_second);
        let judgement = one(&layout, Rule::ClockOffset);
        assert_eq!(judgement.state, RuleState::Broken, "{gained_s}");
        // What is worst is so at the end of the plan, whatever was passed before.
        assert_eq!((judgement.phase, judgement.at), (Ok(3), Ok(at(28_800.0))), "{gained_s}");
        let from = judgement.broken_from.unwrap();
        near(from.to_f64(), wanted_s, 4e-15);
        assert_eq!(plan(&layout).phase_at(from), Some(phase), "{gained_s}");
    }
    // Passed on the far side of a turn inside a single ramp.
    let rest =
        "[[phase]]\nramp = [\"1 g0\", \"-3 g0\"]\nfor = \"4 h\"\n[[limit]]\nnode = \"far\"\n";
    let layout = two(-3000.0, "", &format!("{rest}clock_offset = {:?}", 5400.0 * per_second));
    let judgement = one(&layout, Rule::ClockOffset);
    // Turn at 1 h with half an hour gained; then back by (t − 1 h)²/2 per hour.
    near(judgement.broken_from.unwrap().to_f64(), 3600.0 + 7200.0, 1e-14);
}

#[test]
fn exactly_at_a_limit_is_kept() {
    let largest = one(&run_with(1.0), Rule::ClockOffset).value.unwrap();
    let judgement = one(&run_with(largest), Rule::ClockOffset);
    assert_eq!((judgement.state, judgement.margin), (RuleState::Kept, Some(0.0)));
    let judgement = one(&run_with(largest.next_down()), Rule::ClockOffset);
    assert_eq!((judgement.state, judgement.phase), (RuleState::Broken, Ok(3)));
    assert!(judgement.margin.unwrap() < 0.0);
    // 2 · 10⁻³⁰/r² for two clocks of 1e-15: exactly at the averaging time.
    let resolve = "[[phase]]\nhold = \"1 g0\"\nfor = \"1 h\"\n[[limit]]\nnode = \"far\"\n";
    let of = |limit_s: f64| {
        let rest = format!("{resolve}resolve_within = {limit_s:?}");
        one(&two(1000.0, "clock = \"c\"", &rest), Rule::Resolve)
    };
    let time = of(1.0).value.unwrap();
    let difference = 1000.0 * G0 / C2_M2_S2.to_f64();
    near(time, 2e-30 / (difference * difference), 1e-14);
    assert_eq!((of(time).state, of(time).margin), (RuleState::Kept, Some(0.0)));
    assert_eq!(of(time.next_down()).state, RuleState::Broken);
    // The rating of the reference is the thrust itself.
    let rated = line(&node("hub", 0.0, "rating = \"1 g0\""), "[[phase]]\nhold = \"1 g0\"\nfor = 1");
    assert_eq!(one(&rated, Rule::Rating).margin, Some(0.0));
    assert_eq!(one(&rated, Rule::Rating).state, RuleState::Kept);
}

#[test]
fn a_pair_parts_by_the_difference_of_its_positions() {
    let nodes = node("hub", 0.0, "") + &node("a", 900.0, "") + &node("b", -600.0, "");
    let rest = "[[phase]]\nhold = 2.5\nfor = 1000\n\
                [[limit]]\npair = [\"b\", \"a\"]\nclock_offset = \"1 ps\"\n\
                [[limit]]\npair = [\"a\", \"b\"]\nclock_offset = \"1 s\"";
    let layout = line(&nodes, rest);
    let judged = of_rule(&layout, Rule::ClockOffset);
    for judgement in &judged {
        near(judgement.value.clone().unwrap(), 1500.0 * 2500.0 / C2_M2_S2.to_f64(), 1e-15);
    }
    assert_eq!(judged[0].subject.name(&layout), "b to a");
    // 1 ps is reached after c² · 1 ps / (1500 m · 2.5 m/s²).
    near(judged[0].broken_from.unwrap().to_f64(), C2_M2_S2.to_f64() * 1e-12 / 3750.0, 1e-14);
}

#[test]
fn resolving_is_judged_under_the_design_acceleration() {
    let limit = "[[limit]]\nnode = \"far\"\nresolve_within = \"1 h\"\n";
    let phase = "[[phase]]\nhold = \"0.5 g0\"\nfor = \"1 h\"\n";
    let nodes = node("hub", 0.0, "clock = \"c\"") + &node("far", -1000.0, "clock = \"c\"");
    let seconds = |acceleration: f64| {
        let rate: f64 = 1000.0 * acceleration / C2_M2_S2.to_f64();
        2e-30 / (rate * rate)
    };
    let strongest = one(&line(&nodes, &format!("{phase}{limit}")), Rule::Resolve);
    near(strongest.value.unwrap(), seconds(0.5 * G0), 1e-14);
    assert_eq!((strongest.phase, strongest.at), (Ok(0), Ok(ArrayTime::ZERO)));
    let text = format!("design_acceleration = \"0.1 g0\"\n{nodes}");
    let design = one(&line(&text, &format!("{phase}{limit}")), Rule::Resolve);
    near(design.value.unwrap(), seconds(0.1 * G0), 1e-14);
    assert!(design.at.is_err());
    let standing = format!("[standing]\ngravity = 9.8\n{limit}");
    let standing = one(&line(&nodes, &standing), Rule::Resolve);
    near(standing.value.unwrap(), seconds(9.8), 1e-14);
    // No thrust at all, and no distance: never.
    let coast = format!("[[phase]]\nhold = 0\nfor = 1\n{limit}");
    let coasting = one(&line(&nodes, &coast), Rule::Resolve);
    assert_eq!(coasting.state, RuleState::Broken);
    assert_eq!(coasting.margin, Some(f64::NEG_INFINITY));
    assert!(coasting.value.unwrap_err().starts_with("never"));
}

#[test]
fn what_cannot_be_judged_says_why_and_what_is_missing() {
    let limit = "[[phase]]\nhold = 1\nfor = 1\n[[limit]]\nnode = \"far\"\nresolve_within = 1\n";
    let links = format!("{limit}[[link]]\nbetween = [\"hub\", \"hub2\"]\n");
    let flicker = format!("{limit}[clock.f]\nflicker_pm = 1e-15\n");
    let extra = node("hub2", 1.0, "");
    for (more, rest, why, remedy) in [
        ("", limit, "`far` has no clock", "give `far` a `clock`"),
        ("clock = \"f\"", &flicker, "bandwidth", "state the `bandwidth` of `[clock.f]`"),
        ("clock = \"c\"", &links, "no chain of links", "add a `[[link]]`"),
    ] {
        let nodes = node("hub", 0.0, "clock = \"c\"") + &extra + &node("far", -5.0, more);
        let layout = line(&nodes, rest);
        let judgement = one(&layout, Rule::Resolve);
        assert_eq!((judgement.state, judgement.margin), (RuleState::NotJudged, None));
        assert!(judgement.value.clone().unwrap_err().contains(why), "{judgement:?}");
        assert_eq!(judgement.limit, Ok(1.0));
        let check = Check::new(&layout, JudgedOver::Plan);
        assert!(check.remedy(&judgement).unwrap().contains(remedy), "{judgement:?}");
        assert_eq!(check.broken(), None, "what is not judged breaks nothing");
    }
}

#[test]
fn a_standing_line_is_judged_over_a_day() {
    let rest = "[standing]\ngravity = 9.8\n[[limit]]\nnode = \"far\"\nclock_offset = \"5 ns\"\n";
    let layout = two(1000.0, "", rest);
    let judgement = one(&layout, Rule::ClockOffset);
    let rate = 9800.0 / C2_M2_S2.to_f64();
    near(judgement.value.clone().unwrap(), rate * 86_400.0, 1e-15);
    near(judgement.broken_from.unwrap().to_f64(), 5e-9 / rate, 1e-14);
    assert_eq!(judgement.at, Ok(at(86_400.0)));
    let check = Check::new(&layout, JudgedOver::Plan);
    assert!(check.remedy(&judgement).unwrap().starts_with("set the clocks again within "));
    assert!(check_report(Arc::new(check)).remarks[0].contains("1 d"));
}

#[test]
fn moments_are_judged_alone() {
    let layout = run_with(1e-9);
    let moment = |seconds: f64| {
        let span = JudgedOver::Moment(at(seconds));
        judge(&layout, span).into_iter().find(|all| all.rule == Rule::ClockOffset).unwrap()
    };
    assert_eq!(moment(60.0).state, RuleState::Kept);
    let late = moment(1e9);
    assert_eq!((late.state, late.phase.is_err()), (RuleState::Broken, true));
    near(late.value.unwrap(), 3000.0 * 9000.0 * G0 / C2_M2_S2.to_f64(), 1e-15);
}

/// The amounts in a remedy, as a layout states them: a number and a unit.
fn amounts(remedy: &str) -> Vec<String> {
    let words: Vec<&str> = remedy.split([' ', ',']).filter(|word| !word.is_empty()).collect();
    let is_number = |word: &str| word.starts_with(|sign: char| sign.is_ascii_digit());
    let pairs = words.windows(2).filter(|pair| is_number(pair[0]));
    pairs.map(|pair| format!("\"{} {}\"", pair[0], pair[1])).collect()
}

fn remedy(layout: &Layout, rule: Rule) -> String {
    let judgement = one(layout, rule);
    assert_eq!(judgement.state, RuleState::Broken, "{judgement:?}");
    Check::new(layout, JudgedOver::Plan).remedy(&judgement).expect("a remedy")
}

#[test]
fn what_a_remedy_offers_is_accepted() {
    let text = |hold: &str, position: &str, rating: &str, offset: &str, resolve: &str| {
        format!(
            "name = \"t\"\n[[node]]\nname = \"hub\"\nclock = \"c\"\n[[node]]\nname = \"far\"\n\
             position = {position}\nrating = {rating}\nclock = \"c\"\n[[phase]]\nhold = {hold}\n\
             for = 7001\n[[limit]]\nnode = \"far\"\nclock_offset = {offset}\n\
             resolve_within = {resolve}\n[clock.c]\nwhite_fm = 1e-15\nflicker_fm = 3e-16\n"
        )
    };
    let broken = |rule: Rule, text: &str| {
        let judgement = one(&layout(text), rule);
        judgement.state == RuleState::Broken
    };
    let filed = text("3.3", "-777.7", "1.7", "1e-11", "1");
    let offered = amounts(&remedy(&layout(&filed), Rule::Rating));
    let [thrust, build] = &offered[..] else { panic!("{offered:?}") };
    assert!(!broken(Rule::Rating, &text(thrust, "-777.7", "1.7", "1", "1")), "{thrust}");
    assert!(!broken(Rule::Rating, &text("3.3", "-777.7", build, "1", "1")), "{build}");
    let offered = amounts(&remedy(&layout(&filed), Rule::ClockOffset));
    let [gain, near, allow] = &offered[..] else { panic!("{offered:?}") };
    let near = near.replace('"', "");
    let near = format!("\"-{near}\"");
    assert!(!broken(Rule::ClockOffset, &text("3.3", &near, "9", "1e-11", "1")), "{near}");
    assert!(!broken(Rule::ClockOffset, &text("3.3", "-777.7", "9", allow, "1")), "{allow}");
    let gain: f64 = gain.trim_matches('"').split(' ').next().unwrap().parse().unwrap();
    let weaker = format!("{:?}", gain / 7001.0);
    assert!(!broken(Rule::ClockOffset, &text(&weaker, "-777.7", "9", "1e-11", "1")), "{weaker}");
    let filed = text("0.0005", "-777.7", "9", "1", "3");
    let offered = amounts(&remedy(&layout(&filed), Rule::Resolve));
    let [thrust, apart] = &offered[..] else { panic!("{offered:?}") };
    assert!(!broken(Rule::Resolve, &text(thrust, "-777.7", "99", "1", "3")), "{thrust}");
    let apart = format!("\"-{}\"", apart.replace('"', ""));
    assert!(!broken(Rule::Resolve, &text("0.0005", &apart, "9", "1", "3")), "{apart}");
    let filed = text("0.06", "-777.7", "9", "1", "3");
    let offered = amounts(&remedy(&layout(&filed), Rule::Resolve));
    let allow = offered.last().unwrap();
    assert!(!broken(Rule::Resolve, &text("0.06", "-777.7", "9", "1", allow)), "{allow}");
}

#[test]
fn the_report_says_at_a_glance_what_is_nearest() {
    let nodes = node("hub", 0.0, "rating = \"1 g0\"") + &node("far", -10.0, "rating = \"0.5 g0\"");
    let layout = line(&nodes, "[[phase]]\nhold = \"0.4 g0\"\nfor = \"1 h\"");
    let report = check_report(Arc::new(Check::new(&layout, JudgedOver::Plan)));
    let scalar = |key: &str| &report.scalars.iter().find(|scalar| scalar.key == key).unwrap().value;
    assert_eq!(scalar("kept"), &Cell::Integer(4));
    assert_eq!(scalar("not_judged"), &Cell::Integer(0));
    let Cell::Number(margin) = scalar("smallest_margin") else { panic!() };
    near(*margin, 0.2, 1e-14);
    assert_eq!(scalar("smallest_margin_rule"), &Cell::Text("rating".into()));
    assert_eq!(scalar("smallest_margin_subject"), &Cell::Text("far".into()));
    assert_eq!(scalar("smallest_margin_phase"), &Cell::Integer(1));
    assert_eq!(scalar("smallest_margin_at_s"), &Cell::Computed(ArrayTime::ZERO));
    let Cell::Text(widen) = scalar("widen") else { panic!() };
    assert!(widen.contains("0.5 g0 at the reference would bring it to its rating"), "{widen}");
    // Text shows each value in its own unit and leaves out the column of SI units.
    let mut page = Vec::new();
    write_text(&report, &TextOptions { width: None, unicode: false }, &mut page).unwrap();
    let page = String::from_utf8(page).unwrap();
    assert!(page.contains("3.92266 m/s^2") && page.contains("4.903325 m/s^2"), "{page}");
    assert!(!page.contains("unit "), "{page}");
    let mut json = Vec::new();
    write_json(&report, &mut json).unwrap();
    let json: serde_json::Value = serde_json::from_slice(&json).unwrap();
    let row = &json["rules"][3];
    assert_eq!((&row["limit"], &row["unit"]), (&4.903_325.into(), &"m/s^2".into()));
    let phase = &json["phases"][0];
    assert_eq!((&phase["kind"], &phase["smallest_rate_node"]), (&"hold".into(), &"far".into()));
    near(phase["rating_margin"].as_f64().unwrap(), 0.2, 1e-14);
}

/// A layout whose only broken rule is a slack tether, which has no numeric margin.
const SLACK: &str = r#"
name = "t"
reference = "hub"
[[node]]
name = "hub"
mass = "1 t"
rating = "3 m/s^2"
[[node]]
name = "far"
position = "-1 km"
mass = "100 kg"
[[span]]
along = ["hub", "far"]
kind = "tether"
[[engine]]
node = "far"
[[phase]]
ramp = [0, 2]
for = "10 min"
[[phase]]
hold = 2
for = "1 h"
"#;

#[test]
fn a_broken_rule_comes_before_every_kept_one() {
    let layout = layout(SLACK);
    let check = Check::new(&layout, JudgedOver::Plan);
    let summary = check.summary();
    assert_eq!((summary.broken, summary.smallest.rule), (1, Rule::Slack));
    let report = check_report(Arc::new(check));
    let scalar = |key: &str| &report.scalars.iter().find(|scalar| scalar.key == key).unwrap().value;
    assert_eq!(scalar("smallest_margin_rule"), &Cell::Text("slack".into()));
    assert_eq!(scalar("smallest_margin_subject"), &Cell::Text("hub to far".into()));
    assert_eq!(scalar("smallest_margin"), &Cell::Absent("a limit of zero has no margin".into()));
    let Cell::Text(widen) = scalar("widen") else { panic!() };
    assert!(widen.starts_with("move 0.9091 of the thrust to `hub`"), "{widen}");
    // Of two that are broken the one without a margin is the worse, whatever the other's is.
    let text = SLACK.replace("rating = \"3 m/s^2\"", "rating = \"1 ug0\"");
    let layout = crate::recording::layout(&text);
    let check = Check::new(&layout, JudgedOver::Plan);
    assert_eq!((check.summary().broken, check.summary().smallest.rule), (2, Rule::Slack));
    // Of those with margins the smallest.
    let text = text
        .replace("kind = \"tether\"", "kind = \"boom\"")
        .replace("[[engine]]", "strength = \"1 N\"\n[[engine]]");
    let layout = crate::recording::layout(&text);
    let check = Check::new(&layout, JudgedOver::Plan);
    let margins = of_rule(&layout, Rule::Rating)[0].margin;
    assert!(margins > of_rule(&layout, Rule::Strength)[0].margin.map(|margin| margin * 1e3));
    assert_eq!((check.summary().broken, check.summary().smallest.rule), (2, Rule::Rating));
}

#[test]
fn the_moment_is_that_of_the_value_and_the_first_beyond_stands_beside_it() {
    // Pushed by 2 m/s² · 1000 kg from the end of the ramp on, slack from the start.
    let slack = one(&layout(SLACK), Rule::Slack);
    near(slack.value.clone().unwrap(), 2000.0, 1e-12);
    assert_eq!((slack.phase, slack.at), (Ok(1), Ok(at(600.0))));
    assert_eq!(slack.broken_from, Ok(ArrayTime::ZERO));
    // 3 m/s² are felt from the end of a ramp, 2 from two thirds of it.
    let rest = "[[phase]]\nramp = [0, 3]\nfor = 300\n[[phase]]\nhold = 3\nfor = 60\n";
    let rated = line(&node("hub", 0.0, "rating = 2"), rest);
    let rating = one(&rated, Rule::Rating);
    assert_eq!((rating.value.clone(), rating.at), (Ok(3.0), Ok(at(300.0))));
    near(rating.broken_from.unwrap().to_f64(), 200.0, 1e-15);
    // A horizon at 3 m/s² and 10 % more: reached at 10/11 of the ramp.
    let far = two(-1.1 * C2_M2_S2.to_f64() / 3.0, "", rest);
    let judged = of_rule(&far, Rule::Horizon);
    let horizon = judged.iter().find(|judged| judged.state == RuleState::Broken).unwrap();
    assert_eq!((horizon.value.clone(), horizon.at), (Ok(3.0), Ok(at(300.0))));
    near(horizon.broken_from.unwrap().to_f64(), 3000.0 / 11.0, 1e-14);
    // Tension of 100 kg reaches 250 N where the thrust reaches 2.5 m/s².
    let span = "[[span]]\nalong = [\"hub\", \"far\"]\nkind = \"tether\"\nstrength = 250\n";
    let strong = two(-10.0, "mass = 100", &format!("{span}{rest}"));
    let strength = one(&strong, Rule::Strength);
    near(strength.value.clone().unwrap(), 300.0, 1e-14);
    assert_eq!(strength.at, Ok(at(300.0)));
    near(strength.broken_from.unwrap().to_f64(), 250.0, 1e-14);
    // What is kept is broken from no moment on.
    assert!(of_rule(&strong, Rule::Horizon).iter().all(|kept| kept.broken_from.is_err()));
}

#[test]
fn margins_that_agree_are_told_apart_by_what_is_used() {
    // At 1 ug0 both rates are one to the last digit.
    let nodes = node("hub", 0.0, "") + &node("near", -1000.0, "") + &node("far", -2000.0, "");
    let layout = line(&nodes, "[[phase]]\nhold = \"1 ug0\"\nfor = 1\n");
    let check = Check::new(&layout, JudgedOver::Plan);
    let smallest = &check.summary().smallest;
    assert_eq!((smallest.margin, smallest.subject.name(&layout)), (Some(1.0), "far".into()));
    let report = check_report(Arc::new(check));
    let used = report.scalars.iter().find(|scalar| scalar.key == "smallest_margin_used").unwrap();
    let Cell::Number(used) = used.value else { panic!("{used:?}") };
    near(used, 2000.0 * 1e-6 * G0 / C2_M2_S2.to_f64(), 1e-15);
}

#[test]
fn advice_speaks_of_what_there_is() {
    let ramp = "[[phase]]\nramp = [0, 3]\nfor = 300\n";
    let far = two(-1.1 * C2_M2_S2.to_f64() / 3.0, "", ramp);
    let broken = of_rule(&far, Rule::Horizon);
    let broken = broken.iter().find(|judged| judged.state == RuleState::Broken).unwrap();
    assert_eq!(
        Check::new(&far, JudgedOver::Plan).remedy(broken).unwrap(),
        "thrust with no more than 0.278104 g0 at the reference, or place the node no farther \
         than 3.16661 ly from it"
    );
    let rest = ramp.replace("ramp = [0, 3]", "hold = 3");
    let far = two(-1.1 * C2_M2_S2.to_f64() / 3.0, "", &rest);
    let check = Check::new(&far, JudgedOver::Plan);
    let (broken, _) = check.broken().unwrap();
    assert!(check.remedy(&broken).unwrap().starts_with("hold no more than 0.278104 g0"));
    // The thrust ends with a step, which is in no phase.
    let span = "[[span]]\nalong = [\"hub\", \"far\"]\nkind = \"boom\"\naxial_stiffness = 1e6\n";
    let cut = two(-1000.0, "mass = 100", &format!("{span}{ramp}"));
    let ramps = of_rule(&cut, Rule::Ramp);
    let last = ramps.last().unwrap();
    assert_eq!(last.phase, Err("the thrust is cut at the end of the plan"));
    let remedy = Check::new(&cut, JudgedOver::Plan).remedy(last).unwrap();
    assert!(remedy.starts_with("let the thrust down at the end of the plan"), "{remedy}");
    // A line that stands gains nothing: its clocks are set again.
    let stands = two(
        1000.0,
        "",
        "[standing]\ngravity = 9.8\n[[limit]]\nnode = \"far\"\nclock_offset = 1e-12\n",
    );
    let span = JudgedOver::Moment(at(3600.0));
    let check = Check::new(&stands, span);
    let (broken, _) = check.broken().unwrap();
    let remedy = check.remedy(&broken).unwrap();
    assert!(remedy.starts_with("set the clocks again within 9.1"), "{remedy}");
}

/// A random line with a random plan and limits, some nodes beyond the horizon.
fn any_line() -> impl Strategy<Value = String> {
    let position = prop_oneof![-1e4..1e4_f64, -1e16..1e16_f64, Just(0.0)];
    let rating = prop_oneof![0.1..20.0_f64, Just(9.0)];
    let nodes = prop::collection::vec((position, prop::option::of(rating)), 0..12);
    let level = prop_oneof![-20.0..20.0_f64, Just(0.0), Just(5.0)];
    let phases = prop::collection::vec((level.clone(), level, 1.0..1e7_f64), 0..8);
    (nodes, phases, 1e-14..1e-3_f64).prop_map(|(nodes, phases, limit)| {
        let mut text = "name = \"t\"\n".to_owned() + &node("hub", 0.0, "");
        let count = nodes.len();
        for (index, (position, rating)) in nodes.into_iter().enumerate() {
            let rating = rating.map_or(String::new(), |rating| format!("rating = {rating:?}"));
            text += &node(&format!("n{index}"), position, &rating);
        }
        for (from, to, length) in phases {
            text += &format!("[[phase]]\nramp = [{from:?}, {to:?}]\nfor = {length:?}\n");
        }
        for index in 0..count {
            let limit = limit * f64::from(1 << index);
            text += &format!("[[limit]]\nnode = \"n{index}\"\nclock_offset = {limit:?}\n");
        }
        text
    })
}

/// Cells of a number and a name.
fn pair_of(cells: &[Cell<'_>]) -> Option<(f64, String)> {
    match cells {
        [Cell::Number(value), Cell::Text(name)] => Some((*value, name.clone().into_owned())),
        _ => None,
    }
}

proptest! {
    #[test]
    fn the_quick_count_of_broken_rules_is_the_slow_one(text in any_line()) {
        let layout = layout(&text);
        let check = Check::new(&layout, JudgedOver::Plan);
        let all = judge(&layout, JudgedOver::Plan);
        let broken: Vec<&Judgement> =
            all.iter().filter(|judgement| judgement.state == RuleState::Broken).collect();
        let first = broken.first().map(|first| ((*first).clone(), broken.len()));
        prop_assert_eq!(check.broken(), first);
        let summary = check.summary();
        prop_assert_eq!(summary.broken, broken.len());
        prop_assert_eq!(summary.kept + summary.broken + summary.not_judged, all.len());
        for judgement in broken {
            prop_assert!(check.remedy(judgement).is_some());
        }
    }

    #[test]
    fn the_first_moment_beyond_a_limit_is_the_nearest_attosecond(text in any_line()) {
        let layout = layout(&text);
        let plan = plan(&layout);
        for judgement in of_rule(&layout, Rule::ClockOffset) {
            if judgement.state != RuleState::Broken {
                continue;
            }
            let name = judgement.subject.name(&layout).into_owned();
            let row = layout.nodes.iter().position(|node| node.name == name).unwrap();
            let position = layout.nodes[row].position_m;
            let offset = |at: ArrayTime| {
                (plan.moment(at).rapidity * position / SPEED_OF_LIGHT_M_S).abs()
            };
            let limit = Dd::new(judgement.limit.unwrap());
            let at = judgement.broken_from.unwrap();
            // Where the rapidity nearly stands still, rounding decides more than an attosecond.
            let slack = limit * 1e-28;
            let near = |count: i128| ArrayTime::from_attoseconds(at.attoseconds() + count);
            prop_assert!(offset(near(-1)) <= limit + slack, "{judgement:?}");
            prop_assert!(offset(near(1)) >= limit - slack, "{judgement:?}");
            for share in 0..50 {
                let earlier = ArrayTime::from_attoseconds(at.attoseconds() / 50 * share);
                prop_assert!(offset(earlier) <= limit + slack, "{judgement:?} at {earlier}");
            }
        }
    }

    #[test]
    fn margins_of_phases_are_those_of_every_node(text in any_line()) {
        let layout = layout(&text);
        let check = Check::new(&layout, JudgedOver::Plan);
        let report = check_report(Arc::new(check));
        let table = &report.tables[1];
        prop_assert_eq!(table.rows, plan(&layout).phases().len());
        for (row, phase) in plan(&layout).phases().iter().enumerate() {
            let mut cells = Vec::new();
            (table.fill)(row, &mut cells);
            let (mut rate, mut margin) = (1.0_f64, f64::INFINITY);
            for end in [phase.start, phase.end] {
                let mut moment = plan(&layout).moment(end);
                moment.acceleration_m_s2 = phase.acceleration(end);
                let instant = Instant { moment, gradient_per_s2: 0.0 };
                for node in &layout.nodes {
                    let here = instant.rate(Dd::new(node.position_m)).to_f64();
                    rate = rate.min(here);
                    if let Some(rating) = node.rating_m_s2 {
                        let felt = instant.felt_acceleration_m_s2(Dd::new(node.position_m));
                        let felt = if here > 0.0 { felt.abs().to_f64() } else { f64::INFINITY };
                        margin = margin.min(1.0 - felt / rating);
                    }
                }
            }
            let (smallest, _) = pair_of(&cells[6..8]).expect("a rate");
            prop_assert!((smallest - rate).abs() <= 1e-15 * rate.abs().max(1.0));
            match pair_of(&cells[8..10]) {
                Some((got, _)) => prop_assert!(
                    (got - margin).abs() <= 4e-15 * (1.0 - margin).max(1.0),
                    "got {got}, wanted {margin}"
                ),
                None => prop_assert!(margin.is_infinite(), "{cells:?}, wanted {margin}"),
            }
        }
    }
}
