//! Constants, each with its provenance.

use super::dd::Dd;

/// Speed of light in vacuum, m/s. Exact: the SI definition of the metre
/// (BIPM, SI Brochure, 9th edition, 2019, section 2.2).
pub const SPEED_OF_LIGHT_M_S: f64 = 299_792_458.0;

/// Square of the speed of light, m²/s². Exact: the integer 89 875 517 873 681 764
/// has 55 significant bits, so it needs both halves of a double-double.
pub const C2_M2_S2: Dd = Dd { hi: 89_875_517_873_681_760.0, lo: 4.0 };

/// `1/c²`, s²/m², to 2⁻¹⁰⁶: a product with it costs a third of a division by
/// [`C2_M2_S2`].
pub const INVERSE_C2_S2_M2: Dd = Dd { hi: 1.1126500560536185e-17, lo: -6.629592170627655e-34 };

/// `1/c`, s/m, to 2⁻¹⁰⁶.
pub const INVERSE_C_S_M: Dd = Dd { hi: 3.3356409519815204e-9, lo: 6.917657862297521e-26 };

/// Standard acceleration of free fall `g0`, m/s². Exact by convention
/// (3rd CGPM, 1901, resolution 2).
pub const STANDARD_GRAVITY_M_S2: f64 = 9.80665;

/// Astronomical unit, m. Exact (IAU 2012 resolution B2).
pub const ASTRONOMICAL_UNIT_M: f64 = 149_597_870_700.0;

/// Julian year, s. Exact: 365.25 days of 86 400 s (IAU style manual, 1989).
pub const JULIAN_YEAR_S: f64 = 31_557_600.0;

/// Light-year, m. Exact: the speed of light times the Julian year,
/// 9 460 730 472 580 800 (IAU style manual, 1989).
pub const LIGHT_YEAR_M: f64 = 9_460_730_472_580_800.0;

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::dd::Wide;

    #[test]
    fn inverses_undo_what_they_invert() {
        for (value, inverse) in
            [(C2_M2_S2, INVERSE_C2_S2_M2), (Dd::new(SPEED_OF_LIGHT_M_S), INVERSE_C_S_M)]
        {
            let rest = (Wide::from(value).times(inverse) - Wide::from(Dd::ONE)).to_dd();
            assert!(rest.abs().hi < 1.3e-32, "{rest:?}");
        }
    }
}
