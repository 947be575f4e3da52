//! Values from outside the project, each with its source.
//!
//! "From memory" says that the page itself was not at hand when the check was written;
//! the digits were recomputed independently at 50 digits with the inputs stated.

use approx::assert_relative_eq;
use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::{
    ASTRONOMICAL_UNIT_M, C2_M2_S2, JULIAN_YEAR_S, LIGHT_YEAR_M, SPEED_OF_LIGHT_M_S,
    STANDARD_GRAVITY_M_S2,
};
use clockspar::model::dd::Dd;
use clockspar::model::motion::cosh_sinh;
use clockspar::model::plan::{Phase, Plan};
use clockspar::model::rates::{Instant, LaunchFrame};

/// A thrust held from array time zero on.
fn held(acceleration_m_s2: f64, at: ArrayTime) -> (Plan, Instant) {
    let phase =
        Phase::whole(ArrayTime::ZERO, ArrayTime::LIMIT, acceleration_m_s2, acceleration_m_s2);
    let length = if acceleration_m_s2 * 1e11 > 690.0 * SPEED_OF_LIGHT_M_S {
        ArrayTime::from_attoseconds(at.attoseconds() + 1)
    } else {
        phase.end
    };
    let phase = Phase::whole(ArrayTime::ZERO, length, acceleration_m_s2, acceleration_m_s2);
    let plan = Plan::new(vec![phase]).expect("a plan within the domain");
    let moment = plan.moment(at);
    (plan, Instant { moment, gradient_per_s2: 0.0 })
}

/// Years to array time, to the attosecond.
fn years(count: f64, year_s: f64) -> ArrayTime {
    ArrayTime::nearest(Dd::product(count, year_s)).expect("in the domain")
}

/// Agreement within the rounding of a published number.
fn published(got: f64, text: &str) {
    let wanted: f64 = text.replace(',', "").parse().expect("a number");
    let digits = text.split(['e', 'E']).next().unwrap_or(text);
    let exponent: i32 = text.split(['e', 'E']).nth(1).map_or(0, |part| part.parse().expect("int"));
    let decimals = digits.split_once('.').map_or(0, |(_, part)| part.len() as i32);
    let half = 0.5 * 10_f64.powi(exponent - decimals);
    assert!(
        (got - wanted).abs() <= half * (1.0 + 1e-9),
        "published {text}, got {got}, difference {:e}, rounding {half:e}",
        got - wanted
    );
}

#[test]
fn constants_are_the_defined_ones() {
    // SI Brochure, 9th edition (2019): c exact.
    assert_eq!(SPEED_OF_LIGHT_M_S, 299_792_458.0);
    // 3rd CGPM (1901), Comptes Rendus p. 70: 980.665 cm/s², exact.
    assert_eq!(STANDARD_GRAVITY_M_S2, 9.80665);
    // IAU 2012 resolution B2: exact.
    assert_eq!(ASTRONOMICAL_UNIT_M, 149_597_870_700.0);
    // IAU style manual (from memory); astropy.constants `lyr` prints the same integer.
    assert_eq!(LIGHT_YEAR_M, 9_460_730_472_580_800.0);
    assert_eq!(LIGHT_YEAR_M, SPEED_OF_LIGHT_M_S * JULIAN_YEAR_S);
    // The square of an exact integer, by integer arithmetic.
    let square = 299_792_458_i128 * 299_792_458;
    assert_eq!(C2_M2_S2.hi as i128 + C2_M2_S2.lo as i128, square);
}

#[test]
fn the_horizon_at_one_g_is_a_light_year_away() {
    // c²/g0 = 9.164 752 272 558 087e15 m = 0.968 715 079 572 289 ly, recomputed at 50
    // digits; "about 1 light-year", Misner, Thorne & Wheeler (1973), section 6.2 (from memory).
    let (_, here) = held(STANDARD_GRAVITY_M_S2, ArrayTime::from_seconds(1));
    let horizon = here.horizon_m(Dd::ZERO).expect("thrust is on").to_f64();
    assert_relative_eq!(horizon, 9.164_752_272_558_087e15, epsilon = 0.0, max_relative = 1e-15);
    assert_relative_eq!(
        horizon / LIGHT_YEAR_M,
        0.968_715_079_572_289,
        epsilon = 0.0,
        max_relative = 1e-14
    );
}

