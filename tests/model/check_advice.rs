//! Advice put into the layout: every figure that `check` and `loads` offer, and every sentence
//! without one that can be followed, mends the rule it is offered for.

use std::collections::BTreeMap;
use std::sync::Arc;

use clockspar::layout::quantity::{Dimension, parse};
use clockspar::layout::{Course, Layout, read};
use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::SPEED_OF_LIGHT_M_S;
use clockspar::table::content::{Check, JudgedOver, Judgement, Rule, RuleState};

use crate::dice::Dice;

/// A value as a layout states it: a bare number or a quantity.
type Stated = String;

fn bare(value: f64) -> Stated {
    format!("{value:?}")
}

fn quoted(amount: &str) -> Stated {
    format!("\"{amount}\"")
}

#[derive(Clone, Debug)]
struct Place {
    name: String,
    position: Stated,
    position_m: f64,
    mass_kg: f64,
    rating: Option<Stated>,
}

#[derive(Clone, Debug)]
struct Joined {
    kind: &'static str,
    density: f64,
    stiffness: Option<f64>,
    strength: Option<Stated>,
    expansion: f64,
}

#[derive(Clone, Debug)]
struct Push {
    node: String,
    share: f64,
    exhaust: Option<f64>,
    propellant: Option<Stated>,
}

#[derive(Clone, Debug)]
struct Bound {
    subject: String,
    offset: Option<Stated>,
    resolve: Option<Stated>,
}

/// A layout as its parts.
#[derive(Clone, Debug)]
struct Filed {
    as_flown: bool,
    design: Option<Stated>,
    places: Vec<Place>,
    /// By the gap from the fore end; empty: nothing is said of any gap.
    joined: Vec<Joined>,
    pushes: Vec<Push>,
    /// From, to, for; empty: the line stands.
    phases: Vec<[Stated; 3]>,
    gradient: f64,
    bounds: Vec<Bound>,
}

impl Filed {
    fn text(&self) -> String {
        let mut text = "name = \"t\"\nreference = \"hub\"\n".to_owned();
        if self.as_flown {
            text += "positions = \"as flown\"\n";
        }
        if let Some(design) = &self.design {
            text += &format!("design_acceleration = {design}\n");
        }
        let mut sorted: Vec<&Place> = self.places.iter().collect();
        sorted.sort_by(|a, b| b.position_m.total_cmp(&a.position_m));
        for place in &sorted {
            let Place { name, position, mass_kg, rating, .. } = place;
            text += &format!("[[node]]\nname = \"{name}\"\nmass = {mass_kg:?}\nclock = \"c\"\n");
            if name != "hub" {
                text += &format!("position = {position}\n");
            }
            if let Some(rating) = rating {
                text += &format!("rating = {rating}\n");
            }
        }
        for (gap, joined) in self.joined.iter().enumerate() {
            let [fore, aft] = [&sorted[gap].name, &sorted[gap + 1].name];
            let Joined { kind, density, expansion, .. } = joined;
            text += &format!(
                "[[span]]\nalong = [\"{fore}\", \"{aft}\"]\nkind = \"{kind}\"\n\
                 linear_density = {density:?}\nsafety_factor = 1.7\n"
            );
            if let Some(stiffness) = joined.stiffness {
                text += &format!("axial_stiffness = {stiffness:?}\n");
            }
            if let Some(strength) = &joined.strength {
                text += &format!("strength = {strength}\n");
            }
            if *expansion != 0.0 {
                text += &format!("thermal_expansion = {expansion:?}\ntemperature_change = 100\n");
            }
        }
        for Push { node, share, exhaust, propellant } in &self.pushes {
            text += &format!("[[engine]]\nnode = \"{node}\"\nshare = {share:?}\n");
            if let Some(exhaust) = exhaust {
                text += &format!("exhaust_speed = {exhaust:?}\n");
            }
            if let Some(propellant) = propellant {
                text += &format!("propellant = {propellant}\n");
            }
        }
        for [from, to, length] in &self.phases {
            text += &format!("[[phase]]\nramp = [{from}, {to}]\nfor = {length}\n");
        }
        if self.phases.is_empty() {
            let gradient = self.gradient;
            text += &format!("[standing]\ngravity = 9.8\ngradient = {gradient:?}\n");
        }
        for Bound { subject, offset, resolve } in &self.bounds {
            text += &format!("[[limit]]\n{subject}\n");
            if let Some(offset) = offset {
                text += &format!("clock_offset = {offset}\n");
            }
            if let Some(resolve) = resolve {
                text += &format!("resolve_within = {resolve}\n");
            }
        }
        text + "[clock.c]\nwhite_fm = 1e-15\nflicker_fm = 1e-18\n"
    }

