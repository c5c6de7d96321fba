//! Where to put elements: seeds, indicators, refinement plans. Plans only, never solves.
