//! Many nodes by one rule.

use compact_str::format_compact;

use super::nodes::{Gathered, Origin, Place, node};
use crate::layout::fault::{Collector, Spot};
use crate::layout::names;
use crate::layout::written::{Field, Spacing, Written, WrittenSeries};
use crate::model::constants::C2_M2_S2;
use crate::model::dd::Dd;

/// Adds the members of a series: prefix followed by 1, 2, …; `None` after a fault.
pub(super) fn expand(
    series: &WrittenSeries,
    clock: Option<u32>,
    written: &Written,
    gathered: &mut Gathered,
    faults: &mut Collector,
) -> Option<()> {
    let (prefix, prefix_spot) = series.prefix.stated()?;
    let (count, from_m) = (series.count.value()?, series.from_m.value()?);
    let longest = format!("{prefix}{count}");
    if let Err((rule, remedy)) = names::check_name(&longest) {
        faults.fault(prefix_spot, format!("{rule}; the last member would be `{longest}`"), remedy);
        return None;
    }
    let to_m = match series.to_m {
        Field::Stated(to_m, _) => to_m,
        _ if *count == 1 => *from_m,
        _ => return None,
    };
    let spacing = series.spacing.value().copied().unwrap_or(Spacing::Even);
    let positions = positions(series, spacing, *count, [*from_m, to_m], written, faults)?;
    let place = |position: Option<Spot>| Place {
        spot: prefix_spot,
        position,
        has_no_position: false,
        origin: Origin::Series,
    };
    gathered.places.push(place(series.from_m.spot()), 1);
    gathered.places.push(place(series.to_m.spot()), count.saturating_sub(1));
    gathered.nodes.reserve(*count);
    gathered.nodes.extend(positions.into_iter().enumerate().map(|(index, position_m)| {
        let name = format_compact!("{prefix}{}", index + 1);
        node(name, position_m, &series.values, clock)
    }));
    Some(())
}

fn positions(
    series: &WrittenSeries,
    spacing: Spacing,
    count: usize,
    [from_m, to_m]: [f64; 2],
    written: &Written,
    faults: &mut Collector,
) -> Option<Vec<f64>> {
    match spacing {
        Spacing::Even => Some(even(count, from_m, to_m)),
        Spacing::EqualShift => {
            let spot = series.spacing.spot()?;
            let acceleration = match &written.design_acceleration {
                Field::Stated(value, _) if *value != 0.0 => *value,
                Field::Faulty => return None,
                _ => {
                    faults.fault(
                        spot,
                        "equal shift holds at a design acceleration other than zero",
                        "add for example `design_acceleration = \"0.02 g0\"`, or write `even`",
                    );
                    return None;
                }
            };
            let members = equal_shift(count, from_m, to_m, acceleration);
            if members.is_none() {
                faults.fault(
                    spot,
                    "equal shift needs both ends in front of the horizon at the design acceleration",
                    "bring `from` and `to` nearer to the reference, or lower `design_acceleration`",
                );
            }
            members
        }
    }
}

/// Positions at equal distances, `from + (to − from)(i − 1)/(count − 1)`, each rounded
/// once; count 1 is `from`.
pub(super) fn even(count: usize, from_m: f64, to_m: f64) -> Vec<f64> {
    let last = count.saturating_sub(1);
    (0..count)
        .map(|index| {
            if last == 0 {
                return from_m;
            }
            let (left, gone) = ((last - index) as f64, index as f64);
            let sum = Dd::product(from_m, left) + Dd::product(to_m, gone);
            (sum / last as f64).to_f64() + 0.0
        })
        .collect()
}

/// Positions whose rates `N = 1 + α h / c²` are in geometric progression:
/// `h = from + (c²/α) N₁ (exp(t ln(Nₙ/N₁)) − 1)`, `t = (i − 1)/(count − 1)`.
///
/// Relative accuracy 8 units in the last place of `|to − from|`, plus the rounding of the
/// sum. `ln(Nₙ/N₁)` comes from `ln_1p` while it is small, so nothing is lost at 10⁻¹⁶
/// per metre. `None` when an end lies on or behind the horizon, or the acceleration is 0.
pub(super) fn equal_shift(
    count: usize,
    from_m: f64,
    to_m: f64,
    acceleration_m_s2: f64,
) -> Option<Vec<f64>> {
    let rate = |position_m: f64| Dd::ONE + Dd::product(acceleration_m_s2, position_m) / C2_M2_S2;
    let (first, last) = (rate(from_m), rate(to_m));
    let positive = |rate: Dd| rate > Dd::ZERO;
    if acceleration_m_s2 == 0.0 || !positive(first) || !positive(last) {
        return None;
    }
    let step = Dd::difference(to_m, from_m) * acceleration_m_s2 / C2_M2_S2;
    let ratio_minus_one = (step / first).to_f64();
    let ln_ratio = if ratio_minus_one < -0.5 {
        libm::log((last / first).to_f64())
    } else {
        libm::log1p(ratio_minus_one)
    };
    // From the reference of the progression to the horizon.
    let scale_m = (C2_M2_S2 / acceleration_m_s2 * first).to_f64();
    let intervals = count.saturating_sub(1);
    let member = |index: usize| {
        if index == 0 {
            return from_m;
        }
        if index == intervals {
            return to_m;
        }
        let share = index as f64 / intervals as f64;
        from_m + scale_m * libm::expm1(share * ln_ratio) + 0.0
    };
    Some((0..count).map(member).collect())
}

/// Prefixes of the series placed by equal shift, in the order of the file.
pub(super) fn placed_by_equal_shift(written: &Written) -> Vec<String> {
    let shifted =
        written.series.iter().filter(|series| series.spacing.value() == Some(&Spacing::EqualShift));
    shifted.filter_map(|series| series.prefix.value().cloned()).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn even_members_hit_both_ends() {
        assert_eq!(even(1, -7.0, 3.0), [-7.0]);
        assert_eq!(even(4, -0.1, -0.4), [-0.1, -0.2, -0.30000000000000004, -0.4]);
        assert_eq!(even(3, -1.0, 1.0)[1].to_bits(), 0);
        let many = even(1_000_000, -5e3, -40e3);
        assert_eq!((many[0], many[999_999]), (-5e3, -40e3));
        assert!(many.windows(2).all(|pair| pair[1] < pair[0]));
    }

    #[test]
    fn equal_shift_is_geometric() {
        // A line whose far end runs at a thousandth: rates 1, 1/10, 1/100, 1/1000.
        let c2 = C2_M2_S2.to_f64();
        let acceleration = 9.80665;
        let horizon = c2 / acceleration;
        let members =
            equal_shift(4, 0.0, -0.999 * horizon, acceleration).expect("in front of the horizon");
        for (member, rate) in members.iter().zip([1.0, 0.1, 0.01, 0.001]) {
            let found = 1.0 + acceleration * member / c2;
            assert!((found - rate).abs() < 1e-15 * 4.0, "{found} {rate}");
        }
        assert_eq!(equal_shift(4, 0.0, -1.001 * horizon, acceleration), None);
        assert_eq!(equal_shift(4, 0.0, -1.0, 0.0), None);
        // A short line bows away from even spacing by at most α L² / (8 c²), to the horizon.
        let short = equal_shift(5, -5e3, -40e3, 0.196133).expect("in front of the horizon");
        let bow = 0.196133 * 35e3 * 35e3 / 8.0 / c2;
        for (a, b) in short.iter().zip(even(5, -5e3, -40e3)) {
            assert!((-1.01 * bow..=0.0).contains(&(a - b)), "{a} {b}");
        }
    }
}
