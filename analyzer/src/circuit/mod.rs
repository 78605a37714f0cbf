//! The flat circuit: nodes, parts and ports, without any place in a text. Two circuits
//! are equal when they describe the same small-signal network with the same names, so a
//! change of comments or line order elsewhere leaves a circuit equal.

mod part;
mod topology;

pub use part::{
    Circuit, Node, NodeId, NodeRef, Part, PartId, PartKind, PartRole, Port, PortDrive, Sense,
    is_ground,
};
pub use topology::{Islands, conducts_dc, dc_islands, voltage_loops};
