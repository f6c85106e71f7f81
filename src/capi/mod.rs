//! The C boundary.
//!
//! Every function has the same shape: the host's floating-point control set aside, panics stopped, the handle
//! looked up, the arguments checked, one call inward. Pointers of the host are followed only in this room and
//! in [`crate::lend`]. `include/limnograph.h` is made from this room and is the manual for C programmers, so
//! the comments on exported items are written for them.

mod arguments;
mod boundary;
mod functions;
mod registry;
mod types;

pub use functions::*;
pub use types::*;
