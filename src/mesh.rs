//! Elements along the span and the breaks between them.

/// Side of a point from which a value is taken.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Side {
    /// Limit from the left, `a-`.
    Left,
    /// Limit from the right, `a+`.
    Right,
}

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
    /// The end at which the equations are singular, if any: the element then has Gauss nodes, all inside.
    pub open: Option<Side>,
}

impl Element {
    /// Length h.
    pub fn length(&self) -> f64 {
        self.right - self.left
    }

    /// Coordinate x of the reference coordinate s in [-1, 1]; exact at both ends.
    pub fn coordinate(&self, s: f64) -> f64 {
        if s <= 0.0 {
            self.left + 0.5 * self.length() * (1.0 + s)
        } else {
            self.right - 0.5 * self.length() * (1.0 - s)
        }
    }

    /// Reference coordinate s in [-1, 1] of the coordinate x; x outside the element is moved to its end.
    pub fn reference(&self, x: f64) -> f64 {
        (((x - self.left) - (self.right - x)) / self.length()).clamp(-1.0, 1.0)
    }

    /// The two halves.
    pub fn halves(&self) -> [Element; 2] {
        let middle = 0.5 * (self.left + self.right);
        let at = |side| self.open.filter(|open| *open == side);
        [
            Element { right: middle, open: at(Side::Left), ..*self },
            Element { left: middle, open: at(Side::Right), ..*self },
        ]
    }
}

/// Elements in ascending order, without gaps; no element crosses a break.
#[derive(Debug, Clone, PartialEq)]
pub struct Mesh {
    /// The elements.
    pub elements: Vec<Element>,
}

impl Mesh {
    /// `per_piece` equal elements of `nodes` nodes between each two neighbouring points.
    ///
    /// # Example
    /// ```
    /// let mesh = spanwise::mesh::Mesh::uniform(&[0.0, 1.0, 3.0], 2, 16);
    /// assert_eq!(mesh.elements.len(), 4);
    /// assert_eq!(mesh.elements[3].left, 2.0);
    /// ```
    pub fn uniform(points: &[f64], per_piece: usize, nodes: usize) -> Self {
        let per_piece = per_piece.max(1);
        let mut elements = Vec::new();
        for (piece, ends) in points.windows(2).enumerate() {
            let at = |k: usize| {
                if k == per_piece { ends[1] } else { ends[0] + (ends[1] - ends[0]) * k as f64 / per_piece as f64 }
            };
            elements.extend((0..per_piece).map(|k| Element {
                left: at(k),
                right: at(k + 1),
                nodes,
                piece,
                open: None,
            }));
        }
        Self { elements }
    }

    /// The same elements with `more` nodes each.
    pub fn enriched(&self, more: usize) -> Self {
        Self { elements: self.elements.iter().map(|e| Element { nodes: e.nodes + more, ..*e }).collect() }
    }

    /// The same elements, open at singular ends of the span.
    pub(crate) fn opened(mut self, open: [bool; 2]) -> Self {
        // An element remembers one open end only.
        if let (true, [only]) = (open == [true; 2], &self.elements[..]) {
            self.elements = only.halves().to_vec();
        }
        if let (true, Some(first)) = (open[0], self.elements.first_mut()) {
            first.open = Some(Side::Left);
        }
        if let (true, Some(last)) = (open[1], self.elements.last_mut()) {
            last.open = Some(Side::Right);
        }
        self
    }

    /// Both ends of the span.
    pub fn span(&self) -> [f64; 2] {
        match (self.elements.first(), self.elements.last()) {
            (Some(first), Some(last)) => [first.left, last.right],
            _ => [0.0, 0.0],
        }
    }

    /// Length of the span.
    pub fn length(&self) -> f64 {
        let [from, to] = self.span();
        to - from
    }

    /// Largest number of nodes of any element.
    pub fn most_nodes(&self) -> usize {
        self.elements.iter().map(|e| e.nodes).max().unwrap_or(0)
    }
}
