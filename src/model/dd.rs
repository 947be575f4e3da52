//! Double-double numbers: an unevaluated sum of two doubles, about 106 bits.
//!
//! Built on the error-free transformations of Dekker (Numer. Math. 18 (1971) 224)
//! and Knuth (TAOCP vol. 2, section 4.2.2), with the product error taken from a
//! fused multiply-add. Relative errors are those proved by Joldes, Muller and
//! Popescu (ACM Trans. Math. Softw. 44 (2017) 15): below 3·2⁻¹⁰⁶ for a sum,
//! 5·2⁻¹⁰⁶ for a product and 10·2⁻¹⁰⁶ for a quotient.
//!
//! `f64::mul_add` is correctly rounded whether the machine has the instruction or
//! not, so the bits agree everywhere.

use std::cmp::Ordering;
use std::ops::{Add, Div, Mul, Neg, Sub};

/// A number carried as `hi + lo`, with `hi` the double nearest to the sum.
#[derive(Clone, Copy, Debug, PartialEq, Default)]
pub struct Dd {
    /// The double nearest to the value.
    pub hi: f64,
    /// What is left, at most half a unit in the last place of `hi`.
    pub lo: f64,
}

/// The sum of two doubles and its rounding error, exactly (Knuth's TwoSum).
#[inline]
#[must_use]
pub fn two_sum(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    let b_part = sum - a;
    let a_part = sum - b_part;
    (sum, (a - a_part) + (b - b_part))
}

/// The same when `|a| ≥ |b|` (Dekker's FastTwoSum).
#[inline]
#[must_use]
pub fn quick_two_sum(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    (sum, b - (sum - a))
}

/// The product of two doubles and its rounding error, exactly.
#[inline]
#[must_use]
pub fn two_product(a: f64, b: f64) -> (f64, f64) {
    let product = a * b;
    (product, a.mul_add(b, -product))
}

impl Dd {
    /// Zero.
    pub const ZERO: Dd = Dd { hi: 0.0, lo: 0.0 };
    /// One.
    pub const ONE: Dd = Dd { hi: 1.0, lo: 0.0 };

    /// A double, exactly.
    #[inline]
    #[must_use]
    pub const fn new(value: f64) -> Dd {
        Dd { hi: value, lo: 0.0 }
    }

    /// The exact sum of two doubles.
    #[inline]
    #[must_use]
    pub fn sum(a: f64, b: f64) -> Dd {
        let (hi, lo) = two_sum(a, b);
        Dd { hi, lo }
    }

    /// The exact difference of two doubles.
    #[inline]
    #[must_use]
    pub fn difference(a: f64, b: f64) -> Dd {
        Dd::sum(a, -b)
    }

    /// The exact product of two doubles (short of underflow).
    #[inline]
    #[must_use]
    pub fn product(a: f64, b: f64) -> Dd {
        let (hi, lo) = two_product(a, b);
        Dd { hi, lo }
    }

    /// An integer of up to 106 bits, exactly; a longer one rounded.
    #[must_use]
    pub fn from_i128(value: i128) -> Dd {
        // The conversion rounds to nearest, so the remainder has at most 75 bits and
        // its own conversion is exact for every count of attoseconds in the domain.
        let hi = value as f64;
        let lo = (value - hi as i128) as f64;
        let (hi, lo) = quick_two_sum(hi, lo);
        Dd { hi, lo }
    }

    /// The product with a double-double, to 2⁻²⁰⁰, and exactly where four doubles hold it.
    #[must_use]
    pub fn wide_product(self, other: Dd) -> Wide {
        let (ll, ll_error) = two_product(self.lo, other.lo);
        let (lh, lh_error) = two_product(self.lo, other.hi);
        let (hl, hl_error) = two_product(self.hi, other.lo);
        let (hh, hh_error) = two_product(self.hi, other.hi);
        Wide::sum(&mut [ll_error, ll, lh_error, hl_error, lh, hl, hh_error, hh])
    }

    /// The nearest double.
    #[inline]
    #[must_use]
    pub fn to_f64(self) -> f64 {
        self.hi + self.lo
    }

    /// The absolute value.
    #[inline]
    #[must_use]
    pub fn abs(self) -> Dd {
        if self.is_negative() { -self } else { self }
    }

    /// Whether the value is below zero.
    #[inline]
    #[must_use]
    pub fn is_negative(self) -> bool {
        self.hi < 0.0 || (self.hi == 0.0 && self.lo < 0.0)
    }

    /// Whether the value is zero.
    #[inline]
    #[must_use]
    pub fn is_zero(self) -> bool {
        self.hi == 0.0 && self.lo == 0.0
    }

    /// Whether both halves are finite.
    #[inline]
    #[must_use]
    pub fn is_finite(self) -> bool {
        self.hi.is_finite() && self.lo.is_finite()
    }

