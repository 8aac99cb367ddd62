//! The law: accelerated projected dual ascent on a scaled quadratic programme.
//!
//! minimise `sum 1/2 q_j (x_j - x0_j)^2 + w_j |x_j|`
//! subject to `l <= A x <= r`, `lo <= x <= hi`; the first rows are equalities.
//!
//! Data flow: [`scale::Scaled`] is built when topology, rung or the set of open
//! columns changes; [`limits::Limits`] is filled every tick; [`iterate::Iterate`]
//! holds the iterates and makes the steps. Nothing is factorised or inverted.
//!
//! | code | symbol | meaning | shape | unit |
//! |---|---|---|---|---|
//! | `a`, `at` | A^, A^' | scaled matrix and its transpose | rows x cols | - |
//! | `s` | s | square root of the curvature of each unknown | cols | - |
//! | `e` | e | factor of each row | rows | - |
//! | `t` | T | orthonormalisation of the equality rows | eqs x eqs | - |
//! | `x` | x^ | scaled unknowns, x^ = s x | cols | - |
//! | `y`, `v` | y, v | scaled duals and their extrapolation | rows | - |
//! | `sigma` | sigma | step, 1 / (1.1 lambda_max(A^ A^')) | 1 | - |
//!
//! Source: dual accelerated gradient, Y. Nesterov, "A method of solving a convex
//! programming problem with convergence rate O(1/k^2)", 1983; adaptive gradient
//! restart, B. O'Donoghue and E. Candes, "Adaptive restart for accelerated
//! gradient schemes", 2015.

pub mod iterate;
pub mod kernel;
pub mod limits;
pub mod scale;

pub use iterate::{Iterate, dual_clamp};
pub use limits::{Limits, Problem};
pub use scale::Scaled;
