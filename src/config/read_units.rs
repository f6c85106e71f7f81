//! Reads `[units]`: which unit, which powers of a and h, and no way of saying the same thing twice.

use super::convert::Setting;
use super::section::Section;
use super::units::{Positions, Quantity, Scale, Units};
use crate::units::{Dimension, Unit, UnitError, raise};

/// Quantity = value · unit · a^a · h^h.
#[derive(Clone, Copy)]
struct Form {
    a: f64,
    h: f64,
}

impl Form {
    const AS_IT_IS: Form = Form { a: 0.0, h: 0.0 };

    const fn with_a(a: f64) -> Form {
        Form { a, h: 0.0 }
    }
}

/// Powers of a and h beyond this are taken for a mistake.
const LARGEST_POWER: f64 = 10.0;

const KINDS: [(&str, Positions); 2] = [
    ("comoving", Positions::Comoving),
    ("physical", Positions::Physical),
];

/// Reads the section; `None` where it recorded a problem.
pub(super) fn read(section: &mut Section) -> Option<Units> {
    let setting = section.setting();
    let mut reader = Reader {
        section,
        setting,
        scales: [Scale::default(); Quantity::ALL.len()],
    };
    let (length, positions) = reader.length();
    let mass = reader.quantity("mass", Quantity::Mass, Form::AS_IT_IS, None);
    let velocity = reader.velocity();
    let time = reader.quantity(
        "time",
        Quantity::Time,
        Form::AS_IT_IS,
        both(length, velocity, Unit::over),
    );
    reader.internal_energy(velocity);
    reader.density(
        both(mass, length, |mass, length| mass.over(&length.power(3.0)?)),
        positions,
    );
    let rate = both(mass, time, Unit::over);
    reader.quantity(
        "star_formation_rate",
        Quantity::StarFormationRate,
        Form::AS_IT_IS,
        rate.clone(),
    );
    reader.quantity(
        "accretion_rate",
        Quantity::AccretionRate,
        Form::AS_IT_IS,
        rate,
    );
    let energy = both(mass, velocity, |mass, velocity| {
        mass.times(&velocity.power(2.0)?)
    });
    reader.quantity("energy", Quantity::Energy, Form::AS_IT_IS, energy);
    reader.quantity(
        "momentum",
        Quantity::Momentum,
        Form::AS_IT_IS,
        both(mass, velocity, Unit::times),
    );
    let kelvin = Unit::from_cgs(1.0, Dimension::TEMPERATURE);
    reader.quantity(
        "temperature",
        Quantity::Temperature,
        Form::AS_IT_IS,
        Some(kelvin),
    );
    let scales = reader.scales;
    let is_complete = scales.iter().all(|scale| scale.cgs > 0.0);
    (is_complete && !section.has_problems()).then_some(Units { positions, scales })
}

/// A unit that follows from two others, where both are known.
fn both(
    left: Option<Unit>,
    right: Option<Unit>,
    combine: impl Fn(&Unit, &Unit) -> Result<Unit, UnitError>,
) -> Option<Result<Unit, UnitError>> {
    Some(combine(&left?, &right?))
}

struct Reader<'s> {
    section: &'s mut Section,
    setting: Setting,
    scales: [Scale; Quantity::ALL.len()],
}

