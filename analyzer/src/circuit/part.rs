//! Nodes, parts and ports of a flat circuit, with values in SI units.

/// A node other than ground.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct NodeId(pub u32);

/// A part.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct PartId(pub u32);

/// What a terminal is connected to.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum NodeRef {
    /// The reference node.
    Ground,
    /// Any other node.
    Node(NodeId),
}

impl NodeRef {
    /// The node, unless it is ground.
    pub fn node(self) -> Option<NodeId> {
        match self {
            Self::Ground => None,
            Self::Node(node) => Some(node),
        }
    }
}

/// A node's name: the instance path and the name joined by dots, as first written.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Node {
    /// Full name.
    pub name: String,
}

/// The V source branch whose current controls a source.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Sense(pub PartId);

/// Why a part is in the circuit.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum PartRole {
    /// Written as a card.
    Card,
    /// Belongs to the stand-in of a device.
    Device,
    /// The termination that a block mark adds at a port.
    Termination,
    /// The supply or tie that a mark adds.
    Supply,
}

/// One part.
#[derive(Clone, PartialEq, Debug)]
pub struct Part {
    /// Full name: instance path and name joined by dots.
    pub name: String,
    /// What it is.
    pub kind: PartKind,
    /// Why it is there.
    pub role: PartRole,
}

/// What a part is and where its terminals go. Currents are counted into the first terminal.
#[derive(Clone, PartialEq, Debug)]
pub enum PartKind {
    /// Resistor, ohms (not zero).
    Resistor {
        /// Terminals.
        nodes: [NodeRef; 2],
        /// Ohms.
        ohm: f64,
    },
    /// Capacitor, farads.
    Capacitor {
        /// Terminals.
        nodes: [NodeRef; 2],
        /// Farads.
        farad: f64,
    },
    /// Inductor, henries; the first terminal bears the dot.
    Inductor {
        /// Terminals.
        nodes: [NodeRef; 2],
        /// Henries.
        henry: f64,
    },
    /// Coupling of two inductors.
    Coupling {
        /// The inductors.
        inductors: [PartId; 2],
        /// Coupling factor k.
        factor: f64,
    },
    /// Independent voltage source: a short for small signals, with what a port or rail puts in
    /// series with it.
    VoltageSource {
        /// n+ and n-.
        nodes: [NodeRef; 2],
        /// Series resistance, ohms.
        series_ohm: f64,
        /// Series inductance, henries.
        series_henry: f64,
    },
    /// Independent current source: open for small signals.
    CurrentSource {
        /// n+ and n-.
        nodes: [NodeRef; 2],
    },
    /// Voltage-controlled voltage source (E).
    Vcvs {
        /// n+ and n-.
        nodes: [NodeRef; 2],
        /// c+ and c-.
        control: [NodeRef; 2],
        /// Volts per volt.
        gain: f64,
    },
    /// Voltage-controlled current source (G): gain times control voltage leaves n+ through the
    /// source into n-.
    Vccs {
        /// n+ and n-.
        nodes: [NodeRef; 2],
        /// c+ and c-.
        control: [NodeRef; 2],
        /// Siemens.
        siemens: f64,
        /// Pure delay of the gain, seconds: siemens exp(-s delay).
        delay_s: f64,
    },
    /// Current-controlled current source (F).
    Cccs {
        /// n+ and n-.
        nodes: [NodeRef; 2],
        /// The sensing branch.
        sense: Sense,
        /// Amperes per ampere.
        gain: f64,
    },
    /// Current-controlled voltage source (H).
    Ccvs {
        /// n+ and n-.
        nodes: [NodeRef; 2],
        /// The sensing branch.
        sense: Sense,
        /// Ohms.
        ohm: f64,
    },
    /// Ideal transmission line: a wave that enters one end leaves the other after the delay.
    Line {
        /// End 1 and its reference, end 2 and its reference.
        nodes: [NodeRef; 4],
        /// Characteristic impedance, ohms.
        ohm: f64,
        /// Delay, seconds.
        delay_s: f64,
    },
    /// A part that is read but not computed.
    NotComputed {
        /// Its terminals.
        nodes: Vec<NodeRef>,
        /// What it is and what to do about it, for the verdict's reason.
        reason: String,
    },
}

