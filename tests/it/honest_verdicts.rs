//! Faults that were found once: verdicts without a finding, figures without digits, marks that did
//! more or less than they said.

use super::load::Loaded;
use squeg_analyzer::finding::Severity;
use squeg_analyzer::host::{BlockReport, Verdict};

fn rules(loaded: &Loaded) -> Vec<(Severity, &str)> {
    let findings = loaded.screening.findings.iter();
    findings.map(|f| (f.severity, f.rule.as_str())).collect()
}

fn block(text: &str) -> BlockReport {
    Loaded::text(text).screening.blocks[0].clone()
}

/// The message of the only `unknown-mark` of a text.
fn bad_mark(text: &str) -> String {
    let loaded = Loaded::text(text);
    let found: Vec<_> = loaded
        .screening
        .findings
        .iter()
        .filter(|finding| finding.rule.as_str() == "unknown-mark")
        .collect();
    assert_eq!(found.len(), 1, "{text}\n{:?}", rules(&loaded));
    found[0].message.clone()
}

/// A field-effect stage whose gate and drain are shorted by chokes at low frequencies.
const CHOKED: &str = "\
Buoy receiver, choked stage
*~ block stage in=g out=d
*~ device M1 pins=d,g,s gm=60m gds=1.5m cgs=0.6p cgd=60f cds=0.2p rg=2
M1 d g 0 0 nrf
Lg g 0 10n
Ld d 0 100n
.model nrf nmos
";

#[test]
fn an_oscillator_of_many_states_is_an_error_on_its_source() {
    let mut text = String::from("t\n*~ block big in=n0\nL1 n0 0 1n\nG1 n0 0 0 n0 80m\n");
    for k in 0..1600 {
        text += &format!("R{k} n{k} n{} 1k\nC{k} n{} 0 1p\n", k + 1, k + 1);
    }
    let loaded = Loaded::text(&text);
    assert_eq!(loaded.screening.blocks[0].verdict, Verdict::Unstable);
    let found: Vec<_> = loaded
        .screening
        .findings
        .iter()
        .filter(|finding| finding.rule.as_str() == "unstable-mode")
        .collect();
    assert_eq!(found.len(), 1);
    assert_eq!(found[0].span.range.slice(&text), "G1");
    let trace = loaded.prepared.trace(None, &["modes".to_owned()], &[]);
    let message = trace.expect_err("too many").to_string();
    assert!(message.contains("1601 states"), "{message}");
}

#[test]
fn figures_without_digits_are_not_told() {
    // The terminated matrices lose K's digits towards zero frequency, where it grows beyond 1e5.
    let loaded = Loaded::text(CHOKED);
    let hz = [1e2, 1e3, 1e4, 1e8, 1e9];
    let table = loaded
        .prepared
        .trace(None, &["k".to_owned(), "mu".to_owned()], &hz)
        .expect("two ports");
    let k = |row: usize| table.rows[row][1];
    for (row, hz) in hz.iter().enumerate() {
        let want = reference_k(*hz);
        let near = (k(row) - want).abs() < 0.01 * want.abs();
        assert!(
            k(row).is_nan() || near,
            "K = {} at {hz}, not {want}",
            k(row)
        );
    }
    assert!(
        (k(4) - reference_k(1e9)).abs() < 1e-6,
        "{} {}",
        k(4),
        reference_k(1e9)
    );
    let two_port = loaded.screening.blocks[0].two_port.clone();
    let k_min = two_port
        .and_then(|t| t.k_min)
        .expect("K is known somewhere");
    assert!(k_min > -1.0 && k_min < 1.0, "{k_min}");
}

/// K of `CHOKED` from its admittances, K = (2 g11 g22 - Re y12 y21)/|y12 y21| (J. M. Rollett, IRE
/// Trans. CT-9, 1962, from memory).
fn reference_k(hz: f64) -> f64 {
    use num_complex::Complex64;
    let s = Complex64::new(0.0, std::f64::consts::TAU * hz);
    let (gm, gds, rg) = (60e-3, 1.5e-3, 2.0);
    let (cgs, cgd, cds) = (0.6e-12, 60e-15, 0.2e-12);
    // Behind the gate resistance.
    let y11 = s * (cgs + cgd);
    let (y12, y21) = (-s * cgd, gm - s * cgd);
    let y22 = gds + s * (cgd + cds);
    let d = 1.0 + rg * y11;
    let outer = [
        y11 / d + 1.0 / (s * 10e-9),
        y12 / d,
        y21 / d,
        y22 - rg * y12 * y21 / d + 1.0 / (s * 100e-9),
    ];
    let product = outer[1] * outer[2];
    (2.0 * outer[0].re * outer[3].re - product.re) / product.norm()
}

#[test]
fn passive_networks_are_not_said_to_oscillate() {
    for cards in [
        "R1 a b 50\n",
        "Cc a m 100p\nR1 m 0 1k\nCd m b 100p\n",
        "L1 a b 10n\nC1 a 0 1p\nC2 b 0 1p\n",
        "Lg a 0 10n\nLd b 0 100n\nG1 b 0 a 0 60m\n",
    ] {
        let text = format!("t\n*~ block net in=a out=b\n{cards}");
        let why = block(&text).why.unwrap_or_default();
        assert!(!why.contains("make it oscillate"), "{cards}: {why}");
    }
}

#[test]
fn a_stand_in_needs_a_device() {
    let text = "t\n*~ block osc in=RL\n*~ device G1 gm=1\nCg g 0 200p\nL1 g d 1u\nCd d 0 100p\nRL d 0 1k\nG1 d 0 g 0 2.5m\n";
    assert!(bad_mark(text).contains("neither a semiconductor device"));
    assert_eq!(block(text).verdict, Verdict::Unstable);
}

