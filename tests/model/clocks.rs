//! Stability of clocks and the averaging time that resolves a pair, against spectra and
//! laws worked out by another method (`tests/data/clocks`) and published coefficients.

use clockspar::model::clocks::{Comparison, LinkNoise, Noise, Resolved, Unresolved};

use crate::recording::layout;

const NOISE: &str = include_str!("../data/clocks/noise.csv");
const RESOLVE: &str = include_str!("../data/clocks/resolve.csv");

/// Agreement in parts of what is wanted, however small that is.
#[track_caller]
pub fn near(got: f64, wanted: f64, tolerance: f64) {
    let difference = (got - wanted).abs();
    assert!(
        difference <= tolerance * wanted.abs(),
        "got {got:e}, wanted {wanted:e}, difference {difference:e}, tolerance {tolerance:e}"
    );
}

fn of_kind(kind: &str, deviation: f64, bandwidth_hz: f64) -> Noise {
    let mut noise = Noise { bandwidth_hz, ..Noise::default() };
    match kind {
        "white_pm" => noise.white_pm = deviation,
        "flicker_pm" => noise.flicker_pm = deviation,
        "white_fm" => noise.white_fm = deviation,
        "flicker_fm" => noise.flicker_fm = deviation,
        "random_walk_fm" => noise.random_walk_fm = deviation,
        _ => panic!("{kind}"),
    }
    noise
}

fn rows(text: &str) -> impl Iterator<Item = Vec<&str>> {
    text.lines().skip(1).map(|line| line.split(',').collect())
}

fn number(text: &str) -> f64 {
    text.parse().unwrap_or_else(|_| panic!("a number: {text}"))
}

#[test]
fn deviations_are_those_of_the_integrated_spectra() {
    let mut count = 0;
    for row in rows(NOISE) {
        let [kind, bandwidth, averaging, ratio, tolerance] = row[..] else { panic!("{row:?}") };
        let noise = of_kind(kind, 3e-17, number(bandwidth));
        let got = noise.allan_deviation(number(averaging)) / 3e-17;
        near(got, number(ratio), number(tolerance));
        near(noise.allan_deviation(1.0), 3e-17, 4e-16);
        count += 1;
    }
    assert!(count >= 18);
}

#[test]
fn flicker_phase_noise_follows_the_standard_and_its_bandwidth() {
    // IEEE Std 1139-2008, table B.2 (from memory): [1.038 + 3 ln(2π f_h t)] h_1/(4π² t²).
    for (bandwidth, averaging) in [(10.0, 100.0), (0.5, 1e4), (1e4, 3e-3)] {
        let noise = of_kind("flicker_pm", 1e-13, bandwidth);
        let law = |t: f64| 1.038 + 3.0 * (std::f64::consts::TAU * bandwidth * t).ln();
        let wanted = 1e-13 / averaging * (law(averaging) / law(1.0)).sqrt();
        near(noise.allan_deviation(averaging), wanted, 5e-5);
    }
    // Outside the domain of the law, 2π f_h t ≫ 1: falls with the averaging time all the same.
    let slow = of_kind("flicker_pm", 1e-13, 1e-3);
    let moments = [1e-3, 1.0, 10.0, 100.0, 305.0, 307.0, 1e3, 1e5];
    for pair in moments.windows(2) {
        assert!(slow.allan_deviation(pair[0]) > slow.allan_deviation(pair[1]));
    }
    near(slow.allan_deviation(1.0), 1e-13, 4e-16);
}

#[test]
fn drift_and_independent_kinds_add() {
    // Linear drift D gives D t/√2 (elementary).
    let drifting = Noise { drift_per_s: -3e-16, ..Noise::default() };
    near(drifting.allan_deviation(400.0), 3e-16 * 400.0 / 2.0_f64.sqrt(), 1e-15);
    let all = Noise {
        white_pm: 1e-15,
        white_fm: 2e-15,
        flicker_fm: 4e-16,
        random_walk_fm: 1e-17,
        ..drifting
    };
    let squares: f64 = 1e-30 / 2500.0 + 4e-30 / 50.0 + 1.6e-31 + 1e-34 * 50.0 + 4.5e-32 * 2500.0;
    near(all.allan_deviation(50.0), squares.sqrt(), 1e-15);
    assert_eq!(Noise::default().allan_deviation(1.0), 0.0);
}

