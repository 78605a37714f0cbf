//! The language server: everything between the byte streams and the analyzer. `transport` and what
//! it stands on keep the connection alive; `documents` holds the open texts; `worker` analyses them
//! apart from the connection; `backend` routes.

mod backend;
mod convert;
mod documents;
pub mod fence;
pub mod frame;
pub mod input;
mod library;
pub mod life;
pub mod message;
pub mod outbox;
pub mod panic_log;
pub mod params;
pub mod parent;
mod publish;
pub mod repair;
pub mod salvage;
pub mod self_test;
pub mod transport;
pub mod uri;
mod worker;

use crate::cli::Exit;

/// Serves until the client ends the session.
pub fn serve() -> Exit {
    let code = transport::serve(backend::Backend::new, |builder| {
        backend::extend(self_test::register(builder))
    });
    if code == std::process::ExitCode::SUCCESS {
        Exit::Clean
    } else {
        Exit::Findings
    }
}
