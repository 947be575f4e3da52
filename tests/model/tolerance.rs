//! The one table of allowed errors for every quantity the program prints.
//!
//! `|value − reference| ≤ bound · S`, with `u = 2⁻⁵³`. `required` is what the project
//! demands of itself; `held` is what the reference data show and must keep showing.
//! A row whose worst measured error stays below a quarter of `held` is looser than
//! needed and fails as well, and so does a printed quantity without a row.

use num_rational::BigRational;
use num_traits::{Signed, ToPrimitive, Zero};

/// Unit round-off of a double.
pub const U: f64 = 1.0 / 9_007_199_254_740_992.0;

/// One allowed error.
pub struct Allowed {
    /// Key of the quantity in the tables.
    pub quantity: &'static str,
    /// What is required, as a multiple of the scale.
    pub required: f64,
    /// What is held.
    pub held: f64,
    /// The scale `S`, in words.
    pub scale: &'static str,
    /// Why the bound is what it is.
    pub reason: &'static str,
}

/// The table.
pub const ALLOWED: &[Allowed] = &[
    Allowed {
        quantity: "reference_acceleration_m_s2",
        required: 4.0 * U,
        held: 1.0 * U,
        scale: "value",
        reason: "an exact numerator, one division, rounded once",
    },
    Allowed {
        quantity: "rapidity",
        required: 4.0 * U,
        held: 1.0 * U,
        scale: "value + 2^-96 of the total rapidity",
        reason: "the velocity gained is summed to 200 bits, then divided and rounded once",
    },
    Allowed {
        quantity: "rate_minus_one",
        required: 4.0 * U,
        held: 1.0 * U,
        scale: "value",
        reason: "double-double, rounded once",
    },
    Allowed {
        quantity: "acceleration_m_s2",
        required: 4.0 * U,
        held: 1.0 * U,
        scale: "value",
        reason: "double-double, rounded once; holds down to N = 1e-6",
    },
    Allowed {
        quantity: "horizon_m",
        required: 4.0 * U,
        held: 1.0 * U,
        scale: "value",
        reason: "double-double, rounded once",
    },
    Allowed {
        quantity: "redshift",
        required: 4.0 * U,
        held: 1.0 * U,
        scale: "value",
        reason: "double-double, rounded once",
    },
    Allowed {
        quantity: "rate_difference",
        required: 4.0 * U,
        held: 1.0 * U,
        scale: "value",
        reason: "formed from the difference of positions, never from two rates",
    },
    Allowed {
        quantity: "clock_offset_s",
        required: 4.0 * U,
        held: 1.0 * U,
        scale: "value + 2^-96 of position times total rapidity / c",
        reason: "double-double, rounded once",
    },
    Allowed {
        quantity: "proper_time_s",
        required: 8.0 * U,
        held: 1.0 * U,
        scale: "value",
        reason: "exact array time plus a double-double offset, rounded once",
    },
    Allowed {
        quantity: "predicted_reading_s",
        required: 4.0 * U,
        held: 1.0 * U,
        scale: "the sum of the moduli of its terms",
        reason: "double-double, rounded once",
    },
    Allowed {
        quantity: "launch_time_s",
        required: 1e-14,
        held: 6.0 * U,
        scale: "launch time of the reference + |h sinh(rapidity)|/c",
        reason: "hyperbolic functions of the libm crate, each good to 2 u, and products of them",
    },
    Allowed {
        quantity: "launch_position_m",
        required: 1e-14,
        held: 6.0 * U,
        scale: "c times the integral of |sinh(rapidity)| + |h| cosh(rapidity)",
        reason: "hyperbolic functions of the libm crate, each good to 2 u, and products of them",
    },
    Allowed {
        quantity: "flight times, one hold",
        required: 8.0 * U,
        held: 1.0 * U,
        scale: "value",
        reason: "double-double throughout, rounded once",
    },
    Allowed {
        quantity: "flight times",
        required: 1e-14,
        held: 1.0 * U,
        scale: "value",
        reason: "double-double throughout, rounded once",
    },
    Allowed {
        quantity: "received_shift, one hold",
        required: 4.0 * U,
        held: 1.0 * U,
        scale: "value",
        reason: "double-double, rounded once",
    },
    Allowed {
        quantity: "received_shift",
        required: 1e-14,
        held: 4.0 * U,
        scale: "expm1 of the total rapidity and the tilts of the ends",
        reason: "double-double; the displacement of a moving end is a double",
    },
    Allowed {
        quantity: "shift_rate_per_s",
        required: 1e-14,
        held: 1.0 * U,
        scale: "(|a_j| + |a_i|)(1 + shift)/c",
        reason: "formed in double-double, so that its cancellation costs nothing",
    },
    Allowed {
        quantity: "round trip, radar distance, one hold",
        required: 8.0 * U,
        held: 1.0 * U,
        scale: "value",
        reason: "double-double throughout, rounded once",
    },
    Allowed {
        quantity: "round trip, radar distance",
        required: 1e-14,
        held: 1.0 * U,
        scale: "value",
        reason: "double-double throughout, rounded once",
    },
    Allowed {
        quantity: "two_way_error_s, one ramp",
        required: 1e-6,
        held: 2e-12,
        scale: "value",
        reason: "the second difference of the rapidity, ten-point quadrature",
    },
    Allowed {
        quantity: "two_way_error_s",
        required: 1e-6,
        held: 1e-10,
        scale: "value + 1e-16 s, so 1e-22 s where it is small",
        reason: "difference of two double-double clock times",
    },
    Allowed {
        quantity: "arrives_array_s",
        required: 1e-14,
        held: 2.0 * U,
        scale: "sum of the moduli of the terms over the slope, + 1e-4 s for the attosecond",
        reason: "null coordinates in double-double",
    },
    Allowed {
        quantity: "launch times of a signal",
        required: 1e-14,
        held: 1.0 * U,
        scale: "sum of the moduli of the terms",
        reason: "null coordinates in double-double",
    },
    Allowed {
        quantity: "ln_ratio",
        required: 1e-14,
        held: 0.6 * U,
        scale: "total rapidity + what the arrival may be off times the acceleration",
        reason: "the rapidity itself, rounded once",
    },
    Allowed {
        quantity: "last_call_s",
        required: 1e-14,
        held: 1.0 * U,
        scale: "sum of the moduli of the terms",
        reason: "null coordinates in double-double",
    },
    Allowed {
        quantity: "reception of a released node",
        required: 1e-14,
        held: 1.0 * U,
        scale: "value",
        reason: "the ray of a link from a point farther off",
    },
    Allowed {
        quantity: "passes",
        required: 1e-14,
        held: 4.0 * U,
        scale: "sum of the moduli of the terms over the slope + value",
        reason: "positions in double-double, times in doubles",
    },
    Allowed {
        quantity: "closing_speed_m_s",
        required: 1e-14,
        held: 6.0 * U,
        scale: "value + what the moment may be off times the acceleration",
        reason: "hyperbolic tangent of the relative rapidity",
    },
    Allowed {
        quantity: "axial_force_n",
        required: 1e-14,
        held: 2.0 * U,
        scale: "(|acceleration|/N)(mass aft + share aft times whole mass)",
        reason: "the balance in double-double; what has burned to a few u times the mass it leaves",
    },
    Allowed {
        quantity: "engine_force_n",
        required: 1e-14,
        held: 4.0 * U,
        scale: "value",
        reason: "double-double but for the mass that is left",
    },
    Allowed {
        quantity: "propellant_used_kg",
        required: 1e-14,
        held: 4.0 * U,
        scale: "value",
        reason: "one expm1 of the libm crate and products",
    },
    Allowed {
        quantity: "loaded_position_m",
        required: 4.0 * U,
        held: 2.0 * U,
        scale: "value",
        reason: "a double-double sum of lengths; only the stretch itself is rounded early",
    },
    Allowed {
        quantity: "loaded_speed_m_s",
        required: 1e-12,
        held: 64.0 * U,
        scale: "value",
        reason: "a derivative of the stretch in doubles; first-order end motion needs no more",
    },
    Allowed {
        quantity: "loaded_clock_offset_s",
        required: 1e-14,
        held: 4.0 * U,
        scale: "integral of |h acceleration| / c^2",
        reason: "closed form, or ten-point quadrature over short pieces",
    },
];

