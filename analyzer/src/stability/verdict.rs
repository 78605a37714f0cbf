//! The verdict on a block and how far the screen saw.

/// The verdict on a block. The order is the rank: an earlier one outranks a later one.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Verdict {
    /// A natural mode grows.
    Unstable,
    /// Nothing can be said; the reason is given.
    Undetermined,
    /// A natural mode neither grows nor decays.
    Marginal,
    /// All natural modes decay, as terminated.
    Stable,
    /// Stable with any passive termination at its ports.
    UnconditionallyStable,
}

impl Verdict {
    /// The word used in every output.
    pub fn as_str(self) -> &'static str {
        match self {
            Self::Unstable => "unstable",
            Self::Undetermined => "undetermined",
            Self::Marginal => "marginal",
            Self::Stable => "stable",
            Self::UnconditionallyStable => "unconditionally-stable",
        }
    }
}

/// How far the screen can see into the devices.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Sight {
    /// Every controlled source inside the devices is accessible.
    Intrinsic,
    /// Some device is known at its terminals only.
    Terminal,
    /// Only the ports are known.
    PortsOnly,
}

impl Sight {
    /// The word used in every output.
    pub fn as_str(self) -> &'static str {
        match self {
            Self::Intrinsic => "intrinsic",
            Self::Terminal => "terminal",
            Self::PortsOnly => "ports-only",
        }
    }
}
