//! Physical and astronomical constants in cgs units.
//!
//! CODATA: the 2022 adjustment (Mohr, Tiesinga, Newell & Taylor 2025, Rev. Mod. Phys. 97, 025002); values
//! marked exact are fixed by the 2019 definition of the SI. IAU: resolutions 2012 B2 and 2015 B2, B3.
//! `tests/astropy` holds all of them against `astropy.constants`.

/// Newtonian constant of gravitation (cm³ g⁻¹ s⁻²), CODATA 2022 (unchanged since 2018).
pub const GRAVITATION: f64 = 6.6743e-8;
/// Speed of light in vacuum (cm s⁻¹), exact.
pub const SPEED_OF_LIGHT: f64 = 2.997_924_58e10;
/// Boltzmann constant (erg K⁻¹), exact.
pub const BOLTZMANN: f64 = 1.380_649e-16;
/// Proton mass (g), CODATA 2022.
pub const PROTON_MASS: f64 = 1.672_621_925_95e-24;
/// Thomson cross-section (cm²), CODATA 2022.
pub const THOMSON_CROSS_SECTION: f64 = 6.652_458_705_1e-25;
/// Electronvolt (erg), exact.
pub const ELECTRONVOLT: f64 = 1.602_176_634e-12;

/// Nominal solar mass parameter GM☉ (cm³ s⁻²), IAU 2015 resolution B3.
pub const SOLAR_MASS_PARAMETER: f64 = 1.327_124_4e26;
/// Solar mass (g): the nominal solar mass parameter over G, as IAU 2015 resolution B3 recommends.
pub const SOLAR_MASS: f64 = SOLAR_MASS_PARAMETER / GRAVITATION;
/// Nominal solar luminosity (erg s⁻¹), IAU 2015 resolution B3.
pub const SOLAR_LUMINOSITY: f64 = 3.828e33;

/// Astronomical unit (cm), IAU 2012 resolution B2, exact.
pub const ASTRONOMICAL_UNIT: f64 = 1.495_978_707e13;
/// Parsec (cm): 648000/π astronomical units, IAU 2015 resolution B2.
pub const PARSEC: f64 = 648_000.0 / std::f64::consts::PI * ASTRONOMICAL_UNIT;
/// Kiloparsec (cm).
pub const KILOPARSEC: f64 = 1e3 * PARSEC;
/// Megaparsec (cm).
pub const MEGAPARSEC: f64 = 1e6 * PARSEC;

/// Day (s), exact.
pub const DAY: f64 = 86_400.0;
/// Julian year of 365.25 days (s), exact.
pub const YEAR: f64 = 365.25 * DAY;
/// Megayear (s).
pub const MEGAYEAR: f64 = 1e6 * YEAR;
/// Gigayear (s).
pub const GIGAYEAR: f64 = 1e9 * YEAR;

/// One km/s/Mpc, in s⁻¹.
pub const KM_PER_S_PER_MPC: f64 = 1e5 / MEGAPARSEC;
