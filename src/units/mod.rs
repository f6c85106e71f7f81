//! Units, physical constants and the expansion of the universe.
//!
//! Everything inside the library is in cgs; a [`Unit`] carries a host's value there, and back out into the
//! units a column is written in. [`Cosmology`] answers how fast and how old the universe is.

pub mod constants;
mod cosmology;
mod dimension;
mod names;
pub(crate) mod nearest;
mod parse;
mod quadrature;
mod unit;

pub use cosmology::{Cosmology, CosmologyError, Expansion, Parameters};
pub use dimension::Dimension;
pub(crate) use unit::raise;
pub use unit::{Symbols, Unit, UnitError};
