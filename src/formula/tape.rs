//! Instruction lists: evaluation over many nodes at once.
