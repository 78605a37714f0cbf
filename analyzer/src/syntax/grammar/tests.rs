//! Tests of the parser: lossless, every card, every fault with its place.

use super::*;
use crate::syntax::ast::CardKind;

fn read(text: &str) -> Parse {
    parse(Arc::from(text), FileRole::Included)
}

fn errors(text: &str) -> Vec<(String, String)> {
    let parsed = read(text);
    parsed
        .errors
        .iter()
        .map(|e| (parsed.tree.slice(e.range).to_owned(), e.kind.to_string()))
        .collect()
}

/// Every byte belongs to one token, every token to one item.
fn assert_lossless(text: &str) {
    let parsed = read(text);
    let mut at = 0;
    for token in parsed.tree.tokens() {
        assert_eq!(token.start, at, "tokens touch");
        at = token.end;
    }
    assert_eq!(at as usize, text.len(), "tokens cover the text");
    let mut covered: Vec<u32> = parsed
        .tree
        .items()
        .iter()
        .flat_map(|item| item.lines.iter().cloned().flatten())
        .collect();
    covered.sort_unstable();
    let all: Vec<u32> = (0..parsed.tree.tokens().len() as u32).collect();
    assert_eq!(covered, all, "items cover the tokens");
}

const EVERY_CARD: &str = "\
* every card
R1 a b 4.7k
C1 a b C=10p ic=0
L1 a b lmod 1n $ trailing
K1 L1 L2 0.9
V1 a 0 DC 5 AC 1
I1 a 0 1m ; trailing
E1 o 0 a b 10
G1 o 0 VCCS a b {gm*2}
F1 o 0 V1 2
H1 o 0 CCVS V1 'rm'
T1 a 0 b 0 Z0=50 TD=1n
W1 a b 0 c d 0 N=2 L=0.1 RLGCMODEL=m
S1 a b 0 MNAME=sdata
S2 a b c d swmod
X1 a b sub w=1u l='2*a'
D1 a k dmod
Q1 c b e qmod 2
Q2 c b e s qmod
M1 d g s b nmos w=10u l=1u
J1 d g s jmod
Z1 d g s zmod
B1 a 0 V=V(a)*2
E2 o 0 LAPLACE a b 1 / 1 1n
G3 o 0 POLY(2) a b c d 1 2 3
.subckt sub a b w=1u l={w*2}
.ends sub
.param x=1 y='x*2' f(a,b)='a+b' z = 1 + 2
.model qmod npn (bf=100 is=1e-16)
.lib 'parts.lib' tt
.global vdd vss
.temp 27
.tran 1n 1u
*~ block amp in=a out=b:75 band=1meg..2g
*~+ z0=50
.end
whatever stands here
";

#[test]
fn every_card_reads_without_fault() {
    assert_eq!(errors(EVERY_CARD), []);
    assert_lossless(EVERY_CARD);
}

#[test]
fn fields_land_where_they_belong() {
    let parsed = read("L1 a b lmod 1n\nQ1 c b e qmod 2\nG1 o 0 VCCS a b 2m\n");
    let text = |word: Word| parsed.tree.slice(word.range).to_owned();
    let kinds: Vec<&CardKind> = parsed
        .statements
        .iter()
        .filter_map(|statement| match &statement.kind {
            StatementKind::Card(card) => Some(&card.kind),
            _ => None,
        })
        .collect();
    let [
        CardKind::TwoTerminal {
            model: Some(model),
            value: Some(value),
            ..
        },
        CardKind::Device {
            nodes,
            model: device,
        },
        CardKind::VoltageControlled { nodes: four, gain },
    ] = kinds.as_slice()
    else {
        panic!("{kinds:?}");
    };
    assert_eq!(text(*model), "lmod");
    assert_eq!(parsed.tree.slice(value.range), "1n");
    assert_eq!((nodes.len(), text(*device)), (3, "qmod".to_owned()));
    assert_eq!(text(four[3]), "b");
    assert_eq!(parsed.tree.slice(gain.range), "2m");
}

#[test]
fn faults_stand_on_their_word() {
    let fault = |text: &str, word: &str, part: &str| {
        let found = errors(text);
        assert!(
            found.iter().any(|(w, m)| w == word && m.contains(part)),
            "{text:?}: {found:?}"
        );
        assert_eq!(found.len(), 1, "{text:?}: {found:?}");
        assert_lossless(text);
    };
    fault("R1 a b\n", "R1", "missing");
    fault("R1 a b 4k7x9\n", "4k7x9", "not a number");
    fault("R1 a b 1e999\n", "1e999", "too large");
    fault("R1 a b '1+'\n", "'1+'", "expression");
    fault("R1 a b '1+2\n", "'", "not closed");
    fault("R1 a b R=\n", "R", "no value");
    fault("1abc a b c\n", "1abc", "no element");
    fault("+ 1k\n", "+", "continues nothing");
    fault("*~+ a\n", "*~+", "continues nothing");
    fault("R1 a b\n\n+ 1k\n", "+", "across");
    fault(".subckt x a\n", "x", "not closed");
    fault(".ends\n", ".ends", "without an open");
    fault(".subckt x a\n.ends y\n", "y", "open subcircuit is `x`");
    fault("K1 L1 0.5\n", "K1", "missing");
    fault("R1 a b 1k oops\n", "oops", "no place");
}

#[test]
fn continuation_crosses_comments_and_marks() {
    let parsed = read("R1 a\n* note\n*~ rail vdd volts=5\n+ b 1k\n");
    let cards = parsed
        .statements
        .iter()
        .filter(|s| matches!(s.kind, StatementKind::Card(_)))
        .count();
    assert_eq!(cards, 1);
    assert_eq!(parsed.errors.len(), 1);
    assert_eq!(parsed.errors[0].kind, SyntaxErrorKind::StrayContinuation);
    assert_eq!(errors("R1 a b\n+ 1k\n"), []);
    assert_eq!(errors("R1 a b '1k +\n+ 2k'\n"), []);
}

#[test]
fn titles() {
    let title = |text: &str| parse(Arc::from(text), FileRole::Top);
    assert!(title("R1 a 0 1k\nC1 a 0 1p\n").title_card.is_some());
    assert!(
        title("Low-noise stage, board 2\nC1 a 0 1p\n")
            .title_card
            .is_none()
    );
    assert!(title("* R1 a 0 1k\n").title_card.is_none());
    let marked = title("*~ block amp in=a\nR1 a 0 1k\n");
    assert_eq!(marked.statements.len(), 2);
}

#[test]
fn odd_texts_never_lose_bytes() {
    for text in [
        "",
        "\n",
        "\r\n\r\n",
        "\u{FEFF}R1 a b 1k",
        "R1 a b 1k\rC1 a b 1p\r",
        "\0\0",
        "'",
        "{",
        "\"",
        "=",
        "()",
        ",,,",
        "R1 = = =",
        "*~",
        "*~ ",
        "+",
        ".",
        "..",
        "R1\u{A0}a\u{A0}b\u{A0}1k",
        ".subckt",
        ".lib",
        ".model",
        "K",
        "E1 a b",
        "x",
        "X1",
        "é1 a b 1",
        "R1 a b {1+{2}}",
    ] {
        assert_lossless(text);
    }
    let wide = "x".repeat(1 << 20);
    assert_lossless(&wide);
}

#[test]
fn bom_and_crlf_are_transparent() {
    assert_eq!(errors("\u{FEFF}R1 a b 1k\r\nC1 a b 1p\r\n"), []);
}
