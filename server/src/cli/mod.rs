//! The commands. Each takes its arguments and returns how it went; results go to standard
//! output, everything else to standard error.

mod args;
mod color;
mod explain;
mod lint;
mod merge;
mod rules;
mod trace;
mod trace_source;

use crate::io::write_stdout;
use args::{Args, Command};
use clap::Parser;
use log::LevelFilter;
use std::io::Write;
use std::process::ExitCode;

/// How a command went; the later outranks the earlier.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Exit {
    /// Done; nothing at or above the failing level.
    Clean,
    /// Done; findings at or above the failing level.
    Findings,
    /// A path could not be read, bad usage or internal failure.
    Failed,
}

impl Exit {
    /// 0, 1 or 2.
    pub fn code(self) -> ExitCode {
        ExitCode::from(match self {
            Self::Clean => 0,
            Self::Findings => 1,
            Self::Failed => 2,
        })
    }
}

/// Reads the command line and runs the command.
pub fn run() -> Exit {
    let args = match Args::try_parse() {
        Ok(args) => args,
        Err(error) => return usage(&error),
    };
    start_log(args.log);
    match args.command {
        Command::Lint(args) => lint::run(&args),
        Command::Serve(_) => crate::lsp::serve(),
        Command::Trace(args) => trace::run(&args),
        Command::Explain(args) => explain::run(&args),
        Command::Rules(args) => rules::run(&args),
    }
}

/// Help and version are results; everything else is bad usage.
fn usage(error: &clap::Error) -> Exit {
    // Nobody is left to be told when this cannot be written.
    let _ = error.print();
    if error.use_stderr() {
        Exit::Failed
    } else {
        Exit::Clean
    }
}

/// Log lines go to standard error. The option beats the environment.
fn start_log(level: Option<LevelFilter>) {
    let mut builder = env_logger::Builder::new();
    builder.filter_level(LevelFilter::Warn);
    match level {
        Some(level) => builder.filter_level(level),
        None => builder.parse_env("SQUEG_LOG"),
    };
    builder.format(|out, record| {
        let level = match record.level() {
            log::Level::Error => "error",
            log::Level::Warn => "warning",
            log::Level::Info => "info",
            log::Level::Debug => "debug",
            log::Level::Trace => "trace",
        };
        writeln!(out, "squeg: {level}: {}", record.args())
    });
    // Fails only when a log was started before: that one then serves.
    let _ = builder.try_init();
}

/// Writes a result; a failure to write is a failure of the command.
fn deliver(result: &[u8], exit: Exit) -> Exit {
    match write_stdout(result) {
        Ok(()) => exit,
        Err(error) => fail(&format!("standard output: {error}")),
    }
}

/// A value as a JSON document that ends with a line break.
fn json_document(value: &impl serde::Serialize) -> Result<Vec<u8>, serde_json::Error> {
    let mut text = serde_json::to_vec_pretty(value)?;
    text.push(b'\n');
    Ok(text)
}

/// Writes a JSON result.
fn deliver_json(value: &impl serde::Serialize, exit: Exit) -> Exit {
    match json_document(value) {
        Ok(text) => deliver(&text, exit),
        Err(error) => fail(&format!("the result cannot be written: {error}")),
    }
}

/// Says on standard error why the command is not done.
fn fail(reason: &str) -> Exit {
    log::error!("{reason}");
    Exit::Failed
}