    /// The product with a power of two, exactly (short of under- and overflow).
    #[inline]
    #[must_use]
    pub fn scale(self, power_of_two: f64) -> Dd {
        Dd { hi: self.hi * power_of_two, lo: self.lo * power_of_two }
    }
}

impl From<f64> for Dd {
    fn from(value: f64) -> Dd {
        Dd::new(value)
    }
}

impl Neg for Dd {
    type Output = Dd;
    #[inline]
    fn neg(self) -> Dd {
        Dd { hi: -self.hi, lo: -self.lo }
    }
}

impl Add for Dd {
    type Output = Dd;
    #[inline]
    fn add(self, other: Dd) -> Dd {
        let (sum, error) = two_sum(self.hi, other.hi);
        let (tail, tail_error) = two_sum(self.lo, other.lo);
        let (sum, error) = quick_two_sum(sum, error + tail);
        let (hi, lo) = quick_two_sum(sum, error + tail_error);
        Dd { hi, lo }
    }
}

impl Add<f64> for Dd {
    type Output = Dd;
    #[inline]
    fn add(self, other: f64) -> Dd {
        let (sum, error) = two_sum(self.hi, other);
        let (hi, lo) = quick_two_sum(sum, error + self.lo);
        Dd { hi, lo }
    }
}

impl Sub for Dd {
    type Output = Dd;
    #[inline]
    fn sub(self, other: Dd) -> Dd {
        self + (-other)
    }
}

impl Sub<f64> for Dd {
    type Output = Dd;
    #[inline]
    fn sub(self, other: f64) -> Dd {
        self + (-other)
    }
}

impl Mul for Dd {
    type Output = Dd;
    #[inline]
    fn mul(self, other: Dd) -> Dd {
        let (product, error) = two_product(self.hi, other.hi);
        let cross = self.hi.mul_add(other.lo, self.lo * other.hi);
        let (hi, lo) = quick_two_sum(product, error + cross);
        Dd { hi, lo }
    }
}

impl Mul<f64> for Dd {
    type Output = Dd;
    #[inline]
    fn mul(self, other: f64) -> Dd {
        let (product, error) = two_product(self.hi, other);
        let (hi, lo) = quick_two_sum(product, self.lo.mul_add(other, error));
        Dd { hi, lo }
    }
}

impl Div for Dd {
    type Output = Dd;
    #[inline]
    fn div(self, other: Dd) -> Dd {
        let first = self.hi / other.hi;
        let rest = self - other * first;
        let second = rest.hi / other.hi;
        let rest = rest - other * second;
        let third = rest.hi / other.hi;
        let (hi, lo) = quick_two_sum(first, second);
        Dd { hi, lo } + third
    }
}

impl Div<f64> for Dd {
    type Output = Dd;
    #[inline]
    fn div(self, other: f64) -> Dd {
        self / Dd::new(other)
    }
}

impl PartialOrd for Dd {
    fn partial_cmp(&self, other: &Dd) -> Option<Ordering> {
        match self.hi.partial_cmp(&other.hi) {
            Some(Ordering::Equal) => self.lo.partial_cmp(&other.lo),
            order => order,
        }
    }
}

/// A number carried as the sum of four doubles, largest first: about 212 bits.
///
/// Used where results nearly cancel and the small remainder is what counts: the
/// acceleration beside its zero inside a ramp, and the velocity gained by a plan that
/// brakes back to almost nothing.
#[derive(Clone, Copy, Debug, PartialEq, Default)]
pub struct Wide([f64; 4]);

impl Wide {
    /// Zero.
    pub const ZERO: Wide = Wide([0.0; 4]);

    /// The sum of any number of doubles, to 2⁻²⁰⁰ of the largest term however much they
    /// cancel; exact when the sum fits. The terms are used as scratch space.
    ///
    /// Repeated vector summation (Ogita, Rump and Oishi, SIAM J. Sci. Comput. 26 (2005)
    /// 1955): a pass replaces the terms by an equal sum that cancels less. Then the
    /// leading parts are read off (Shewchuk, Discrete Comput. Geom. 18 (1997) 305, fig. 15).
    #[must_use]
    pub fn sum(terms: &mut [f64]) -> Wide {
        for _ in 0..5 {
            for index in 1..terms.len() {
                let (sum, error) = two_sum(terms[index], terms[index - 1]);
                terms[index] = sum;
                terms[index - 1] = error;
            }
        }
        let mut parts = [0.0; 4];
        let mut count = 0;
        let mut carried = 0.0;
        for &term in terms.iter().rev() {
            let (sum, error) = two_sum(carried, term);
            carried = sum;
            if error != 0.0 {
                parts[count] = sum;
                carried = error;
                count += 1;
                if count == 3 {
                    break;
                }
            }
        }
        parts[count] = carried;
        Wide(parts)
    }

