//! `lint --format json`: the schema `squeg-lint-1`. The types here are the schema: their fields
//! are its keys in order. Every key is always present; what is unknown, infinite or not a number
//! is null (serde_json writes such doubles so).

use super::LintResult;
use super::places::{Place, Places, Point};
use serde::{Serialize, Serializer};
use squeg_analyzer::finding::{Edit, Finding, Fix, Related};
use squeg_analyzer::host::{
    BlockReport, DeterminantReport, DrivingPointReport, ModeReport, Share, TwoPortReport,
};

/// The whole document.
#[derive(Serialize, Debug)]
pub struct LintDocument<'a> {
    schema: &'static str,
    version: &'static str,
    findings: Vec<JsonFinding<'a>>,
    blocks: Vec<JsonBlock<'a>>,
}

#[derive(Serialize, Debug)]
struct JsonFinding<'a> {
    rule: &'static str,
    severity: &'static str,
    message: &'a str,
    file: &'a str,
    range: JsonRange,
    block: Option<&'a str>,
    node: Option<&'a str>,
    ranges_hz: &'a [[f64; 2]],
    #[serde(serialize_with = "as_map")]
    values: &'a [(&'static str, f64)],
    related: Vec<JsonRelated<'a>>,
    fixes: Vec<JsonFix<'a>>,
    fingerprint: String,
}

#[derive(Serialize, Debug)]
struct JsonRange {
    start: JsonPoint,
    end: JsonPoint,
}

#[derive(Serialize, Debug)]
struct JsonPoint {
    line: u32,
    column: u32,
}

#[derive(Serialize, Debug)]
struct JsonRelated<'a> {
    file: &'a str,
    range: JsonRange,
    message: &'a str,
}

#[derive(Serialize, Debug)]
struct JsonFix<'a> {
    title: &'a str,
    edits: Vec<JsonEdit<'a>>,
}

#[derive(Serialize, Debug)]
struct JsonEdit<'a> {
    file: &'a str,
    range: JsonRange,
    text: &'a str,
}

#[derive(Serialize, Debug)]
struct JsonBlock<'a> {
    name: &'a str,
    file: &'a str,
    line: u32,
    verdict: &'static str,
    sight: &'static str,
    why: Option<&'a str>,
    unknowns: usize,
    sweep_hz: [f64; 2],
    elapsed_ms: f64,
    unstable_modes: Option<usize>,
    axis_modes: Option<usize>,
    modes: Vec<JsonMode<'a>>,
    determinant: JsonDeterminant,
    driving_point: Vec<JsonDrivingPoint<'a>>,
    two_port: Option<JsonTwoPort>,
}

#[derive(Serialize, Debug)]
struct JsonMode<'a> {
    hz: f64,
    growth_per_s: f64,
    damping: f64,
    nodes: Vec<JsonNodeShare<'a>>,
    parts: Vec<JsonPartShare<'a>>,
}

#[derive(Serialize, Debug)]
struct JsonNodeShare<'a> {
    node: &'a str,
    share: f64,
}

#[derive(Serialize, Debug)]
struct JsonPartShare<'a> {
    #[serde(rename = "ref")]
    reference: &'a str,
    share: f64,
}

#[derive(Serialize, Debug)]
struct JsonDeterminant {
    encirclements: Option<i64>,
    off_network_unstable: Option<usize>,
    evaluations: usize,
    certified: Option<bool>,
    failed_hz: Option<[f64; 2]>,
}

#[derive(Serialize, Debug)]
struct JsonDrivingPoint<'a> {
    node: &'a str,
    worst_siemens: f64,
    worst_hz: f64,
    ranges_hz: &'a [[f64; 2]],
    startup_hz: &'a [f64],
}

#[derive(Serialize, Debug)]
struct JsonTwoPort {
    mu_min: f64,
    mu_min_hz: f64,
    k_min: Option<f64>,
    k_min_hz: Option<f64>,
    unilateral: bool,
    proviso: Option<bool>,
}

