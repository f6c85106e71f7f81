//! An MPI communicator.
