//! Holds every sample to what its `* expect` comments say. The expectations were computed apart
//! from squeg: natural modes by 420-bit eigenvalues of the summed pencil, agreeing with an
//! adaptive count of the phase of the determinant (see samples/README.md).

use super::load::Loaded;
use squeg_analyzer::units::parse_number;
use std::path::{Path, PathBuf};

fn samples() -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("../samples");
    let mut files: Vec<PathBuf> = std::fs::read_dir(folder)
        .expect("the samples are there")
        .filter_map(|entry| Some(entry.ok()?.path()))
        .filter(|path| path.extension().is_some_and(|e| e == "cir"))
        .collect();
    files.sort();
    files
}

/// `key=value` of an expectation.
fn key<'t>(line: &'t str, key: &str) -> Option<&'t str> {
    line.split_whitespace()
        .find_map(|word| word.strip_prefix(key)?.strip_prefix('='))
}

#[test]
fn every_sample_gives_what_it_says() {
    let files = samples();
    assert!(files.len() >= 9, "nine samples at least");
    let mut faults = Vec::new();
    for path in files {
        let name = path.file_name().map(|n| n.to_string_lossy().into_owned());
        let name = name.unwrap_or_default();
        let loaded = Loaded::new(&path);
        let text = std::fs::read_to_string(&path).expect("a sample can be read");
        let expectations: Vec<&str> = text
            .lines()
            .filter_map(|line| line.strip_prefix("* expect "))
            .collect();
        assert!(!expectations.is_empty(), "{name} says what it must give");
        let mut wanted = 0;
        for line in &expectations {
            let fault = match line.split_whitespace().next() {
                Some("block") => block(&loaded, line),
                Some("finding") => {
                    wanted += 1;
                    finding(&loaded, line)
                }
                Some("clean") => Ok(()),
                _ => Err("unknown expectation".to_owned()),
            };
            if let Err(message) = fault {
                faults.push(format!("{name}: {line}: {message}"));
            }
        }
        let serious = loaded.serious();
        if serious.len() != wanted {
            let all: Vec<String> = serious
                .iter()
                .map(|f| format!("{}:{} {}", loaded.line(f), f.rule.as_str(), f.message))
                .collect();
            faults.push(format!(
                "{name}: {} findings, {wanted} expected:\n    {}",
                serious.len(),
                all.join("\n    ")
            ));
        }
    }
    assert!(faults.is_empty(), "{}", faults.join("\n"));
}

fn block(loaded: &Loaded, line: &str) -> Result<(), String> {
    let name = line.split_whitespace().nth(1).unwrap_or("?");
    let block = loaded.block(name);
    let got = block.verdict.as_str();
    if Some(got) != key(line, "verdict") {
        return Err(format!("got {got} ({:?})", block.why));
    }
    if let Some(modes) = key(line, "modes") {
        let modes = modes.parse().ok();
        if block.unstable_modes != modes {
            return Err(format!("got {:?} modes", block.unstable_modes));
        }
    }
    if let Some(at) = key(line, "at") {
        let want = hertz(at);
        let got = block.modes.first().map_or(f64::NAN, |mode| mode.hz);
        if (got / want - 1.0).abs() > 0.005 {
            return Err(format!("grows at {got} Hz"));
        }
    }
    Ok(())
}

/// `3.42MHz` as people write it: here `M` is mega.
fn hertz(text: &str) -> f64 {
    parse_number(&text.replace("MHz", "meg")).map_or(f64::NAN, |n| n.value)
}

fn finding(loaded: &Loaded, line: &str) -> Result<(), String> {
    let rule = line.split_whitespace().nth(1).unwrap_or("?");
    let want_line: Option<u32> = key(line, "line").and_then(|l| l.parse().ok());
    let file = key(line, "file");
    let found = loaded.screening.findings.iter().any(|f| {
        let path = loaded.paths.get(&f.span.file);
        let in_file = match file {
            Some(file) => path.is_some_and(|p| p.ends_with(file)),
            None => f.span.file == loaded.prepared.root(),
        };
        let in_block = key(line, "block").is_none_or(|b| f.block.as_deref() == Some(b));
        f.rule.as_str() == rule && Some(loaded.line(f)) == want_line && in_file && in_block
    });
    if found {
        Ok(())
    } else {
        Err("not found".to_owned())
    }
}
