//! Bad text: findings with places, no panic, and nothing of the sound lines lost.

use super::load::Loaded;
use squeg_analyzer::finding::Finding;

/// A sound netlist with something to find; bad lines are put in at every place.
const SOUND: &str = "\
Receiver stage
*~ block stage in=gate out=drain
R1 gate 0 10M
L1 gate g1 5n
C1 g1 0 1p
C2 g1 drain 0.2p
G1 drain 0 g1 0 30m
R2 drain 0 2k
L2 drain 0 6n
X1 gate tail lossy
R3 tail 0 1k
.subckt lossy a b
R1 a b 470
.ends
";

/// Forty lines that are wrong in their own way.
const BAD: [&str; 40] = [
    "R9",
    "R9 a",
    "R9 a b",
    "R9 a b 4k7x9",
    "R9 a b 1e999",
    "R9 a b '1+'",
    "R9 a b '1+2",
    "R9 a b {1",
    "R9 a b R=",
    "R9 a b nosuch",
    "C9 a b",
    "L9",
    "K9 L1",
    "K9 L1 L9 0.5",
    "K9",
    "V9",
    "V9 a",
    "I9 q",
    "E9 a b",
    "G9 a b c",
    "G9 a b c d",
    "F9 a b",
    "F9 a b V9 2",
    "H9 a b V9 1",
    "X9",
    "X9 gate nosuch",
    "X9 gate lossy",
    "Q9 c b e",
    "Q9",
    "M9 d g",
    "D9 a",
    "T9 a b",
    "S9 a",
    "W9",
    "1abc a b 1",
    "= = =",
    "( ) ,",
    ".model",
    ".include",
    "{",
];

fn told(loaded: &Loaded, text: &str, skip: Option<u32>) -> Vec<(String, String, String)> {
    let mut all: Vec<_> = loaded
        .screening
        .findings
        .iter()
        .filter(|finding| Some(loaded.line(finding)) != skip)
        .filter(|finding| finding.rule.as_str() != "block-undetermined")
        .map(|finding: &Finding| {
            let word = finding.span.range.slice(text).to_owned();
            (
                finding.rule.as_str().to_owned(),
                word,
                finding.message.clone(),
            )
        })
        .collect();
    all.sort();
    all
}

#[test]
fn one_bad_line_takes_nothing_from_the_others() {
    let sound = Loaded::text(SOUND);
    let want = told(&sound, SOUND, None);
    assert!(
        want.iter().any(|(rule, _, _)| rule == "unstable-mode"),
        "{want:?}"
    );
    let lines: Vec<&str> = SOUND.lines().collect();
    for bad in BAD {
        // Line 10 (after the stage) stands outside the subcircuit.
        let mut all = lines.clone();
        all.insert(9, bad);
        let text = all.join("\n") + "\n";
        let loaded = Loaded::text(&text);
        let here = loaded
            .screening
            .findings
            .iter()
            .filter(|finding| loaded.line(finding) == 10)
            .count();
        let harmless = ["V9 a"].contains(&bad);
        assert!(here > 0 || harmless, "{bad}: no finding on its line");
        let got = told(&loaded, &text, Some(10));
        let lost: Vec<_> = want.iter().filter(|w| !got.contains(w)).collect();
        assert!(lost.is_empty(), "{bad}: lost {lost:?}\ngot {got:?}");
        let added: Vec<_> = got.iter().filter(|g| !want.contains(g)).collect();
        assert!(added.is_empty(), "{bad}: added {added:?}");
    }
}