/// The row of a quantity.
pub fn allowed(quantity: &str) -> &'static Allowed {
    ALLOWED
        .iter()
        .find(|row| row.quantity == quantity)
        .unwrap_or_else(|| panic!("no row in the table of allowed errors for `{quantity}`"))
}

/// A decimal number, exactly.
pub fn exact_decimal(text: &str) -> BigRational {
    let (mantissa, exponent) = match text.split_once(['e', 'E']) {
        Some((mantissa, exponent)) => (mantissa, exponent.parse::<i32>().expect("an exponent")),
        None => (text, 0),
    };
    let (whole, part) = mantissa.split_once('.').unwrap_or((mantissa, ""));
    let digits: num_bigint::BigInt = format!("{whole}{part}").parse().expect("digits");
    let shift = exponent - part.len() as i32;
    let power = num_bigint::BigInt::from(10).pow(shift.unsigned_abs());
    if shift >= 0 {
        BigRational::from_integer(digits * power)
    } else {
        BigRational::new(digits, power)
    }
}

/// A double, exactly.
pub fn exact(value: f64) -> BigRational {
    BigRational::from_float(value).unwrap_or_else(|| panic!("{value} is not finite"))
}

/// The distribution of errors of one quantity, relative to its scale.
pub struct Errors {
    quantity: &'static str,
    found: Vec<f64>,
}

