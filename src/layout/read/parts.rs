//! Spans, engines, links, limits and stations: what names the rows of a line.

use std::collections::{BTreeMap, HashMap};

use super::named;
use super::rows::Rows;
use crate::layout::fault::{Collector, Spot};
use crate::layout::written::{Field, SpanValues, Written};
use crate::layout::{Engine, Limit, LimitSubject, Link, Span, Station};

/// How far the shares of the engines may sum from 1.
const SHARES_WITHIN: f64 = 1e-9;

/// One span for every neighbour gap along each `[[span]]`, fore to aft.
pub(super) fn spans(written: &Written, line: &Rows, faults: &mut Collector) -> Vec<Span> {
    // What covers the gaps from a row on, and up to which row.
    let mut covered: BTreeMap<usize, (usize, &SpanValues)> = BTreeMap::new();
    for span in &written.spans {
        let Some((along, spot)) = span.along.stated() else {
            continue;
        };
        let Some([a, b]) = line.pair(along, faults) else {
            continue;
        };
        let (fore, aft) = (a.min(b), a.max(b));
        let before = covered.range(..aft).next_back().filter(|(_, (end, _))| *end > fore);
        if let Some((start, _)) = before {
            let gap = fore.max(*start);
            let rule = format!(
                "one span covers a gap; {} to {} is covered before",
                line.nodes[gap].name,
                line.nodes[gap + 1].name
            );
            faults.fault(spot, rule, "let each span begin where the other ends");
            continue;
        }
        covered.insert(fore, (aft, &span.values));
    }
    let gaps = covered
        .into_iter()
        .flat_map(|(fore, (aft, values))| (fore..aft).map(move |gap| span(gap, values)));
    gaps.collect()
}

fn span(fore: usize, values: &SpanValues) -> Span {
    Span {
        fore,
        kind: values.kind,
        linear_density_kg_m: values.linear_density_kg_m,
        axial_stiffness_n: values.axial_stiffness_n,
        u_axial_stiffness_n: values.u_axial_stiffness_n,
        strength_n: values.strength_n,
        safety_factor: values.safety_factor,
        thermal_expansion_per_k: values.thermal_expansion_per_k,
        u_thermal_expansion_per_k: values.u_thermal_expansion_per_k,
        temperature_change_k: values.temperature_change_k,
        u_temperature_change_k: values.u_temperature_change_k,
    }
}

/// The engines; their shares sum to 1.
pub(super) fn engines(written: &Written, line: &Rows, faults: &mut Collector) -> Vec<Engine> {
    let several = written.engines.len() > 1;
    let mut all = Vec::with_capacity(written.engines.len());
    let mut sum = 0.0;
    let mut known = true;
    for engine in &written.engines {
        let share = match &engine.share {
            Field::Stated(share, _) => *share,
            Field::Absent if !several => 1.0,
            Field::Absent => {
                let rule = "with several engines each states its share";
                faults.fault(engine.spot, rule, "add for example `share = 0.5`");
                known = false;
                0.0
            }
            Field::Faulty => {
                known = false;
                0.0
            }
        };
        sum += share;
        let Some(node) = named(&engine.node).and_then(|name| line.row(name, faults)) else {
            continue;
        };
        all.push(Engine {
            node,
            share,
            exhaust_speed_m_s: engine.exhaust_speed_m_s,
            propellant_kg: engine.propellant_kg,
        });
    }
    if let Some(last) = written.engines.last()
        && known
        && (sum - 1.0_f64).abs() > SHARES_WITHIN
    {
        let rule = format!("the shares of the engines sum to 1; these sum to {sum}");
        let remedy = if several { "change the shares" } else { "one engine has the share 1" };
        faults.fault(last.share.spot().unwrap_or(last.spot), rule, remedy);
    }
    all
}

/// The links as written; each pair once.
pub(super) fn links(written: &Written, line: &Rows, faults: &mut Collector) -> Vec<Link> {
    let mut all: Vec<Link> = Vec::with_capacity(written.links.len());
    let mut seen: HashMap<[usize; 2], Spot> = HashMap::new();
    for link in &written.links {
        let Some((pair, spot)) = link.between.stated() else {
            continue;
        };
        let Some(between) = line.pair(pair, faults) else {
            continue;
        };
        let mut sorted = between;
        sorted.sort_unstable();
        if seen.insert(sorted, spot).is_some() {
            faults.fault(
                spot,
                "a link serves both directions, and a pair has one",
                "take one of the two links away",
            );
        }
        all.push(Link {
            between,
            carrier_hz: link.carrier_hz,
            delay_out_s: link.delay_out_s,
            delay_back_s: link.delay_back_s,
            instability: link.instability,
        });
    }
    all
}

/// The limits.
pub(super) fn limits(written: &Written, line: &Rows, faults: &mut Collector) -> Vec<Limit> {
    let mut all = Vec::with_capacity(written.limits.len());
    for limit in &written.limits {
        let subject = match (named(&limit.node), limit.pair.value()) {
            (Some(name), _) => line.row(name, faults).map(LimitSubject::Node),
            (None, Some(pair)) => line.pair(pair, faults).map(LimitSubject::Pair),
            (None, None) => None,
        };
        if let Some(subject) = subject {
            all.push(Limit {
                subject,
                clock_offset_s: limit.clock_offset_s,
                resolve_within_s: limit.resolve_within_s,
            });
        }
    }
    all
}

/// The stations; each name once.
pub(super) fn stations(written: &Written, faults: &mut Collector) -> Vec<Station> {
    let mut all: Vec<Station> = Vec::with_capacity(written.stations.len());
    let mut seen = HashMap::new();
    for station in &written.stations {
        let (Some((name, spot)), Some(position_m)) =
            (station.name.stated(), station.position_m.value())
        else {
            continue;
        };
        if seen.insert(name.clone(), spot).is_some() {
            let rule = format!("names are unique; `{name}` names two stations");
            faults.fault(spot, rule, "rename one of the two");
        }
        all.push(Station { name: name.clone(), position_m: *position_m });
    }
    all
}
