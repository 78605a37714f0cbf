//! Screens the blocks of a prepared netlist, and turns numbers into reports with names.

use super::prepared::{Prepared, Screening, finish};
use super::report::{
    BlockReport, DeterminantReport, DrivingPointReport, ModeReport, Share, Sight, TwoPortReport,
    Verdict,
};
use crate::assembly::Unknowns;
use crate::cancel::{Cancel, Cancelled};
use crate::circuit::{NodeId, NodeRef, PartKind};
use crate::elaborate::BlockCircuit;
use crate::finding::Finding;
use crate::rules::{BlockContext, screen_findings};
use crate::stability::{Doubt, ListedMode, Screen, ScreenRequest};

/// Shares listed of each mode.
const SHARES: usize = 8;

/// The request that a block's mark makes.
pub(super) fn request<'a>(prepared: &Prepared, block: &'a BlockCircuit) -> ScreenRequest<'a> {
    let config = &prepared.host.config;
    ScreenRequest {
        circuit: &block.circuit,
        claims: block
            .passive_claims
            .iter()
            .map(|claim| claim.parts.clone())
            .collect(),
        judged: block.judged.as_deref(),
        sweep_hz: block.sweep_hz,
        default_sweep_hz: config.sweep_hz,
        states: config.limits.states,
    }
}

impl Prepared {
    /// Screens all blocks.
    ///
    /// # Errors
    /// [`Cancelled`] when the flag was set before the end.
    pub fn screen(&self, cancel: &Cancel) -> Result<Screening, Cancelled> {
        let mut findings: Vec<Finding> = self.raw_findings().to_vec();
        let mut blocks = Vec::new();
        for block in &self.elaborated.blocks {
            let (report, found) = self.screen_block(block, cancel)?;
            blocks.push(report);
            findings.extend(found);
        }
        finish(self, &mut findings, true);
        Ok(Screening { findings, blocks })
    }

    fn screen_block(
        &self,
        block: &BlockCircuit,
        cancel: &Cancel,
    ) -> Result<(BlockReport, Vec<Finding>), Cancelled> {
        let started = (self.host.now)();
        let computable = !block
            .circuit
            .parts
            .iter()
            .any(|part| matches!(part.kind, PartKind::NotComputed { .. }));
        let result = if computable {
            let memo = &self.host.memo;
            Some(memo.screen(self.root, &block.name, &request(self, block), cancel)?)
        } else {
            None
        };
        let elapsed = (self.host.now)().saturating_sub(started);
        let verdict = verdict(block, result.as_deref());
        let why = why(block, result.as_deref(), verdict);
        let mut report = report(block, result.as_deref(), verdict, why.clone());
        report.elapsed_ms = elapsed.as_secs_f64() * 1e3;
        if result.is_none() {
            report.unknowns = Unknowns::new(&block.circuit).len();
            report.sweep_hz = block.sweep_hz.unwrap_or(self.host.config.sweep_hz);
        }
        let not_utf8 = Vec::new();
        let text = self.text_context(&not_utf8);
        let context = BlockContext {
            text: &text,
            block,
            screen: result.as_deref(),
            verdict,
            why: why.as_deref(),
        };
        Ok((report, screen_findings(&context)))
    }
}

/// The screen's verdict, with what is missing from the circuit taken into account.
fn verdict(block: &BlockCircuit, screen: Option<&Screen>) -> Verdict {
    match screen.map(|screen| screen.verdict) {
        None => Verdict::Undetermined,
        Some(Verdict::Unstable) => Verdict::Unstable,
        Some(_) if !block.gaps.is_empty() => Verdict::Undetermined,
        Some(verdict) => verdict,
    }
}

/// Reasons first, then assumptions.
fn why(block: &BlockCircuit, screen: Option<&Screen>, verdict: Verdict) -> Option<String> {
    const MOST: usize = 4;
    let mut reasons: Vec<String> = Vec::new();
    let gaps: Vec<&str> = block.gaps.iter().map(|gap| gap.reason.as_str()).collect();
    reasons.extend(gaps.iter().take(MOST).map(|gap| (*gap).to_owned()));
    if gaps.len() > MOST {
        reasons.push(format!("and {} more of this kind", gaps.len() - MOST));
    }
    if let Some(doubt) = screen.and_then(|screen| screen.doubt.as_ref()) {
        reasons.push(doubt_in_words(block, doubt));
    }
    reasons.extend(block.notes.iter().cloned());
    if let Some(screen) = screen {
        if screen.too_many_states.is_some() {
            reasons.push("modes counted by the phase of the determinant only".to_owned());
        }
        if let (Some([low, high]), true) = (screen.delays_followed_hz, screen.doubt.is_none()) {
            reasons.push(format!(
                "with delays, modes are counted from {} to {} and taken to end there",
                crate::units::hertz(low),
                crate::units::hertz(high)
            ));
        }
        if verdict == Verdict::Stable {
            reasons.extend(port_note(screen));
        }
    }
    (!reasons.is_empty()).then(|| reasons.join("; "))
}

/// What is and is not said about other terminations.
fn port_note(screen: &Screen) -> Option<String> {
    let two_port = screen.two_port.as_ref()?;
    // Nearer to 1 than this is 1: what a lossless or passive network shows.
    const ONE: f64 = 1e-9;
    let at = crate::units::hertz(two_port.mu_min_hz);
    Some(if two_port.mu_min > 1.0 + ONE {
        "mu above 1 at every swept point, not certified between them".to_owned()
    } else if !two_port.below_one {
        format!("stable as terminated; mu comes down to 1 at {at}")
    } else {
        format!(
            "stable as terminated; mu falls to {:.6} at {at}, so some passive terminations make it oscillate",
            two_port.mu_min,
        )
    })
}

