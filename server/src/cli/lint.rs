//! `squeg lint`: reads, screens each netlist behind a fence, merges, renders. What could not be
//! read or computed is said on standard error and never keeps the rest from being told.

use super::args::{Args, FailOn, LintArgs, LintFormat};
use super::merge::{NetlistResult, merge};
use super::{Exit, color, deliver, deliver_json, usage};
use crate::io::{ReadFault, read_stdin};
use crate::panic::guard;
use crate::report::{BlockDetail, LintDocument, LintResult, Places, TextOptions, render_text};
use crate::session::Session;
use crate::walk::{Walk, walk};
use clap::CommandFactory;
use clap::error::ErrorKind;
use squeg_analyzer::cancel::Cancel;
use squeg_analyzer::finding::{Finding, RuleId, Severity};
use squeg_analyzer::host::{Host, Screening};
use squeg_analyzer::text::{FileId, Span, TextRange};
use std::path::{Path, PathBuf};

/// The name of standard input when none is given.
const STDIN_NAME: &str = "<stdin>";

/// Runs the command.
pub fn run(args: &LintArgs) -> Exit {
    let stdin = args.paths.iter().any(|path| is_stdin(path));
    if args.stdin_name.is_some() && !stdin {
        let message = "--as names standard input, which is read for the path `-` only";
        return usage(&Args::command().error(ErrorKind::ArgumentConflict, message));
    }
    if let Some(jobs) = args.jobs {
        log::debug!("{jobs} jobs allowed; netlists are screened one after the other");
    }
    let mut run = Run::new();
    if stdin {
        run.read_stdin(args.stdin_name.as_deref());
    }
    run.read_paths(&args.paths, stdin);
    run.screen_all(&screen);
    let (result, session, failed) = run.finish();
    let exit = exit_of(&result, args.fail_on, failed);
    write(args, &result, &session, exit)
}

fn is_stdin(path: &Path) -> bool {
    path.as_os_str() == "-"
}

fn write(args: &LintArgs, result: &LintResult, session: &Session, exit: Exit) -> Exit {
    let places = Places::new(session.host(), session.names());
    match args.format {
        LintFormat::Json => deliver_json(&LintDocument::new(result, &places), exit),
        LintFormat::Text => {
            let options = TextOptions {
                paint: color::paint(args.color),
                blocks: match (args.terse, args.evidence) {
                    (true, _) => BlockDetail::Nothing,
                    (false, false) => BlockDetail::Line,
                    (false, true) => BlockDetail::Evidence,
                },
            };
            deliver(render_text(result, &places, options).as_bytes(), exit)
        }
    }
}

fn exit_of(result: &LintResult, fail_on: FailOn, failed: bool) -> Exit {
    // Severities are ordered with errors first.
    let level = match fail_on {
        FailOn::Error => Severity::Error,
        FailOn::Warning => Severity::Warning,
        FailOn::Info => Severity::Info,
    };
    if failed {
        Exit::Failed
    } else if result.findings.iter().any(|f| f.severity <= level) {
        Exit::Findings
    } else {
        Exit::Clean
    }
}

/// Everything that is computed of one netlist.
fn screen(host: &Host, root: FileId) -> NetlistResult {
    let prepared = host.prepare(root);
    let files = prepared.files();
    let screening = prepared.screen(&Cancel::new()).unwrap_or_else(|_| {
        // Nobody sets the flag; were it set, the findings of the text would still hold.
        Screening {
            findings: prepared.findings().to_vec(),
            blocks: Vec::new(),
        }
    });
    NetlistResult { files, screening }
}

/// A run under way.
struct Run {
    session: Session,
    results: Vec<NetlistResult>,
    failed: bool,
}

impl Run {
    fn new() -> Self {
        Self {
            session: Session::new(),
            results: Vec::new(),
            failed: false,
        }
    }

    fn fault(&mut self, path: &Path, reason: &str) {
        log::error!("{}: {reason}", path.display());
        self.failed = true;
    }

    /// Standard input comes first: its text stands in for the file that bears its name.
    fn read_stdin(&mut self, name: Option<&Path>) {
        let name = name.unwrap_or(Path::new(STDIN_NAME));
        match read_stdin(self.session.host().config.limits.file_bytes) {
            Ok(source) => {
                let session = &mut self.session;
                let added = guard(&shown(name), || session.add_root_text(name, source));
                self.failed |= added.is_none();
            }
            Err(fault) => self.not_read(name, &fault),
        }
    }

