//! The program as a test runs it.

use std::path::Path;
use std::process::{Command, Output};

pub(crate) fn run(arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_truelimb"))
        .args(arguments)
        .output()
        .unwrap()
}

pub(crate) fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).unwrap()
}

pub(crate) fn shown(path: &Path) -> &str {
    path.to_str().unwrap()
}
