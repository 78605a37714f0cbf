//! Exit codes, texts of every shape, both formats.

use super::bench::{Bench, DUBIOUS, FAULTY, SOUND, findings, findings_of};
use std::io::Read;
use std::process::Stdio;

#[test]
fn exit_codes_and_the_failing_level() {
    let bench = Bench::new()
        .file("sound.cir", SOUND)
        .file("dubious.cir", DUBIOUS)
        .file("faulty.cir", FAULTY);
    let code = |args: &[&str]| bench.run(&[&["lint"], args].concat()).code;
    assert_eq!(code(&["sound.cir"]), Some(0));
    assert_eq!(code(&["dubious.cir"]), Some(0));
    assert_eq!(code(&["dubious.cir", "--fail-on", "warning"]), Some(1));
    assert_eq!(code(&["--fail-on", "info", "dubious.cir"]), Some(1));
    assert_eq!(code(&["faulty.cir"]), Some(1));
    assert_eq!(code(&["faulty.cir", "missing.cir"]), Some(2));
    assert_eq!(code(&["--format", "sarif", "sound.cir"]), Some(2));
    assert_eq!(code(&["--fail-on", "never", "sound.cir"]), Some(2));
    assert_eq!(code(&["--as", "x.cir", "sound.cir"]), Some(2));
}

#[test]
fn text_is_the_gnu_form_and_nothing_else() {
    let bench = Bench::new().file("a/faulty.cir", FAULTY);
    let ran = bench.run(&["lint", "a"]);
    let first = ran.out.lines().next().unwrap_or_default();
    let start = "a/faulty.cir:3:1: error: ";
    assert!(first.starts_with(start), "{first}");
    assert!(first.ends_with(" [unreadable-card]"), "{first}");
    assert!(!ran.out.contains('\x1b'), "no colour in a pipe");
    assert_eq!(ran.err, "");
}

#[test]
fn colour_adds_the_line_and_a_marker() {
    let bench = Bench::new().file("dubious.cir", DUBIOUS);
    let args = ["lint", "--color", "always", "dubious.cir"];
    let out = bench.run(&args).out;
    assert!(out.contains("\x1b[1m"), "{out}");
    let marker = "\n    R1 a b 10M\n           ^^^\n";
    assert!(out.contains(marker), "{out}");
}

#[test]
fn a_path_that_cannot_be_read_keeps_the_result() {
    let bench = Bench::new().file("faulty.cir", FAULTY);
    let ran = bench.run(&["lint", "--format", "json", "missing.cir", "faulty.cir"]);
    assert_eq!(ran.code, Some(2));
    assert_eq!(
        findings_of(&ran.json(), "unreadable-card"),
        ["faulty.cir:3:1"]
    );
    assert_eq!(ran.err, "squeg: error: missing.cir: no such file\n");
}

#[test]
fn line_breaks_and_a_byte_order_mark_change_nothing() {
    let cr_lf = DUBIOUS.replace('\n', "\r\n");
    let cr = DUBIOUS.replace('\n', "\r");
    let marked = format!("\u{FEFF}{cr_lf}");
    let bench = Bench::new()
        .file("cr.cir", cr)
        .file("crlf.cir", cr_lf)
        .file("mark.cir", marked)
        .file("tail.cir", DUBIOUS.trim_end());
    let (code, document) = bench.json(&["."]);
    assert_eq!(code, Some(0));
    assert_eq!(
        findings_of(&document, "milli-or-mega"),
        [
            "./cr.cir:3:8",
            "./crlf.cir:3:8",
            "./mark.cir:3:8",
            "./tail.cir:3:8"
        ]
    );
}

#[test]
fn columns_count_characters() {
    let text = "title\nV1 \u{1F30A}\u{E9} 0 1\nR1 \u{1F30A}\u{E9} 0 10M\n";
    let bench = Bench::new().file("wide.cir", text);
    let (_, document) = bench.json(&["wide.cir"]);
    assert_eq!(findings_of(&document, "milli-or-mega"), ["wide.cir:3:9"]);
    let range = &document["findings"]
        .as_array()
        .and_then(|list| list.iter().find(|f| f["rule"] == "milli-or-mega"))
        .expect("the finding")["range"];
    assert_eq!(range["end"]["column"], 12);
}

#[test]
fn empty_and_undecodable_texts() {
    let latin = [&b"title \xE9\n"[..], &DUBIOUS.as_bytes()[6..]].concat();
    let noise: Vec<u8> = (0..4096u32).map(|i| ((i * 167) >> 3) as u8).collect();
    let bench = Bench::new()
        .file("empty.cir", "")
        .file("latin.cir", latin)
        .file("noise.cir", noise);
    let (code, document) = bench.json(&["empty.cir"]);
    assert_eq!((code, findings(&document)), (Some(0), Vec::new()));
    let (_, document) = bench.json(&["latin.cir"]);
    let found = findings_of(&document, "milli-or-mega");
    assert_eq!(found, ["latin.cir:3:8"]);
    let ran = bench.run(&["lint", "noise.cir"]);
    assert!(
        matches!(ran.code, Some(0 | 1)),
        "{:?} {}",
        ran.code,
        ran.err
    );
}

