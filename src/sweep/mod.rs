//! One pass over the lent arrays, block by block.
