//! Legendre polynomials: values, Gauss, Lobatto and Radau rules, nodal and modal coefficients.
