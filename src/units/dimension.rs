//! What kind of quantity a unit measures.

use std::fmt;

/// Exponents of length, mass, time and temperature, counted in sixths so that square and cube roots (an
/// entropy has the power 5/3 of a density in it) stay exact.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash)]
pub struct Dimension {
    sixths: [i16; 4],
}

/// Bases by their cgs names, with their index in [`Dimension::sixths`], in the order in which they are written.
const BASES: [(usize, &str); 4] = [(1, "g"), (0, "cm"), (2, "s"), (3, "K")];

/// What messages call the common ones.
const COMMON: [(Dimension, &str); 16] = [
    (Dimension::NUMBER, "a pure number"),
    (Dimension::LENGTH, "a length"),
    (Dimension::MASS, "a mass"),
    (Dimension::TIME, "a time"),
    (Dimension::TEMPERATURE, "a temperature"),
    (Dimension::VELOCITY, "a velocity"),
    (
        Dimension::SPECIFIC_ENERGY,
        "an energy per mass (a velocity squared)",
    ),
    (Dimension::DENSITY, "a density"),
    (Dimension::MASS_PER_TIME, "a mass per time"),
    (Dimension::ENERGY, "an energy"),
    (Dimension::MOMENTUM, "a momentum"),
    (Dimension::VOLUME, "a volume"),
    (Dimension::POWER, "an energy per time"),
    (Dimension::new(2, 0, 0, 0), "an area"),
    (Dimension::new(-1, 1, -2, 0), "a pressure"),
    (Dimension::new(0, 0, -1, 0), "an inverse time"),
];

impl Dimension {
    /// No dimension at all.
    pub const NUMBER: Dimension = Dimension::new(0, 0, 0, 0);
    /// cm
    pub const LENGTH: Dimension = Dimension::new(1, 0, 0, 0);
    /// g
    pub const MASS: Dimension = Dimension::new(0, 1, 0, 0);
    /// s
    pub const TIME: Dimension = Dimension::new(0, 0, 1, 0);
    /// K
    pub const TEMPERATURE: Dimension = Dimension::new(0, 0, 0, 1);
    /// cm s⁻¹
    pub const VELOCITY: Dimension = Dimension::new(1, 0, -1, 0);
    /// cm² s⁻² = erg g⁻¹
    pub const SPECIFIC_ENERGY: Dimension = Dimension::new(2, 0, -2, 0);
    /// g cm⁻³
    pub const DENSITY: Dimension = Dimension::new(-3, 1, 0, 0);
    /// g s⁻¹
    pub const MASS_PER_TIME: Dimension = Dimension::new(0, 1, -1, 0);
    /// g cm² s⁻² = erg
    pub const ENERGY: Dimension = Dimension::new(2, 1, -2, 0);
    /// g cm s⁻¹
    pub const MOMENTUM: Dimension = Dimension::new(1, 1, -1, 0);
    /// cm³
    pub const VOLUME: Dimension = Dimension::new(3, 0, 0, 0);
    /// erg s⁻¹
    pub const POWER: Dimension = Dimension::new(2, 1, -3, 0);

    /// From whole exponents of length, mass, time and temperature.
    pub const fn new(length: i8, mass: i8, time: i8, temperature: i8) -> Dimension {
        Dimension {
            sixths: [
                6 * length as i16,
                6 * mass as i16,
                6 * time as i16,
                6 * temperature as i16,
            ],
        }
    }

    /// The dimension of a product; `None` when an exponent leaves the range that can be held.
    pub fn times(self, other: Dimension) -> Option<Dimension> {
        self.combine(other, i16::checked_add)
    }

    /// The dimension of a quotient; `None` as for [`Dimension::times`].
    pub fn over(self, other: Dimension) -> Option<Dimension> {
        self.combine(other, i16::checked_sub)
    }

    /// The dimension raised to `power`; `None` when an exponent is then not a multiple of 1/6, or too large.
    pub fn power(self, power: f64) -> Option<Dimension> {
        let mut sixths = [0_i16; 4];
        for (to, from) in sixths.iter_mut().zip(self.sixths) {
            let exact = f64::from(from) * power;
            let whole = exact.round();
            // Written decimals of thirds ("0.3333333333") are not refused for their last digit.
            if !((exact - whole).abs() <= 1e-9 && whole.abs() <= f64::from(i16::MAX)) {
                return None;
            }
            *to = whole as i16;
        }
        Some(Dimension { sixths })
    }

    /// In cgs base units, e.g. `cm s^-1`; `1` for a pure number.
    pub fn in_base_units(&self) -> String {
        let mut words = Vec::new();
        for (index, base) in BASES {
            let sixths = self.sixths[index];
            match sixths {
                0 => {}
                6 => words.push(base.to_string()),
                _ if sixths % 6 == 0 => words.push(format!("{base}^{}", sixths / 6)),
                _ if sixths % 3 == 0 => words.push(format!("{base}^({}/2)", sixths / 3)),
                _ if sixths % 2 == 0 => words.push(format!("{base}^({}/3)", sixths / 2)),
                _ => words.push(format!("{base}^({sixths}/6)")),
            }
        }
        if words.is_empty() {
            "1".to_string()
        } else {
            words.join(" ")
        }
    }

    fn combine(
        self,
        other: Dimension,
        operation: fn(i16, i16) -> Option<i16>,
    ) -> Option<Dimension> {
        let mut sixths = [0_i16; 4];
        for (index, to) in sixths.iter_mut().enumerate() {
            *to = operation(self.sixths[index], other.sixths[index])?;
        }
        Some(Dimension { sixths })
    }
}

/// `a velocity (cm s^-1)`, or only the base units where the quantity has no common name.
impl fmt::Display for Dimension {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        match COMMON.iter().find(|(dimension, _)| dimension == self) {
            Some((Dimension::NUMBER, name)) => formatter.write_str(name),
            Some((_, name)) => write!(formatter, "{name} ({})", self.in_base_units()),
            None => write!(formatter, "something in {}", self.in_base_units()),
        }
    }
}
