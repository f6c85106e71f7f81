//! The config file: strict, with errors that name file, line and the nearest key that exists.
