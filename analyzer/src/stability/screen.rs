//! The screen of one circuit: all methods from one system, compared with each other.

use super::active::{ActiveSet, active_sources};
use super::delayed;
use super::determinant::{Determinant, DeterminantFailure, count};
use super::driving_point::{DrivingPoint, driving_points};
use super::modes::{
    AXIS_TOLERANCE, LISTED_DAMPING, Mode, ModeFailure, Modes, Participation, natural_modes,
    participation,
};
use super::probe::{Solver, SolverFailure};
use super::two_port::{TwoPort, TwoPortWatch};
use super::verdict::Verdict;
use crate::assembly::{Switch, Unknown};
use crate::cancel::{Cancel, Cancelled};
use crate::circuit::{Circuit, NodeId, NodeRef, PartId};
use crate::linalg::plan::Plan;
use crate::linalg::workspace::Workspace;
use crate::sweep::frequency_grid;

/// What to screen and how far.
#[derive(Clone, Debug)]
pub struct ScreenRequest<'a> {
    /// The terminated circuit.
    pub circuit: &'a Circuit,
    /// Sets of sources claimed to model passive parts.
    pub claims: Vec<Vec<PartId>>,
    /// The parts that are judged, when not all are.
    pub judged: Option<&'a [PartId]>,
    /// A sweep that the designer asks for, hertz.
    pub sweep_hz: Option<[f64; 2]>,
    /// The sweep otherwise, widened to every oscillatory mode of the active sources.
    pub default_sweep_hz: [f64; 2],
    /// States up to which modes are computed.
    pub states: usize,
}

/// A part takes part in a mode from this share on ..
const TAKES_PART: f64 = 0.01;
/// .. or when a change of its value moves the mode by this much of its distance from the axis: a
/// weak source decides over a mode of high Q.
const MOVES_DAMPING: f64 = 0.1;

/// A listed mode with its shares.
#[derive(Clone, PartialEq, Debug)]
pub struct ListedMode {
    /// The mode.
    pub mode: Mode,
    /// Its shares.
    pub shares: Participation,
    /// Whether an active source takes part.
    pub active: bool,
    /// Whether the network with the sources off has it too.
    pub unmoved: bool,
}

/// Why nothing certain can be said.
#[derive(Clone, PartialEq, Debug)]
#[non_exhaustive]
pub enum Doubt {
    /// The circuit has no nodes.
    Empty,
    /// A value is not finite.
    NotFinite,
    /// det A(s) = 0 for every s.
    Singular {
        /// Nodes of the null vectors.
        nodes: Vec<NodeId>,
        /// Branches of the null vectors.
        parts: Vec<PartId>,
    },
    /// The numerics failed; in words.
    Numeric(String),
    /// The determinant could not be followed.
    NotCounted(DeterminantFailure),
    /// Two methods contradict each other; in words.
    Disagree(String),
}

/// Everything the screen of one circuit tells.
#[derive(Clone, PartialEq, Debug)]
pub struct Screen {
    /// Unknowns of the system.
    pub unknowns: usize,
    /// The sweep, hertz.
    pub sweep_hz: [f64; 2],
    /// The sources that were switched off for comparison, and claims that failed.
    pub active: ActiveSet,
    /// All modes; `None` when there are too many or numerics failed.
    pub modes: Option<Modes>,
    /// Modes with the active sources off.
    pub off_modes: Option<Modes>,
    /// Too many states for exact modes: how many.
    pub too_many_states: Option<usize>,
    /// With delays, the band (hertz) that was followed: the counts are of what lies within, and
    /// `modes` holds those that were found.
    pub delays_followed_hz: Option<[f64; 2]>,
    /// Modes of little damping and the one of largest growth, growth falling.
    pub listed: Vec<ListedMode>,
    /// Counts by the normalized determinant.
    pub determinant: Option<Determinant>,
    /// Nodes with negative conductance.
    pub driving: Vec<DrivingPoint>,
    /// Two-port factors.
    pub two_port: Option<TwoPort>,
    /// What forbids a clean verdict.
    pub doubt: Option<Doubt>,
    /// The verdict, from this circuit alone.
    pub verdict: Verdict,
}

