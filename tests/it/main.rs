//! Tests of the whole: the suite of cases with known answers.

mod load;
mod samples;
mod suite;