#[test]
fn rocket_table_of_the_usenet_physics_faq() {
    // "The Relativistic Rocket", Usenet Physics FAQ (P. Gibbs 1996, D. Koks 2006), from
    // memory, recomputed. The table is computed with a = 1.03 ly/yr² exactly, not with g0.
    let acceleration = 1.03 * LIGHT_YEAR_M / (JULIAN_YEAR_S * JULIAN_YEAR_S);
    for (crew, launch, distance, gamma) in [
        (1.0, "1.19", "0.56", "1.58"),
        (2.0, "3.75", "2.90", "3.99"),
        (5.0, "83.7", "82.7", "86.2"),
        (8.0, "1840", "1839", "1895"),
        (12.0, "113243", "113242", "116641"),
    ] {
        let at = years(crew, JULIAN_YEAR_S);
        let (plan, here) = held(acceleration, at);
        let frame = LaunchFrame::new(plan.launch(at), here.moment.rapidity);
        published(frame.time_s(Dd::ZERO).expect("finite") / JULIAN_YEAR_S, launch);
        published(frame.position_m(Dd::ZERO).expect("finite") / LIGHT_YEAR_M, distance);
        published(cosh_sinh(here.moment.rapidity).0, gamma);
    }
}

#[test]
fn unit_hyperbola_table() {
    // Table "One Gee" (weblog, 2006): sinh T and cosh T − 1 of the unit hyperbola.
    let acceleration = LIGHT_YEAR_M / (JULIAN_YEAR_S * JULIAN_YEAR_S);
    for (crew, launch, distance) in [
        (1.0, "1.175", "0.5431"),
        (2.0, "3.627", "2.762"),
        (2.337, "5.127", "4.223"),
        (3.962, "26.3", "25.3"),
        (6.60, "368", "367"),
        (10.9, "2.7e4", "2.7e4"),
        (15.4, "2.44e6", "2.44e6"),
        (18.4, "4.9e7", "4.9e7"),
        (25.3, "5e10", "5e10"),
    ] {
        let at = years(crew, JULIAN_YEAR_S);
        let (plan, here) = held(acceleration, at);
        let frame = LaunchFrame::new(plan.launch(at), here.moment.rapidity);
        published(frame.time_s(Dd::ZERO).expect("finite") / JULIAN_YEAR_S, launch);
        published(frame.position_m(Dd::ZERO).expect("finite") / LIGHT_YEAR_M, distance);
    }
}

#[test]
fn braking_half_way_takes_the_published_crew_time() {
    // Usenet Physics FAQ, same page: accelerate to half way, then brake; a = 1.03 ly/yr².
    let acceleration = 1.03 * LIGHT_YEAR_M / (JULIAN_YEAR_S * JULIAN_YEAR_S);
    // The crew times recomputed at 50 digits; the page prints 3.6, 6.6, 20 and 28 yr.
    for (distance_ly, crew, printed) in [
        (4.3, 3.564_46, "3.6"),
        (27.0, 6.589_74, "6.6"),
        (30_000.0, 20.0749, "20"),
        (2_000_000.0, 28.2295, "28"),
    ] {
        published(crew, printed);
        let half = years(crew / 2.0, JULIAN_YEAR_S);
        let end = half.stepped(half, 1).expect("in the domain");
        let plan = Plan::new(vec![
            Phase::whole(ArrayTime::ZERO, half, acceleration, acceleration),
            Phase::whole(half, half, -acceleration, -acceleration),
        ])
        .expect("a plan");
        let moment = plan.moment(end);
        assert_eq!(moment.rapidity, Dd::ZERO, "at rest at the far end");
        let frame = LaunchFrame::new(plan.launch(end), moment.rapidity);
        let flown = frame.position_m(Dd::ZERO).expect("finite") / LIGHT_YEAR_M;
        // The crew time is given to six digits, and the distance grows as its exponential.
        assert_relative_eq!(flown, distance_ly, epsilon = 0.0, max_relative = 3e-5 * crew);
    }
}

#[test]
fn nine_nines_of_light_speed_with_the_constants_it_was_computed_with() {
    // Code-recipe page with printed output for 0.999 c at g = 9.8, c = 3e8, year of 3.15e7 s:
    // 21.71419414 yr of launch time, 3.69310123154 yr of crew time. With our c the same
    // rapidity is reached at an acceleration scaled by c/3e8.
    let acceleration = 9.8 * SPEED_OF_LIGHT_M_S / 3e8;
    let year_s = 3.15e7;
    let at = years(3.693_101_231_54, year_s);
    let (plan, here) = held(acceleration, at);
    let frame = LaunchFrame::new(plan.launch(at), here.moment.rapidity);
    let launch = frame.time_s(Dd::ZERO).expect("finite") / year_s;
    assert_relative_eq!(launch, 21.714_194_14, epsilon = 0.0, max_relative = 1e-9);
    let (cosh, sinh) = cosh_sinh(here.moment.rapidity);
    assert_relative_eq!(sinh / cosh, 0.999, epsilon = 0.0, max_relative = 1e-12);
}

