//! The series on disk.

pub mod record;
pub mod schema;
