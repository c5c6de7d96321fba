//! Problems from Rust closures.
