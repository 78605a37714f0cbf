//! The only facade of the analyzer: texts in, findings and block reports out. Holds no paths
//! and does no I/O; includes that are not known are asked for by number and spelling.

mod accepted;
mod fingerprint;
mod hover;
mod memo;
mod outline;
mod prepared;
mod report;
mod screening;
mod source;
mod trace;

pub use hover::{CAUTION, Hover};
pub use outline::{Symbol, SymbolKind, outline};
pub use prepared::{Prepared, Screening};
pub use report::{
    BlockReport, DeterminantReport, DrivingPointReport, ModeReport, Share, Sight, TwoPortReport,
    Verdict,
};
pub use source::{Host, SourceText};
pub use trace::{TraceError, TraceTable};

pub use crate::elaborate::{Include, IncludeRequest};
pub use crate::syntax::FileRole;
