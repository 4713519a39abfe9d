//! The command: reads arguments, calls the library, prints results on stdout and all else on stderr.

mod arguments;
mod combine;
mod commands;
mod compare;
mod dry_run;
mod inspect;
mod plan;
mod progress;
mod recover;
mod refraction;
mod report;
mod schema;
mod seeing;
mod shell;

use arguments::{Arguments, Command};
use clap::Parser;
use std::process::ExitCode;
use truelimb::Error;

/// How a command ended, apart from failing.
pub(crate) enum Ending {
    /// Done.
    Done,
    /// Done, but the answer was refused.
    Refused,
}

fn main() -> ExitCode {
    let arguments = Arguments::parse();
    if let Some(threads) = arguments.threads {
        // Set once, before any work; a second pool is never made.
        let _ = rayon::ThreadPoolBuilder::new()
            .num_threads(threads.get())
            .build_global();
    }
    let quiet = arguments.quiet;
    let verbose = arguments.verbose;
    let ended = match arguments.command {
        Command::Demo(it) => commands::demo(&it, quiet),
        Command::Reduce(it) => commands::reduce(&it, quiet, verbose),
        Command::Seeing(it) => seeing::seeing(&it, quiet),
        Command::Combine(it) => combine::combine(&it, quiet),
        Command::Recover(it) => recover::recover(&it, quiet),
        Command::Simulate(it) => commands::simulate(&it, quiet),
        Command::Limb(it) => commands::limb(&it),
        Command::Refraction(it) => refraction::refraction(&it, quiet),
        Command::Compare(it) => compare::compare(&it),
        Command::Inspect(it) => inspect::inspect(&it, quiet),
        Command::Report(it) => report::report(&it),
        Command::Schema(it) => schema::schema(&it),
        Command::Completions(it) => Ok(shell::completions(&it)),
        Command::Man(it) => shell::man(&it),
        Command::Plan(it) => plan::plan(&it, quiet),
    };
    match ended {
        Ok(Ending::Done) => ExitCode::SUCCESS,
        Ok(Ending::Refused) => ExitCode::from(3),
        Err(it) => {
            progress::fail(&it.to_string(), it.cure());
            ExitCode::from(status(&it))
        }
    }
}

/// Exit status: 2 for input that cannot be used, 1 for what failed otherwise.
fn status(error: &commands::Failure) -> u8 {
    match error {
        commands::Failure::Usage(_) | commands::Failure::Plan(_) => 2,
        commands::Failure::Synth(_) => 1,
        commands::Failure::Recover(it) => match it.as_ref() {
            truelimb::recover::RecoverError::Folder { .. } => 1,
            _ => 2,
        },
        commands::Failure::Run(it) => match it.as_ref() {
            Error::File { .. } | Error::Record { .. } | Error::Report(_) => 1,
            _ => 2,
        },
    }
}
