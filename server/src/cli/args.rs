//! The command line as data. Names and defaults are part of the product's contract.

use clap::{Parser, Subcommand, ValueEnum};
use log::LevelFilter;
use std::num::NonZeroUsize;
use std::path::PathBuf;

/// Version and commit, as `--version` prints them behind the name.
const VERSION: &str = concat!(
    env!("CARGO_PKG_VERSION"),
    " (commit ",
    env!("SQUEG_COMMIT"),
    ")"
);

/// Language server and headless linter for circuit netlists: screens every marked amplifier
/// block for small-signal stability
#[derive(Parser, Debug)]
#[command(name = "squeg", version = VERSION, arg_required_else_help = true)]
#[command(disable_help_subcommand = true)]
pub struct Args {
    /// What is logged to standard error: off, error, warn, info, debug or trace [env: SQUEG_LOG]
    #[arg(long, global = true, value_name = "LEVEL")]
    pub log: Option<LevelFilter>,
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

/// The commands.
#[derive(Subcommand, Debug)]
pub enum Command {
    /// Check netlists and screen their marked blocks
    Lint(LintArgs),
    /// Run as a language server on standard streams
    Serve(ServeArgs),
    /// Print figures of a block over frequency
    Trace(TraceArgs),
    /// Print the explanation of a rule
    Explain(ExplainArgs),
    /// List the rules
    Rules(RulesArgs),
}

/// `squeg lint`
#[derive(clap::Args, Debug)]
#[command(after_help = "\
Exit status: 0 nothing at or above the failing level, 1 findings at or above it,
2 a path could not be read, bad usage or internal failure (the result is still written).\n")]
pub struct LintArgs {
    /// Files, folders to be walked, or `-` for standard input [default: the current folder]
    #[arg(value_name = "PATH")]
    pub paths: Vec<PathBuf>,
    /// Name of the text on standard input; includes are looked for beside it
    #[arg(long = "as", value_name = "NAME")]
    pub stdin_name: Option<PathBuf>,
    /// Format of the result: text or json
    #[arg(long, value_name = "FORMAT", default_value = "text", value_parser = lint_format)]
    pub format: LintFormat,
    /// Least severity that makes the exit status 1
    #[arg(long, value_name = "SEVERITY", default_value = "error")]
    pub fail_on: FailOn,
    /// Colour, and the netlist line with a marker under the word
    #[arg(long, value_name = "WHEN", default_value = "auto")]
    pub color: ColorWhen,
    /// Leave out the lines on blocks
    #[arg(long)]
    pub terse: bool,
    /// Add the evidence behind each verdict (text only)
    #[arg(long, conflicts_with = "terse")]
    pub evidence: bool,
    /// Netlists screened at a time
    #[arg(long, value_name = "N")]
    pub jobs: Option<NonZeroUsize>,
}

/// Formats of `lint`.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum LintFormat {
    /// GNU message lines.
    Text,
    /// `squeg-lint-1`.
    Json,
}

fn lint_format(text: &str) -> Result<LintFormat, String> {
    match text {
        "text" => Ok(LintFormat::Text),
        "json" => Ok(LintFormat::Json),
        "sarif" => Err("not available yet; there are text and json".to_owned()),
        _ => Err("there are text and json".to_owned()),
    }
}

/// The failing level.
#[derive(Clone, Copy, PartialEq, Eq, Debug, ValueEnum)]
pub enum FailOn {
    /// Errors fail.
    Error,
    /// Errors and warnings fail.
    Warning,
    /// Every finding fails.
    Info,
}

/// When to write in colour.
#[derive(Clone, Copy, PartialEq, Eq, Debug, ValueEnum)]
pub enum ColorWhen {
    /// On a terminal, unless the environment says otherwise.
    Auto,
    /// Always.
    Always,
    /// Never.
    Never,
}

/// `squeg serve`
#[derive(clap::Args, Debug)]
pub struct ServeArgs {
    /// Accepted because editors pass it; standard streams are used in any case
    #[arg(long)]
    pub stdio: bool,
}

/// `squeg trace`
#[derive(clap::Args, Debug)]
#[command(after_help = "\
QUANTITY: ndf, y:NODE, z:NODE, s, k, mu, mu-prime, delta, return-ratio:SOURCE, loop:NAME,
loop-null:NAME, modes (alone), bias. Frequencies are netlist numbers: 1meg is a million, 1M a thousandth.\n")]
pub struct TraceArgs {
    /// Netlist, or `-` for standard input
    #[arg(value_name = "FILE")]
    pub file: PathBuf,
    /// Block; may be left out when there is one only
    #[arg(long, value_name = "NAME")]
    pub block: Option<String>,
    /// Quantity to print; may be given more than once
    #[arg(long = "of", value_name = "QUANTITY", required = true)]
    pub quantities: Vec<String>,
    /// Frequencies, hertz
    #[arg(long, value_name = "F,F,..", value_delimiter = ',', conflicts_with_all = ["from", "to", "points"])]
    pub at: Vec<String>,
    /// Lowest frequency, hertz
    #[arg(long, value_name = "F", requires_all = ["to", "points"])]
    pub from: Option<String>,
    /// Highest frequency, hertz
    #[arg(long, value_name = "F", requires_all = ["from", "points"])]
    pub to: Option<String>,
    /// Number of frequencies, spaced evenly on a logarithmic axis, both ends among them
    #[arg(long, value_name = "N", requires_all = ["from", "to"])]
    pub points: Option<usize>,
    /// Format of the result
    #[arg(long, value_name = "FORMAT", default_value = "csv")]
    pub format: TraceFormat,
}

/// Formats of `trace`.
#[derive(Clone, Copy, PartialEq, Eq, Debug, ValueEnum)]
pub enum TraceFormat {
    /// RFC 4180 with LF.
    Csv,
    /// `squeg-trace-1`.
    Json,
}

/// `squeg explain`
#[derive(clap::Args, Debug)]
pub struct ExplainArgs {
    /// Name of the rule, as in brackets behind a finding
    #[arg(value_name = "RULE")]
    pub rule: String,
}

/// `squeg rules`
#[derive(clap::Args, Debug)]
pub struct RulesArgs {
    /// Format of the result
    #[arg(long, value_name = "FORMAT", default_value = "text")]
    pub format: RulesFormat,
}

/// Formats of `rules`.
#[derive(Clone, Copy, PartialEq, Eq, Debug, ValueEnum)]
pub enum RulesFormat {
    /// A table.
    Text,
    /// `squeg-rules-1`.
    Json,
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    #[test]
    fn the_command_line_is_consistent() {
        Args::command().debug_assert();
    }

    #[test]
    fn formats_that_are_not_there_are_bad_usage() {
        let parsed = Args::try_parse_from(["squeg", "lint", "--format", "sarif"]);
        let message = parsed.map(|_| ()).map_err(|error| error.to_string());
        let message = message.err().unwrap_or_default();
        assert!(message.contains("not available yet"), "{message}");
    }
}