    fn layout(&self) -> Option<Arc<Layout>> {
        let none = |_: &str| Err("no file".to_owned());
        read("test", &self.text(), &none).ok().map(Arc::new)
    }

    fn place(&self, name: &str) -> usize {
        self.places.iter().position(|place| place.name == name).expect("a node of this name")
    }

    /// Puts a node so far from another, on the side it stands on.
    fn put(&mut self, name: &str, other: &str, amount: &str) {
        let (row, from) = (self.place(name), self.place(other));
        let from_m = self.places[from].position_m;
        let apart_m = parse(amount, Dimension::Length).expect("a length");
        let side = (self.places[row].position_m - from_m).signum();
        let place = &mut self.places[row];
        place.position_m = from_m + side * apart_m;
        let sign = if side < 0.0 { "-" } else { "" };
        place.position = match other {
            "hub" => quoted(&format!("{sign}{amount}")),
            _ => bare(place.position_m),
        };
    }

    fn value(text: &str) -> f64 {
        parse(text.trim_matches('"'), Dimension::Acceleration).expect("an acceleration")
    }

    /// Holds the thrust within an amount, either way.
    fn cap(&mut self, amount: &str) {
        let most = parse(amount, Dimension::Acceleration).expect("an acceleration");
        for end in self.phases.iter_mut().flat_map(|[from, to, _]| [from, to]) {
            let value = Filed::value(end);
            if value.abs() > most {
                let sign = if value < 0.0 { "-" } else { "" };
                *end = quoted(&format!("{sign}{amount}"));
            }
        }
    }

    fn scaled_thrust(&mut self, factor: f64) {
        for end in self.phases.iter_mut().flat_map(|[from, to, _]| [from, to]) {
            *end = bare(Filed::value(end) * factor);
        }
    }

    fn scaled_time(&mut self, factor: f64) {
        for [_, _, length] in &mut self.phases {
            let seconds: f64 = length.parse().expect("bare seconds");
            let attoseconds = (seconds * factor * 1e18).floor().max(1.0) as i128;
            *length = ArrayTime::from_attoseconds(attoseconds).to_string();
        }
    }
}

