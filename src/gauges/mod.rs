//! The diagnostics, one file each.
