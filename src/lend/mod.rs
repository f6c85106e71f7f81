//! Typed, strided, read-only views of host arrays.
//!
//! A host lends an array until its species is sounded or the step is entered; nothing is copied, kept or
//! written. The rules of the room: every description is checked when it is lent, so that reading it later
//! cannot fail; the only thing trusted is that the memory described is there (see [`View`]).

mod ahead;
mod convert;
mod fields;
mod lot;
mod memory;
mod view;

pub use ahead::Ahead;
pub use fields::{FIELDS, Field, FieldInfo, Quantity, SPECIES, Shape, Species};
pub use lot::Lot;
pub use view::{ArrayShape, Lent, Scalar, View, ViewError};
