//! What is told of the word under the cursor: a node's driving point with a small curve, a
//! block's verdict and evidence.

use super::prepared::{Prepared, Screening};
use super::report::BlockReport;
use super::screening::request;
use crate::circuit::{NodeId, PartKind};
use crate::elaborate::{BlockCircuit, MarkData};
use crate::stability::{Probe, active_sources, driving_point_admittance, solver_of};
use crate::syntax::StatementKind;
use crate::text::{FileId, Span, TextRange};
use crate::units::{engineering, hertz, hertz_range, seconds};

/// A text for a place.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Hover {
    /// The word it speaks of.
    pub range: TextRange,
    /// Markdown that also reads well as plain text.
    pub markdown: String,
}

/// Said wherever a verdict is given.
pub const CAUTION: &str = "A linear small-signal screen at the given bias; it does not replace large-signal analysis, measurement, radio licensing or the judgement of a qualified engineer.";

/// Blocks told of in one hover.
const MOST: usize = 3;

impl Prepared {
    /// What is known of the word at a byte offset. `screening` is the latest result, if there is one.
    pub fn hover(&self, screening: Option<&Screening>, file: FileId, offset: u32) -> Option<Hover> {
        let parse = self.program.file(file)?;
        let statement = parse.statements.iter().find(|s| s.range.touches(offset))?;
        match &statement.kind {
            StatementKind::Mark(_) => self.hover_mark(screening, file, statement.range),
            StatementKind::Card(card) => {
                let words = card.kind.nodes().iter().map(|word| word.range);
                let word = words.into_iter().find(|range| range.touches(offset))?;
                let name = parse.tree.slice(word);
                self.hover_node(screening, name, Span::new(file, word))
            }
            _ => None,
        }
    }

    fn hover_mark(
        &self,
        screening: Option<&Screening>,
        file: FileId,
        range: TextRange,
    ) -> Option<Hover> {
        let inside = |span: Span| span.file == file && range.meets(span.range);
        let mark = self
            .elaborated
            .marks
            .iter()
            .find(|mark| inside(mark.span))?;
        let MarkData::Block(block) = &mark.data else {
            return None;
        };
        let report = screening.and_then(|s| s.blocks.iter().find(|b| b.span == block.span));
        let markdown = match report {
            Some(report) => block_text(report),
            None => format!("**block {}** is being screened", block.name),
        };
        Some(Hover {
            range: mark.span.range.cover(block.span.range),
            markdown,
        })
    }

    fn hover_node(&self, screening: Option<&Screening>, name: &str, span: Span) -> Option<Hover> {
        let suffix = format!(".{}", name.to_ascii_lowercase());
        let mut texts = Vec::new();
        for block in &self.elaborated.blocks {
            let report = screening.and_then(|s| s.blocks.iter().find(|b| b.span == block.span));
            let nodes = block.circuit.nodes.iter().enumerate();
            let matching = nodes.filter(|(index, node)| {
                let lower = node.name.to_ascii_lowercase();
                // In a subcircuit the word stands for a node of each instance.
                let here = block.map.node(NodeId(*index as u32)).map(|s| s.file) == Some(span.file);
                lower == suffix[1..] || (here && lower.ends_with(&suffix))
            });
            for (index, node) in matching.take(MOST.saturating_sub(texts.len())) {
                let id = NodeId(index as u32);
                texts.push(self.node_text(block, report, id, &node.name));
            }
        }
        (!texts.is_empty()).then(|| Hover {
            range: span.range,
            markdown: texts.join("\n\n"),
        })
    }

