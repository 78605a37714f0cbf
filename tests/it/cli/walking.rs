//! Which files are read.

use super::bench::{Bench, DUBIOUS, findings_of};

fn files(bench: &Bench, paths: &[&str]) -> Vec<String> {
    let (code, document) = bench.json(paths);
    assert_eq!(code, Some(0), "{document}");
    let found = findings_of(&document, "milli-or-mega").into_iter();
    found
        .map(|place| place.split(':').next().unwrap_or("").to_owned())
        .collect()
}

#[test]
fn folders_are_walked_by_ending_and_sorted() {
    let library = "R1 a 0 10M\nR2 a 0 1k\n";
    let mut bench = Bench::new().file("notes.txt", DUBIOUS).file("cir", DUBIOUS);
    for name in ["z.cir", "a.ckt", "m/b.net", "m/a.iss", "m/deep/er/x.CIR"] {
        bench = bench.file(name, DUBIOUS);
    }
    for name in ["p.inc", "q.lib", "r.sub"] {
        bench = bench.file(name, library);
    }
    let names = [
        "a.ckt",
        "m/a.iss",
        "m/b.net",
        "m/deep/er/x.CIR",
        "p.inc",
        "q.lib",
        "r.sub",
        "z.cir",
    ];
    assert_eq!(files(&bench, &[]), names);
    let dotted: Vec<String> = names.iter().map(|name| format!("./{name}")).collect();
    assert_eq!(files(&bench, &["."]), dotted);
    assert_eq!(
        files(&bench, &["m"]),
        ["m/a.iss", "m/b.net", "m/deep/er/x.CIR"]
    );
    assert_eq!(
        files(&bench, &["m/"]),
        ["m/a.iss", "m/b.net", "m/deep/er/x.CIR"]
    );
}

#[test]
fn a_named_file_is_read_whatever_its_name() {
    let bench = Bench::new()
        .file("notes.txt", DUBIOUS)
        .file(".hidden/.x", DUBIOUS);
    assert_eq!(files(&bench, &["notes.txt"]), ["notes.txt"]);
    assert_eq!(files(&bench, &[".hidden/.x"]), [".hidden/.x"]);
}

#[test]
fn a_file_is_checked_once_under_its_first_name() {
    let bench = Bench::new().file("m/a.cir", DUBIOUS);
    let paths = ["m/a.cir", "m", "./m/../m/a.cir"];
    assert_eq!(files(&bench, &paths), ["m/a.cir"]);
}

#[test]
fn hidden_and_ignored_entries_are_skipped() {
    let bench = Bench::new()
        .folder(".git")
        .file(".gitignore", "out/\n*.net\n")
        .file(".ignore", "a.cir\n")
        .file("a.cir", DUBIOUS)
        .file("b.net", DUBIOUS)
        .file("out/c.cir", DUBIOUS)
        .file(".hidden/d.cir", DUBIOUS)
        .file(".e.cir", DUBIOUS);
    assert_eq!(files(&bench, &[]), ["a.cir"]);
    // What is named counts as wanted.
    assert_eq!(files(&bench, &["b.net"]), ["b.net"]);
    assert_eq!(files(&bench, &[".hidden"]), [".hidden/d.cir"]);
}

#[cfg(unix)]
#[test]
fn links_in_folders_are_skipped_and_named_ones_followed() {
    use std::os::unix::fs::symlink;
    let bench = Bench::new().file("real/a.cir", DUBIOUS).folder("walked");
    let link = |target: &str, name: &str| symlink(target, bench.path(name)).expect("a link");
    link("../real/a.cir", "walked/link.cir");
    link("../real", "walked/folder");
    link(".", "walked/ring");
    link("real", "other");
    assert_eq!(files(&bench, &["walked"]), Vec::<String>::new());
    assert_eq!(files(&bench, &["walked/link.cir"]), ["walked/link.cir"]);
    assert_eq!(files(&bench, &["other"]), ["other/a.cir"]);
}

#[test]
fn a_folder_without_netlists_is_said_and_no_failure() {
    let bench = Bench::new().folder("empty");
    let ran = bench.run(&["lint", "empty"]);
    assert_eq!((ran.code, ran.out.as_str()), (Some(0), ""));
    let said = "squeg: warning: empty: no netlists in this folder\n";
    assert_eq!(ran.err, said);
    let ran = bench.run(&["--log", "off", "lint", "empty"]);
    assert_eq!(ran.err, "");
}