impl Screen {
    fn undetermined(
        request: &ScreenRequest<'_>,
        unknowns: usize,
        active: ActiveSet,
        doubt: Doubt,
    ) -> Self {
        Self {
            unknowns,
            sweep_hz: request.sweep_hz.unwrap_or(request.default_sweep_hz),
            active,
            modes: None,
            off_modes: None,
            too_many_states: None,
            delays_followed_hz: None,
            listed: Vec::new(),
            determinant: None,
            driving: Vec::new(),
            two_port: None,
            doubt: Some(doubt),
            verdict: Verdict::Undetermined,
        }
    }

    /// Right-half-plane modes, from the modes or, beyond their limit, from the determinant.
    pub fn unstable_modes(&self) -> Option<usize> {
        match (&self.modes, &self.determinant) {
            (_, Some(determinant)) if self.delays_followed_hz.is_some() => {
                Some(determinant.on_roots)
            }
            (Some(modes), _) => Some(modes.unstable()),
            (None, Some(determinant)) => Some(determinant.on_roots),
            (None, None) => None,
        }
    }

    /// Listed modes that grow.
    pub fn growing(&self) -> impl Iterator<Item = &ListedMode> {
        self.listed
            .iter()
            .filter(|listed| listed.mode.damping() < -AXIS_TOLERANCE)
    }

    /// Listed modes on the axis.
    pub fn resting(&self) -> impl Iterator<Item = &ListedMode> {
        self.listed
            .iter()
            .filter(|listed| listed.mode.damping().abs() <= AXIS_TOLERANCE)
    }
}

/// The active sources that are judged: those that are switched off for comparison.
fn judged_sources(request: &ScreenRequest<'_>, active: &ActiveSet) -> Vec<PartId> {
    let judged = |id: &PartId| request.judged.is_none_or(|judged| judged.contains(id));
    active.sources.iter().copied().filter(judged).collect()
}

/// The solver of a request: the judged active sources are those that are switched off.
///
/// # Errors
/// Why there is no system.
pub fn solver_of(request: &ScreenRequest<'_>, active: &ActiveSet) -> Result<Solver, SolverFailure> {
    solver_from(request, active, None)
}

fn solver_from(
    request: &ScreenRequest<'_>,
    active: &ActiveSet,
    earlier: Option<&Plan>,
) -> Result<Solver, SolverFailure> {
    let off = judged_sources(request, active);
    let pairs: Vec<[NodeRef; 2]> = Vec::new();
    Solver::with_plan(request.circuit, &Switch::off(off), &pairs, earlier)
}

/// What the screen of a circuit leaves for the screen of the same circuit with other values.
#[derive(Clone, Debug)]
pub struct Earlier {
    plan: Plan,
    on: Option<Modes>,
    off: Option<Modes>,
}

/// Screens a circuit.
///
/// # Errors
/// [`Cancelled`] when the flag was set before the end.
pub fn screen(request: &ScreenRequest<'_>, cancel: &Cancel) -> Result<Screen, Cancelled> {
    screen_from(request, None, cancel).map(|(screen, _)| screen)
}

/// As [`screen`], starting from what an earlier screen left: the same answer, sooner.
///
/// # Errors
/// [`Cancelled`] when the flag was set before the end.
pub fn screen_from(
    request: &ScreenRequest<'_>,
    earlier: Option<&Earlier>,
    cancel: &Cancel,
) -> Result<(Screen, Option<Earlier>), Cancelled> {
    cancel.check()?;
    let active = active_sources(request.circuit, &request.claims);
    let solver = match solver_from(request, &active, earlier.map(|earlier| &earlier.plan)) {
        Ok(solver) => solver,
        Err(failure) => {
            let unknowns = crate::assembly::Unknowns::new(request.circuit).len();
            let doubt = doubt_of(request.circuit, failure);
            let screen = Screen::undetermined(request, unknowns, active, doubt);
            return Ok((screen, None));
        }
    };
    cancel.check()?;
    let work = Work {
        request,
        cancel,
        solver: &solver,
        earlier,
    };
    let screen = work.run(active)?;
    let left = Earlier {
        plan: solver.plan.clone(),
        on: screen.modes.clone(),
        off: screen.off_modes.clone(),
    };
    Ok((screen, Some(left)))
}

