//! The house rules that a test can hold: every file says what it is, modules of the analyzer
//! import only what they may, and no file grows without end.

use std::path::{Path, PathBuf};

fn root() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("..")
}

fn sources(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in std::fs::read_dir(folder).expect("a folder").flatten() {
        let path = entry.path();
        if path.is_dir() {
            sources(&path, found);
        } else if path.extension().is_some_and(|e| e == "rs") {
            found.push(path);
        }
    }
}

fn all_sources() -> Vec<(PathBuf, String)> {
    let mut found = Vec::new();
    for folder in ["analyzer/src", "server/src", "tests/it"] {
        sources(&root().join(folder), &mut found);
    }
    found.sort();
    found
        .into_iter()
        .map(|path| {
            let text = std::fs::read_to_string(&path).expect("a source can be read");
            (path, text)
        })
        .collect()
}

#[test]
fn every_file_opens_by_saying_what_it_is() {
    for (path, text) in all_sources() {
        assert!(text.starts_with("//!"), "{} has no header", path.display());
    }
}

/// What a module of the analyzer may import, besides itself.
const ARROWS: &[(&str, &[&str])] = &[
    ("text", &[]),
    ("units", &[]),
    ("cancel", &[]),
    ("linalg", &[]),
    ("syntax", &["text", "units"]),
    ("circuit", &["units"]),
    ("elaborate", &["syntax", "text", "units", "circuit"]),
    ("assembly", &["circuit", "linalg"]),
    (
        "sweep",
        &["assembly", "circuit", "linalg", "cancel", "units"],
    ),
    (
        "stability",
        &["sweep", "assembly", "circuit", "linalg", "units", "cancel"],
    ),
    ("finding", &["text", "units"]),
    ("config", &["units", "finding"]),
    (
        "rules",
        &[
            "text",
            "units",
            "syntax",
            "circuit",
            "elaborate",
            "assembly",
            "stability",
            "finding",
            "config",
            "host",
        ],
    ),
    ("explain", &["finding", "rules"]),
    (
        "host",
        &[
            "text",
            "units",
            "cancel",
            "syntax",
            "circuit",
            "elaborate",
            "assembly",
            "linalg",
            "sweep",
            "stability",
            "finding",
            "config",
            "rules",
        ],
    ),
];

/// Names behind `crate::` in a text.
fn imports(text: &str) -> Vec<String> {
    text.split("crate::")
        .skip(1)
        .map(|rest| {
            let end = rest.find(|c: char| !(c.is_alphanumeric() || c == '_'));
            rest[..end.unwrap_or(rest.len())].to_owned()
        })
        .collect()
}

#[test]
fn modules_import_only_what_they_may() {
    let mut faults = Vec::new();
    let base = root().join("analyzer/src");
    for (path, text) in all_sources() {
        let Ok(inside) = path.strip_prefix(&base) else {
            continue;
        };
        let first = inside.components().next().expect("a component");
        let module = Path::new(first.as_os_str()).with_extension("");
        let module = module.to_string_lossy().into_owned();
        if module == "lib" {
            continue;
        }
        let allowed = ARROWS.iter().find(|(name, _)| *name == module);
        let Some((_, allowed)) = allowed else {
            faults.push(format!(
                "module {module} has no line in the table of arrows"
            ));
            continue;
        };
        // Tests may look wherever they need to.
        let code = text.split("#[cfg(test)]").next().unwrap_or("");
        for name in imports(code) {
            let module_like = name.chars().next().is_some_and(char::is_lowercase);
            if module_like && name != module && !allowed.contains(&name.as_str()) {
                faults.push(format!("{}: {module} imports {name}", inside.display()));
            }
        }
    }
    assert!(faults.is_empty(), "{}", faults.join("\n"));
}

#[test]
fn the_server_stays_out_of_the_numerics() {
    let base = root().join("server/src");
    for (path, text) in all_sources() {
        if path.starts_with(&base) {
            for module in [
                "linalg",
                "stability",
                "assembly",
                "syntax",
                "elaborate",
                "circuit",
            ] {
                let name = format!("squeg_analyzer::{module}");
                assert!(!text.contains(&name), "{} uses {name}", path.display());
            }
        }
    }
}

#[test]
fn the_analyzer_knows_no_protocol_and_no_files() {
    let base = root().join("analyzer/src");
    for (path, text) in all_sources() {
        if path.starts_with(&base) {
            for word in [
                "tower_lsp",
                "tokio",
                "serde",
                "std::fs",
                "std::env",
                "println!",
            ] {
                assert!(!text.contains(word), "{} uses {word}", path.display());
            }
        }
    }
    let manifest = std::fs::read_to_string(root().join("analyzer/Cargo.toml")).expect("manifest");
    for word in ["tower-lsp", "tokio", "serde", "toml", "clap"] {
        assert!(!manifest.contains(word), "the analyzer depends on {word}");
    }
}

#[test]
fn files_stay_small() {
    const LIMIT: usize = 620;
    for (path, text) in all_sources() {
        let lines = text.lines().count();
        assert!(lines <= LIMIT, "{} has {lines} lines", path.display());
    }
}
