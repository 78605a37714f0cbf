//! Invented results for the tests of the renderers: what a screen of a two-stage circuit could
//! tell, with every kind of gap in it.

use super::{LintResult, Places};
use squeg_analyzer::finding::{Finding, RuleId, Severity};
use squeg_analyzer::host::{
    BlockReport, DeterminantReport, DrivingPointReport, FileRole, Host, ModeReport, Share, Sight,
    SourceText, TwoPortReport, Verdict,
};
use squeg_analyzer::text::{FileId, Span, TextRange};
use std::time::Duration;

const TEXT: &str = "\
Two stages of a tide gauge
*~ block stage in=a out=d
*~ block \u{3A9}box in=d
R\u{3A9}1 a\tb 10M
G2 d 0 b 0 20m
";

/// A host and a result that fits it.
pub struct SampleRun {
    host: Host,
    names: Vec<String>,
    result: LintResult,
}

impl SampleRun {
    /// Gives result and places to a renderer.
    pub fn with<T>(&self, render: impl Fn(&LintResult, &Places<'_>) -> T) -> T {
        render(&self.result, &Places::new(&self.host, &self.names))
    }
}

/// The place of the first `word`.
fn span(word: &str) -> Span {
    let start = TEXT.find(word).unwrap_or(0) as u32;
    let range = TextRange::new(start, start + word.len() as u32);
    Span::new(FileId(0), range)
}

/// Everything at once.
pub fn run() -> SampleRun {
    let mut host = Host::new(|| Duration::ZERO);
    host.add_file(SourceText::new(TEXT), FileRole::Top);
    SampleRun {
        host,
        names: vec!["gauge/two stages.cir".to_owned()],
        result: LintResult {
            findings: vec![value_finding(), mode_finding()],
            blocks: vec![stage(), opaque()],
        },
    }
}

fn value_finding() -> Finding {
    let message = "`10M` reads as 10.0 m\u{3A9}\x1b[2J".to_owned();
    let id = RuleId("milli-or-mega");
    let mut finding = Finding::new(id, Severity::Warning, span("10M"), String::new());
    // Renderers must stand a control character, though the analyzer lets none through.
    finding.message = message;
    finding.fix("write `10meg`", span("10M"), "10meg")
}

fn mode_finding() -> Finding {
    let message = "natural mode at 1.33 GHz grows with time constant 3.23 ns".to_owned();
    let id = RuleId("unstable-mode");
    let mut finding = Finding::new(id, Severity::Error, span("G2"), message);
    finding.block = Some("stage".to_owned());
    finding.node = Some("d".to_owned());
    finding.ranges_hz = vec![[0.94e9, 1.72e9], [1e10, f64::INFINITY]];
    finding.values = vec![("hz", 1.33e9), ("worst_siemens", f64::NAN)];
    finding.fingerprint = 0xfedc_ba98_7654_3210;
    finding.also(span("stage"), "in this block")
}

fn share(name: &str, share: f64) -> Share {
    Share {
        name: name.to_owned(),
        share,
    }
}

/// An unstable block with everything known.
pub fn stage() -> BlockReport {
    BlockReport {
        name: "stage".to_owned(),
        span: span("stage in"),
        verdict: Verdict::Unstable,
        sight: Sight::Intrinsic,
        why: Some("rail vdd taken as ideal".to_owned()),
        unknowns: 14,
        sweep_hz: [1e3, 100e9],
        elapsed_ms: 2.5,
        unstable_modes: Some(2),
        axis_modes: Some(0),
        modes: vec![
            ModeReport {
                hz: 1.33e9,
                growth_per_s: 3.1e8,
                damping: -0.0371,
                nodes: vec![share("d", 0.62), share("x1.g", 0.3)],
                parts: vec![share("G2", 0.55)],
            },
            ModeReport {
                hz: 159.0,
                growth_per_s: -500.0,
                damping: 0.4475,
                nodes: vec![share("b", 1.0)],
                parts: Vec::new(),
            },
        ],
        determinant: DeterminantReport {
            encirclements: Some(2),
            off_network_unstable: Some(0),
            evaluations: 812,
            certified: Some(true),
            failed_hz: None,
        },
        driving_point: vec![DrivingPointReport {
            node: "d".to_owned(),
            worst_siemens: -1.92e-3,
            worst_hz: 1.31e9,
            ranges_hz: vec![[0.94e9, 1.72e9]],
            startup_hz: vec![1.33e9],
        }],
        two_port: Some(TwoPortReport {
            mu_min: 0.84,
            mu_min_hz: 650e6,
            k_min: None,
            k_min_hz: None,
            unilateral: false,
            proviso: Some(false),
        }),
    }
}

/// A block of which hardly anything is known.
pub fn opaque() -> BlockReport {
    BlockReport {
        name: "\u{3A9}box".to_owned(),
        span: span("\u{3A9}box"),
        verdict: Verdict::Undetermined,
        sight: Sight::PortsOnly,
        why: Some("a card cannot be read (line 4)".to_owned()),
        unknowns: 0,
        sweep_hz: [1e3, 100e9],
        elapsed_ms: 0.0,
        unstable_modes: None,
        axis_modes: None,
        modes: Vec::new(),
        determinant: DeterminantReport::default(),
        driving_point: Vec::new(),
        two_port: None,
    }
}

/// A block with a mode that grows without oscillation.
pub fn latch() -> BlockReport {
    BlockReport {
        unstable_modes: Some(1),
        modes: vec![ModeReport {
            hz: 0.0,
            growth_per_s: 5e5,
            damping: -1.0,
            nodes: vec![share("q", 0.5)],
            parts: Vec::new(),
        }],
        ..opaque()
    }
}