fn doubt_of(circuit: &Circuit, failure: SolverFailure) -> Doubt {
    match failure {
        SolverFailure::Empty => Doubt::Empty,
        SolverFailure::NotFinite => Doubt::NotFinite,
        SolverFailure::Numeric(error) => Doubt::Numeric(error.to_string()),
        SolverFailure::Singular { unknowns } => {
            let all = crate::assembly::Unknowns::new(circuit);
            let (mut nodes, mut parts) = (Vec::new(), Vec::new());
            for row in unknowns {
                match all.of_row(row) {
                    Some(Unknown::Node(node)) => nodes.push(node),
                    Some(Unknown::Branch(part)) => parts.push(part),
                    None => {}
                }
            }
            Doubt::Singular { nodes, parts }
        }
    }
}

/// What the modes and the determinants say.
struct Counted {
    modes: Option<Modes>,
    off: Option<Modes>,
    too_many_states: Option<usize>,
    delays_followed_hz: Option<[f64; 2]>,
    mode_doubt: Option<Doubt>,
    counted: Result<Determinant, DeterminantFailure>,
}

struct Work<'a> {
    request: &'a ScreenRequest<'a>,
    cancel: &'a Cancel,
    solver: &'a Solver,
    earlier: Option<&'a Earlier>,
}