fn any(dice: &mut Dice) -> Filed {
    let count = 2 + dice.below(4);
    let far = if dice.is(0.2) { 3e16 } else { 5e3 };
    let mut places: Vec<Place> = (0..count)
        .map(|index| {
            let position_m = if index == 0 { 0.0 } else { dice.between(-far, far * 0.6) };
            Place {
                name: if index == 0 { "hub".to_owned() } else { format!("n{index}") },
                position: bare(position_m),
                position_m,
                mass_kg: if dice.is(0.1) { 0.0 } else { dice.between(1.0, 500.0) },
                rating: dice.is(0.5).then(|| bare(dice.size(0.3, 12.0))),
            }
        })
        .collect();
    places.sort_by(|a, b| b.position_m.total_cmp(&a.position_m));
    let stands = dice.is(0.15) && far < 1e10;
    let (is_joined, is_soft) = (far < 1e10 && dice.is(0.8), dice.is(0.6));
    let joined: Vec<Joined> = (1..count)
        .filter(|_| is_joined)
        .map(|_| Joined {
            kind: if dice.is(0.5) { "tether" } else { "boom" },
            density: if dice.is(0.2) { 0.0 } else { dice.between(0.0, 0.2) },
            stiffness: is_soft.then(|| dice.size(3e5, 1e8)),
            strength: dice.is(0.6).then(|| bare(dice.size(10.0, 1e5))),
            expansion: if dice.is(0.2) { dice.between(-2e-5, 2e-5) } else { 0.0 },
        })
        .collect();
    let burns = dice.is(0.4);
    let engines = 1 + dice.below(2);
    let share = if engines == 1 { 1.0 } else { (dice.between(0.1, 0.9) * 1e4).round() / 1e4 };
    let pushes = (0..engines)
        .map(|index| Push {
            node: places[dice.below(count)].name.clone(),
            share: if index == 0 { share } else { 1.0 - share },
            exhaust: burns.then(|| dice.size(3e3, 1e5)),
            propellant: burns.then(|| bare(dice.size(1.0, 1e3))),
        })
        .collect();
    let mut phases = Vec::new();
    let mut last = 0.0;
    let (is_one_way, side) = (dice.is(0.6), if dice.is(0.7) { 1.0 } else { -1.0 });
    for _ in 0..if stands { 0 } else { 1 + dice.below(4) } {
        let level = match dice.below(3) {
            0 => 0.0,
            1 => dice.between(0.0, 6.0) * side,
            _ => dice.between(if is_one_way { 0.0 } else { -6.0 }, 6.0) * side,
        };
        let from = if dice.is(0.3) { level } else { last };
        let to = if dice.is(0.3) { from } else { level };
        phases.push([bare(from), bare(to), format!("{:.3}", dice.size(0.05, 1e4))]);
        last = to;
    }
    let as_flown = dice.is(0.3);
    let names: Vec<String> = places.iter().map(|place| place.name.clone()).collect();
    let bounds = (0..dice.below(3))
        .map(|_| {
            let one = 1 + dice.below(count - 1);
            let other = dice.below(one);
            let subject = match dice.is(0.5) {
                true => format!("pair = [\"{}\", \"{}\"]", names[one], names[other]),
                false => {
                    let own = names.iter().filter(|name| *name != "hub").nth(dice.below(count - 1));
                    format!("node = \"{}\"", own.expect("another node"))
                }
            };
            let is_offset = dice.is(0.7);
            Bound {
                subject,
                offset: is_offset.then(|| bare(dice.size(1e-15, 1e-9))),
                resolve: (!is_offset).then(|| bare(dice.size(1e-3, 1e6))),
            }
        })
        .collect();
    let design = (as_flown || dice.is(0.3)).then(|| bare(dice.between(0.01, 6.0) * side));
    let gradient = if dice.is(0.5) { 3e-6 } else { 0.0 };
    Filed { as_flown, design, places, joined, pushes, phases, gradient, bounds }
}

/// What stands between two pieces of a remedy, if the first does.
fn between<'a>(way: &'a str, before: &str, after: &str) -> Option<&'a str> {
    let rest = &way[way.find(before)? + before.len()..];
    Some(if after.is_empty() { rest } else { &rest[..rest.find(after)?] })
}

