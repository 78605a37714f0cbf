//! Tests of the whole: the suite of cases with known answers, the samples, and the built program
//! as its users drive it.

mod amplifiers;
mod bad_input;
mod cli;
mod honest_verdicts;
mod load;
mod random_amplifiers;
mod rules_table;
mod samples;
mod screen_rules;
mod suite;
mod tidy;
