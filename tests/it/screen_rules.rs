//! Rules of coverage and stability on small blocks: each fires where it must, on the word it
//! must, and stays away from near misses.

use super::load::Loaded;
use squeg_analyzer::finding::Severity;
use squeg_analyzer::host::Verdict;

/// Rule, severity and the text under the finding, for one rule.
fn told(text: &str, rule: &str) -> Vec<(Severity, String)> {
    Loaded::text(text)
        .screening
        .findings
        .iter()
        .filter(|finding| finding.rule.as_str() == rule)
        .map(|f| (f.severity, f.span.range.slice(text).to_owned()))
        .collect()
}

fn on(severity: Severity, word: &str) -> Vec<(Severity, String)> {
    vec![(severity, word.to_owned())]
}

const NONE: Vec<(Severity, String)> = Vec::new();

#[test]
fn terminations() {
    let shorted = "t\n*~ block amp in=a\nV1 a 0 0\nR1 a b 1k\nC1 b 0 1p\n";
    assert_eq!(told(shorted, "port-shorted"), on(Severity::Error, "a"));
    let named = "t\n*~ block amp in=V1\nV1 a 0 0\nR1 a b 1k\nC1 b 0 1p\n";
    assert_eq!(told(named, "port-shorted"), NONE);
    let twice = "t\n*~ block amp in=a\nR1 a 0 75\nC1 a 0 1p\n";
    assert_eq!(told(twice, "port-loaded-twice"), on(Severity::Warning, "a"));
    let far = "t\n*~ block amp in=a\nR1 a 0 1k\nC1 a 0 1p\n";
    assert_eq!(told(far, "port-loaded-twice"), NONE);
    let by_name = "t\n*~ block amp in=R1\nR1 a 0 75\nC1 a 0 1p\n";
    assert_eq!(told(by_name, "port-loaded-twice"), NONE);
}

#[test]
fn pins_of_a_subcircuit_block() {
    let inner = |marks: &str| {
        format!(
            "t\n.subckt amp in out vdd\n*~ block a in=in out=out\n{marks}R1 in out 1k\nR2 out vdd 1k\nC1 out 0 1p\n.ends\n"
        )
    };
    let open = inner("");
    assert_eq!(told(&open, "pin-unassigned"), on(Severity::Info, "vdd"));
    assert_eq!(
        Loaded::text(&open).screening.blocks[0].verdict,
        Verdict::Undetermined
    );
    for marks in [
        "*~ rail vdd volts=5\n",
        "*~ tie vdd to=ground\n",
        "*~ tie vdd to=open\n",
        "*~ tie vdd to=10\n",
    ] {
        let text = inner(marks);
        assert_eq!(told(&text, "pin-unassigned"), NONE);
        assert_eq!(
            Loaded::text(&text).screening.blocks[0].verdict,
            Verdict::Stable,
            "{marks}"
        );
    }
    let why = Loaded::text(&inner("*~ rail vdd volts=5\n"))
        .screening
        .blocks[0]
        .why
        .clone();
    assert!(
        why.is_some_and(|why| why.contains("taken as ideal")),
        "an ideal rail is told"
    );
}

#[test]
fn passive_claims() {
    let gyrator = |second: &str| {
        format!(
            "t\n*~ block amp in=a out=b\n*~ passive G1 G2\nG1 a 0 b 0 5m\nG2 b 0 a 0 {second}\nC1 a 0 1p\nC2 b 0 1p\n"
        )
    };
    assert_eq!(told(&gyrator("-5m"), "passive-claim-fails"), NONE);
    assert_eq!(
        told(&gyrator("-6m"), "passive-claim-fails"),
        on(Severity::Warning, "passive")
    );
    // A transformer of E and F: equal turns are passive, unequal ones are not.
    let transformer = |turns: &str| {
        format!(
            "t\n*~ block amp in=p out=b\n*~ passive E1 F1\nE1 q 0 p 0 3\nVs q b 0\nF1 p 0 Vs {turns}\nC1 p 0 1n\nC2 b 0 1n\n"
        )
    };
    assert_eq!(told(&transformer("3"), "passive-claim-fails"), NONE);
    assert_eq!(told(&transformer("2"), "passive-claim-fails").len(), 1);
}

