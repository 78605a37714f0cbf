//! Includes: where they are looked for, what is refused, and who reports what.

use super::bench::{Bench, findings, findings_of};

/// Finds `10M` wherever it is read as a card.
const PART: &str = "R9 a 0 10M\n";

fn top(includes: &[&str]) -> String {
    let mut text = "title\nV1 a 0 1\nR1 a 0 1k\n".to_owned();
    for include in includes {
        text.push_str(&format!(".include '{include}'\n"));
    }
    text
}

#[test]
fn paths_are_relative_to_the_including_file_and_shown_so() {
    let bench = Bench::new()
        .file("boards/a.cir", top(&["../lib/outer.inc"]))
        .file("lib/outer.inc", ".include 'deep/inner.inc'\n")
        .file("lib/deep/inner.inc", PART);
    let (code, document) = bench.json(&["boards/a.cir"]);
    assert_eq!(code, Some(0), "{document}");
    assert_eq!(
        findings_of(&document, "milli-or-mega"),
        ["lib/deep/inner.inc:1:8"]
    );
    let (_, document) = bench.json(&["./boards"]);
    assert_eq!(
        findings_of(&document, "milli-or-mega"),
        ["./lib/deep/inner.inc:1:8"]
    );
}

#[test]
fn an_included_file_has_no_title_and_is_told_once() {
    // The part ends in `.cir` and is walked before the files that include it.
    let bench = Bench::new()
        .file("d/a_part.cir", PART)
        .file("d/b.cir", top(&["a_part.cir"]))
        .file("d/c.cir", top(&["./a_part.cir"]));
    let (code, document) = bench.json(&["d"]);
    assert_eq!(code, Some(0), "{document}");
    let found = findings_of(&document, "milli-or-mega");
    assert_eq!(found, ["d/a_part.cir:1:8"]);
}

#[test]
fn a_part_is_checked_where_it_is_included_and_not_alone() {
    // Alone, the instance in the part would name a subcircuit that nobody defines.
    let bench = Bench::new()
        .file(
            "d/main.cir",
            "title\n.subckt pad a\nR1 a 0 1k\nR2 a 0 1k\n.ends\nV1 a 0 1\n.include use.inc\n",
        )
        .file("d/use.inc", "X1 a pad\n");
    let (_, document) = bench.json(&["d"]);
    let rules = findings(&document);
    assert!(
        !rules.iter().any(|rule| rule.contains("unknown-subcircuit")),
        "{rules:?}"
    );
    let (code, document) = bench.json(&["d/use.inc"]);
    assert_eq!(code, Some(1));
    let found = findings_of(&document, "unknown-subcircuit");
    assert_eq!(found, ["d/use.inc:1:6"]);
}

#[test]
fn a_ring_of_includes_ends_and_loses_nobody() {
    let bench = Bench::new()
        .file("a.cir", format!("{}{PART}", top(&["b.cir"])))
        .file("b.cir", format!("{}{PART}", top(&["a.cir"])))
        .file("self.cir", format!("{}{PART}", top(&["self.cir"])));
    let (_, document) = bench.json(&["."]);
    assert_eq!(
        findings_of(&document, "milli-or-mega"),
        ["./a.cir:5:8", "./b.cir:5:8", "./self.cir:5:8"]
    );
    // The title stays a title.
    let found = findings_of(&document, "unreadable-card");
    assert_eq!(found, Vec::<String>::new());
}

#[cfg(unix)]
#[test]
fn what_cannot_be_included_never_hangs_or_ends_the_run() {
    use std::process::Command;
    let includes = ["none.inc", "folder", "/dev/zero", "pipe", ""];
    let text = format!("{}{PART}", top(&includes));
    let bench = Bench::new().file("a.cir", text).folder("folder");
    let made = Command::new("mkfifo").arg(bench.path("pipe")).status();
    assert!(made.is_ok_and(|status| status.success()), "a pipe");
    let (code, document) = bench.json(&["a.cir"]);
    assert!(matches!(code, Some(0 | 1)), "{code:?}");
    assert_eq!(findings_of(&document, "milli-or-mega"), ["a.cir:9:8"]);
    for name in ["/dev/zero", "pipe", "folder/none.cir"] {
        let ran = bench.run(&["lint", name]);
        assert_eq!((ran.code, ran.out.as_str()), (Some(2), ""), "{name}");
        assert!(ran.err.contains(name), "{}", ran.err);
    }
}

#[cfg(unix)]
#[test]
fn one_real_file_is_read_once_by_whatever_name() {
    use std::os::unix::fs::symlink;
    let bench = Bench::new()
        .file(
            "a.cir",
            top(&["lib/p.inc", "lib/../lib/p.inc", "link/p.inc"]),
        )
        .file("lib/p.inc", PART);
    symlink("lib", bench.path("link")).expect("a link");
    let (_, document) = bench.json(&["a.cir"]);
    let found = findings_of(&document, "milli-or-mega");
    assert_eq!(found, ["lib/p.inc:1:8"]);
}

#[cfg(unix)]
#[test]
fn a_way_back_past_a_link_is_not_shortened() {
    use std::os::unix::fs::symlink;
    // `link/..` is the folder `far`, not the one in which the link stands.
    let bench = Bench::new()
        .file("far/p.inc", PART)
        .file("far/deep/a.cir", top(&["../p.inc"]));
    symlink("far/deep", bench.path("link")).expect("a link");
    let (_, document) = bench.json(&["link/a.cir"]);
    let found = findings_of(&document, "milli-or-mega");
    assert_eq!(found, ["link/../p.inc:1:8"]);
}

#[test]
fn backslashes_separate_folders() {
    let bench = Bench::new()
        .file("a.cir", top(&["lib\\p.inc"]))
        .file("lib/p.inc", PART);
    let (_, document) = bench.json(&["a.cir"]);
    let found = findings_of(&document, "milli-or-mega");
    assert_eq!(found.len(), 1, "{document}");
}