#[test]
fn averaging_times_are_those_of_a_scan_and_bisection() {
    let mut never = 0;
    for row in rows(RESOLVE) {
        let clock = |from: usize| Noise {
            white_pm: number(row[from]),
            flicker_pm: number(row[from + 1]),
            white_fm: number(row[from + 2]),
            flicker_fm: number(row[from + 3]),
            random_walk_fm: number(row[from + 4]),
            bandwidth_hz: number(row[from + 5]),
            drift_per_s: number(row[from + 6]),
        };
        let comparison = Comparison::of(&clock(0), &clock(7), number(row[14]));
        let (difference, factor) = (number(row[15]), number(row[16]));
        match comparison.resolve(difference, factor) {
            Resolved::After(time) => {
                // Near the floor the time depends on the last bits of what is left above it.
                let part = factor * comparison.quietest_within(f64::INFINITY).deviation;
                let left = 1.0 - (part / difference).powi(2);
                let tolerance = 1e-14 / left.max(1e-13);
                near(time, number(row[17]), tolerance);
            }
            Resolved::Never(Unresolved::Floor(quietest)) => {
                assert_eq!(row[17], "", "{row:?}");
                assert!(factor * quietest.deviation > difference.abs(), "{quietest:?}");
                never += 1;
            }
            other @ Resolved::Never(_) => panic!("{other:?}: {row:?}"),
        }
    }
    assert!(never >= 5);
}

#[test]
fn white_frequency_noise_resolves_with_the_square_of_the_factor() {
    // t = 2 (k A / r)²: two like clocks.
    let clock = Noise { white_fm: 6e-17, ..Noise::default() };
    let pair = Comparison::of(&clock, &clock, 0.0);
    for factor in [1.0, 2.0, 3.0] {
        let wanted = 2.0 * (factor * 6e-17 / 1e-18_f64).powi(2);
        let Resolved::After(time) = pair.resolve(-1e-18, factor) else { panic!("resolved") };
        near(time, wanted, 1e-14);
    }
}

#[test]
fn edges_of_resolving() {
    let silent = Comparison::of(&Noise::default(), &Noise::default(), 0.0);
    assert_eq!(silent.resolve(1e-30, 1.0), Resolved::After(0.0));
    assert_eq!(silent.resolve(0.0, 1.0), Resolved::Never(Unresolved::NoDifference));
    let flat = Noise { flicker_fm: 3e-18, ..Noise::default() };
    let flat = Comparison::of(&flat, &Noise::default(), 0.0);
    assert_eq!(flat.resolve(3e-18, 1.0), Resolved::After(0.0), "exactly at the floor");
    assert!(matches!(flat.resolve(2.999e-18, 1.0), Resolved::Never(Unresolved::Floor(_))));
    // An uncertainty of the bias is a floor when absolute agreement is meant.
    let white = Noise { white_fm: 1e-16, ..Noise::default() };
    let white = Comparison::of(&white, &Noise::default(), 0.0);
    assert!(matches!(white.resolve(1e-18, 1.0), Resolved::After(_)));
    let absolute = white.with_bias_uncertainty(2e-18);
    assert!(matches!(absolute.resolve(1e-18, 1.0), Resolved::Never(Unresolved::Floor(_))));
    near(absolute.deviation(1e40), 2e-18, 1e-15);
    // Absurd noise is no panic.
    let loud = Noise { white_fm: 1e200, random_walk_fm: 1e200, ..Noise::default() };
    let loud = Comparison::of(&loud, &loud, 1e200);
    assert!(matches!(loud.resolve(1e-300, 1.0), Resolved::Never(_)));
}

#[test]
fn the_quietest_averaging_time_is_where_falling_and_rising_noise_meet() {
    // W/t + R t is least at t = √(W/R), where it is 2 √(W R).
    let clock = Noise { white_fm: 1e-15, random_walk_fm: 1e-19, ..Noise::default() };
    let comparison = Comparison::of(&clock, &Noise::default(), 0.0);
    let quietest = comparison.quietest_within(f64::INFINITY);
    near(quietest.deviation, (2e-34_f64).sqrt(), 1e-14);
    near(quietest.averaging_s.unwrap(), 1e4, 1e-6);
    let early = comparison.quietest_within(100.0);
    assert_eq!(early.averaging_s, Some(100.0));
    near(early.deviation, comparison.deviation(100.0), 1e-15);
    // Twice: the same noise resolves a difference for a while and then loses it again.
    let Resolved::After(time) = comparison.resolve(2e-17, 1.0) else { panic!("resolved") };
    assert!(time < 1e4 && comparison.deviation(1e9) > 2e-17);
}

#[test]
fn links_add_along_the_quietest_chain() {
    let text = r#"
name = "links"
[[series]]
prefix = "n"
count = 5
from = "0 m"
to = "-40 m"
[[link]]
between = ["n1", "n2"]
instability = 3e-17
[[link]]
between = ["n3", "n2"]
instability = 4e-17
[[link]]
between = ["n1", "n4"]
instability = 1e-16
[[link]]
between = ["n4", "n3"]
instability = 1e-18
"#;
    let links = LinkNoise::of(&layout(text));
    near(links.between(0, 1).unwrap(), 3e-17, 1e-15);
    near(links.between(2, 0).unwrap(), 5e-17, 1e-15);
    near(links.between(0, 3).unwrap(), 1e-16, 1e-15);
    assert_eq!(links.between(0, 4), None);
    let none = text.split("[[link]]").next().unwrap();
    assert_eq!(LinkNoise::of(&layout(none)).between(0, 4), Some(0.0), "every neighbour pair");
}
