//! Typed, strided, read-only views of host arrays.
