//! From statements to flat circuits: includes, scopes, parameters, hierarchy and marks.
//! The one place that joins text and meaning. Faults become [`Issue`]s; nothing fails.

mod block;
mod cards;
mod device;
mod flatten;
mod issue;
mod mark_checks;
mod marks;
mod names;
mod params;
mod program;
mod scope;
mod source_map;

pub use block::{BlockCircuit, Elaborated, PassiveClaim, TerminationFault, elaborate_blocks};
pub use flatten::{Flat, Flattener, Gap, Limits};
pub use issue::{Issue, IssueKind, LimitKey};
pub use marks::{
    BlockMark, DeviceMark, MarkData, MarkUse, PinTie, QuietMark, RailMark, TieMark, TieTo,
};
pub use names::{Folded, nearest};
pub use params::Env;
pub use program::{
    CardRef, FileStore, Include, IncludeRequest, Model, Program, Scope, ScopeId, gather,
};
pub use source_map::{InstanceId, Origin, SourceMap};