#[test]
fn standard_input() {
    let bench = Bench::new()
        .file("board/parts.inc", "R9 b 0 10M\n")
        .file("board/a.cir", FAULTY);
    let json = ["lint", "--format", "json", "-"];
    let ran = bench.run_with_stdin(&json, DUBIOUS.as_bytes());
    assert_eq!(ran.code, Some(0));
    assert_eq!(findings_of(&ran.json(), "milli-or-mega"), ["<stdin>:3:8"]);
    // Includes are looked for beside the name, and the text stands in for the file.
    let args = [&json[..], &["--as", "board/a.cir", "board"]].concat();
    let text = "title\nV1 b 0 1\n.include parts.inc\n";
    let ran = bench.run_with_stdin(&args, text.as_bytes());
    assert_eq!(ran.code, Some(0), "{}", ran.out);
    assert_eq!(
        findings_of(&ran.json(), "milli-or-mega"),
        ["board/parts.inc:1:8"]
    );
    // By its name a library: no title line.
    let args = [&json[..], &["--as", "x.inc"]].concat();
    let ran = bench.run_with_stdin(&args, b"R9 b 0 10M\n");
    assert_eq!(findings_of(&ran.json(), "milli-or-mega"), ["x.inc:1:8"]);
}

#[test]
fn the_document_has_every_key() {
    let bench = Bench::new().file("dubious.cir", DUBIOUS);
    let (_, document) = bench.json(&["dubious.cir"]);
    let keys = |value: &serde_json::Value| -> Vec<String> {
        let object = value.as_object().expect("an object");
        object.keys().cloned().collect()
    };
    assert_eq!(document["schema"], "squeg-lint-1");
    assert_eq!(document["version"], env!("CARGO_PKG_VERSION"));
    assert_eq!(keys(&document), ["blocks", "findings", "schema", "version"]);
    let finding = &document["findings"][0];
    let wanted = [
        "block",
        "file",
        "fingerprint",
        "fixes",
        "message",
        "node",
        "range",
        "ranges_hz",
        "related",
        "rule",
        "severity",
        "values",
    ];
    assert_eq!(keys(finding), wanted);
    assert!(finding["fixes"].is_array() && finding["values"].is_object());
    assert_eq!(keys(&finding["range"]["start"]), ["column", "line"]);
}

#[cfg(unix)]
#[test]
fn a_reader_that_goes_away_is_no_failure() {
    // Far more text than a pipe holds.
    let card = "R1 a 0 10M\n";
    let text = format!("title\n{}", card.repeat(20_000));
    let bench = Bench::new().file("long.cir", text);
    let mut command = bench.command(&["lint", "long.cir"]);
    command.stdout(Stdio::piped()).stderr(Stdio::piped());
    let mut child = command.spawn().expect("the program starts");
    drop(child.stdout.take());
    let mut said = String::new();
    let mut pipe = child.stderr.take().expect("a pipe was asked for");
    pipe.read_to_string(&mut said).expect("text");
    let status = child.wait().expect("the program ends");
    assert_eq!(said, "");
    assert!(matches!(status.code(), Some(0 | 1)), "{status}");
}

#[cfg(target_os = "linux")]
#[test]
fn an_output_that_cannot_be_written_is_a_failure() {
    let bench = Bench::new().file("faulty.cir", FAULTY);
    let full = std::fs::OpenOptions::new().write(true).open("/dev/full");
    let mut command = bench.command(&["lint", "faulty.cir"]);
    let out = command.stdout(full.expect("the device that is always full"));
    let ran = out.output().expect("the program runs");
    assert_eq!(ran.status.code(), Some(2));
}

#[test]
fn a_text_above_the_limit_is_refused_with_one_finding() {
    let bench = Bench::new().file("small.cir", DUBIOUS);
    let big = std::fs::File::create(bench.path("big.cir")).expect("a file");
    big.set_len((64 << 20) + 1).expect("a sparse file");
    let ran = bench.run(&["lint", "--format", "json", "big.cir", "small.cir"]);
    assert_eq!(ran.code, Some(2));
    let document = ran.json();
    assert_eq!(findings_of(&document, "limit-reached"), ["big.cir:1:1"]);
    let found = findings_of(&document, "milli-or-mega");
    assert_eq!(found, ["small.cir:3:8"]);
    assert!(ran.err.contains("`file-bytes`"), "{}", ran.err);
}
