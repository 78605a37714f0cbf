//! Stamps the commit into the binary, for `--version`. Without git, or outside a work tree of
//! the project's own, the commit is `unknown`.

use std::path::Path;
use std::process::Command;

fn main() {
    let commit = tracked().then(|| git(&["rev-parse", "--short=12", "HEAD"]));
    let commit = commit.flatten().unwrap_or_else(|| "unknown".to_owned());
    println!("cargo:rustc-env=SQUEG_COMMIT={commit}");
    println!("cargo:rerun-if-changed=build.rs");
    // The branch's file is missing while its ref is packed; the log of HEAD is written at each
    // commit in any case.
    let branch = git(&["symbolic-ref", "--quiet", "HEAD"]);
    let names = ["HEAD", "packed-refs", "logs/HEAD"].map(str::to_owned);
    for name in names.into_iter().chain(branch) {
        let path = git(&["rev-parse", "--git-path", &name]);
        // A path that does not exist would make every build run this again.
        if let Some(path) = path.filter(|path| Path::new(path).exists()) {
            println!("cargo:rerun-if-changed={path}");
        }
    }
}

/// Whether this very package is under version control: an unpacked archive may lie inside the work
/// tree of something else.
fn tracked() -> bool {
    git(&["ls-files", "--error-unmatch", "Cargo.toml"]).is_some()
}

/// One line from git, run in the package's folder; `None` when it fails or says nothing.
fn git(arguments: &[&str]) -> Option<String> {
    let output = Command::new("git").args(arguments).output().ok()?;
    let text = String::from_utf8(output.stdout).ok()?;
    let line = text.trim();
    (output.status.success() && !line.is_empty()).then(|| line.to_owned())
}
