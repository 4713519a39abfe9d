//! `truelimb completions` and `truelimb man`: made from the arguments themselves.

use crate::Ending;
use crate::arguments::{Arguments, Completions, Man};
use crate::commands::{Failure, print};
use clap::CommandFactory;
use std::io::Write;
use std::path::Path;
use truelimb::Error;

/// `truelimb completions`.
pub(crate) fn completions(it: &Completions) -> Ending {
    let mut text = Vec::new();
    clap_complete::generate(it.shell, &mut Arguments::command(), "truelimb", &mut text);
    send(&text);
    Ending::Done
}

/// `truelimb man`.
pub(crate) fn man(it: &Man) -> Result<Ending, Failure> {
    let mut command = Arguments::command();
    command.build();
    let Some(folder) = &it.output else {
        let mut text = Vec::new();
        clap_mangen::Man::new(command)
            .render(&mut text)
            .map_err(|error| file_error(Path::new("the manual page"), &error))?;
        send(&text);
        return Ok(Ending::Done);
    };
    std::fs::create_dir_all(folder).map_err(|error| file_error(folder, &error))?;
    clap_mangen::generate_to(command, folder).map_err(|error| file_error(folder, &error))?;
    print(&folder.display().to_string());
    Ok(Ending::Done)
}

/// Sends a finished text to stdout; a closed pipe is no failure.
fn send(text: &[u8]) {
    let _ = std::io::stdout().lock().write_all(text);
}

fn file_error(path: &Path, error: &std::io::Error) -> Failure {
    Error::File {
        path: path.to_owned(),
        what: "could not be written",
        reason: error.to_string(),
    }
    .into()
}
