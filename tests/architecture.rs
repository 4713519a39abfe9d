//! Holds the rules of `DEVELOPERS.md` that a compiler does not: the order of the modules, who may
//! touch files, the headings of the physics.

use std::fs;
use std::path::{Path, PathBuf};

/// One source file of the library or the command.
struct Source {
    /// Path under `src`, with forward slashes.
    path: String,
    text: String,
}

impl Source {
    /// The top-level module that the file belongs to.
    fn module(&self) -> &str {
        let first = self.path.split('/').next().unwrap();
        first.trim_end_matches(".rs")
    }

    /// Lines of code with their numbers, comments left out.
    fn code(&self) -> impl Iterator<Item = (usize, &str)> {
        self.text
            .lines()
            .enumerate()
            .map(|(i, line)| (i + 1, line.split("//").next().unwrap_or_default()))
    }

    fn is_command(&self) -> bool {
        self.path.starts_with("bin/")
    }
}

fn root() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

fn rust_files(folder: &Path, into: &mut Vec<PathBuf>) {
    for entry in fs::read_dir(folder).unwrap() {
        let path = entry.unwrap().path();
        if path.is_dir() {
            rust_files(&path, into);
        } else if path.extension().is_some_and(|it| it == "rs") {
            into.push(path);
        }
    }
}

fn sources() -> Vec<Source> {
    let src = root().join("src");
    let mut paths = Vec::new();
    rust_files(&src, &mut paths);
    paths.sort();
    let sources: Vec<Source> = paths
        .iter()
        .map(|path| {
            let names: Vec<_> = path
                .strip_prefix(&src)
                .unwrap()
                .iter()
                .map(|it| it.to_str().unwrap())
                .collect();
            Source {
                path: names.join("/"),
                text: fs::read_to_string(path).unwrap(),
            }
        })
        .collect();
    assert!(sources.len() > 50, "{} sources found", sources.len());
    sources
}

/// The modules in the order in which `lib.rs` declares them.
fn declared() -> Vec<String> {
    fs::read_to_string(root().join("src/lib.rs"))
        .unwrap()
        .lines()
        .filter_map(|line| line.strip_prefix("pub mod ")?.strip_suffix(';'))
        .map(str::to_owned)
        .collect()
}

/// The modules that a line of code names by `crate::`, `crate::{a, b::c}` included.
fn named(code: &str) -> Vec<String> {
    let word = |text: &str| {
        text.chars()
            .take_while(|it| it.is_alphanumeric() || *it == '_')
            .collect::<String>()
    };
    let mut names = Vec::new();
    for (at, _) in code.match_indices("crate::") {
        let rest = &code[at + "crate::".len()..];
        if let Some(group) = rest.strip_prefix('{') {
            let mut depth = 0;
            let mut begins = true;
            for (i, c) in group.char_indices() {
                match c {
                    '{' => depth += 1,
                    '}' if depth == 0 => break,
                    '}' => depth -= 1,
                    ',' if depth == 0 => begins = true,
                    _ if begins && !c.is_whitespace() => {
                        names.push(word(&group[i..]));
                        begins = false;
                    }
                    _ => {}
                }
            }
        } else {
            names.push(word(rest));
        }
    }
    names
}

fn assert_none(broken: &[String]) {
    assert!(broken.is_empty(), "\n{}", broken.join("\n"));
}

#[test]
fn the_scanner_sees_every_form_of_path() {
    assert_eq!(named("use crate::air::Site;"), ["air"]);
    assert_eq!(
        named("use crate::{air::{self, Site}, sky, limb::Disk};"),
        ["air", "sky", "limb"]
    );
    assert_eq!(
        named("let x: crate::sky::Utc = crate::limb::f();"),
        ["sky", "limb"]
    );
}

