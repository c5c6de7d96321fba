//! The calculation sheet: from a file to a located, checked model in SI units.