    /// The nearest double-double.
    #[must_use]
    pub fn to_dd(self) -> Dd {
        let [first, second, third, fourth] = self.0;
        let (third, _) = two_sum(third, fourth);
        let (second, third) = two_sum(second, third);
        let (first, second) = two_sum(first, second);
        let (hi, lo) = quick_two_sum(first, second + third);
        Dd { hi, lo }
    }

    /// The product with a double-double, to 2⁻²⁰⁰.
    #[must_use]
    pub fn times(self, factor: Dd) -> Wide {
        let mut terms = [0.0; 16];
        for (index, part) in self.0.into_iter().rev().enumerate() {
            let (low, low_error) = two_product(part, factor.lo);
            let (high, high_error) = two_product(part, factor.hi);
            terms[4 * index..4 * index + 4].copy_from_slice(&[low_error, low, high_error, high]);
        }
        Wide::sum(&mut terms)
    }

    /// The quotient by a double-double that is not zero, to 2⁻²⁰⁰, by long division.
    #[must_use]
    pub fn over(self, divisor: Dd) -> Wide {
        let mut rest = self;
        let mut digits = [0.0; 5];
        for digit in digits.iter_mut().rev() {
            *digit = rest.0[0] / divisor.hi;
            rest = rest - Wide::from(divisor).times(Dd::new(*digit));
        }
        Wide::sum(&mut digits)
    }

    /// The product with a power of two, exactly.
    #[must_use]
    pub fn scale(self, power_of_two: f64) -> Wide {
        Wide(self.0.map(|part| part * power_of_two))
    }
}

impl From<Dd> for Wide {
    fn from(value: Dd) -> Wide {
        Wide([value.hi, value.lo, 0.0, 0.0])
    }
}

impl Add for Wide {
    type Output = Wide;
    fn add(self, other: Wide) -> Wide {
        let ([a, b, c, d], [e, f, g, h]) = (self.0, other.0);
        Wide::sum(&mut [h, d, g, c, f, b, e, a])
    }
}

impl Neg for Wide {
    type Output = Wide;
    fn neg(self) -> Wide {
        self.scale(-1.0)
    }
}

impl Sub for Wide {
    type Output = Wide;
    fn sub(self, other: Wide) -> Wide {
        self + (-other)
    }
}

/// A running double-double sum that loses nothing a double result could show, over
/// any number of terms: the carry of each addition is kept in a third double.
#[derive(Clone, Copy, Debug, Default)]
pub struct RunningSum {
    head: Dd,
    carry: f64,
}

impl RunningSum {
    /// Adds one term.
    pub fn add(&mut self, term: Dd) {
        let (hi, first) = two_sum(self.head.hi, term.hi);
        let (lo, second) = two_sum(self.head.lo, term.lo);
        let (lo, third) = two_sum(lo, first);
        let (hi, lo) = quick_two_sum(hi, lo);
        self.head = Dd { hi, lo };
        self.carry += second + third;
    }

    /// The sum so far.
    #[must_use]
    pub fn value(&self) -> Dd {
        self.head + self.carry
    }
}

#[cfg(test)]
#[expect(clippy::disallowed_methods, reason = "powers of two in a test are exact")]
mod tests {
    use super::*;

    #[test]
    fn products_and_quotients_undo_each_other() {
        let mut worst = 0.0_f64;
        for index in 1..2000 {
            let a = Dd::new(f64::from(index)) / 7.0;
            let b = Dd::new(1.0) / f64::from(index * 3 + 1);
            let back = (a * b) / b;
            worst = worst.max(((back - a) / a).abs().hi);
        }
        assert!(worst < 16.0 * 2.0_f64.powi(-106), "worst {worst:e}");
    }

    #[test]
    fn wide_sums_survive_cancellation() {
        let tiny = 2.0_f64.powi(-150);
        let mut terms = [1.0, tiny, 1e10, -1.0, -1e10];
        assert_eq!(Wide::sum(&mut terms).to_dd(), Dd::new(tiny));
    }

    #[test]
    fn wide_quotients_are_good_to_two_hundred_bits() {
        let third = Wide::from(Dd::ONE).over(Dd::new(3.0));
        let rest = third.times(Dd::new(3.0)) - Wide::from(Dd::ONE);
        assert!(rest.to_dd().abs().hi < 2.0_f64.powi(-200), "{rest:?}");
        let seventh = Wide::from(Dd::ONE).over(Dd::new(7.0));
        let all = seventh + seventh.scale(2.0) + seventh.scale(4.0) - Wide::from(Dd::ONE);
        assert!(all.to_dd().abs().hi < 2.0_f64.powi(-200), "{all:?}");
    }

    #[test]
    fn integers_are_exact() {
        let count: i128 = 99_999_999_999_999_999_999_999_999_999;
        let value = Dd::from_i128(count);
        assert_eq!(value.hi as i128 + value.lo as i128, count);
    }
}
