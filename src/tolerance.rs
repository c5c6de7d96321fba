//! Every numerical tolerance of the crate, named once, with the reason for its size.
