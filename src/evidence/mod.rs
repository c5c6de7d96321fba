//! What the answer rests on: error bars, residual, decay, balance, the second route.
