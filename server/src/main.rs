//! `squeg`: reads the command line and hands over to the language server or to a command.
//! Knows exit codes and nothing of netlists.

mod cli;
mod io;
mod lsp;
mod panic;
mod report;
mod session;
mod walk;

use std::process::ExitCode;

fn main() -> ExitCode {
    panic::log_panics();
    let exit = panic::guard("the command", cli::run).unwrap_or(cli::Exit::Failed);
    exit.code()
}
