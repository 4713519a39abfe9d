//! Runs every command of the README, as it stands there, one after the other in a folder of its
//! own, and holds the guide to what the program says.
//!
//! In that folder lie the small session of an independent model and one of its frames as
//! `sun.fits`, and the values of the demo, so that every example has something to work on.

use std::fs;
use std::path::Path;
use std::process::Command;

/// Commands that the checks of the project run themselves, or that install.
const RUN_ELSEWHERE: [&str; 2] = ["cargo test --locked --release", "cargo install --path ."];

/// A fenced block of the README: its language and its lines.
struct Block {
    language: String,
    lines: Vec<String>,
}

fn blocks(readme: &str) -> Vec<Block> {
    let mut all: Vec<Block> = Vec::new();
    let mut open = false;
    for line in readme.lines() {
        if let Some(language) = line.strip_prefix("```") {
            open = !open;
            if open {
                all.push(Block {
                    language: language.to_owned(),
                    lines: Vec::new(),
                });
            }
        } else if open {
            all.last_mut().unwrap().lines.push(line.to_owned());
        }
    }
    assert!(!open, "a block of the README is not closed");
    all
}

/// The commands in the first column of the README's tables.
fn in_tables(readme: &str) -> Vec<String> {
    readme
        .lines()
        .filter_map(|it| it.strip_prefix("| `truelimb "))
        .map(|it| format!("truelimb {}", it.split('`').next().unwrap()))
        .collect()
}

/// A folder with something for every example.
fn folder() -> tempfile::TempDir {
    let folder = tempfile::tempdir().unwrap();
    let from = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/session");
    for entry in fs::read_dir(&from).unwrap() {
        let path = entry.unwrap().path();
        fs::copy(&path, folder.path().join(path.file_name().unwrap())).unwrap();
    }
    fs::copy(from.join("burst_000.fits"), folder.path().join("sun.fits")).unwrap();
    let values = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-data/values.csv");
    fs::copy(values, folder.path().join("values.csv")).unwrap();
    folder
}

/// Runs one command; status 3 is an answer too. Gives what it said, both streams.
fn run(command: &str, folder: &Path) -> String {
    let binary = Path::new(env!("CARGO_BIN_EXE_truelimb")).parent().unwrap();
    let path = format!(
        "{}:{}",
        binary.display(),
        std::env::var("PATH").unwrap_or_default()
    );
    let command = command.replace("cargo run --release --", "truelimb");
    let output = Command::new("bash")
        .args(["-euo", "pipefail", "-c", &command])
        .current_dir(folder)
        .env("PATH", path)
        .output()
        .unwrap();
    let said = format!(
        "{}{}",
        String::from_utf8_lossy(&output.stdout),
        String::from_utf8_lossy(&output.stderr)
    );
    assert!(
        matches!(output.status.code(), Some(0 | 3)),
        "{command}: {:?}\n{said}",
        output.status
    );
    said
}

/// The words of a line, every number made the same.
fn words(line: &str) -> String {
    let mut out = String::new();
    for word in line.split_whitespace() {
        let is_number = word.contains(|it: char| it.is_ascii_digit());
        out.push_str(if is_number { "#" } else { word });
        out.push(' ');
    }
    out
}

#[test]
fn every_command_of_the_readme_does_what_it_says() {
    let readme =
        fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("README.md")).unwrap();
    let folder = folder();
    let mut said = String::new();
    let (mut commands, mut shown) = (0, 0);
    for block in blocks(&readme) {
        match block.language.as_str() {
            "sh" => {
                said.clear();
                for line in block.lines.iter().filter(|it| !it.trim().is_empty()) {
                    if line.starts_with('#') || RUN_ELSEWHERE.contains(&line.trim()) {
                        continue;
                    }
                    commands += 1;
                    said.push_str(&run(line, folder.path()));
                }
            }
            // What the block before prints: the words are the program's, the figures a run's.
            "text" => {
                let printed: Vec<String> = said.lines().map(words).collect();
                for line in block.lines.iter().filter(|it| !it.trim().is_empty()) {
                    shown += 1;
                    assert!(
                        printed.contains(&words(line)),
                        "the README shows a line that is not printed: {line}\n{said}"
                    );
                }
            }
            _ => {}
        }
    }
    assert!(commands >= 5, "{commands} commands in blocks");
    assert!(shown >= 5, "{shown} lines of output shown");
    let table = in_tables(&readme);
    assert!(table.len() >= 9, "{table:?}");
    for command in &table {
        run(command, folder.path());
    }
}