/// The layouts in which one way of a remedy has been followed, with the words it began with.
fn followed(
    filed: &Filed,
    layout: &Layout,
    judged: &Judgement,
    way: &str,
) -> Vec<(&'static str, Filed)> {
    let subject = judged.subject.name(layout).into_owned();
    let mut found: Vec<(&'static str, Filed)> = Vec::new();
    let mut add = |words: &'static str, change: &dyn Fn(&mut Filed)| {
        let mut copy = filed.clone();
        change(&mut copy);
        found.push((words, copy));
    };
    let gap = || {
        let fore =
            layout.nodes.iter().position(|node| subject.starts_with(&format!("{} to", node.name)));
        fore.expect("a span")
    };
    let no_quotes = |text: &str| text.trim_matches('`').to_owned();
    let named = |text: &str| match text {
        "the reference" | "it" => "hub".to_owned(),
        _ => no_quotes(text),
    };
    let no_more = ["hold no more than ", "thrust with no more than "];
    if let Some(most) = no_more.iter().find_map(|words| between(way, words, " at the reference")) {
        add("no more thrust", &|copy| copy.cap(most));
    } else if let Some(near) = between(way, "place the node no farther than ", " from ") {
        add("no farther from the horizon", &|copy| copy.put(&subject, "hub", near));
    } else if let Some(near) = between(way, "place the two no farther than ", " apart") {
        let (one, other) = subject.split_once(" to ").expect("a pair");
        for (moved, stays) in [(one, other), (other, one)] {
            if moved != "hub" {
                add("nearer together", &|copy| copy.put(moved, stays, near));
            }
        }
    } else if let Some(name) = between(way, "place ", " no farther than ") {
        let near = between(way, " no farther than ", " from ").expect("a distance");
        let other = named(between(way, " from ", "").expect("a node"));
        add("no farther", &|copy| copy.put(&named(name), &other, near));
    } else if let Some(name) = between(way, "place ", " at least ") {
        let far = between(way, " at least ", " from ").expect("a distance");
        let other = named(between(way, " from ", "").expect("a node"));
        add("farther apart", &|copy| copy.put(&named(name), &other, far));
    } else if let Some(build) = between(way, "build the node for ", "") {
        if build != "more" {
            add("build for", &|copy| {
                let row = copy.place(&subject);
                copy.places[row].rating = Some(quoted(build));
            });
        }
    } else if let Some(gain) = between(way, "gain no more than ", "") {
        let Course::Thrust(plan) = &layout.course else { panic!("thrust") };
        let gain = parse(gain, Dimension::Speed).expect("a speed");
        // What is gained at most, at ends of phases and where the thrust turns.
        let mut most = 0.0_f64;
        for phase in plan.phases() {
            let after = phase.moment_of(clockspar::model::dd::Dd::ZERO);
            let zero = after.and_then(|after| ArrayTime::nearest(phase.start.seconds() + after));
            for at in [Some(phase.end), zero].into_iter().flatten() {
                most = most.max(plan.moment(at).rapidity.to_f64().abs() * SPEED_OF_LIGHT_M_S);
            }
        }
        let factor = gain / most * (1.0 - 1e-11);
        let lengths = plan.phases().iter().map(|phase| phase.end.seconds_since(phase.start).hi);
        let shortest = lengths.fold(f64::INFINITY, f64::min);
        add("gain less by less thrust", &|copy| copy.scaled_thrust(factor));
        // Phases of few attoseconds could not be shortened evenly.
        if factor * shortest > 1e-6 {
            add("gain less in less time", &|copy| copy.scaled_time(factor));
        }
    } else if let Some(allow) = between(way, "allow ", "") {
        let is_offset = judged.rule == Rule::ClockOffset;
        add("allow", &|copy| {
            let words = subject.split_once(" to ").map_or_else(
                || format!("node = \"{subject}\""),
                |(one, other)| format!("pair = [\"{one}\", \"{other}\"]"),
            );
            let limit = judged.limit.expect("a limit");
            for bound in copy.bounds.iter_mut().filter(|bound| bound.subject == words) {
                let own = if is_offset { &mut bound.offset } else { &mut bound.resolve };
                if own.as_ref().is_some_and(|own| own.parse() == Ok(limit)) {
                    *own = Some(quoted(allow));
                }
            }
        });
    } else if let Some(strength) = between(way, "a strength of ", "") {
        add("strength", &|copy| copy.joined[gap()].strength = Some(quoted(strength)));
    } else if let Some(name) = between(way, " of the thrust to `", "`") {
        let share: f64 = between(way, "move ", " of the thrust").expect("a share").parse().unwrap();
        assert!(share > 0.0 && share <= 1.0, "{way}");
        add("move thrust", &|copy| moved(copy, layout, gap(), name, share));
    } else if let Some(name) = between(way, "move all of the thrust beyond it to `", "`") {
        add("move all thrust", &|copy| moved(copy, layout, gap(), name, 1.0));
    } else if let Some(end) = between(way, "keep the thrust towards the ", " end") {
        let sign = if end == "fore" { 1.0 } else { -1.0 };
        add("one direction", &|copy| {
            for end in copy.phases.iter_mut().flat_map(|[from, to, _]| [from, to]) {
                if Filed::value(end) * sign < 0.0 {
                    *end = bare(0.0);
                }
            }
        });
    } else if way.contains("file the span as a boom") {
        add("boom", &|copy| copy.joined[gap()].kind = "boom");
    } else if let Some(long) = between(way, "change the thrust over ", " or longer") {
        let phase = judged.phase.expect("a phase");
        add("longer ramp", &|copy| {
            let limit = judged.limit.expect("a length");
            if limit > 0.0 {
                copy.phases[phase][2] = quoted(long);
                return;
            }
            let from = phase.checked_sub(1).map_or(bare(0.0), |last| copy.phases[last][1].clone());
            let to = copy.phases[phase][0].clone();
            copy.phases.insert(phase, [from, to, quoted(long)]);
        });
    } else if let Some(long) = between(way, "where it is cut, over ", " or longer") {
        add("no cut", &|copy| {
            let from = copy.phases.last().expect("a phase")[1].clone();
            copy.phases.push([from, bare(0.0), quoted(long)]);
        });
    } else if let Some(aboard) = between(way, "", " kg aboard") {
        if let Ok(aboard) = aboard.parse::<f64>() {
            add("propellant", &|copy| {
                let limit = judged.limit.expect("what is aboard");
                for push in &mut copy.pushes {
                    if push.propellant.as_ref().is_some_and(|own| own.parse() == Ok(limit)) {
                        push.propellant = Some(quoted(&format!("{aboard:?} kg")));
                    }
                }
            });
        }
    } else if let Some(least) = between(way, "design for at least ", "") {
        let sign =
            if filed.design.as_ref().is_some_and(|own| own.starts_with('-')) { "-" } else { "" };
        add("design", &|copy| copy.design = Some(quoted(&format!("{sign}{least}"))));
    } else if let Some(least) = between(way, "hold at least ", "") {
        // The strongest thrust is the one that counts, so it is more of that.
        let strongest = filed.phases.iter().flat_map(|[from, to, _]| [from, to]);
        let strongest = strongest
            .map(|end| Filed::value(end))
            .fold(0.0, |most: f64, here| if here.abs() > most.abs() { here } else { most });
        let sign = if strongest < 0.0 { "-" } else { "" };
        add("hold more", &|copy| {
            let hold = quoted(&format!("{sign}{least}"));
            copy.phases.push([hold.clone(), hold, bare(1.0)]);
        });
    }
    found
}

