//! Constants, each with its provenance.

use super::dd::Dd;

/// Speed of light in vacuum, m/s. Exact: the SI definition of the metre
/// (BIPM, SI Brochure, 9th edition, 2019, section 2.2).
pub const SPEED_OF_LIGHT_M_S: f64 = 299_792_458.0;

/// Square of the speed of light, m²/s². Exact: the integer 89 875 517 873 681 764
/// has 55 significant bits, so it needs both halves of a double-double.
pub const C2_M2_S2: Dd = Dd { hi: 89_875_517_873_681_760.0, lo: 4.0 };

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
