//! Linear algebra of one pass: condense an element, chain the elements, close with the conditions.
//!
//! On an element the unknowns are the nodal values of the highest derivatives v_i = u_i^(m_i) at n
//! Legendre-Gauss-Lobatto nodes and the state at the left end (Greengard, SIAM J. Numer. Anal. 28, 1991;
//! rectangular collocation: Driscoll & Hale, IMA J. Numer. Anal. 36, 2016). The collocation rows and the rows
//! "state at the right end = ..." form a tall matrix over v; what is left of it below the pivots ties
//! the states at both ends ([`element`]). The chain of these is reduced by orthogonal factors
//! ([`chain`]; row-pivoted elimination is unstable there: Wright, SIAM J. Sci. Comput. 14, 1993), and a small
//! dense system of end states, constants and conditions closes it ([`closure`]).

pub(crate) mod chain;
pub(crate) mod closure;
pub(crate) mod condition;
pub(crate) mod element;
pub(crate) mod frame;
pub(crate) mod householder;
pub(crate) mod nudge;
pub(crate) mod pass;
pub(crate) mod tables;

pub(crate) use nudge::Perturbation;
pub(crate) use pass::{Pass, from_nodes, solve, transfer};
pub(crate) use tables::{Library, Tables};
