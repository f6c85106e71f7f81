//! Sums that are exact: the true sum of the contributions, rounded once.