fn as_map<S: Serializer>(values: &&[(&'static str, f64)], out: S) -> Result<S::Ok, S::Error> {
    out.collect_map(values.iter().copied())
}

impl<'a> LintDocument<'a> {
    /// The document of a run.
    pub fn new(result: &'a LintResult, places: &Places<'a>) -> Self {
        let finding = |finding| JsonFinding::new(finding, places);
        let block = |block| JsonBlock::new(block, places);
        Self {
            schema: "squeg-lint-1",
            version: env!("CARGO_PKG_VERSION"),
            findings: result.findings.iter().map(finding).collect(),
            blocks: result.blocks.iter().map(block).collect(),
        }
    }
}

impl<'a> JsonFinding<'a> {
    fn new(finding: &'a Finding, places: &Places<'a>) -> Self {
        let place = places.place(finding.span);
        let related = |related| JsonRelated::new(related, places);
        let fix = |fix| JsonFix::new(fix, places);
        Self {
            rule: finding.rule.as_str(),
            severity: finding.severity.as_str(),
            message: &finding.message,
            file: place.file,
            range: JsonRange::new(place),
            block: finding.block.as_deref(),
            node: finding.node.as_deref(),
            ranges_hz: &finding.ranges_hz,
            values: &finding.values,
            related: finding.related.iter().map(related).collect(),
            fixes: finding.fixes.iter().map(fix).collect(),
            // A string: a JSON number keeps 53 bits only.
            fingerprint: format!("{:016x}", finding.fingerprint),
        }
    }
}

impl JsonRange {
    fn new(place: Place<'_>) -> Self {
        let point = |point: Point| JsonPoint {
            line: point.line,
            column: point.column,
        };
        Self {
            start: point(place.start),
            end: point(place.end),
        }
    }
}

impl<'a> JsonRelated<'a> {
    fn new(related: &'a Related, places: &Places<'a>) -> Self {
        let place = places.place(related.span);
        Self {
            file: place.file,
            range: JsonRange::new(place),
            message: &related.message,
        }
    }
}

impl<'a> JsonFix<'a> {
    fn new(fix: &'a Fix, places: &Places<'a>) -> Self {
        let edit = |edit: &'a Edit| {
            let place = places.place(edit.span);
            JsonEdit {
                file: place.file,
                range: JsonRange::new(place),
                text: &edit.text,
            }
        };
        Self {
            title: &fix.title,
            edits: fix.edits.iter().map(edit).collect(),
        }
    }
}

impl<'a> JsonBlock<'a> {
    fn new(block: &'a BlockReport, places: &Places<'a>) -> Self {
        let place = places.place(block.span);
        let points = block.driving_point.iter();
        Self {
            name: &block.name,
            file: place.file,
            line: place.start.line,
            verdict: block.verdict.as_str(),
            sight: block.sight.as_str(),
            why: block.why.as_deref(),
            unknowns: block.unknowns,
            sweep_hz: block.sweep_hz,
            elapsed_ms: block.elapsed_ms,
            unstable_modes: block.unstable_modes,
            axis_modes: block.axis_modes,
            modes: block.modes.iter().map(JsonMode::new).collect(),
            determinant: JsonDeterminant::new(&block.determinant),
            driving_point: points.map(JsonDrivingPoint::new).collect(),
            two_port: block.two_port.as_ref().map(JsonTwoPort::new),
        }
    }
}

impl<'a> JsonMode<'a> {
    fn new(mode: &'a ModeReport) -> Self {
        let node = |share: &'a Share| JsonNodeShare {
            node: &share.name,
            share: share.share,
        };
        let part = |share: &'a Share| JsonPartShare {
            reference: &share.name,
            share: share.share,
        };
        Self {
            hz: mode.hz,
            growth_per_s: mode.growth_per_s,
            damping: mode.damping,
            nodes: mode.nodes.iter().map(node).collect(),
            parts: mode.parts.iter().map(part).collect(),
        }
    }
}

impl JsonDeterminant {
    fn new(report: &DeterminantReport) -> Self {
        Self {
            encirclements: report.encirclements,
            off_network_unstable: report.off_network_unstable,
            evaluations: report.evaluations,
            certified: report.certified,
            failed_hz: report.failed_hz,
        }
    }
}

impl<'a> JsonDrivingPoint<'a> {
    fn new(report: &'a DrivingPointReport) -> Self {
        Self {
            node: &report.node,
            worst_siemens: report.worst_siemens,
            worst_hz: report.worst_hz,
            ranges_hz: &report.ranges_hz,
            startup_hz: &report.startup_hz,
        }
    }
}