    fn read_paths(&mut self, paths: &[PathBuf], stdin: bool) {
        let paths: Vec<PathBuf> = paths.iter().filter(|p| !is_stdin(p)).cloned().collect();
        let walk = if stdin && paths.is_empty() {
            Walk::default()
        } else {
            walk(&paths)
        };
        for fault in &walk.faults {
            self.fault(Path::new(&fault.path), &fault.reason);
        }
        for path in &walk.files {
            let session = &mut self.session;
            match guard(&shown(path), || session.add_root(path)) {
                Some(Ok(_)) => {}
                Some(Err(fault)) => self.not_read(path, &fault),
                None => self.failed = true,
            }
        }
    }

    fn not_read(&mut self, path: &Path, fault: &ReadFault) {
        self.fault(path, &fault.to_string());
        if let ReadFault::TooLarge { bytes, limit } = fault {
            let file = self.session.add_unread(path);
            let finding = too_large(file, *bytes, *limit, fault);
            self.results.push(NetlistResult {
                files: vec![file],
                screening: Screening {
                    findings: vec![finding],
                    blocks: Vec::new(),
                },
            });
        }
    }

    /// Reads all includes, then screens each netlist with `screen`. One that fails leaves the
    /// others alone.
    fn screen_all(&mut self, screen: &dyn Fn(&Host, FileId) -> NetlistResult) {
        for root in self.session.roots().to_vec() {
            let session = &mut self.session;
            let name = session.name(root).to_owned();
            let loaded = guard(&name, || session.load_includes(root));
            self.failed |= loaded.is_none();
        }
        for root in self.session.settle_roles() {
            let host = self.session.host();
            match guard(self.session.name(root), || screen(host, root)) {
                Some(result) => self.results.push(result),
                None => self.failed = true,
            }
        }
    }

    fn finish(self) -> (LintResult, Session, bool) {
        let result = merge(self.results, self.session.names());
        (result, self.session, self.failed)
    }
}

fn shown(path: &Path) -> String {
    path.display().to_string()
}

/// The finding on a file above the limit: it names the key and stands where the file begins.
fn too_large(file: FileId, bytes: u64, limit: u64, fault: &ReadFault) -> Finding {
    let span = Span::new(file, TextRange::empty(0));
    let message = format!("the file was not read: {fault}");
    let mut finding = Finding::new(RuleId("limit-reached"), Severity::Warning, span, message);
    finding.values = vec![("bytes", bytes as f64), ("limit_bytes", limit as f64)];
    finding
}

#[cfg(test)]
mod tests {
    use super::*;
    use squeg_analyzer::host::SourceText;

    #[test]
    fn a_panic_in_one_netlist_leaves_the_others() {
        let mut run = Run::new();
        for name in ["a.cir", "b.cir", "c.cir"] {
            let text = SourceText::new("title\nR1 a 0\n");
            run.session.add_root_text(Path::new(name), text);
        }
        run.screen_all(&|host, root| {
            if root == FileId(1) {
                std::panic::panic_any("on purpose");
            }
            screen(host, root)
        });
        let (result, session, failed) = run.finish();
        let files: Vec<&str> = result
            .findings
            .iter()
            .filter(|finding| finding.rule.as_str() == "unreadable-card")
            .map(|finding| session.name(finding.span.file))
            .collect();
        assert_eq!(files, ["a.cir", "c.cir"]);
        assert!(failed, "the failure is not forgotten");
        assert_eq!(exit_of(&result, FailOn::Error, failed), Exit::Failed);
    }

    #[test]
    fn a_file_above_the_limit_is_a_finding_and_a_failure() {
        let mut run = Run::new();
        let fault = ReadFault::TooLarge {
            bytes: 70 << 20,
            limit: 64 << 20,
        };
        run.not_read(Path::new("big.cir"), &fault);
        let (result, session, failed) = run.finish();
        let told: Vec<(&str, &str)> = result
            .findings
            .iter()
            .map(|f| (session.name(f.span.file), f.message.as_str()))
            .collect();
        let message =
            "the file was not read: its size of 70 MiB is above the limit of 64 MiB (`file-bytes`)";
        assert_eq!(told, [("big.cir", message)]);
        assert!(failed, "a path was not read");
    }

    #[test]
    fn the_failing_level() {
        let at = Span::new(FileId(0), TextRange::empty(0));
        let with = |severity, fail_on| {
            let id = RuleId("zero-part");
            let result = LintResult {
                findings: vec![Finding::new(id, severity, at, String::new())],
                blocks: Vec::new(),
            };
            exit_of(&result, fail_on, false)
        };
        use Exit::{Clean, Findings};
        assert_eq!(with(Severity::Error, FailOn::Error), Findings);
        assert_eq!(with(Severity::Warning, FailOn::Error), Clean);
        assert_eq!(with(Severity::Warning, FailOn::Warning), Findings);
        assert_eq!(with(Severity::Info, FailOn::Warning), Clean);
        assert_eq!(with(Severity::Info, FailOn::Info), Findings);
    }
}
