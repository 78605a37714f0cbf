//! The system of one circuit: pattern, values with any set of sources switched off, and the
//! exact entries.

use super::stamps::{REFERENCE_OHM as OHM, REFERENCE_RAD_PER_S as RAD, Stamp, stamps};
use super::unknowns::Unknowns;
use crate::circuit::{Circuit, PartId};
use crate::linalg::exact::{ExactEntry, Field61};
use crate::linalg::pattern::Pattern;
use crate::linalg::values::Values;
use std::collections::HashSet;
use std::sync::Arc;

/// Which controlled sources are switched off (their gain set to zero).
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Switch {
    off: HashSet<PartId>,
}

impl Switch {
    /// All sources on.
    pub fn all_on() -> Self {
        Self::default()
    }

    /// The given sources off.
    pub fn off(parts: impl IntoIterator<Item = PartId>) -> Self {
        Self {
            off: parts.into_iter().collect(),
        }
    }

    /// Whether a part is off.
    pub fn is_off(&self, part: PartId) -> bool {
        self.off.contains(&part)
    }
}

/// A(s) of a circuit.
#[derive(Clone, Debug)]
pub struct System {
    /// Rows and columns.
    pub unknowns: Unknowns,
    /// What each part adds.
    pub stamps: Vec<Stamp>,
    /// The pattern of all stamps.
    pub pattern: Arc<Pattern>,
}

impl System {
    /// Assembles a circuit.
    pub fn new(circuit: &Circuit) -> Self {
        let unknowns = Unknowns::new(circuit);
        let stamps = stamps(circuit, &unknowns);
        let entries: Vec<(u32, u32)> = stamps.iter().map(|s| (s.row, s.column)).collect();
        let pattern = Pattern::new(unknowns.len(), &entries);
        Self {
            unknowns,
            stamps,
            pattern,
        }
    }

    /// Whether a stamp is switched off: the gain entries of a source, not its incidence.
    fn is_off(stamp: &Stamp, switch: &Switch) -> bool {
        stamp.power != 0 && switch.is_off(stamp.part)
    }

    /// Values with some sources off.
    pub fn values(&self, switch: &Switch) -> Values {
        let mut values = Values::new(Arc::clone(&self.pattern));
        for stamp in &self.stamps {
            if Self::is_off(stamp, switch) {
                continue;
            }
            // Every stamp is in the pattern by construction.
            let _ = if stamp.delay > 0.0 {
                values.add_delay(stamp.row, stamp.column, stamp.value, stamp.delay)
            } else if stamp.with_s {
                values.add_c(stamp.row, stamp.column, stamp.value)
            } else {
                values.add_g(stamp.row, stamp.column, stamp.value)
            };
        }
        values
    }

    /// Whether some part has a delay, so that the system is no pencil G + s C.
    pub fn has_delays(&self) -> bool {
        self.stamps.iter().any(|stamp| stamp.delay > 0.0)
    }

    /// The exact entries of G and of C with some sources off; `None` when a value is not finite. In
    /// place of exp(-s delay) stands one random element for each delay: det A(s) = 0 for all s only
    /// if the determinant vanishes whatever the exponentials are.
    pub fn exact(&self, switch: &Switch) -> Option<(Vec<ExactEntry>, Vec<ExactEntry>)> {
        let (mut g, mut c) = (Vec::new(), Vec::new());
        for stamp in &self.stamps {
            if Self::is_off(stamp, switch) {
                continue;
            }
            let mut value = stamp.exact?;
            if stamp.delay > 0.0 {
                let bits = stamp.delay.to_bits().wrapping_mul(0x9e37_79b9_7f4a_7c15);
                value = value * Field61::from_u64(bits | 1);
            }
            let entry = (stamp.row, stamp.column, value);
            if stamp.with_s {
                c.push(entry);
            } else {
                g.push(entry);
            }
        }
        Some((g, c))
    }
}

/// A normalised s as rad/s.
pub fn rad_per_s(normalised: f64) -> f64 {
    normalised * RAD
}

/// A normalised inverse entry as ohms.
pub fn ohms(normalised: f64) -> f64 {
    normalised * OHM
}
