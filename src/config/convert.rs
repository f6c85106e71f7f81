//! Turns single values of the file into what was asked for, or says what was found instead.

use super::node::{Node, Value};
use super::problem::{plain, quoted};
use super::units::{Quantity, Units};
use crate::units::{Dimension, Symbols, Unit, raise};

/// What units in the config may rely on.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Setting {
    /// What names stand for.
    pub(super) symbols: Symbols,
    /// The Hubble parameter, where one is stated.
    pub(super) h: Option<f64>,
    /// Is there a scale factor?
    pub(super) is_expanding: bool,
}

/// A quantity as the config states it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Measure {
    /// A bare number: so many of the host's own unit.
    Host(f64),
    /// A number with its unit: `cgs · a^a_power` in cgs units.
    Stated {
        /// Value at a = 1.
        cgs: f64,
        /// Power of the scale factor: 0 for a fixed physical quantity, 1 for a comoving length.
        a_power: f64,
    },
}

impl Measure {
    /// The quantity at scale factor `a` in cgs: physical, or comoving for [`Quantity::ComovingLength`].
    pub fn in_cgs(&self, quantity: Quantity, units: &Units, a: f64) -> f64 {
        match *self {
            Measure::Host(value) => value * units.factor(quantity, a),
            Measure::Stated { cgs, .. } => cgs * raise(a, self.scale_factor_power(quantity, units)),
        }
    }

    /// The power of the scale factor in [`Measure::in_cgs`]; 0 where the quantity does not change with it.
    pub fn scale_factor_power(&self, quantity: Quantity, units: &Units) -> f64 {
        match *self {
            Measure::Host(_) => units.scale_factor_power(quantity),
            Measure::Stated { a_power, .. }
                if quantity == Quantity::ComovingLength && units.is_expanding() =>
            {
                a_power - 1.0
            }
            Measure::Stated { a_power, .. } => a_power,
        }
    }
}

pub(super) fn number(node: &Node) -> Option<f64> {
    match node.value {
        Value::Float(value) => Some(value),
        Value::Integer(value) => Some(value as f64),
        _ => None,
    }
}

pub(super) fn text(node: &Node) -> Option<&str> {
    match &node.value {
        Value::Text(text) => Some(text),
        _ => None,
    }
}

pub(super) fn list(node: &Node) -> Option<&[Node]> {
    match &node.value {
        Value::List(items) => Some(items),
        _ => None,
    }
}

pub(super) fn flag(node: &Node) -> Option<bool> {
    match node.value {
        Value::Flag(flag) => Some(flag),
        _ => None,
    }
}

/// Every item of a list; or what was found that is not as expected.
pub(super) fn each<T>(node: &Node, convert: impl Fn(&Node) -> Option<T>) -> Result<Vec<T>, String> {
    let items = list(node).ok_or_else(|| node.value.describe())?;
    items
        .iter()
        .map(|item| convert(item).ok_or_else(|| format!("{} in the list", item.value.describe())))
        .collect()
}

/// A unit by its name, or by its value in cgs.
pub(super) fn unit(node: &Node, dimension: Dimension, setting: &Setting) -> Result<Unit, String> {
    match number(node) {
        Some(value) => Unit::from_cgs(value, dimension).map_err(|_| plain(value)),
        None => named_unit(node, dimension, setting),
    }
}

/// A value that does not change with time, as for [`unit`] but in cgs.
pub(super) fn constant(
    node: &Node,
    dimension: Dimension,
    setting: &Setting,
) -> Result<f64, String> {
    let (cgs, a_power) = resolve(node, &unit(node, dimension, setting)?, setting)?;
    if a_power == 0.0 {
        Ok(cgs)
    } else {
        Err(format!(
            "{}, which changes with the scale factor",
            node.value.describe()
        ))
    }
}

/// A bare number in the host's unit, or a number with its unit.
pub(super) fn measure(
    node: &Node,
    dimension: Dimension,
    setting: &Setting,
) -> Result<Measure, String> {
    match number(node) {
        Some(value) if value > 0.0 => Ok(Measure::Host(value)),
        Some(value) => Err(plain(value)),
        None => {
            let (cgs, a_power) = resolve(node, &named_unit(node, dimension, setting)?, setting)?;
            Ok(Measure::Stated { cgs, a_power })
        }
    }
}

fn named_unit(node: &Node, dimension: Dimension, setting: &Setting) -> Result<Unit, String> {
    let written = text(node).ok_or_else(|| node.value.describe())?;
    let unit = Unit::parse(written, &setting.symbols)
        .map_err(|error| format!("{} ({error})", quoted(written)))?;
    if unit.dimension == dimension {
        Ok(unit)
    } else if unit.dimension == Dimension::NUMBER {
        Err(format!(
            "{}, a pure number (a bare number is written without quotes)",
            quoted(written)
        ))
    } else {
        Err(format!("{}, {}", quoted(written), unit.dimension))
    }
}

/// Folds h in: the value at a = 1 in cgs, and the power of a.
fn resolve(node: &Node, unit: &Unit, setting: &Setting) -> Result<(f64, f64), String> {
    let found = node.value.describe();
    if unit.a_power != 0.0 && !setting.is_expanding {
        return Err(format!(
            "{found} with the scale factor, but [cosmology] says expanding = false"
        ));
    }
    if unit.h_power != 0.0 && setting.h.is_none() {
        return Err(format!(
            "{found} with h, but [cosmology] states no hubble, which would say what h is"
        ));
    }
    let cgs = unit.factor_cgs * raise(setting.h.unwrap_or(1.0), unit.h_power);
    if cgs.is_normal() {
        Ok((cgs, unit.a_power))
    } else {
        Err(format!("{found}, which comes to {cgs:e} in cgs"))
    }
}