impl Work<'_> {
    fn run(&self, active: ActiveSet) -> Result<Screen, Cancelled> {
        let unknowns = self.solver.system.unknowns.len();
        let stop = || self.cancel.is_set();
        let Counted {
            modes,
            off,
            too_many_states,
            delays_followed_hz,
            mode_doubt,
            counted,
        } = if self.solver.system.has_delays() {
            self.count_with_delays(&active)?
        } else {
            self.count_lumped()?
        };
        let found = match (&modes, &counted) {
            (None, Ok(determinant)) if determinant.on_roots > 0 => {
                let band_hz = self
                    .request
                    .sweep_hz
                    .unwrap_or(self.request.default_sweep_hz);
                delayed::growing_modes(self.solver, band_hz, determinant.on_roots, &stop).ok()
            }
            _ => None,
        };
        self.cancel.check()?;
        let listed = match modes.as_ref().or(found.as_ref()) {
            Some(modes) => self.list(modes, off.as_ref(), &active),
            None => Ok(Vec::new()),
        };
        let (listed, list_doubt) = match listed {
            Ok(listed) => (listed, None),
            Err(doubt) => (Vec::new(), Some(doubt)),
        };
        self.cancel.check()?;
        let sweep_hz = self.sweep(&listed);
        let grid = self.grid(sweep_hz, modes.as_ref());
        let mut two_port = TwoPortWatch::new(self.solver, self.request.circuit);
        let mut watch = |ws: &Workspace, hz: &[f64]| two_port.see(ws, hz);
        let nodes = self.judged_nodes();
        let driving = driving_points(self.solver, &grid, nodes.as_deref(), &mut watch, &stop);
        self.cancel.check()?;
        let (driving, drive_doubt) = match driving {
            Ok(found) => (found.unwrap_or_default(), None),
            Err(error) => (Vec::new(), Some(Doubt::Numeric(error.to_string()))),
        };
        let (determinant, count_doubt) = match counted {
            Ok(determinant) => (Some(determinant), None),
            Err(failure) => (None, Some(Doubt::NotCounted(failure))),
        };
        let disagreement = determinant
            .as_ref()
            .and_then(|d| match delays_followed_hz {
                Some(_) => delayed_disagreement(modes.as_ref(), d),
                None => disagreement(modes.as_ref(), off.as_ref(), d),
            })
            .map(Doubt::Disagree);
        let doubt = mode_doubt
            .or(count_doubt)
            .or(disagreement)
            .or(list_doubt)
            .or(drive_doubt);
        let verdict = verdict_of(
            modes.as_ref(),
            determinant.as_ref(),
            doubt.as_ref(),
            too_many_states.is_some(),
        );
        Ok(Screen {
            unknowns,
            sweep_hz,
            active,
            modes,
            off_modes: off,
            too_many_states,
            delays_followed_hz,
            listed,
            determinant,
            driving,
            two_port: two_port.finish(),
            doubt,
            verdict,
        })
    }

    /// Exact modes, and the counts of both determinants.
    fn count_lumped(&self) -> Result<Counted, Cancelled> {
        let stop = || self.cancel.is_set();
        let states = self.request.states;
        let before = |off: bool| {
            let earlier = self.earlier?;
            if off { &earlier.off } else { &earlier.on }.as_ref()
        };
        let on = natural_modes(self.solver, false, states, before(false), &stop);
        self.cancel.check()?;
        let off = if self.solver.off_structure.singular {
            None
        } else {
            natural_modes(self.solver, true, states, before(true), &stop).ok()
        };
        self.cancel.check()?;
        let too_many_states = match &on {
            Err(ModeFailure::TooMany { states }) => Some(*states),
            _ => None,
        };
        let mode_doubt = match &on {
            Err(ModeFailure::Numeric(error)) => Some(Doubt::Numeric(error.to_string())),
            _ => None,
        };
        let modes = on.ok();
        let counted = count(self.solver, modes.as_ref(), off.as_ref(), &stop);
        self.cancel.check()?;
        Ok(Counted {
            modes,
            off,
            too_many_states,
            delays_followed_hz: None,
            mode_doubt,
            counted,
        })
    }

    /// With delays: what can be counted and found in the band of the sweep.
    fn count_with_delays(&self, active: &ActiveSet) -> Result<Counted, Cancelled> {
        let stop = || self.cancel.is_set();
        let band_hz = self
            .request
            .sweep_hz
            .unwrap_or(self.request.default_sweep_hz);
        let off = judged_sources(self.request, active);
        let found = delayed::judge(
            self.solver,
            self.request.circuit,
            &off,
            active,
            band_hz,
            &stop,
        );
        self.cancel.check()?;
        Ok(match found {
            Ok(found) => Counted {
                modes: Some(found.modes),
                off: None,
                too_many_states: None,
                delays_followed_hz: Some(found.band_hz),
                mode_doubt: None,
                counted: found.counted,
            },
            Err(error) => Counted {
                modes: None,
                off: None,
                too_many_states: None,
                delays_followed_hz: Some(band_hz),
                mode_doubt: Some(Doubt::Numeric(error.to_string())),
                counted: Err(DeterminantFailure {
                    stopped: false,
                    reason: error.to_string(),
                    failed_hz: None,
                    evaluations: 0,
                }),
            },
        })
    }

    fn list(
        &self,
        modes: &Modes,
        off: Option<&Modes>,
        active: &ActiveSet,
    ) -> Result<Vec<ListedMode>, Doubt> {
        let chosen: Vec<Mode> = modes
            .list
            .iter()
            .enumerate()
            .filter(|(index, mode)| *index == 0 || mode.damping() < LISTED_DAMPING)
            .map(|(_, mode)| mode.clone())
            .collect();
        let shares = participation(self.solver, self.request.circuit, &chosen)
            .map_err(|error| Doubt::Numeric(error.to_string()))?;
        Ok(chosen
            .into_iter()
            .zip(shares)
            .map(|(mode, shares)| {
                let reach = MOVES_DAMPING * mode.s_rad_per_s.re.abs();
                let moves = |id: &PartId| {
                    let sensitivity = shares.sensitivity_rad_per_s.get(id.0 as usize);
                    sensitivity.is_some_and(|ds| ds.norm() >= reach)
                };
                let takes_part = shares.parts.iter().any(|(id, share)| {
                    active.sources.contains(id) && (*share >= TAKES_PART || moves(id))
                });
                let unmoved = off.is_some_and(|off| {
                    off.list.iter().any(|other| {
                        let gap = (other.s_rad_per_s - mode.s_rad_per_s).norm();
                        gap <= AXIS_TOLERANCE * mode.s_rad_per_s.norm()
                    })
                });
                ListedMode {
                    mode,
                    shares,
                    active: takes_part,
                    unmoved,
                }
            })
            .collect())
    }

    /// The sweep asked for; otherwise the default one, widened to every oscillatory mode in which
    /// an active source takes part.
    fn sweep(&self, listed: &[ListedMode]) -> [f64; 2] {
        const BEYOND: f64 = 3.0;
        if let Some(sweep) = self.request.sweep_hz {
            return sweep;
        }
        let [mut low, mut high] = self.request.default_sweep_hz;
        for listed in listed {
            let hz = listed.mode.hz();
            if listed.active && hz > 0.0 && listed.mode.damping() < LISTED_DAMPING {
                low = low.min(hz / BEYOND);
                high = high.max(hz * BEYOND);
            }
        }
        [low, high]
    }

    fn grid(&self, sweep_hz: [f64; 2], modes: Option<&Modes>) -> Vec<f64> {
        let around: Vec<(f64, f64)> = modes
            .map(|modes| {
                modes
                    .list
                    .iter()
                    .map(|mode| (mode.hz(), mode.damping()))
                    .collect()
            })
            .unwrap_or_default();
        frequency_grid(sweep_hz[0], sweep_hz[1], &around)
    }

    /// The nodes of the judged parts.
    fn judged_nodes(&self) -> Option<Vec<NodeId>> {
        let judged = self.request.judged?;
        let mut nodes: Vec<NodeId> = judged
            .iter()
            .filter_map(|id| self.request.circuit.part(*id))
            .flat_map(|part| part.kind.terminals().iter().chain(part.kind.control()))
            .filter_map(|node| node.node())
            .collect();
        nodes.sort_unstable();
        nodes.dedup();
        Some(nodes)
    }
}

