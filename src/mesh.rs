//! Elements along the span and the breaks between them.

/// One element: its interval, its number of nodes, and the piece of the model it lies in.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Element {
    /// Left end.
    pub left: f64,
    /// Right end.
    pub right: f64,
    /// Number of collocation nodes n.
    pub nodes: usize,
    /// Piece of the model: between two neighbouring points.
    pub piece: usize,
}

impl Element {
    /// Length h.
    pub fn length(&self) -> f64 {
        self.right - self.left
    }
}

/// Elements in ascending order, without gaps; no element crosses a break.
#[derive(Debug, Clone, PartialEq)]
pub struct Mesh {
    /// The elements.
    pub elements: Vec<Element>,
}
