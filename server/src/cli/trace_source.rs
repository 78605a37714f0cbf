//! The one place where `trace` asks the analyzer for figures.

use squeg_analyzer::host::Prepared;

pub use squeg_analyzer::host::{TraceError, TraceTable};

/// The figures `quantities` of a block at frequencies in hertz.
///
/// # Errors
/// [`TraceError`] when a name is not known or there is no system to compute with.
pub fn trace(
    prepared: &Prepared,
    block: Option<&str>,
    quantities: &[String],
    hz: &[f64],
) -> Result<TraceTable, TraceError> {
    prepared.trace(block, quantities, hz)
}
