//! The C boundary.
