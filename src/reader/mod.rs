//! Reading a series, also while a host writes it.