#[test]
fn keys_of_the_other_kind_of_device_are_refused() {
    let stage = |mark: &str| {
        format!(
            "t\n*~ block a in=b out=c\n*~ device Q1 {mark}\nQ1 c b 0 fast\nRb b 0 1k\nRc c 0 1k\n.model fast npn\n"
        )
    };
    let mixed = stage("pins=c,b,e gm=20m rpi=1k cgs=1p");
    assert!(bad_mark(&mixed).contains("`cgs=` has no place"));
    assert_eq!(block(&mixed).verdict, Verdict::Undetermined);
    let bulk = "t\n*~ block a in=g out=d\n*~ device M1 pins=d,g,s,b gm=20m cgs=1p\nM1 d g 0 0 nch\nRg g 0 1k\nRd d 0 1k\n.model nch nmos\n";
    assert_eq!(block(bulk).verdict, Verdict::Stable);
    let negative = stage("gm=20m rpi=1k tau=-1p");
    assert!(bad_mark(&negative).contains("tau="));
}

#[test]
fn one_count_alone_is_no_unstable_mode() {
    // Time constants of years: the two counts may part, and then the methods disagree.
    let text = "t\n*~ block slow in=a\nL1 a b 1x\nR1 b 0 10m\nC1 a 0 1\nL2 a 0 1x\n";
    let loaded = Loaded::text(text);
    let told = rules(&loaded);
    if loaded.screening.blocks[0].verdict != Verdict::Unstable {
        assert!(
            told.iter().all(|(_, rule)| *rule != "unstable-mode"),
            "{told:?}"
        );
    }
    let errors = told
        .iter()
        .filter(|(severity, _)| *severity == Severity::Error);
    assert!(errors.count() <= 1, "{told:?}");
}

#[test]
fn a_rail_with_resistance_does_not_short_a_port() {
    let text = "t\n*~ block amp in=a out=b\n*~ rail a volts=1 ohms=5\nR1 a b 1k\nC1 b 0 1p\n";
    let loaded = Loaded::text(text);
    let told = rules(&loaded);
    assert!(
        told.iter().all(|(_, rule)| *rule != "port-shorted"),
        "{told:?}"
    );
}

#[test]
fn slips_in_marks_are_told() {
    let with =
        |mark: &str| format!("t\n*~ block amp in=a out=b\n*~ {mark}\nR1 a b 1k\nC1 b 0 1p\n");
    for (mark, word) in [
        ("rail a ohms=-5", "must not be negative"),
        ("rail a ohms 5", "has no meaning"),
        ("rail a ohms=1 ohms=2", "written twice"),
        ("loads in=foo", "vswr"),
        ("margins gain=abc", "takes a number"),
        ("spread R=abc", "takes a share"),
        ("spread trials=0", "whole number"),
        ("loop main", "`at=` is missing"),
        ("bias-sweep V1=1", "LO..HI"),
    ] {
        let message = bad_mark(&with(mark));
        assert!(message.contains(word), "{mark}: {message}");
    }
    for mark in [
        "loads in=vswr:3 out=any",
        "margins gain=6dB phase=45",
        "spread R=5% C=0.1 together=R,C trials=200",
        "loop main at=R1.1",
        "bias-sweep V1=0..5 points=6",
    ] {
        let loaded = Loaded::text(&with(mark));
        let told = rules(&loaded);
        assert!(
            told.iter().all(|(_, rule)| *rule != "unknown-mark"),
            "{mark}: {told:?}"
        );
    }
}

#[test]
fn copies_of_controlled_sources_add_up() {
    // Two parallel copies of a current source carry twice the current, of a voltage source the same
    // voltage. Both close a positive feedback: 1/R - gain/R and R - ohm.
    let conductance = |card: &str| {
        let text = format!("t\n*~ block amp\nV1 a b 0\nRb b 0 100\n{card}\n");
        let loaded = Loaded::text(&text);
        let table = loaded.prepared.trace(None, &["y:a".to_owned()], &[1e6]);
        table.expect("a node").rows[0][1]
    };
    let close = |a: f64, b: f64| assert!((a - b).abs() < 1e-12, "{a} {b}");
    close(conductance("F1 a 0 V1 0.5"), 0.015);
    close(conductance("F1 a 0 V1 0.5 m=2"), 0.02);
    close(
        conductance("H1 c 0 V1 50\nRc a c 100"),
        conductance("H1 c 0 V1 50 m=2\nRc a c 100"),
    );
}

#[test]
fn a_loop_of_sources_names_nodes() {
    let why = block("t\n*~ block amp in=b\nV1 a 0 1\nV2 a 0 1\nR1 a b 1k\n").why;
    assert!(why.is_some_and(|why| why.contains("node `a`")));
}

#[test]
fn an_ideal_source_is_a_short() {
    let loaded = Loaded::text("t\n*~ block amp in=b\nV1 a 0 1\nR1 a b 1k\n");
    let quantities = ["y:a", "z:a"].map(str::to_owned);
    let table = loaded
        .prepared
        .trace(None, &quantities, &[1e6])
        .expect("a node");
    assert_eq!(table.rows[0][1..], [f64::INFINITY, 0.0, 0.0, 0.0]);
}

#[test]
fn what_is_there_but_does_not_fit_is_not_called_unknown() {
    let loaded = Loaded::text("t\n*~ block amp in=R1\nR1 a b 1k\nR2 b 0 1k\nC1 a 0 1p\n");
    let found = loaded
        .screening
        .findings
        .iter()
        .find(|finding| finding.rule.as_str() == "unknown-node-in-mark")
        .expect("R1 is no resistor to ground");
    assert!(found.message.contains("is there"), "{}", found.message);
    assert!(found.fixes.is_empty());
}
