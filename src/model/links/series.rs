//! Exponentials, logarithms and their integrals in double-double, for light on its way
//! along a line.
//!
//! Relative accuracy is what matters here, down to arguments of 1e-30: a link of one
//! metre changes the rapidity by 1e-16, and the differences that are published hang on
//! that number.

use crate::model::dd::Dd;

/// `ln 2` to 107 bits (DLMF 4.2.1; OEIS A002162).
const LN_2: Dd = Dd { hi: std::f64::consts::LN_2, lo: 2.319_046_813_846_299_6e-17 };

/// Number of stored reciprocals: the longest series below needs about fifty terms.
const RECIPROCAL_COUNT: usize = 72;

/// `1/n` as double-doubles; the entry for zero is unused.
const RECIPROCALS: [Dd; RECIPROCAL_COUNT] = reciprocals();

const fn reciprocals() -> [Dd; RECIPROCAL_COUNT] {
    let mut table = [Dd::ZERO; RECIPROCAL_COUNT];
    let mut n = 1;
    while n < RECIPROCAL_COUNT {
        let divisor = n as f64;
        let hi = 1.0 / divisor;
        // A divisor of seven bits times 41 bits is exact, and so is the rest after it.
        let head = f64::from_bits(hi.to_bits() & !0xFFF);
        let rest = (1.0 - head * divisor) - (hi - head) * divisor;
        table[n] = Dd { hi, lo: rest / divisor };
        n += 1;
    }
    table
}

/// Terms below this share of the first ones, 2⁻⁵⁶, are formed in plain doubles.
const DOUBLE_SHARE: f64 = 1.0 / 72_057_594_037_927_936.0;

/// Terms below this share, 2⁻¹¹², are left out.
const LAST_SHARE: f64 = DOUBLE_SHARE * DOUBLE_SHARE;

/// What the exponential of a quadratic does over a stretch that begins at zero.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Decay {
    /// `e^(−ψ) − 1` at the end of the stretch.
    pub change: Dd,
    /// Mean of `e^(−ψ)` over the stretch.
    pub mean: Dd,
}

/// `e^(−ψ) − 1` at `t = 1` and the mean of `e^(−ψ)` over `0 … 1`, for
/// `ψ(t) = linear · t + quadratic · t²/2`.
///
/// Taylor's series by its recurrence, `(n + 1) t_(n+1) = −(linear t_n + quadratic t_(n−1))`.
/// Both results are good to 1e-29 of `|linear| + |quadratic|` and of one, for
/// `|linear| ≤ 1` and `|quadratic| ≤ 2`. Terms that cannot reach the last digits are
/// formed in plain doubles.
pub(crate) fn decay(linear: Dd, quadratic: Dd) -> Decay {
    let size = linear.hi.abs() + quadratic.hi.abs();
    let (mut before, mut term) = (Dd::ONE, -linear);
    let mut change = term;
    let mut mean = term.scale(0.5);
    let straight = quadratic.is_zero();
    let mut n = 1;
    while before.hi.abs() + term.hi.abs() > DOUBLE_SHARE * size && n + 2 < RECIPROCAL_COUNT {
        n += 1;
        let push = if straight { linear * term } else { linear * term + quadratic * before };
        (before, term) = (term, -(push * RECIPROCALS[n]));
        change = change + term;
        mean = mean + term * RECIPROCALS[n + 1];
    }
    let (mut before, mut term) = (before.hi, term.hi);
    let (mut change_tail, mut mean_tail) = (0.0, 0.0);
    while before.abs() + term.abs() > LAST_SHARE * size && n + 2 < RECIPROCAL_COUNT {
        n += 1;
        let push = linear.hi * term + quadratic.hi * before;
        (before, term) = (term, -push * RECIPROCALS[n].hi);
        change_tail += term;
        mean_tail += term * RECIPROCALS[n + 1].hi;
    }
    Decay { change: change + change_tail, mean: mean + mean_tail + 1.0 }
}

/// `eˣ − 1`, to 1e-29 of itself for `|x| ≤ 700`; −1 far below, infinite far above.
///
/// A multiple of `ln 2` is taken off, a thirty-second of the rest goes through the
/// series, and five doublings `q ← q (2 + q)` restore it.
pub(crate) fn exp_m1(x: Dd) -> Dd {
    if x.hi.abs() < 1.0 / 64.0 {
        return decay(-x, Dd::ZERO).change;
    }
    if x.hi > 709.0 {
        return Dd::new(f64::INFINITY);
    }
    if x.hi < -745.0 {
        return Dd::new(-1.0);
    }
    let power = (x.hi / LN_2.hi).round();
    let rest = x - LN_2 * power;
    let mut change = decay(-rest.scale(1.0 / 32.0), Dd::ZERO).change;
    for _ in 0..5 {
        change = change * (change + 2.0);
    }
    // Powers down to the smallest double are exact; two factors keep the largest finite.
    let half = libm::exp2((power / 2.0).trunc());
    let other = libm::exp2(power - (power / 2.0).trunc());
    change.scale(half).scale(other) + (Dd::new(half * other) - 1.0)
}