#[test]
fn clocks_a_few_metres_apart() {
    let shift = |gravity: f64, height: f64| {
        let (_, here) = held(gravity, ArrayTime::from_seconds(1));
        here.rate_minus_one(Dd::new(height)).to_f64()
    };
    // Takano et al., Oyo Buturi 86 (2017) 972 (abstract): 1.1e-18 per centimetre.
    published(shift(9.80665, 0.01), "1.1e-18");
    // Chou, Hume, Rosenband & Wineland, Science 329 (2010) 1630: 33 cm at Boulder,
    // (4.1 ± 1.6)e-17 (from memory); NIST news 24 September 2010: "approximately 90
    // billionths of a second" over 79 years.
    let boulder = shift(9.79599, 0.33);
    assert!((boulder - 4.1e-17).abs() < 1.6e-17);
    published(boulder * 79.0 * JULIAN_YEAR_S, "9.0e-8");
    // Zheng et al., Nature Communications 14 (2023), arXiv 2207.07145: expected
    // −10.9e-19 per centimetre (sign of the lower minus the upper clock).
    published(shift(9.8044, 0.01), "10.9e-19");
    // Bothwell et al., Nature 602 (2022) 420: expected gradient 1.09e-19 per millimetre
    // (from memory).
    published(shift(9.796, 0.001), "1.09e-19");
    // Takano et al., Nature Photonics 10 (2016) 662: 15.16 m, 1652.9(5.9)e-18 (from memory).
    assert!((shift(9.7980, 15.16) - 1652.9e-18).abs() < 5.9e-18);
    // Pound & Snider, Phys. Rev. 140 (1965) B788: 4.905e-15 both ways, which is a height of
    // 22.48 m, not the 75 ft (22.86 m) the abstract names.
    let height = 4.905e-15 / (2.0 * shift(9.80665, 1.0));
    published(height, "22.48");
}

#[test]
fn golden_rows_of_two_clocks_at_one_g() {
    // Twenty-digit values computed at 50 digits from the equations of Rindler (1966) and
    // Hamilton (1978): rate difference and the acceleration of the upper clock.
    for (height, excess, upper) in [
        (0.33, 3.600_751_991_825_411_6e-17, 9.806_649_999_999_999_6),
        (1.0, 1.091_136_967_219_821_7e-16, 9.806_649_999_999_998_9),
        (450.0, 4.910_116_352_489_197_7e-14, 9.806_649_999_999_518_5),
        (1000.0, 1.091_136_967_219_821_7e-13, 9.806_649_999_998_929_96),
        (1e6, 1.091_136_967_219_821_7e-10, 9.806_649_998_929_960_2),
        (1e9, 1.091_136_967_219_821_7e-7, 9.806_648_929_960_282_8),
        (LIGHT_YEAR_M, 1.032_295_275_553_596_5, 4.825_406_090_327_436_4),
    ] {
        let (_, here) = held(STANDARD_GRAVITY_M_S2, ArrayTime::from_seconds(1));
        let node = Dd::new(height);
        assert_relative_eq!(
            here.rate_minus_one(node).to_f64(),
            excess,
            epsilon = 0.0,
            max_relative = 5e-16
        );
        let felt = here.felt_acceleration_m_s2(node).to_f64();
        assert_relative_eq!(felt, upper, epsilon = 0.0, max_relative = 5e-16);
    }
}

#[test]
fn an_age_difference_depends_on_the_rapidity_alone() {
    // Ben-Ya'acov, Eur. J. Phys. (2016), arXiv 1701.02731: Δτ = L Δη / c.
    let at = years(1.0, JULIAN_YEAR_S);
    let (_, here) = held(STANDARD_GRAVITY_M_S2, at);
    let offset = here.clock_offset_s(Dd::new(1000.0)).to_f64();
    let rapidity = here.moment.rapidity.to_f64();
    assert_relative_eq!(
        offset,
        1000.0 * rapidity / SPEED_OF_LIGHT_M_S,
        epsilon = 0.0,
        max_relative = 4e-16
    );
    // 3.443 366 ns per year and metre at g0, recomputed.
    published(offset / 1000.0, "3.443366e-9");
}
