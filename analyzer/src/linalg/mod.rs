//! Sparse complex linear algebra for A(s) = G + s C + sum of coef exp(-s tau).
//!
//! Pure numerics: no word of what the matrices describe. In reading order:
//! `pattern` and `values` hold the problem, `plan` chooses a pivot order once,
//! `evaluate` and `workspace` give determinants, inverse entries and solutions
//! for many frequencies, `exact`, `eigen`, `polish` find the modes, `count` the
//! encirclements; `band` and `search` do so where there are delays; `dense` is the slow oracle for checks.

mod apart;
pub mod band;
pub mod count;
pub mod dense;
pub mod det;
pub mod dispatch;
pub mod eigen;
mod elimination;
pub mod error;
mod evaluate;
pub mod exact;
mod exact_dense;
pub mod field61;
mod kernel;
mod markowitz;
#[cfg(test)]
mod oracle_tests;
pub mod pattern;
pub mod plan;
pub mod polish;
mod program;
pub mod search;
mod selected;
mod symmetric;
#[cfg(test)]
mod testing;
mod twofold;
pub mod values;
pub mod workspace;