fn doubt_in_words(block: &BlockCircuit, doubt: &Doubt) -> String {
    const MOST: usize = 6;
    match doubt {
        Doubt::Empty => "the circuit has no nodes".to_owned(),
        Doubt::NotFinite => "a value is not finite".to_owned(),
        Doubt::Numeric(text) => format!("the numerics failed: {text}"),
        Doubt::NotCounted(failure) => failure.reason.clone(),
        Doubt::Disagree(text) => text.clone(),
        Doubt::Singular { nodes, parts } => {
            let mut nodes: Vec<NodeId> = nodes.clone();
            if nodes.is_empty() {
                // Currents alone: the nodes are those between which they flow.
                let ends = parts.iter().filter_map(|part| block.circuit.part(*part));
                nodes.extend(
                    ends.flat_map(|part| part.kind.terminals())
                        .filter_map(|n| n.node()),
                );
                nodes.sort_unstable();
                nodes.dedup();
            }
            let mut names: Vec<String> = nodes
                .iter()
                .map(|node| format!("node `{}`", block.circuit.node_name(NodeRef::Node(*node))))
                .collect();
            names.extend(parts.iter().filter_map(|part| {
                let part = block.circuit.part(*part)?;
                Some(format!("the current of `{}`", part.name))
            }));
            let more = names.len().saturating_sub(MOST);
            names.truncate(MOST);
            let rest = if more > 0 {
                format!(" and {more} more")
            } else {
                String::new()
            };
            format!(
                "the circuit does not determine {}{rest} at any frequency",
                names.join(", ")
            )
        }
    }
}

fn report(
    block: &BlockCircuit,
    screen: Option<&Screen>,
    verdict: Verdict,
    why: Option<String>,
) -> BlockReport {
    let mut report = BlockReport {
        name: block.name.clone(),
        span: block.span,
        verdict,
        sight: sight(block),
        why,
        unknowns: 0,
        sweep_hz: [0.0, 0.0],
        elapsed_ms: 0.0,
        unstable_modes: None,
        axis_modes: None,
        modes: Vec::new(),
        determinant: DeterminantReport::default(),
        driving_point: Vec::new(),
        two_port: None,
    };
    let Some(screen) = screen else { return report };
    report.unknowns = screen.unknowns;
    report.sweep_hz = screen.sweep_hz;
    report.unstable_modes = screen.unstable_modes();
    report.axis_modes = screen.modes.as_ref().map(|modes| modes.on_axis());
    report.modes = screen
        .listed
        .iter()
        .map(|listed| mode(block, listed))
        .collect();
    report.determinant = determinant(screen);
    report.driving_point = driving_points(block, screen);
    report.two_port = screen.two_port.as_ref().map(|found| TwoPortReport {
        mu_min: found.mu_min,
        mu_min_hz: found.mu_min_hz,
        k_min: found.k_min,
        k_min_hz: found.k_min_hz,
        unilateral: found.unilateral,
        proviso: report.unstable_modes.map(|count| count == 0),
    });
    report
}

/// Terminal sight as soon as one part is data at its terminals.
fn sight(block: &BlockCircuit) -> Sight {
    let data = block.circuit.parts.iter().any(|part| match &part.kind {
        PartKind::NotComputed { reason, .. } => {
            part.name.ends_with(".data") || reason.starts_with("an S-parameter block")
        }
        _ => false,
    });
    if data {
        Sight::Terminal
    } else {
        Sight::Intrinsic
    }
}

fn mode(block: &BlockCircuit, listed: &ListedMode) -> ModeReport {
    let circuit = &block.circuit;
    ModeReport {
        hz: listed.mode.hz(),
        growth_per_s: listed.mode.growth_per_s(),
        damping: listed.mode.damping(),
        nodes: listed
            .shares
            .nodes
            .iter()
            .take(SHARES)
            .map(|(node, share)| Share {
                name: circuit.node_name(NodeRef::Node(*node)).to_owned(),
                share: *share,
            })
            .collect(),
        parts: listed
            .shares
            .parts
            .iter()
            .take(SHARES)
            .filter_map(|(part, share)| {
                Some(Share {
                    name: circuit.part(*part)?.name.clone(),
                    share: *share,
                })
            })
            .collect(),
    }
}

fn determinant(screen: &Screen) -> DeterminantReport {
    match (&screen.determinant, &screen.doubt) {
        (Some(found), _) => DeterminantReport {
            encirclements: found.turns(),
            off_network_unstable: found.off_roots,
            evaluations: found.evaluations,
            certified: Some(found.relied_above_hz.is_none()),
            failed_hz: found.relied_above_hz.map(|hz| {
                let fastest = screen.modes.iter().flat_map(|modes| &modes.list);
                let end = fastest.map(|mode| mode.s_rad_per_s.norm() / std::f64::consts::TAU);
                [hz, end.fold(hz, f64::max)]
            }),
        },
        (None, Some(Doubt::NotCounted(failure))) => DeterminantReport {
            evaluations: failure.evaluations,
            certified: Some(false),
            failed_hz: failure.failed_hz,
            ..DeterminantReport::default()
        },
        (None, _) => DeterminantReport::default(),
    }
}

fn driving_points(block: &BlockCircuit, screen: &Screen) -> Vec<DrivingPointReport> {
    screen
        .driving
        .iter()
        .map(|point| DrivingPointReport {
            node: block
                .circuit
                .node_name(NodeRef::Node(point.node))
                .to_owned(),
            worst_siemens: point.worst_siemens,
            worst_hz: point.worst_hz,
            ranges_hz: point.ranges_hz.clone(),
            startup_hz: point.startup_hz.clone(),
        })
        .collect()
}
