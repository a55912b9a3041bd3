//! Plans against optima found elsewhere, against the forward model, and against what
//! must hold of any plan.

mod brewery;
mod endings;
mod forward;
mod optima;
mod problems;
mod properties;
mod simple;
