//! Results as text, JSON, page, tables and plots. Pure functions; display units are applied here only.

/// Everything a record shows, ready for print: plain data in the user's units.
pub mod outcome;
/// From a solved sheet to that data; display units are applied here.
pub mod build;
/// Values with uncertain digits.
pub mod number;
/// Results for people, on a terminal.
pub mod text;
/// Results for programs.
pub mod json;
/// The solution along the span as a table.
pub mod csv;
