//! Linear algebra of one pass: condense an element, chain the elements, close with the conditions.