impl PartKind {
    /// The terminals that carry the part's current (control terminals not included).
    pub fn terminals(&self) -> &[NodeRef] {
        match self {
            Self::Resistor { nodes, .. }
            | Self::Capacitor { nodes, .. }
            | Self::Inductor { nodes, .. }
            | Self::VoltageSource { nodes, .. }
            | Self::CurrentSource { nodes }
            | Self::Vcvs { nodes, .. }
            | Self::Vccs { nodes, .. }
            | Self::Cccs { nodes, .. }
            | Self::Ccvs { nodes, .. } => nodes,
            Self::Line { nodes, .. } => nodes,
            Self::NotComputed { nodes, .. } => nodes,
            Self::Coupling { .. } => &[],
        }
    }

    /// The voltage-sensing terminals, if there are any.
    pub fn control(&self) -> &[NodeRef] {
        match self {
            Self::Vcvs { control, .. } | Self::Vccs { control, .. } => control,
            _ => &[],
        }
    }

    /// Pure delay, seconds; zero for what responds at once.
    pub fn delay_s(&self) -> f64 {
        match self {
            Self::Vccs { delay_s, .. } | Self::Line { delay_s, .. } => *delay_s,
            _ => 0.0,
        }
    }

    /// Whether this is one of the four controlled sources.
    pub fn is_controlled(&self) -> bool {
        matches!(
            self,
            Self::Vcvs { .. } | Self::Vccs { .. } | Self::Cccs { .. } | Self::Ccvs { .. }
        )
    }
}

/// How a port drives the circuit.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum PortDrive {
    /// The termination, a resistor from the node to ground (added by the mark, or a card).
    Shunt {
        /// The port's node.
        node: NodeId,
        /// The resistor.
        part: PartId,
    },
    /// The port impedance in series with a V source.
    Series {
        /// The source.
        part: PartId,
    },
    /// The port impedance across an I source.
    Across {
        /// The source's nodes.
        nodes: [NodeRef; 2],
        /// The resistor across it.
        part: PartId,
    },
}

/// A port of a block.
#[derive(Clone, PartialEq, Debug)]
pub struct Port {
    /// As written in the mark.
    pub name: String,
    /// How it is connected.
    pub drive: PortDrive,
    /// Reference and termination resistance, ohms.
    pub ohm: f64,
}

/// A flat circuit.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct Circuit {
    /// All nodes but ground.
    pub nodes: Vec<Node>,
    /// All parts.
    pub parts: Vec<Part>,
    /// Ports, first `in`, then `out`, then the others.
    pub ports: Vec<Port>,
}

impl Circuit {
    /// A part by number.
    pub fn part(&self, id: PartId) -> Option<&Part> {
        self.parts.get(id.0 as usize)
    }

    /// A node's name; `0` for ground.
    pub fn node_name(&self, node: NodeRef) -> &str {
        match node {
            NodeRef::Ground => "0",
            NodeRef::Node(id) => self.nodes.get(id.0 as usize).map_or("?", |n| &n.name),
        }
    }

    /// A node by its full name, ASCII case ignored; ground by any of its names.
    pub fn find_node(&self, name: &str) -> Option<NodeRef> {
        if is_ground(name) {
            return Some(NodeRef::Ground);
        }
        let index = self
            .nodes
            .iter()
            .position(|node| node.name.eq_ignore_ascii_case(name))?;
        Some(NodeRef::Node(NodeId(index as u32)))
    }

    /// A part by its full name, ASCII case ignored.
    pub fn find_part(&self, name: &str) -> Option<PartId> {
        let index = self
            .parts
            .iter()
            .position(|part| part.name.eq_ignore_ascii_case(name))?;
        Some(PartId(index as u32))
    }

    /// Parts with their numbers.
    pub fn numbered_parts(&self) -> impl Iterator<Item = (PartId, &Part)> {
        self.parts
            .iter()
            .enumerate()
            .map(|(index, part)| (PartId(index as u32), part))
    }
}

/// Whether a name means the reference node: `0 gnd gnd! ground`.
pub fn is_ground(name: &str) -> bool {
    ["0", "gnd", "gnd!", "ground"]
        .iter()
        .any(|ground| name.eq_ignore_ascii_case(ground))
}