/// Moves a share of the thrust across a gap, to the node named, from the engines beyond.
fn moved(copy: &mut Filed, layout: &Layout, gap: usize, name: &str, share: f64) {
    let row = |name: &str| layout.nodes.iter().position(|node| node.name == name).expect("a node");
    let is_aft = row(name) > gap;
    let mut left = share;
    for push in &mut copy.pushes {
        if (row(&push.node) > gap) != is_aft {
            let taken = push.share.min(left);
            push.share -= taken;
            left -= taken;
        }
    }
    copy.pushes.push(Push {
        node: name.to_owned(),
        share: share - left,
        exhaust: None,
        propellant: None,
    });
}

/// The pieces of a remedy that are followed one by one.
fn ways(remedy: &str) -> Vec<&str> {
    let remedy = remedy.split("; as it is").next().unwrap_or(remedy);
    let mut ways: Vec<&str> = Vec::new();
    for part in remedy.split(", or ") {
        let mut rest = part;
        // A list has commas between its ways, and one sentence has a comma of its own.
        while let Some(comma) = rest.find(", ").filter(|_| !rest.contains("where it is cut")) {
            ways.push(&rest[..comma]);
            rest = &rest[comma + 2..];
        }
        ways.push(rest);
    }
    ways
}

/// Whether the rule of a judgement is kept in another layout.
fn is_kept(
    judged: &Judgement,
    before: &Layout,
    after: &Layout,
    span: JudgedOver,
) -> Result<(), String> {
    let (old, new) = (Check::new(before, span), Check::new(after, span));
    let all = |check: &Check<'_>| -> Vec<Judgement> {
        (0..check.rows())
            .map(|row| check.judgement(row))
            .filter(|row| row.rule == judged.rule)
            .collect()
    };
    let (old, new) = (all(&old), all(&new));
    if judged.rule == Rule::Ramp {
        let broken =
            |rows: &[Judgement]| rows.iter().filter(|row| row.state == RuleState::Broken).count();
        return match broken(&new) < broken(&old) {
            true => Ok(()),
            false => Err(format!("{new:?}")),
        };
    }
    let name = judged.subject.name(before);
    // Two limits of one subject, or two engines of one node, follow each other.
    let same = |row: &&Judgement| row.subject.name(before) == name;
    let place = old.iter().filter(same).position(|row| row.row == judged.row).expect("the row");
    let mut same_after = new.iter().filter(|row| row.subject.name(after) == name);
    match same_after.nth(place) {
        Some(found) if found.state == RuleState::Kept => Ok(()),
        None if judged.rule == Rule::Slack => Ok(()),
        found => Err(format!("{found:?}")),
    }
}

