//! Matrices on the reference interval [-1, 1]: differentiation, integration, interpolation, mass.
