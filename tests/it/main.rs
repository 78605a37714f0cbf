//! Tests of the whole: the suite of cases with known answers, the samples, and the built program
//! as its users drive it.

mod cli;
mod load;
mod samples;
mod suite;
