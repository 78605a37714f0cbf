//! `--version`, `explain`, `rules`, `trace`, logs and bad usage.

use super::bench::{Bench, SOUND};

#[test]
fn version_with_commit() {
    let ran = Bench::new().run(&["--version"]);
    assert_eq!((ran.code, ran.err.as_str()), (Some(0), ""));
    let start = concat!("squeg ", env!("CARGO_PKG_VERSION"), " (commit ");
    let commit = ran.out.strip_prefix(start);
    let commit = commit.and_then(|rest| rest.strip_suffix(")\n"));
    let commit = commit.expect("name, version and commit");
    let hexadecimal = commit.len() == 12 && commit.bytes().all(|b| b.is_ascii_hexdigit());
    assert!(commit == "unknown" || hexadecimal, "{commit}");
}

#[test]
fn bad_usage_is_two_and_help_is_zero() {
    let bench = Bench::new();
    for args in [&[][..], &["lnt"], &["lint", "--nope"], &["trace", "a.cir"]] {
        let ran = bench.run(args);
        assert_eq!((ran.code, ran.out.as_str()), (Some(2), ""), "{args:?}");
        assert!(!ran.err.is_empty(), "{args:?} is explained");
    }
    for args in [&["--help"][..], &["lint", "--help"], &["trace", "--help"]] {
        let ran = bench.run(args);
        assert_eq!((ran.code, ran.err.as_str()), (Some(0), ""), "{args:?}");
    }
}

#[test]
fn explain_prints_the_text_of_the_rule() {
    let bench = Bench::new();
    let ran = bench.run(&["explain", "milli-or-mega"]);
    assert_eq!(ran.code, Some(0));
    for wanted in [
        "# milli-or-mega\n",
        "- severity: warning\n",
        "- family: values\n",
        "## What it does\n",
        "## Fix\n",
    ] {
        assert!(ran.out.contains(wanted), "{wanted} in {}", ran.out);
    }
    let ran = bench.run(&["explain", "mili-or-mega"]);
    assert_eq!((ran.code, ran.out.as_str()), (Some(2), ""));
    let said =
        "squeg: error: there is no rule `mili-or-mega`; the nearest name is `milli-or-mega`\n";
    assert_eq!(ran.err, said);
    let ran = bench.run(&["explain", "milli"]);
    assert!(
        ran.err.contains("nearest name is `milli-or-mega`"),
        "{}",
        ran.err
    );
    let ran = bench.run(&["explain", "weather"]);
    assert_eq!(ran.code, Some(2));
}

#[test]
fn rules_as_table_and_document() {
    let bench = Bench::new();
    let table = bench.run(&["rules"]);
    assert_eq!(table.code, Some(0));
    let document = bench.run(&["rules", "--format", "json"]).json();
    assert_eq!(document["schema"], "squeg-rules-1");
    let rules = document["rules"].as_array().expect("a list of rules");
    assert_eq!(rules.len(), table.out.lines().count());
    for (rule, line) in rules.iter().zip(table.out.lines()) {
        let words: Vec<&str> = line.split_whitespace().take(3).collect();
        assert_eq!(words, [&rule["id"], &rule["severity"], &rule["family"]]);
        let summary = rule["summary"].as_str().unwrap_or("?");
        assert!(line.ends_with(summary), "{line}");
    }
}

#[test]
fn trace_says_why_there_is_nothing() {
    let bench = Bench::new().file("a.cir", SOUND);
    let trace = |args: &[&str]| bench.run(&[&["trace", "a.cir"], args].concat());
    for args in [
        &["--of", "mu"][..],
        &["--of", "mu", "--at", "fast"],
        &["--of", "mu", "--at", "1meg", "--from", "1"],
        &[
            "--of", "mu", "--from", "1meg", "--to", "1k", "--points", "5",
        ],
        &["--of", "mu", "--from", "1k", "--to", "1meg"],
        // No block is marked.
        &["--of", "mu", "--at", "1meg,2.4g"],
    ] {
        let ran = trace(args);
        assert_eq!((ran.code, ran.out.as_str()), (Some(2), ""), "{args:?}");
        assert!(!ran.err.is_empty(), "{args:?} is explained");
    }
    let ran = bench.run(&["trace", "none.cir", "--of", "mu", "--at", "1meg"]);
    assert_eq!(ran.err, "squeg: error: none.cir: no such file\n");
}

#[test]
fn log_level_by_option_and_environment() {
    let bench = Bench::new().file("a.cir", SOUND);
    let args = ["lint", "--jobs", "2", "a.cir"];
    let said = |with: &[&str], level: Option<&str>| {
        let mut command = bench.command(&[with, &args[..]].concat());
        if let Some(level) = level {
            command.env("SQUEG_LOG", level);
        }
        let output = command.output().expect("the program runs");
        assert!(output.stdout.is_empty(), "logs never go to standard output");
        String::from_utf8_lossy(&output.stderr).contains("squeg: debug: ")
    };
    assert!(!said(&[], None), "quiet by default");
    assert!(said(&[], Some("debug")), "by environment");
    assert!(said(&["--log", "debug"], None), "by option");
    assert!(!said(&["--log", "error"], Some("debug")), "option first");
}