impl JsonTwoPort {
    fn new(report: &TwoPortReport) -> Self {
        Self {
            mu_min: report.mu_min,
            mu_min_hz: report.mu_min_hz,
            k_min: report.k_min,
            k_min_hz: report.k_min_hz,
            unilateral: report.unilateral,
            proviso: report.proviso,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::samples;
    use super::*;
    use expect_test::expect;

    #[test]
    fn every_key_is_there_and_what_is_unknown_is_null() {
        let run = samples::run();
        let text = run.with(|result, places| {
            let document = LintDocument::new(result, places);
            serde_json::to_string_pretty(&document).unwrap_or_default()
        });
        expect![[r#"
            {
              "schema": "squeg-lint-1",
              "version": "0.1.0",
              "findings": [
                {
                  "rule": "milli-or-mega",
                  "severity": "warning",
                  "message": "`10M` reads as 10.0 mΩ\u001b[2J",
                  "file": "gauge/two stages.cir",
                  "range": {
                    "start": {
                      "line": 4,
                      "column": 9
                    },
                    "end": {
                      "line": 4,
                      "column": 12
                    }
                  },
                  "block": null,
                  "node": null,
                  "ranges_hz": [],
                  "values": {},
                  "related": [],
                  "fixes": [
                    {
                      "title": "write `10meg`",
                      "edits": [
                        {
                          "file": "gauge/two stages.cir",
                          "range": {
                            "start": {
                              "line": 4,
                              "column": 9
                            },
                            "end": {
                              "line": 4,
                              "column": 12
                            }
                          },
                          "text": "10meg"
                        }
                      ]
                    }
                  ],
                  "fingerprint": "0000000000000000"
                },
                {
                  "rule": "unstable-mode",
                  "severity": "error",
                  "message": "natural mode at 1.33 GHz grows with time constant 3.23 ns",
                  "file": "gauge/two stages.cir",
                  "range": {
                    "start": {
                      "line": 5,
                      "column": 1
                    },
                    "end": {
                      "line": 5,
                      "column": 3
                    }
                  },
                  "block": "stage",
                  "node": "d",
                  "ranges_hz": [
                    [
                      940000000.0,
                      1720000000.0
                    ],
                    [
                      10000000000.0,
                      null
                    ]
                  ],
                  "values": {
                    "hz": 1330000000.0,
                    "worst_siemens": null
                  },
                  "related": [
                    {
                      "file": "gauge/two stages.cir",
                      "range": {
                        "start": {
                          "line": 1,
                          "column": 5
                        },
                        "end": {
                          "line": 1,
                          "column": 10
                        }
                      },
                      "message": "in this block"
                    }
                  ],
                  "fixes": [],
                  "fingerprint": "fedcba9876543210"
                }
              ],
              "blocks": [
                {
                  "name": "stage",
                  "file": "gauge/two stages.cir",
                  "line": 2,
                  "verdict": "unstable",
                  "sight": "intrinsic",
                  "why": "rail vdd taken as ideal",
                  "unknowns": 14,
                  "sweep_hz": [
                    1000.0,
                    100000000000.0
                  ],
                  "elapsed_ms": 2.5,
                  "unstable_modes": 2,
                  "axis_modes": 0,
                  "modes": [
                    {
                      "hz": 1330000000.0,
                      "growth_per_s": 310000000.0,
                      "damping": -0.0371,
                      "nodes": [
                        {
                          "node": "d",
                          "share": 0.62
                        },
                        {
                          "node": "x1.g",
                          "share": 0.3
                        }
                      ],
                      "parts": [
                        {
                          "ref": "G2",
                          "share": 0.55
                        }
                      ]
                    },
                    {
                      "hz": 159.0,
                      "growth_per_s": -500.0,
                      "damping": 0.4475,
                      "nodes": [
                        {
                          "node": "b",
                          "share": 1.0
                        }
                      ],
                      "parts": []
                    }
                  ],
                  "determinant": {
                    "encirclements": 2,
                    "off_network_unstable": 0,
                    "evaluations": 812,
                    "certified": true,
                    "failed_hz": null
                  },
                  "driving_point": [
                    {
                      "node": "d",
                      "worst_siemens": -0.00192,
                      "worst_hz": 1310000000.0,
                      "ranges_hz": [
                        [
                          940000000.0,
                          1720000000.0
                        ]
                      ],
                      "startup_hz": [
                        1330000000.0
                      ]
                    }
                  ],
                  "two_port": {
                    "mu_min": 0.84,
                    "mu_min_hz": 650000000.0,
                    "k_min": null,
                    "k_min_hz": null,
                    "unilateral": false,
                    "proviso": false
                  }
                },
                {
                  "name": "Ωbox",
                  "file": "gauge/two stages.cir",
                  "line": 3,
                  "verdict": "undetermined",
                  "sight": "ports-only",
                  "why": "a card cannot be read (line 4)",
                  "unknowns": 0,
                  "sweep_hz": [
                    1000.0,
                    100000000000.0
                  ],
                  "elapsed_ms": 0.0,
                  "unstable_modes": null,
                  "axis_modes": null,
                  "modes": [],
                  "determinant": {
                    "encirclements": null,
                    "off_network_unstable": null,
                    "evaluations": 0,
                    "certified": null,
                    "failed_hz": null
                  },
                  "driving_point": [],
                  "two_port": null
                }
              ]
            }"#]]
        .assert_eq(&text);
    }
}