impl Errors {
    /// An empty distribution.
    pub fn new(quantity: &'static str) -> Errors {
        Errors { quantity, found: Vec::new() }
    }

    /// Adds one comparison; fails at once when it is beyond what is required.
    pub fn compare(&mut self, got: f64, wanted: &BigRational, scale: &BigRational, input: &str) {
        let row = allowed(self.quantity);
        let difference = (exact(got) - wanted).abs();
        let error = if difference.is_zero() {
            0.0
        } else {
            assert!(
                !scale.is_zero(),
                "{}: wanted exactly {wanted}, got {got:e}; input {input}",
                self.quantity
            );
            (difference / scale.abs()).to_f64().expect("a ratio of finite numbers")
        };
        assert!(
            error <= row.required,
            "{}: wanted {:e}, got {got:e}, difference {:.3} u of the scale ({}), allowed {:.3} u; input {input}",
            self.quantity,
            wanted.to_f64().unwrap_or(f64::NAN),
            error / U,
            row.scale,
            row.required / U,
        );
        self.found.push(error);
    }

    /// The worst error, as a multiple of the scale.
    pub fn worst(&self) -> f64 {
        self.found.iter().copied().fold(0.0, f64::max)
    }

    /// Prints the distribution and holds the row to it, both ways.
    pub fn judge(mut self) {
        let row = allowed(self.quantity);
        let worst = self.worst();
        self.found.sort_by(f64::total_cmp);
        let at = |share: f64| self.found[((self.found.len() - 1) as f64 * share) as usize];
        println!(
            "{:28} {:6} values  worst {:8.3} u  99% {:8.3} u  median {:8.3} u  held {:8.3} u  required {:8.3} u  ({})",
            self.quantity,
            self.found.len(),
            worst / U,
            at(0.99) / U,
            at(0.5) / U,
            row.held / U,
            row.required / U,
            row.reason,
        );
        assert!(row.held <= row.required, "{}: held beyond required", row.quantity);
        assert!(worst <= row.held, "{}: worst {:.3} u beyond held", row.quantity, worst / U);
        assert!(
            worst > row.held / 4.0,
            "{}: held is looser than needed: worst {:.3} u",
            row.quantity,
            worst / U
        );
    }
}
