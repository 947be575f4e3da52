//! Bits that must be the same on every machine and with every compiler.
//!
//! Recordings are verified bit for bit, so the transcendental functions come from one
//! implementation. The pins were read off once; the values themselves are held to the
//! reference elsewhere, so a change here means that old recordings no longer verify and
//! that the number `MODEL` has to be raised.

use clockspar::model::array_time::ArrayTime;
use clockspar::model::dd::Dd;
use clockspar::model::motion::{cosh_sinh, sinh_over};
use clockspar::model::plan::{Phase, Plan};

#[test]
fn hyperbolic_functions_keep_their_bits() {
    let points = [1e-9, 0.03, 0.7, 1.9, 21.0, 333.3, 699.9];
    let found: Vec<[u64; 3]> = points
        .iter()
        .map(|&point| {
            let (cosh, sinh) = cosh_sinh(Dd { hi: point, lo: point * 1e-17 });
            [cosh.to_bits(), sinh.to_bits(), sinh_over(Dd::new(point)).to_bits()]
        })
        .collect();
    assert_eq!(found, HYPERBOLIC, "{found:#018x?}");
}

#[test]
fn a_plan_keeps_its_bits() {
    let hour = ArrayTime::from_seconds(3600);
    let ramp = Phase::whole(ArrayTime::ZERO, hour, 0.0, 9.80665);
    let hold = Phase::whole(ramp.end, hour, 9.80665, 9.80665);
    let plan = Plan::new(vec![ramp, hold]).expect("a plan");
    let found: Vec<[u64; 4]> = [1799, 5400, 90_000]
        .into_iter()
        .map(|second| {
            let at = ArrayTime::from_seconds(second);
            let (moment, launch) = (plan.moment(at), plan.launch(at));
            [
                moment.acceleration_m_s2.to_f64().to_bits(),
                moment.rapidity.to_f64().to_bits(),
                launch.time_s.to_f64().to_bits(),
                launch.position_m.to_f64().to_bits(),
            ]
        })
        .collect();
    assert_eq!(found, PLAN, "{found:#018x?}");
}

const HYPERBOLIC: [[u64; 3]; 7] = [
    [0x3ff0000000000000, 0x3e112e0be826d695, 0x3ff0000000000000],
    [0x3ff001d7e503e214, 0x3f9eb97fec690b21, 0x3ff0009d4b216077],
    [0x3ff4152c1862342f, 0x3fe8465153d5bdbc, 0x3ff156cc607419d0],
    [0x400b5783a0f8aab7, 0x400a253298b81d35, 0x3ffb8578a0c1cde7],
    [0x41c3a6e1fd9eecfe, 0x41c3a6e1fd9eecfe, 0x417df21b6a16be75],
    [0x5decd85c19e763ec, 0x5decd85c19e763ec, 0x5d6627c167143153],
    [0x7efac3c2d2582fc4, 0x7efac3c2d2582fc4, 0x7e63944a317bf2a8],
];

const PLAN: [[u64; 4]; 3] = [
    [0x40139a37215deee0, 0x3eeed60be3b4e727, 0x389c1c0000029c35, 0x39442adc7ab84c21],
    [0x40239d013a92a305, 0x3f1eded32e00fb7a, 0x38b51800008f1640, 0x399069d2ec4bdf27],
    [0x0000000000000000, 0x3f27271e6280bc9b, 0x38f5f90005683108, 0x39f0e307c7f2cc36],
];
