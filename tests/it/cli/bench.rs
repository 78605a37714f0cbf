//! A folder of its own for each test, and the program run in it.

use serde_json::Value;
use std::fs;
use std::io::Write;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Output, Stdio};
use std::sync::atomic::{AtomicUsize, Ordering};

/// A sound netlist without marks.
pub const SOUND: &str = "title\nV1 a 0 1\nR1 a b 1k\nR2 b 0 1k\n";
/// A netlist with one error: `unreadable-card` on line 3.
pub const FAULTY: &str = "title\nV1 a 0 1\nR1 a\nR2 a 0 1k\n";
/// A netlist with one warning and no error: `milli-or-mega` on line 3.
pub const DUBIOUS: &str = "title\nV1 a 0 1\nR1 a b 10M\nR2 b 0 1k\n";

/// A folder that goes with the test.
pub struct Bench {
    root: PathBuf,
}

/// What a run left behind.
pub struct Ran {
    /// Exit status; `None` when a signal ended it.
    pub code: Option<i32>,
    /// Standard output.
    pub out: String,
    /// Standard error.
    pub err: String,
}

impl Bench {
    /// A new, empty folder.
    pub fn new() -> Self {
        static COUNT: AtomicUsize = AtomicUsize::new(0);
        let number = COUNT.fetch_add(1, Ordering::Relaxed);
        let name = format!("bench-{}-{number}", std::process::id());
        let root = Path::new(env!("CARGO_TARGET_TMPDIR")).join(name);
        fs::create_dir_all(&root).expect("a folder for the test");
        Self { root }
    }

    /// Writes a file, its folders included.
    pub fn file(self, name: &str, content: impl AsRef<[u8]>) -> Self {
        let path = self.path(name);
        if let Some(folder) = path.parent() {
            fs::create_dir_all(folder).expect("a folder for the file");
        }
        fs::write(path, content).expect("a file for the test");
        self
    }

    /// Makes a folder.
    pub fn folder(self, name: &str) -> Self {
        fs::create_dir_all(self.path(name)).expect("a folder for the test");
        self
    }

    /// A path in the folder.
    pub fn path(&self, name: &str) -> PathBuf {
        self.root.join(name)
    }

    /// The program, to be run in the folder, without settings from outside.
    pub fn command(&self, args: &[&str]) -> Command {
        let mut command = Command::new(env!("CARGO_BIN_EXE_squeg"));
        command
            .args(args)
            .current_dir(&self.root)
            .stdin(Stdio::null())
            // The ignore file of the person who runs the tests is nobody else's business.
            .env("HOME", &self.root)
            .env_remove("XDG_CONFIG_HOME")
            .env_remove("SQUEG_LOG")
            .env_remove("NO_COLOR")
            .env_remove("CLICOLOR_FORCE");
        command
    }

    /// Runs the program to its end.
    pub fn run(&self, args: &[&str]) -> Ran {
        Ran::from(self.command(args).output().expect("the program starts"))
    }

    /// Runs the program with a text on standard input.
    pub fn run_with_stdin(&self, args: &[&str], stdin: &[u8]) -> Ran {
        let mut command = self.command(args);
        command
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped());
        let mut child: Child = command.spawn().expect("the program starts");
        let mut pipe = child.stdin.take().expect("a pipe was asked for");
        pipe.write_all(stdin).expect("the program reads its input");
        drop(pipe);
        Ran::from(child.wait_with_output().expect("the program ends"))
    }

    /// `lint --format json` on the given paths: exit code and document.
    pub fn json(&self, paths: &[&str]) -> (Option<i32>, Value) {
        let args = [&["lint", "--format", "json"], paths].concat();
        let ran = self.run(&args);
        (ran.code, ran.json())
    }
}

impl Drop for Bench {
    fn drop(&mut self) {
        // What cannot be removed stays in the build folder, where it harms nobody.
        let _ = fs::remove_dir_all(&self.root);
    }
}

impl From<Output> for Ran {
    fn from(output: Output) -> Self {
        let text = |bytes| String::from_utf8(bytes).expect("the program writes UTF-8");
        Self {
            code: output.status.code(),
            out: text(output.stdout),
            err: text(output.stderr),
        }
    }
}

impl Ran {
    /// Standard output as JSON.
    pub fn json(&self) -> Value {
        serde_json::from_str(&self.out).expect("a JSON document on standard output")
    }
}

/// `file:line:column rule` of every finding of a document, in its order.
pub fn findings(document: &Value) -> Vec<String> {
    let list = document["findings"].as_array().expect("a list of findings");
    let told = |finding: &Value| {
        let start = &finding["range"]["start"];
        let text = |value: &Value| value.as_str().unwrap_or("?").to_owned();
        format!(
            "{}:{}:{} {}",
            text(&finding["file"]),
            start["line"],
            start["column"],
            text(&finding["rule"])
        )
    };
    list.iter().map(told).collect()
}

/// The findings of one rule.
pub fn findings_of(document: &Value, rule: &str) -> Vec<String> {
    let all = findings(document).into_iter();
    all.filter_map(|told| Some(told.strip_suffix(rule)?.trim_end().to_owned()))
        .collect()
}