#[test]
fn a_seeded_bad_line_anywhere_takes_nothing_from_the_others() {
    const CUT: [&str; 8] = [
        "R9 a b 4k7x9",
        "C9 node1 0",
        "L9 a",
        "G9 a b c 1m",
        "K9 L1",
        "X9",
        ".subckt foo a b",
        "V9 a",
    ];
    let sound = Loaded::text(SOUND);
    let want = told(&sound, SOUND, None);
    let lines: Vec<&str> = SOUND.lines().collect();
    let mut random = Random(0x5eed_bad0_11fe);
    for _ in 0..160 {
        let mut bad = CUT[random.below(CUT.len())].to_owned();
        if random.below(3) == 0 && !bad.starts_with('.') {
            bad.push_str(["'", " {1", " =", "\u{1F30A}("][random.below(4)]);
        }
        // After the title, before the last line: anywhere in between.
        let at = 1 + random.below(lines.len() - 1);
        // A `+` line must stay with its card.
        if lines[at].starts_with('+') || lines[at].starts_with("*~+") {
            continue;
        }
        // Within a subcircuit an `.ends` without a name closes the inner one of two.
        let before = |word: &str| lines[..at].iter().filter(|l| l.starts_with(word)).count();
        if bad.starts_with('.') && before(".subckt") > before(".ends") {
            continue;
        }
        let mut all = lines.clone();
        all.insert(at, &bad);
        let text = all.join("\n") + "\n";
        let loaded = Loaded::text(&text);
        let got = told(&loaded, &text, Some(at as u32 + 1));
        let lost: Vec<_> = want.iter().filter(|w| !got.contains(w)).collect();
        assert!(
            lost.is_empty(),
            "{bad} at {}: lost {lost:?}\ngot {got:?}",
            at + 1
        );
    }
}

/// SplitMix64 (G. L. Steele, D. Lea, C. H. Flood, OOPSLA 2014, from memory).
struct Random(u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }
    fn below(&mut self, n: usize) -> usize {
        (self.next() % n.max(1) as u64) as usize
    }
}

#[test]
fn mutated_netlists_never_panic_and_all_places_exist() {
    const SIGNS: [&str; 12] = [
        "'",
        "{",
        "+",
        "*~",
        "=",
        "\n",
        ".ends",
        ".subckt x a",
        "1e400",
        "\u{1F30A}",
        "\0",
        "(",
    ];
    for seed in 0..400 {
        let mut random = Random(seed);
        let mut text = SOUND.to_owned();
        for _ in 0..1 + random.below(4) {
            let mut at = random.below(text.len());
            while !text.is_char_boundary(at) {
                at -= 1;
            }
            match random.below(3) {
                0 => text.insert_str(at, SIGNS[random.below(SIGNS.len())]),
                1 => {
                    let mut end = (at + random.below(12)).min(text.len());
                    while !text.is_char_boundary(end) {
                        end -= 1;
                    }
                    text.replace_range(at.min(end)..end, "");
                }
                _ => {
                    let line = text.lines().nth(random.below(14)).unwrap_or("").to_owned();
                    text.insert_str(at, &line);
                }
            }
        }
        let loaded = Loaded::text(&text);
        for finding in &loaded.screening.findings {
            let range = finding.span.range.start as usize..finding.span.range.end as usize;
            assert!(
                text.get(range).is_some(),
                "seed {seed}: a place outside the text"
            );
        }
    }
}

#[test]
fn hostile_texts_are_bounded() {
    let mut bomb = String::from("bomb\nX0 a s30\nR1 a 0 1\n.subckt s0 a\nR1 a 0 1\n.ends\n");
    for level in 1..=30 {
        bomb += &format!(
            ".subckt s{level} a\nX1 a s{}\nX2 a s{}\n.ends\n",
            level - 1,
            level - 1
        );
    }
    let found = Loaded::text(&bomb);
    let rules: Vec<&str> = found
        .screening
        .findings
        .iter()
        .map(|f| f.rule.as_str())
        .collect();
    assert!(rules.contains(&"limit-reached"), "{rules:?}");
    let mut chain = String::from("chain\n.param p0=1\n");
    for k in 1..100_000 {
        chain += &format!(".param p{k}='p{}+1'\n", k - 1);
    }
    chain += "R1 a 0 p99999\nR2 a 0 1\n";
    assert_eq!(
        Loaded::text(&chain).serious().len(),
        0,
        "a long chain is sound"
    );
    let deep = format!(
        "deep\nR1 a 0 '{}1{}'\nR2 a 0 1\n",
        "(".repeat(10_000),
        ")".repeat(10_000)
    );
    assert_eq!(Loaded::text(&deep).serious().len(), 0, "depth is no fault");
    let nested: String = (0..10_000).map(|k| format!(".subckt n{k} a\n")).collect();
    let nested = format!("nest\nR1 a 0 1\nR2 a 0 1\n{nested}");
    assert!(
        !Loaded::text(&nested).serious().is_empty(),
        "unclosed subcircuits are told"
    );
    for odd in ["", "\n", "\0\0\0", &"x".repeat(1 << 20)] {
        let _ = Loaded::text(odd);
    }
}
