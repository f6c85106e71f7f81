//! One process alone: every reduction is its own result.
