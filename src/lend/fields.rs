//! Which species and fields exist. To add a field: one variant and one line in the table.

/// A kind of particle or cell.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Species {
    /// Gas particles or cells that interact hydrodynamically.
    Gas,
    /// Star particles.
    Star,
    /// Black-hole particles.
    BlackHole,
    /// Collisionless dark matter.
    DarkMatter,
    /// Wind particles that a code keeps apart from its gas.
    Wind,
}

/// Every species with the name hosts use.
pub const SPECIES: [(Species, &str); 5] = [
    (Species::Gas, "gas"),
    (Species::Star, "star"),
    (Species::BlackHole, "black_hole"),
    (Species::DarkMatter, "dark_matter"),
    (Species::Wind, "wind"),
];

impl Species {
    /// Number of species.
    pub const COUNT: usize = SPECIES.len();

    /// The name hosts use.
    pub fn name(self) -> &'static str {
        SPECIES[self as usize].1
    }

    /// The species of that name.
    pub fn find(name: &str) -> Option<Species> {
        SPECIES
            .iter()
            .find(|(_, known)| *known == name)
            .map(|(species, _)| *species)
    }
}

/// How many numbers an element of the field has.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Shape {
    /// One number.
    Scalar,
    /// Three components.
    Vector,
    /// One number for each element named in the config.
    Elements,
    /// One 64-bit identity; integers only.
    Identity,
}

/// What a field's numbers measure; the config says in which unit the host keeps it.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Quantity {
    /// A pure number.
    Number,
    /// A length; comoving where the config says so.
    Position,
    /// A velocity in the form the config states.
    Velocity,
    /// A mass.
    Mass,
    /// A mass per time, of star formation.
    StarFormationRate,
    /// A mass per time, of accretion.
    AccretionRate,
    /// Energy per mass.
    InternalEnergy,
    /// Mass per volume.
    Density,
    /// A temperature.
    Temperature,
    /// A moment, in the convention the config states for births.
    BirthTime,
}

impl Quantity {
    /// The key of the config that states the host's unit, in words for the header.
    pub fn unit_in_config(self) -> &'static str {
        match self {
            Quantity::Number => "none",
            Quantity::Position => "length",
            Quantity::Velocity => "velocity, in the form velocity_form says",
            Quantity::Mass => "mass",
            Quantity::StarFormationRate => "star_formation_rate",
            Quantity::AccretionRate => "accretion_rate",
            Quantity::InternalEnergy => "internal_energy (per mass)",
            Quantity::Density => "density",
            Quantity::Temperature => "temperature",
            Quantity::BirthTime => "as [time] birth says",
        }
    }
}

/// One array of a species.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Field {
    /// Where the element is.
    Position,
    /// How it moves.
    Velocity,
    /// Its mass (of a black hole: the dynamical, particle mass).
    Mass,
    /// Its identity.
    Id,
    /// Instantaneous star formation rate.
    StarFormationRate,
    /// Internal energy per mass.
    InternalEnergy,
    /// Temperature.
    Temperature,
    /// Mass density.
    Density,
    /// Smoothing length or cell size.
    SmoothingLength,
    /// Mass fraction of all metals.
    Metallicity,
    /// Mass fraction of each element named in the config.
    ElementFraction,
    /// Mass of a star particle when it was born.
    BirthMass,
    /// Moment of its birth.
    BirthTime,
    /// Mass of the black hole itself, where a code carries two.
    SubgridMass,
    /// Rate at which a black hole accretes.
    AccretionRate,
}

/// One line of the table of fields.
#[derive(Clone, Copy, Debug)]
pub struct FieldInfo {
    /// Which field.
    pub field: Field,
    /// The name hosts use.
    pub name: &'static str,
    /// How many numbers an element has.
    pub shape: Shape,
    /// What they measure.
    pub quantity: Quantity,
}

const fn info(field: Field, name: &'static str, shape: Shape, quantity: Quantity) -> FieldInfo {
    FieldInfo {
        field,
        name,
        shape,
        quantity,
    }
}

/// Every field, in the order of the enumeration.
pub const FIELDS: [FieldInfo; 15] = [
    info(
        Field::Position,
        "position",
        Shape::Vector,
        Quantity::Position,
    ),
    info(
        Field::Velocity,
        "velocity",
        Shape::Vector,
        Quantity::Velocity,
    ),
    info(Field::Mass, "mass", Shape::Scalar, Quantity::Mass),
    info(Field::Id, "id", Shape::Identity, Quantity::Number),
    info(
        Field::StarFormationRate,
        "star_formation_rate",
        Shape::Scalar,
        Quantity::StarFormationRate,
    ),
    info(
        Field::InternalEnergy,
        "internal_energy",
        Shape::Scalar,
        Quantity::InternalEnergy,
    ),
    info(
        Field::Temperature,
        "temperature",
        Shape::Scalar,
        Quantity::Temperature,
    ),
    info(Field::Density, "density", Shape::Scalar, Quantity::Density),
    info(
        Field::SmoothingLength,
        "smoothing_length",
        Shape::Scalar,
        Quantity::Position,
    ),
    info(
        Field::Metallicity,
        "metallicity",
        Shape::Scalar,
        Quantity::Number,
    ),
    info(
        Field::ElementFraction,
        "element_fraction",
        Shape::Elements,
        Quantity::Number,
    ),
    info(
        Field::BirthMass,
        "birth_mass",
        Shape::Scalar,
        Quantity::Mass,
    ),
    info(
        Field::BirthTime,
        "birth_time",
        Shape::Scalar,
        Quantity::BirthTime,
    ),
    info(
        Field::SubgridMass,
        "subgrid_mass",
        Shape::Scalar,
        Quantity::Mass,
    ),
    info(
        Field::AccretionRate,
        "accretion_rate",
        Shape::Scalar,
        Quantity::AccretionRate,
    ),
];

impl Field {
    /// Number of fields.
    pub const COUNT: usize = FIELDS.len();

    /// The table's line about this field.
    pub fn info(self) -> &'static FieldInfo {
        &FIELDS[self as usize]
    }

    /// The name hosts use.
    pub fn name(self) -> &'static str {
        self.info().name
    }

    /// The field of that name.
    pub fn find(name: &str) -> Option<Field> {
        FIELDS
            .iter()
            .find(|info| info.name == name)
            .map(|info| info.field)
    }

    /// Numbers an element has, given how many chemical elements the config names.
    pub fn components(self, elements: usize) -> usize {
        match self.info().shape {
            Shape::Scalar | Shape::Identity => 1,
            Shape::Vector => 3,
            Shape::Elements => elements,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tables_stand_in_the_order_of_their_enumerations() {
        for (index, info) in FIELDS.iter().enumerate() {
            assert_eq!(info.field as usize, index);
            assert_eq!(Field::find(info.name), Some(info.field));
        }
        for (index, (species, name)) in SPECIES.iter().enumerate() {
            assert_eq!(*species as usize, index);
            assert_eq!(Species::find(name), Some(*species));
        }
    }
}