    fn node_text(
        &self,
        block: &BlockCircuit,
        report: Option<&BlockReport>,
        node: NodeId,
        name: &str,
    ) -> String {
        let mut text = format!("**node {name}** in block {}: ", block.name);
        let Some(report) = report else {
            return text + "being screened";
        };
        match report.driving_point.iter().find(|p| p.node == name) {
            Some(point) => {
                text += &format!(
                    "driving-point conductance negative, {} at {}",
                    engineering(point.worst_siemens, "S"),
                    hertz(point.worst_hz)
                );
                for [low, high] in &point.ranges_hz {
                    text += &format!("\n- negative {}", hertz_range(*low, *high));
                }
                for hz in &point.startup_hz {
                    text += &format!("\n- start-up condition at {}", hertz(*hz));
                }
            }
            None => text += "driving-point conductance not negative in the sweep",
        }
        if let Some(curve) = self.curve(block, node, report.sweep_hz) {
            let [low, high] = report.sweep_hz;
            text += &format!(
                "\n\n`{curve}`\n\nconductance over admittance, -1 to 1, from {} to {}",
                hertz(low),
                hertz(high)
            );
        }
        text
    }

    /// Re Y over |Y| on a logarithmic axis, drawn in eight steps from -1 to 1.
    fn curve(&self, block: &BlockCircuit, node: NodeId, sweep_hz: [f64; 2]) -> Option<String> {
        const STEPS: [char; 8] = ['▁', '▂', '▃', '▄', '▅', '▆', '▇', '█'];
        const POINTS: usize = 48;
        let computable = |kind: &PartKind| !matches!(kind, PartKind::NotComputed { .. });
        if !block
            .circuit
            .parts
            .iter()
            .all(|part| computable(&part.kind))
        {
            return None;
        }
        let request = request(self, block);
        let active = active_sources(&block.circuit, &request.claims);
        let solver = solver_of(&request, &active).ok()?;
        let [low, high] = sweep_hz;
        let hz: Vec<f64> = (0..POINTS)
            .map(|k| low * (high / low).powf(k as f64 / (POINTS - 1) as f64))
            .collect();
        let y = driving_point_admittance(&solver, Probe::Node(node), &hz).ok()?;
        let drawn = y.iter().map(|y| {
            let share = (y.re / y.norm()).clamp(-1.0, 1.0);
            let step = ((share + 1.0) / 2.0 * (STEPS.len() - 1) as f64).round() as usize;
            STEPS.get(step).copied().unwrap_or(' ')
        });
        Some(drawn.collect())
    }
}

/// A block's verdict and evidence.
fn block_text(report: &BlockReport) -> String {
    let mut text = format!("**block {}: {}**", report.name, report.verdict.as_str());
    if let Some(why) = &report.why {
        text += &format!("\n\n{why}");
    }
    text.push('\n');
    if let Some(count) = report.unstable_modes {
        text += &format!("\n- {count} growing natural modes in the whole plane");
    }
    if let Some(mode) = report.modes.first() {
        let rate = seconds(1.0 / mode.growth_per_s.abs());
        let word = if mode.growth_per_s > 0.0 {
            "grows"
        } else {
            "decays"
        };
        text += &format!(
            "\n- least damped mode: {}, {word} with time constant {rate}, damping {:.3}",
            hertz(mode.hz),
            mode.damping
        );
    }
    let counts = (
        report.determinant.encirclements,
        report.determinant.off_network_unstable,
    );
    if let (Some(turns), Some(off)) = counts {
        text += &format!(
            "\n- normalized determinant: {turns} clockwise encirclements, {off} growing modes with the sources off"
        );
    }
    if let Some(two_port) = &report.two_port {
        text += &format!(
            "\n- least mu {:.3} at {}",
            two_port.mu_min,
            hertz(two_port.mu_min_hz)
        );
    }
    let negative = report.driving_point.len();
    text += &format!("\n- {negative} nodes with negative conductance somewhere in the sweep");
    text += &format!(
        "\n- {} unknowns, sweep {}, {:.1} ms",
        report.unknowns,
        hertz_range(report.sweep_hz[0], report.sweep_hz[1]),
        report.elapsed_ms
    );
    text + &format!("\n\n{CAUTION}")
}