/// `eˣ`, to 1e-29 of itself for `|x| ≤ 700`.
pub(crate) fn exp(x: Dd) -> Dd {
    if x.hi < -1.0 {
        // Here eˣ − 1 has lost the digits of eˣ.
        return Dd::ONE / (exp_m1(-x) + 1.0);
    }
    exp_m1(x) + 1.0
}

/// `ln(1 + y)/y`, 1 at zero, to 1e-29 of itself for `y > −1/2`.
///
/// Small arguments go through the series of the inverse hyperbolic tangent,
/// `ln(1 + y) = 2 artanh(y/(2 + y))` (DLMF 4.6.4); large ones through one Newton step
/// from the double nearest to the logarithm.
pub(crate) fn ln_1p_over(y: Dd) -> Dd {
    if y.hi.abs() < 1.0 / 64.0 {
        let lead = Dd::new(2.0) / (y + 2.0);
        let z = y * lead.scale(0.5);
        let square = z * z;
        if square.hi < 1e-17 {
            return lead + lead.hi * (square.hi * (1.0 / 3.0));
        }
        let mut power = square;
        let mut sum = power * RECIPROCALS[3];
        let mut n = 3;
        while power.hi > 1e-17 && n + 2 < RECIPROCAL_COUNT {
            power = power * square;
            n += 2;
            sum = sum + power * RECIPROCALS[n];
        }
        let (mut power, mut tail) = (power.hi, 0.0);
        while power > 1e-34 && n + 2 < RECIPROCAL_COUNT {
            power *= square.hi;
            n += 2;
            tail += power * RECIPROCALS[n].hi;
        }
        return lead + lead * (sum + tail);
    }
    let guess = libm::log1p(y.hi);
    let reached = exp_m1(Dd::new(guess));
    let off = (y - reached) / (reached + 1.0);
    (off - off * off.scale(0.5) + guess) / y
}

/// `ln r`, to 1e-29 of itself away from `r = 1`, for positive `r`.
pub(crate) fn ln(r: Dd) -> Dd {
    let guess = libm::log(r.hi);
    // What is left after the guess is below 1e-15, so its logarithm needs two terms.
    let off = r * exp(Dd::new(-guess)) - 1.0;
    off - off * off.scale(0.5) + guess
}

#[cfg(test)]
mod tests {
    use super::*;

    fn close(got: Dd, wanted: Dd, bound: f64, what: &str) {
        let error = ((got - wanted) / wanted).abs().hi;
        assert!(error < bound, "{what}: got {got:?}, wanted {wanted:?}, off by {error:e}");
    }

    #[test]
    fn reciprocals_are_double_double() {
        for (n, reciprocal) in RECIPROCALS.iter().enumerate().skip(1) {
            let back = *reciprocal * (n as f64) - 1.0;
            assert!(back.abs().hi < 1e-32, "{n}: {back:?}");
        }
    }

    #[test]
    fn logarithm_undoes_exponential() {
        for exponent in -90..30 {
            for factor in [1.0, -1.0, 0.7, -0.3] {
                let x = Dd::new(factor * libm::exp2(f64::from(exponent)) / 10.0);
                if x.hi.abs() > 650.0 || x.hi < -0.6 {
                    continue;
                }
                let y = exp_m1(x);
                close(ln_1p_over(y) * y, x, 1e-28, "ln(1 + (e^x - 1))");
            }
        }
        for x in [-650.0, -20.0, -3.0, 0.9, 5.0, 44.0, 600.0] {
            close(ln(exp(Dd::new(x))), Dd::new(x), 1e-29, "ln e^x");
        }
    }

    #[test]
    fn a_quadratic_decays_as_its_two_halves() {
        // The stretch 0 … 1 is cut at 1/2; the second half begins with its own slope.
        let (linear, quadratic) = (Dd::new(0.45), Dd::new(-0.7));
        let whole = decay(linear, quadratic);
        let first = decay(linear.scale(0.5), quadratic.scale(0.25));
        let slope = (linear + quadratic.scale(0.5)).scale(0.5);
        let second = decay(slope, quadratic.scale(0.25));
        let kept = first.change + 1.0;
        close(first.mean.scale(0.5) + (kept * second.mean).scale(0.5), whole.mean, 1e-29, "mean");
        close(first.change + kept * second.change, whole.change, 1e-28, "change");
    }
}
