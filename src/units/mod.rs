//! Units, physical constants and the expansion of the universe.
