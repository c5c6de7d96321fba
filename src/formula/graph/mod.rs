//! The checked formula as a shared graph: simplification, total and partial derivatives.
//!
//! Nodes are interned: equal expressions have equal ids, so a carried flux is recognised by comparing ids.

/// Names a node of a [`Graph`].
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct NodeId(pub u32);

/// A node. Everything is in SI units; dimensions have been checked before.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Node {
    /// A number.
    Number(f64),
    /// The coordinate x.
    Coordinate,
    /// The k-th derivative of unknown function i at x.
    Jet {
        /// Index of the unknown function.
        unknown: u16,
        /// Order of the derivative.
        order: u8,
    },
    /// Unknown constant c.
    Constant(u16),
    /// A number that is known only from the solution (value at a point, integral, extreme): slot in a
    /// table that the owner of the graph keeps.
    Slot(u32),
    /// d/dx of an expression that is neither carried nor expanded yet.
    Derivative(NodeId),
    /// -a
    Negate(NodeId),
    /// a + b
    Add(NodeId, NodeId),
    /// a * b
    Multiply(NodeId, NodeId),
    /// a / b
    Divide(NodeId, NodeId),
    /// a ^ b
    Power(NodeId, NodeId),
    /// f(a)
    Unary(Unary, NodeId),
    /// f(a, b)
    Binary(Binary, NodeId, NodeId),
    /// `if(gap < 0, a, b)`; strictly less where `strict`, else `gap <= 0`.
    /// A test whose gap holds the coordinate and data only is decided once per piece of the mesh, at the
    /// piece's middle: its number in [`Graph::piece_tests`]; every other test is decided point by point.
    Choose {
        /// left side minus right side of the comparison
        gap: NodeId,
        /// `<` or `<=`
        strict: bool,
        /// value where the test holds
        then: NodeId,
        /// value elsewhere
        otherwise: NodeId,
    },
}

/// Functions of one argument.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
#[allow(missing_docs)]
pub enum Unary {
    Sqrt,
    Exp,
    Ln,
    Log10,
    Sin,
    Cos,
    Tan,
    Asin,
    Acos,
    Atan,
    Sinh,
    Cosh,
    Tanh,
    Asinh,
    Acosh,
    Atanh,
    Abs,
    Sign,
    Erf,
    Erfc,
}

/// Functions of two arguments.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
#[allow(missing_docs)]
pub enum Binary {
    Atan2,
    Min,
    Max,
    SignedPower,
}

/// With respect to what a partial derivative is taken.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Variable {
    /// The coordinate, unknowns held fixed.
    Coordinate,
    /// u_i^(k)
    Jet {
        /// Index of the unknown function.
        unknown: u16,
        /// Order of the derivative.
        order: u8,
    },
    /// Unknown constant.
    Constant(u16),
    /// A slot.
    Slot(u32),
}

/// An arena of interned nodes.
#[derive(Debug, Clone, Default)]
pub struct Graph {}
