//! Plans against optima found elsewhere, against the forward model, and against what
//! must hold of any plan.

mod optima;
mod problems;