#[test]
fn coverage_of_the_screen() {
    let negative = "t\n*~ block amp in=a\nR1 a 0 -20\nC1 a 0 1p\n";
    assert_eq!(
        told(negative, "off-network-unstable"),
        on(Severity::Warning, "amp")
    );
    assert_eq!(told(negative, "unstable-mode"), on(Severity::Error, "R1"));
    let sound = "t\n*~ block amp in=a\nR1 a 0 -200\nC1 a 0 1p\n";
    assert_eq!(told(sound, "off-network-unstable"), NONE);
    let narrow = |sweep: &str| {
        format!(
            "t\n*~ block amp in=a {sweep}\nL1 a 0 1n\nC1 a 0 10p\nR1 a 0 900\nG1 a 0 b 0 1m\nR2 a b 500\nR3 b 0 500\n"
        )
    };
    assert_eq!(
        told(&narrow("z0=1k sweep=1k..1meg"), "sweep-too-narrow"),
        on(Severity::Warning, "amp")
    );
    assert_eq!(told(&narrow("z0=1k"), "sweep-too-narrow"), NONE);
    let bypass = |c: &str| format!("t\n*~ block amp in=a\nR1 a b 1k\nR2 b 0 1k\nC1 b 0 {c}\n");
    assert_eq!(
        told(&bypass("100n"), "ideal-bypass"),
        on(Severity::Info, "C1")
    );
    assert_eq!(told(&bypass("10p"), "ideal-bypass"), NONE);
    let real = "t\n*~ block amp in=a\nR1 a b 1k\nR2 b 0 1k\nC1 b c 100n\nR3 c 0 10m\n";
    assert_eq!(told(real, "ideal-bypass"), NONE);
    let tank = "t\n*~ block amp in=a\nR1 a 0 1k\nL1 x 0 1u\nC1 x 0 1n\n";
    assert_eq!(told(tank, "lossless-resonance").len(), 1);
    assert_eq!(
        Loaded::text(tank).screening.blocks[0].verdict,
        Verdict::Marginal
    );
    let copies = |m: &str| {
        format!(
            "t\n*~ block amp in=a\nX1 a s {m}\nR1 a 0 1k\n.subckt s p\nG1 p 0 q 0 1m\nR1 p q 1k\nR2 q 0 1k\n.ends\n"
        )
    };
    assert_eq!(
        told(&copies("m=4"), "multiplier-hides-mode"),
        on(Severity::Info, "X1")
    );
    assert_eq!(told(&copies("m=1"), "multiplier-hides-mode"), NONE);
}

#[test]
fn what_cannot_be_computed_is_said() {
    for (card, word) in [
        ("T1 a 0 b 0 cable", "transmission line"),
        ("E1 b 0 LAPLACE a 0 1 / 1 1n", "Laplace"),
        ("Q1 b a 0 fast", "bipolar"),
        ("B1 b 0 V=V(a)", "nonlinear"),
        ("S1 a b 0 MNAME=data", "S-parameter"),
    ] {
        let text = format!("t\n*~ block amp in=a out=b\n{card}\nR1 a b 1k\n.model fast npn\n");
        let loaded = Loaded::text(&text);
        let block = &loaded.screening.blocks[0];
        assert_eq!(block.verdict, Verdict::Undetermined, "{card}");
        let why = block.why.clone().unwrap_or_default();
        assert!(why.contains(word), "{card}: {why}");
        assert_eq!(
            told(&text, "block-undetermined"),
            on(Severity::Error, "amp"),
            "{card}"
        );
    }
    let floating = "t\n*~ block amp in=a\nR1 a 0 1k\nC1 a 0 1p\nR2 x y 1k\nR3 x y 2k\n";
    let why = Loaded::text(floating).screening.blocks[0]
        .why
        .clone()
        .unwrap_or_default();
    assert!(why.contains("`x`") && why.contains("`y`"), "{why}");
}

#[test]
fn one_cause_is_one_finding_and_hints_know_the_verdict() {
    // Colpitts (textbook: gm R = Cg/Cd), above and below its threshold of 2 mS.
    let colpitts = |gm: &str| {
        format!(
            "t\n*~ block osc in=RL\nCg g 0 200p\nL1 g d 1u\nCd d 0 100p\nRL d 0 1k\nG1 d 0 g 0 {gm}\n"
        )
    };
    let loaded = Loaded::text(&colpitts("2.5m"));
    let errors: Vec<_> = loaded
        .screening
        .findings
        .iter()
        .filter(|f| f.severity == Severity::Error)
        .collect();
    assert_eq!(errors.len(), 1, "{errors:?}");
    assert_eq!(errors[0].rule.as_str(), "unstable-mode");
    assert!(
        errors[0].message.starts_with("19.5 MHz natural mode grows"),
        "{}",
        errors[0].message
    );
    assert!(!errors[0].ranges_hz.is_empty(), "the range is repeated");
    let stable = Loaded::text(&colpitts("1.9m"));
    for finding in &stable.screening.findings {
        assert!(
            !finding.message.contains("oscillation can start"),
            "{}",
            finding.message
        );
        if finding.rule.as_str() == "negative-conductance" {
            assert!(
                finding
                    .message
                    .ends_with("all natural modes damped as terminated")
            );
        }
    }
}

#[test]
fn accepted_findings_are_gone() {
    let text = "t\n*~ block amp in=a\n*~ quiet negative-part why=\"models the active load\"\nR1 a 0 -200\nC1 a 0 1p\n";
    assert_eq!(told(text, "negative-part"), NONE);
    assert_eq!(told(text, "unused-quiet"), NONE);
}
