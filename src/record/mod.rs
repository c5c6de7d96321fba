//! Results as text, JSON, page, tables and plots. Pure functions; display units are applied here only.

/// Everything a record shows, ready for print: plain data in the user's units.
pub mod outcome;
/// From a solved sheet to that data; display units are applied here.
pub mod build;