#[test]
fn a_module_uses_only_modules_declared_above_it() {
    let order = declared();
    assert!(order.len() > 15, "{order:?}");
    let rank = |name: &str| order.iter().position(|it| it == name);
    let mut broken = Vec::new();
    for it in sources().iter().filter(|it| !it.is_command()) {
        if it.path == "lib.rs" {
            continue;
        }
        let Some(own) = rank(it.module()) else {
            broken.push(format!(
                "src/{}: lib.rs does not declare its module",
                it.path
            ));
            continue;
        };
        // Groups may run over several lines, so the whole text is read at once.
        let code: Vec<&str> = it.code().map(|(_, line)| line).collect();
        for name in named(&code.join("\n")) {
            // What is no module, such as `crate::Error`, comes from the end of the order.
            if rank(&name).unwrap_or(order.len()) > own {
                broken.push(format!(
                    "src/{}: `{}` may not use `{name}`",
                    it.path,
                    it.module()
                ));
            }
        }
    }
    assert_none(&broken);
}

#[test]
fn every_source_file_opens_with_what_it_is_about() {
    let broken: Vec<String> = sources()
        .iter()
        .filter(|it| !it.text.starts_with("//! "))
        .map(|it| format!("src/{}: no module comment in its first line", it.path))
        .collect();
    assert_none(&broken);
}

/// The parts that bring things in and send things out.
const TOUCH_FILES: [&str; 6] = [
    "frames/",
    "session/",
    "report/",
    "pipeline/products",
    "synth/",
    "bin/",
];

#[test]
fn files_and_environment_are_touched_only_at_the_edges() {
    let mut broken = Vec::new();
    for it in sources() {
        if TOUCH_FILES.iter().any(|edge| it.path.starts_with(edge)) {
            continue;
        }
        for (number, line) in it.code() {
            for word in ["std::fs", "std::io", "std::env"] {
                if line.contains(word) {
                    broken.push(format!("src/{}:{number}: {word}", it.path));
                }
            }
        }
    }
    assert_none(&broken);
}

#[test]
fn the_library_never_looks_at_a_clock() {
    let mut broken = Vec::new();
    for it in sources().iter().filter(|it| !it.is_command()) {
        for (number, line) in it.code() {
            for word in ["SystemTime::now", "Instant::now"] {
                if line.contains(word) {
                    broken.push(format!("src/{}:{number}: {word}", it.path));
                }
            }
        }
    }
    assert_none(&broken);
}

/// Folders whose files are physics.
const PHYSICS: [&str; 15] = [
    "air",
    "sky",
    "disk",
    "optics",
    "turbulence",
    "seeing",
    "drift",
    "scan",
    "shape",
    "refraction",
    "select",
    "stack",
    "budget",
    "gravity",
    "limb",
];

#[test]
fn physics_files_keep_the_fixed_headings() {
    const HEADINGS: [&str; 4] = ["# Model", "# Valid for", "# Accuracy", "# Source"];
    let mut broken = Vec::new();
    let mut kept = 0;
    for it in sources() {
        if !PHYSICS.contains(&it.module()) {
            continue;
        }
        let found: Vec<&str> = it
            .text
            .lines()
            .take_while(|line| line.starts_with("//!"))
            .filter_map(|line| line.strip_prefix("//! "))
            .filter(|line| HEADINGS.contains(line))
            .collect();
        if found.is_empty() {
            continue;
        }
        kept += 1;
        if found != HEADINGS {
            broken.push(format!(
                "src/{}: the headings are {found:?}, they should be {HEADINGS:?}",
                it.path
            ));
        }
    }
    assert!(kept >= 12, "{kept} physics files with headings");
    assert_none(&broken);
}

#[test]
fn every_published_check_is_part_of_the_binary() {
    let folder = root().join("tests/published");
    let main = fs::read_to_string(folder.join("main.rs")).unwrap();
    let mut files = Vec::new();
    rust_files(&folder, &mut files);
    let broken: Vec<String> = files
        .iter()
        .filter_map(|it| it.file_stem()?.to_str())
        .filter(|stem| *stem != "main" && !main.lines().any(|it| it == format!("mod {stem};")))
        .map(|stem| format!("tests/published/{stem}.rs is not declared in main.rs"))
        .collect();
    assert!(files.len() > 10);
    assert_none(&broken);
}