/// How often advice was followed, by its rule and what was done.
type Seen = BTreeMap<(&'static str, &'static str), usize>;

/// Follows every piece of advice for a layout; the second count is of lines that stretch.
fn follow(filed: &Filed, span: JudgedOver, [seen, stretched]: &mut [Seen; 2]) {
    let Some(layout) = filed.layout() else { return };
    let check = Check::new(&layout, span);
    for row in 0..check.rows() {
        let judged = check.judgement(row);
        if judged.state != RuleState::Broken {
            continue;
        }
        let remedy = check.remedy(&judged).expect("a remedy for what is broken");
        assert!(!remedy.contains("inf") && !remedy.contains("NaN"), "{remedy}");
        for way in ways(&remedy) {
            for (words, copy) in followed(filed, &layout, &judged, way) {
                // A plan that is stretched or lengthened has something else at one moment.
                let is_shifted = words.starts_with("gain") || words == "hold more";
                if is_shifted && span != JudgedOver::Plan {
                    continue;
                }
                let Some(after) = copy.layout() else {
                    panic!("following \"{way}\" is refused:\n{}\n{}", filed.text(), copy.text())
                };
                if let Err(found) = is_kept(&judged, &layout, &after, span) {
                    panic!(
                        "following \"{way}\" of \"{remedy}\" leaves {judged:?} as {found}:\n{}",
                        filed.text()
                    );
                }
                *seen.entry((judged.rule.word(), words)).or_default() += 1;
                if filed.joined.iter().any(|joined| joined.stiffness.is_some()) {
                    *stretched.entry((judged.rule.word(), words)).or_default() += 1;
                }
            }
        }
    }
}

#[test]
fn following_the_advice_mends_the_rule() {
    let mut dice = Dice(2041);
    let mut counts = [Seen::new(), Seen::new()];
    for _ in 0..2500 {
        follow(&any(&mut dice), JudgedOver::Plan, &mut counts);
    }
    for _ in 0..500 {
        let at = ArrayTime::from_attoseconds(dice.size(1e17, 1e22) as i128);
        follow(&any(&mut dice), JudgedOver::Moment(at), &mut counts);
    }
    let [seen, stretched] = counts;
    println!("{seen:#?} of which on lines that stretch {stretched:#?}");
    for wanted in [
        ("clock_offset", "no farther"),
        ("clock_offset", "gain less by less thrust"),
        ("clock_offset", "gain less in less time"),
        ("rating", "no more thrust"),
        ("strength", "strength"),
        ("slack", "move thrust"),
        ("ramp", "longer ramp"),
        ("propellant", "propellant"),
    ] {
        let count = stretched.get(&wanted);
        assert!(count.is_some_and(|count| *count >= 5), "{wanted:?} of {stretched:#?}");
    }
    for wanted in [
        ("horizon", "no more thrust"),
        ("horizon", "no farther from the horizon"),
        ("rating", "no more thrust"),
        ("rating", "build for"),
        ("strength", "strength"),
        ("slack", "move thrust"),
        ("slack", "move all thrust"),
        ("slack", "one direction"),
        ("slack", "boom"),
        ("ramp", "longer ramp"),
        ("ramp", "no cut"),
        ("propellant", "propellant"),
        ("resolve", "hold more"),
        ("resolve", "design"),
        ("resolve", "farther apart"),
        ("resolve", "allow"),
        ("clock_offset", "gain less by less thrust"),
        ("clock_offset", "gain less in less time"),
        ("clock_offset", "no farther"),
        ("clock_offset", "nearer together"),
        ("clock_offset", "allow"),
    ] {
        assert!(seen.get(&wanted).is_some_and(|count| *count >= 5), "{wanted:?} of {seen:#?}");
    }
}