impl Reader<'_> {
    /// The unit of length without the scale factor, and whether positions are comoving: stated by an `a` in
    /// the unit, or by `positions`, or else comoving wherever space expands.
    fn length(&mut self) -> (Option<Unit>, Positions) {
        let stated = self.section.choice("positions", &KINDS).optional();
        let by_default = if self.setting.is_expanding {
            Positions::Comoving
        } else {
            Positions::Physical
        };
        let positions = stated.unwrap_or(by_default);
        if stated == Some(Positions::Comoving) && !self.setting.is_expanding {
            self.section.refuse(
                "positions",
                "found \"comoving\", but [cosmology] says expanding = false; leave it out",
            );
        }
        let unit = self.section.unit("length", Dimension::LENGTH).required();
        let Some(unit) = unit.filter(|unit| self.has_scale_factor_for(unit, "length")) else {
            return (None, positions);
        };
        let positions = match (unit.a_power, stated) {
            (0.0, _) => positions,
            (1.0, Some(Positions::Physical)) => {
                self.section.refuse(
                    "length",
                    "the a in this unit says comoving, and positions = \"physical\" denies it; leave one of them out",
                );
                positions
            }
            (1.0, _) => Positions::Comoving,
            (power, _) => {
                self.section.refuse(
                    "length",
                    format!("found the scale factor to the power {power}; expected a length without a, or a times one"),
                );
                positions
            }
        };
        let unit = unit.without_scale_factor();
        let power = if positions == Positions::Comoving {
            1.0
        } else {
            0.0
        };
        let to_comoving = if self.setting.is_expanding {
            power - 1.0
        } else {
            0.0
        };
        let is_usable = self.set("length", Quantity::Length, unit, Form::with_a(power), true)
            && self.set(
                "length",
                Quantity::ComovingLength,
                unit,
                Form::with_a(to_comoving),
                true,
            );
        (is_usable.then_some(unit), positions)
    }

    /// The unit of velocity; the form its numbers take must be stated wherever space expands.
    fn velocity(&mut self) -> Option<Unit> {
        const NAMED: [(&str, Form); 4] = [
            ("peculiar", Form::AS_IT_IS),
            // Stored is v/√a, so v is the number times √a; likewise below.
            ("peculiar/sqrt(a)", Form::with_a(0.5)),
            ("dx/dt", Form::with_a(1.0)),
            ("a^2 dx/dt", Form::with_a(-1.0)),
        ];
        let form = self.form("velocity_form", &NAMED);
        if form.is_none() && self.setting.is_expanding && !self.section.has("velocity_form") {
            self.section.missing(
                "velocity_form",
                "\"peculiar\", \"peculiar/sqrt(a)\", \"dx/dt\" or \"a^2 dx/dt\" with x comoving, \
                 or powers { a = .., h = .. } that make the number peculiar",
            );
        }
        if self.refuses_scale_factor("velocity", Dimension::VELOCITY, "velocity_form") {
            return None;
        }
        self.quantity(
            "velocity",
            Quantity::Velocity,
            form.unwrap_or(Form::AS_IT_IS),
            None,
        )
    }

    fn internal_energy(&mut self, velocity: Option<Unit>) {
        let form = self
            .form("internal_energy_form", &[("physical", Form::AS_IT_IS)])
            .unwrap_or(Form::AS_IT_IS);
        if self.refuses_scale_factor(
            "internal_energy",
            Dimension::SPECIFIC_ENERGY,
            "internal_energy_form",
        ) {
            return;
        }
        let squared = velocity.map(|velocity| velocity.power(2.0));
        self.quantity("internal_energy", Quantity::SpecificEnergy, form, squared);
    }

    /// A density that follows from mass and length is of the same kind as the positions; one that is stated
    /// must say which kind it is.
    fn density(&mut self, by_default: Option<Result<Unit, UnitError>>, positions: Positions) {
        let key = "density_form";
        let stated = self.section.choice(key, &KINDS).optional();
        if stated == Some(Positions::Comoving) && !self.setting.is_expanding {
            self.section.refuse(
                key,
                "found \"comoving\", but [cosmology] says expanding = false; leave it out",
            );
        }
        let has_unit = self.section.has("density");
        let carries_a = self
            .section
            .unit_if_right("density")
            .is_some_and(|unit| unit.a_power != 0.0);
        if carries_a && self.section.has(key) {
            self.section.refuse(
                key,
                "the unit of density has the scale factor in it already; leave this key out",
            );
        }
        if has_unit && !carries_a && self.setting.is_expanding && !self.section.has(key) {
            self.section.refuse(
                "density",
                "does not say whether it is comoving; add density_form = \"comoving\" or \"physical\", or write a \
                 into the unit",
            );
        }
        let is_comoving = self.setting.is_expanding
            && !carries_a
            && stated.unwrap_or(positions) == Positions::Comoving;
        let form = if is_comoving {
            Form::with_a(-3.0)
        } else {
            Form::AS_IT_IS
        };
        self.quantity("density", Quantity::Density, form, by_default);
    }

    /// A form by its name, or as powers.
    fn form(&mut self, key: &str, named: &[(&str, Form)]) -> Option<Form> {
        if !self.section.is_table(key) {
            return self.section.choice(key, named).optional();
        }
        let mut powers = self.section.section(key).optional()?;
        let a = powers
            .number_in("a", -LARGEST_POWER..=LARGEST_POWER)
            .or(0.0);
        let h = powers
            .number_in("h", -LARGEST_POWER..=LARGEST_POWER)
            .or(0.0);
        match powers.finish() {
            Ok(()) => Some(Form { a, h }),
            Err(problems) => {
                self.section.adopt(problems);
                None
            }
        }
    }

    /// Where a key of its own holds the power of a, the unit must not hold it too.
    fn refuses_scale_factor(&mut self, key: &str, dimension: Dimension, form_key: &str) -> bool {
        let unit = self.section.unit_if_right(key);
        let has_it = unit.is_some_and(|unit| unit.a_power != 0.0 && unit.dimension == dimension);
        if has_it {
            // Asked for, so that it is not taken for an unknown key.
            let _ = self.section.unit(key, dimension).optional();
            let message = format!("found the scale factor in the unit; expected it in {form_key}");
            self.section.refuse(key, message);
        }
        has_it
    }

    /// Reads a unit and notes what one is in cgs. Without `by_default` the key is required.
    fn quantity(
        &mut self,
        key: &str,
        quantity: Quantity,
        form: Form,
        by_default: Option<Result<Unit, UnitError>>,
    ) -> Option<Unit> {
        let is_stated = self.section.has(key);
        let always_stated = matches!(quantity, Quantity::Mass | Quantity::Velocity);
        let answer = self.section.unit(key, quantity.dimension());
        let unit = if always_stated {
            answer.required()
        } else {
            answer.optional()
        };
        let unit = match (unit, by_default) {
            (Some(unit), _) => unit,
            (None, Some(Ok(unit))) if !is_stated => unit,
            (None, Some(Err(error))) if !is_stated => {
                self.section.refuse(
                    key,
                    format!("follows from the other units and {error}; state it"),
                );
                return None;
            }
            _ => return None,
        };
        if !self.has_scale_factor_for(&unit, key) {
            return None;
        }
        let is_timeless = matches!(
            quantity,
            Quantity::Mass | Quantity::Time | Quantity::Temperature
        );
        if is_timeless && unit.a_power != 0.0 {
            self.section.refuse(
                key,
                format!(
                    "found the scale factor; expected a unit of {} without it",
                    quantity.name()
                ),
            );
            return None;
        }
        self.set(key, quantity, unit, form, is_stated)
            .then_some(unit)
    }

    fn has_scale_factor_for(&mut self, unit: &Unit, key: &str) -> bool {
        let is_fine = unit.a_power == 0.0 || self.setting.is_expanding;
        if !is_fine {
            self.section.refuse(
                key,
                "found the scale factor a, but [cosmology] says expanding = false",
            );
        }
        is_fine
    }

    /// Notes what one of the quantity is in cgs; `false` where a problem was recorded instead.
    fn set(
        &mut self,
        key: &str,
        quantity: Quantity,
        unit: Unit,
        form: Form,
        is_stated: bool,
    ) -> bool {
        match self.scale(unit, form) {
            Ok((cgs, a_power)) => {
                self.scales[quantity as usize] = Scale {
                    cgs,
                    a_power,
                    is_stated,
                };
                true
            }
            Err(message) => {
                self.section.refuse(key, message);
                false
            }
        }
    }

    /// Folds h in: the value at a = 1 in cgs, and the power of a.
    fn scale(&self, unit: Unit, form: Form) -> Result<(f64, f64), String> {
        let a_power = unit.a_power + form.a;
        let h_power = unit.h_power + form.h;
        if a_power.abs() > LARGEST_POWER || h_power.abs() > LARGEST_POWER {
            return Err(format!(
                "comes to a^{a_power} h^{h_power}; expected powers from -10 to 10"
            ));
        }
        if a_power != 0.0 && !self.setting.is_expanding {
            return Err(
                "its form has a power of a, but [cosmology] says expanding = false".to_string(),
            );
        }
        if h_power != 0.0 && self.setting.h.is_none() {
            return Err(
                "found h, but [cosmology] states no hubble, which would say what h is".to_string(),
            );
        }
        let cgs = unit.factor_cgs * raise(self.setting.h.unwrap_or(1.0), h_power);
        if cgs.is_normal() {
            Ok((cgs, a_power))
        } else {
            Err(format!(
                "comes to {cgs:e} in cgs; expected a number that double precision can hold"
            ))
        }
    }
}