/// As [`disagreement`] with delays: the modes were sought, and not all need have been found.
fn delayed_disagreement(modes: Option<&Modes>, determinant: &Determinant) -> Option<String> {
    let found = modes?.unstable();
    let counted = determinant.on_roots;
    (found > counted || (found == 0 && counted > 0)).then(|| {
        format!(
            "{found} right-half-plane modes were found, but the phase of the determinant counts {counted}"
        )
    })
}

/// What two methods contradict each other about, in words.
fn disagreement(
    modes: Option<&Modes>,
    off: Option<&Modes>,
    determinant: &Determinant,
) -> Option<String> {
    let modes = modes?;
    let z = modes.unstable();
    if z != determinant.on_roots {
        return Some(format!(
            "{z} right-half-plane modes, but the phase of the determinant counts {}",
            determinant.on_roots
        ));
    }
    let (off, counted) = (off?, determinant.off_roots?);
    let p = off.unstable();
    (p != counted).then(|| {
        format!(
            "{p} right-half-plane modes with the sources off, but the phase of the determinant counts {counted}"
        )
    })
}

fn verdict_of(
    modes: Option<&Modes>,
    determinant: Option<&Determinant>,
    doubt: Option<&Doubt>,
    too_many: bool,
) -> Verdict {
    let Some(determinant) = determinant else {
        return Verdict::Undetermined;
    };
    if matches!(doubt, Some(Doubt::Disagree(_))) {
        return Verdict::Undetermined;
    }
    // Unstable is said when both counts see it; beyond the limit of states there is but one.
    let both = modes.is_some() || too_many;
    if determinant.on_roots > 0 && both {
        return Verdict::Unstable;
    }
    if !both || doubt.is_some() {
        return Verdict::Undetermined;
    }
    match modes {
        Some(modes) if modes.on_axis() > 0 => Verdict::Marginal,
        _ => Verdict::Stable,
    }
}
