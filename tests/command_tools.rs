//! Runs the commands beside the reduction as a person would: what is in a folder, what a run would
//! do, the report again, the schemas, the shell's help.

mod program;

use program::{run, shown, text};
use serde_json::Value;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::time::{Duration, Instant};

/// What a run that must succeed printed.
fn printed(arguments: &[&str]) -> String {
    let output = run(arguments);
    let said = text(&output.stderr);
    assert_eq!(output.status.code(), Some(0), "{arguments:?}: {said}");
    text(&output.stdout)
}

fn json(arguments: &[&str]) -> Value {
    serde_json::from_str(&printed(arguments)).unwrap()
}

/// What a run that must be refused said: status 2, nothing on stdout.
fn refused(arguments: &[&str]) -> String {
    let output = run(arguments);
    let said = text(&output.stderr);
    assert_eq!(output.status.code(), Some(2), "{arguments:?}: {said}");
    assert_eq!(text(&output.stdout), "", "{arguments:?}");
    said
}

/// A copy of the small session of an independent model.
struct Folder(tempfile::TempDir);

impl Folder {
    fn new() -> Self {
        let from = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/session");
        let it = Self(tempfile::tempdir().unwrap());
        for entry in fs::read_dir(from).unwrap() {
            let path = entry.unwrap().path();
            fs::copy(&path, it.path(path.file_name().unwrap().to_str().unwrap())).unwrap();
        }
        it
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    fn names(&self) -> Vec<String> {
        let mut names: Vec<String> = fs::read_dir(self.0.path())
            .unwrap()
            .map(|it| it.unwrap().file_name().into_string().unwrap())
            .collect();
        names.sort();
        names
    }
}

// ---- inspect ---------------------------------------------------------------------------------

#[test]
fn inspect_finds_what_the_session_of_the_model_says() {
    // The session file was written by the independent model, which knows what it made.
    let folder = Folder::new();
    let found = json(&["inspect", shown(folder.0.path()), "--json"]);
    let session: toml::Table = fs::read_to_string(folder.path("session.toml"))
        .unwrap()
        .parse()
        .unwrap();
    let written = session["sequence"].as_array().unwrap();
    let sequences = found["sequences"].as_array().unwrap();
    assert_eq!(sequences.len(), written.len());
    for (it, written) in sequences.iter().zip(written) {
        assert_eq!(it["kind"].as_str(), written["kind"].as_str());
        assert_eq!(it["files"][0].as_str(), written["files"][0].as_str());
        assert_eq!(it["size_px"], serde_json::json!([384, 384]));
    }
    for kind in ["dark", "flat"] {
        assert_eq!(
            found[kind][0]["path"].as_str(),
            session["calibration"][kind][0].as_str()
        );
    }
    assert_eq!(
        found["weather"][0]["path"].as_str(),
        session["weather"]["log"].as_str()
    );
    assert_eq!(found["sessions"][0]["faults"], 0);
    assert_eq!(found["unusable"].as_array().unwrap().len(), 0);
}

#[test]
fn a_session_that_inspect_started_and_a_person_filled_in_can_be_reduced() {
    let folder = Folder::new();
    let model: toml::Table = fs::read_to_string(folder.path("session.toml"))
        .unwrap()
        .parse()
        .unwrap();
    fs::remove_file(folder.path("session.toml")).unwrap();
    let place = folder.0.path();
    let found = printed(&["inspect", shown(place), "--write", "session.toml"]);
    let started = fs::read_to_string(folder.path("session.toml")).unwrap();
    // What is missing is told by both, and the file as it stands is refused for just that.
    let needed: Vec<&str> = started
        .lines()
        .filter(|it| it.starts_with("# ") && it.contains(" # NEEDED: "))
        .map(|it| it[2..].split(' ').next().unwrap())
        .collect();
    assert!(needed.len() > 9, "{needed:?}");
    for key in needed.iter().filter(|it| **it != "roll_deg") {
        assert!(found.contains(&format!(".{key} ")), "{key}: {found}");
    }
    let said = refused(&["reduce", shown(&folder.path("session.toml")), "--dry-run"]);
    assert!(said.contains("is missing") && said.contains('^'), "{said}");

    // A person fills the marked lines in, one by one, from what is known of the station.
    let mut rolls = [45.0, 90.0, 135.0].iter();
    let filled: Vec<String> = started
        .lines()
        .map(|line| {
            let Some(key) = line
                .strip_prefix("# ")
                .filter(|it| it.contains(" # NEEDED: "))
                .and_then(|it| it.split(' ').next())
            else {
                return line.to_owned();
            };
            if key == "roll_deg" {
                return format!("roll_deg = {}", rolls.next().unwrap());
            }
            let value = model
                .values()
                .find_map(|it| it.as_table()?.get(key))
                .unwrap_or_else(|| panic!("{key}"));
            format!("{key} = {value}")
        })
        .collect();
    fs::write(folder.path("session.toml"), filled.join("\n")).unwrap();
    let plan = json(&[
        "reduce",
        shown(&folder.path("session.toml")),
        "--dry-run",
        "--json",
    ]);
    assert_eq!(plan["frames"], 24);
    assert_eq!(plan["sequences"].as_array().unwrap().len(), 4);

    // What is there is never written over.
    let said = refused(&["inspect", shown(place), "--write", "session.toml"]);
    assert!(said.contains("is there already"), "{said}");
}

#[test]
fn inspect_groups_single_frames_by_name_and_leaves_results_alone() {
    let folder = tempfile::tempdir().unwrap();
    let at = |name: &str| folder.path().join(name);
    let frame = |name: &str, minute: u32, second: u32| {
        let cards = [
            truelimb::frames::Card::text(
                "DATE-OBS",
                format!("2026-06-14T07:{minute:02}:{second:02}.500"),
                "",
            ),
            truelimb::frames::Card::real("EXPTIME", 0.002, ""),
            truelimb::frames::Card::real("OBSGEO-B", 30.94, ""),
        ];
        let mut file = truelimb::frames::FitsWriter::create(&at(name)).unwrap();
        file.image_f32(None, &ndarray::Array2::<f32>::zeros((20, 30)), &cards)
            .unwrap();
        file.finish().unwrap();
    };
    for second in 0..5 {
        frame(&format!("sun {second:03}.fits"), 20, second);
        frame(&format!("limb-{second}.fits"), 40, second);
    }
    // The same name after a pause is another sequence, and then a pattern would name both.
    frame("limb-8.fits", 55, 0);
    fs::create_dir(at("out")).unwrap();
    fs::write(at("out/result.json"), "{}").unwrap();
    fs::copy(at("limb-8.fits"), at("out/stack.fits")).unwrap();
    fs::write(at("notes.fits"), "Clear sky.\n").unwrap();

    let found = json(&["inspect", shown(folder.path()), "--json"]);
    let sequences = found["sequences"].as_array().unwrap();
    assert_eq!(sequences.len(), 3, "{found}");
    assert_eq!(sequences[0]["files"], serde_json::json!(["sun *.fits"]));
    assert_eq!(sequences[0]["frames"], 5);
    let cadence_s = sequences[0]["cadence_s"].as_f64().unwrap();
    assert!((cadence_s - 1.0).abs() < 1e-6, "{cadence_s}");
    assert_eq!(sequences[1]["files"].as_array().unwrap().len(), 5);
    assert_eq!(sequences[2]["files"], serde_json::json!(["limb-8.fits"]));
    assert_eq!(found["unusable"][0]["path"], "notes.fits");
    assert_eq!(found["from_headers"][0]["key"], "site.latitude_deg");
    assert_eq!(found["from_headers"][0]["value"], 30.94);
    let missing = found["missing"].to_string();
    assert!(!missing.contains("latitude_deg") && missing.contains("longitude_deg"));
}

/// Files of other projects and damaged ones, each with what is known of it: at hand where the
/// shared folder is.
#[test]
fn inspect_survives_hostile_files() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("../shared/fits-torture");
    if !folder.is_dir() {
        eprintln!("{} is not there: nothing was tried", folder.display());
        return;
    }
    let mut paths: Vec<PathBuf> = [folder.clone(), folder.join("broken")]
        .iter()
        .filter_map(|it| fs::read_dir(it).ok())
        .flat_map(|it| it.map(|it| it.unwrap().path()))
        .filter(|it| it.is_file() && it.extension().is_none_or(|it| it != "tsv"))
        .collect();
    paths.sort();
    assert!(paths.len() > 50, "{}", paths.len());
    for path in &paths {
        let (code, said) = bounded(path);
        match code {
            Some(0) => {}
            Some(2) => {
                assert!(said.starts_with("error: "), "{said}");
                assert_eq!(said.trim_end().lines().count(), 1, "{said}");
                let name = path.file_name().unwrap().to_str().unwrap();
                assert!(said.contains(name), "{said}");
            }
            other => panic!("{}: {other:?}: {said}", path.display()),
        }
    }
    // All of them at once: every one is accounted for.
    let found = json(&["inspect", shown(&folder), "--json"]);
    let count = |key: &str| found[key].as_array().unwrap().len();
    let in_sequences: usize = found["sequences"]
        .as_array()
        .unwrap()
        .iter()
        .map(|it| it["members"].as_array().unwrap().len())
        .sum();
    let accounted =
        in_sequences + count("dark") + count("flat") + count("without_time") + count("unusable");
    let fits = paths
        .iter()
        .filter(|it| {
            let name = it.to_str().unwrap();
            [".fits", ".fits.gz", ".fit", ".fts"]
                .iter()
                .any(|end| name.ends_with(end))
        })
        .count();
    assert_eq!(accounted, fits);
}

/// Status and words of `inspect` on one file, with two gigabytes of address space and a minute.
fn bounded(path: &Path) -> (Option<i32>, String) {
    const LIMIT_KB: &str = "2000000";
    let mut child = Command::new("sh")
        .args([
            "-c",
            "ulimit -v \"$0\" && exec \"$1\" inspect \"$2\" --threads 1",
            LIMIT_KB,
            env!("CARGO_BIN_EXE_truelimb"),
            shown(path),
        ])
        .stdout(std::process::Stdio::null())
        .stderr(std::process::Stdio::piped())
        .spawn()
        .unwrap();
    let began = Instant::now();
    loop {
        if child.try_wait().unwrap().is_some() {
            break;
        }
        if began.elapsed() > Duration::from_mins(1) {
            child.kill().unwrap();
            panic!("{}: still at it after a minute", path.display());
        }
        std::thread::sleep(Duration::from_millis(5));
    }
    let output = child.wait_with_output().unwrap();
    (output.status.code(), text(&output.stderr))
}

#[test]
fn inspect_names_a_folder_that_is_not_there() {
    let said = refused(&["inspect", "/no/such/folder"]);
    assert!(said.contains("/no/such/folder"), "{said}");
}

// ---- dry run, report -------------------------------------------------------------------------

#[test]
fn a_dry_run_writes_nothing_and_says_what_a_run_does() {
    let folder = Folder::new();
    let before = folder.names();
    let session = folder.path("session.toml");
    let out = folder.path("out");
    let arguments = ["reduce", shown(&session), "-o", shown(&out)];
    let plan = json(&[&arguments[..], &["--dry-run", "--json", "-q"]].concat());
    assert_eq!(folder.names(), before);

    let output = run(&[&arguments[..], &["--json", "-q"]].concat());
    assert!(matches!(output.status.code(), Some(0 | 3)));
    let result: Value = serde_json::from_slice(&output.stdout).unwrap();
    assert_eq!(plan["frames"], result["selection"]["read"]);
    let (planned, done) = (
        plan["sequences"].as_array().unwrap(),
        result["sequences"].as_array().unwrap(),
    );
    assert_eq!(planned.len(), done.len());
    for (planned, done) in planned.iter().zip(done) {
        for key in ["kind", "time_utc", "zenith_true_deg"] {
            assert_eq!(planned[key], done[key], "{key}");
        }
        // The radius that scale and date predict is the one that is there, as the run checks too.
        let radius_px = planned["expected_radius_px"].as_f64().unwrap();
        assert!((170.0..180.0).contains(&radius_px), "{radius_px}");
    }
    assert_eq!(plan["assumed"], result["settings"]["assumed"]);
    for name in plan["products"].as_array().unwrap() {
        assert!(out.join(name.as_str().unwrap()).exists(), "{name}");
    }
    let files = fs::read_dir(&out).unwrap().count();
    assert_eq!(files, plan["products"].as_array().unwrap().len());
    let again = json(&[&arguments[..], &["--dry-run", "--json", "-q"]].concat());
    assert_eq!(again["already_there"], plan["products"]);

    report_is_drawn_again(&out);
    checksums_are_those_of_the_files(&out, &folder);
}

/// The report and the figures drawn again are those of the reduction, byte for byte.
fn report_is_drawn_again(out: &Path) {
    let files = |folder: &Path| -> Vec<(String, Vec<u8>)> {
        let mut all = Vec::new();
        for folder in [folder.to_owned(), folder.join("figures")] {
            for entry in fs::read_dir(folder).unwrap() {
                let path = entry.unwrap().path();
                if path.is_file() {
                    let name = path.strip_prefix(out).unwrap();
                    all.push((shown(name).to_owned(), fs::read(&path).unwrap()));
                }
            }
        }
        all.sort();
        all
    };
    let before = files(out);
    fs::remove_file(out.join("report.html")).unwrap();
    fs::write(out.join("figures/limb.svg"), "spoiled").unwrap();
    let told = json(&["report", shown(out), "--json"]);
    assert!(told["files"].as_array().unwrap().len() > 8, "{told}");
    for ((name, was), (same, is)) in before.iter().zip(&files(out)) {
        assert_eq!(name, same);
        assert!(was == is, "{name} is another than the reduction wrote");
    }

    // A result of another layout is refused, with a cure.
    let path = out.join("result.json");
    let whole = fs::read_to_string(&path).unwrap();
    fs::write(
        &path,
        whole.replacen("\"schema_version\": 1", "\"schema_version\": 99", 1),
    )
    .unwrap();
    let said = refused(&["report", shown(out)]);
    assert!(
        said.contains("schema_version 99") && said.contains("cure"),
        "{said}"
    );
    fs::write(&path, &whole[..whole.len() / 2]).unwrap();
    let said = refused(&["report", shown(out)]);
    assert!(said.contains("result.json") && said.contains('^'), "{said}");
    fs::write(&path, whole).unwrap();
    let said = refused(&["report", shown(out.parent().unwrap())]);
    assert!(said.contains("result.json"), "{said}");
}

/// `provenance.json` names every file that went in and came out, with the checksum that the
/// system's own tool finds.
fn checksums_are_those_of_the_files(out: &Path, folder: &Folder) {
    let origin: Value =
        serde_json::from_slice(&fs::read(out.join("provenance.json")).unwrap()).unwrap();
    let mut products = 0;
    for (id, entity) in origin["entity"].as_object().unwrap() {
        let label = entity["prov:label"].as_str().unwrap();
        let path = if id.starts_with("tl:product") {
            products += 1;
            out.join(label)
        } else {
            folder.path(label)
        };
        let found = Command::new("sha256sum").arg(&path).output().unwrap();
        let found = text(&found.stdout);
        assert_eq!(
            found.split(' ').next(),
            entity["tl:sha256"].as_str(),
            "{label}"
        );
        assert_eq!(
            fs::metadata(&path).unwrap().len(),
            entity["tl:bytes"].as_u64().unwrap(),
            "{label}"
        );
    }
    let written = fs::read_dir(out.join("figures")).unwrap().count() + 7;
    assert_eq!(products, written, "not every product is named");
}

// ---- schema, completions, manual, manners ----------------------------------------------------

#[test]
fn the_schema_of_the_result_holds_every_name_of_the_design() {
    // Names as fixed in the design of result.json.
    let schema = json(&["schema", "result"]);
    let defs = &schema["$defs"];
    let has = |of: &Value, names: &[&str]| {
        for name in names {
            assert!(
                of["properties"][name].is_object() || of["properties"][name] == true,
                "{name}"
            );
        }
    };
    has(
        &schema,
        &[
            "schema_version",
            "program_version",
            "created_from",
            "settings",
            "seed",
            "shape",
            "seeing",
            "turbulence",
            "refraction",
            "selection",
            "budget",
            "sequences",
            "warnings",
        ],
    );
    has(
        &defs["ShapeRecord"],
        &[
            "oblateness",
            "radius",
            "p4",
            "null_tests",
            "instrument",
            "air",
            "separation",
            "by_stack",
            "covariance",
            "definitions",
            "kept_curve",
            "quadrupole",
        ],
    );
    has(
        &defs["ShapeQuantity"],
        &[
            "value",
            "sigma",
            "unit",
            "sigma_random",
            "sigma_systematic",
            "interval_68",
            "interval_95",
            "status",
        ],
    );
    has(
        &defs["SeeingRecord"],
        &[
            "r0",
            "line_of_sight",
            "by_motion",
            "by_blur",
            "fwhm",
            "coherence_time",
            "outer_scale",
            "height_proxy",
            "independent_frames",
        ],
    );
    has(&defs["TurbulenceRecord"], &["floor", "share", "hours_to"]);
    has(&defs["HoursTo"], &["1_mas", "0.5_mas"]);
}

#[test]
fn completions_and_manual_know_every_command() {
    let help = printed(&["--help"]);
    let commands: Vec<&str> = help
        .lines()
        .skip_while(|it| *it != "Commands:")
        .skip(1)
        .take_while(|it| !it.is_empty())
        .filter_map(|it| it.strip_prefix("  ")?.split(' ').next())
        .filter(|it| !it.is_empty())
        .collect();
    assert!(commands.len() >= 10, "{commands:?}");
    for shell in ["bash", "zsh", "fish", "elvish", "powershell"] {
        let script = printed(&["completions", shell]);
        for command in &commands {
            assert!(script.contains(command), "{shell}: {command}");
        }
    }
    let manual = printed(&["man"]);
    assert!(manual.contains(".TH truelimb 1"), "{manual}");
    let folder = tempfile::tempdir().unwrap();
    printed(&["man", "-o", shown(folder.path())]);
    for command in commands.iter().filter(|it| **it != "help") {
        let page = folder.path().join(format!("truelimb-{command}.1"));
        assert!(page.is_file(), "{}", page.display());
        assert!(manual.contains(command), "{command}");
        let explained = printed(&[command, "--help"]);
        assert!(
            explained.contains(&format!("Example: truelimb {command}")),
            "{explained}"
        );
    }
}

#[test]
fn bash_takes_the_completions() {
    let script = printed(&["completions", "bash"]);
    let mut child = Command::new("bash")
        .arg("-n")
        .stdin(std::process::Stdio::piped())
        .spawn()
        .unwrap();
    std::io::Write::write_all(&mut child.stdin.take().unwrap(), script.as_bytes()).unwrap();
    assert!(child.wait().unwrap().success());
}

/// Two frames; all else is the demo's.
const FEW_FRAMES: &str = r#"
[[sequence]]
kind = "burst"
frames = 2
step_s = 0.5
at_min = 0.0
roll_deg = 0.0
"#;

#[test]
fn what_is_piped_has_no_colour_and_progress_is_in_lines() {
    let folder = tempfile::tempdir().unwrap();
    let scenario = folder.path().join("scenario.toml");
    fs::write(&scenario, FEW_FRAMES).unwrap();
    let out = folder.path().join("made");
    let made = run(&["simulate", shown(&scenario), "-o", shown(&out), "--json"]);
    assert_eq!(made.status.code(), Some(0), "{}", text(&made.stderr));
    let told: Value = serde_json::from_slice(&made.stdout).unwrap();
    assert!(Path::new(told["session"].as_str().unwrap()).is_file());
    assert!(Path::new(told["truth"].as_str().unwrap()).is_file());
    let said = text(&made.stderr);
    assert!(
        said.contains("making frames: ") && said.contains(" done in "),
        "{said}"
    );
    assert!(!said.contains('\u{1b}'), "{said}");
    let said = refused(&["inspect", "/no/such/folder"]);
    assert!(
        said.starts_with("error: ") && !said.contains('\u{1b}'),
        "{said}"
    );
    for wrong in [&["--threads", "0", "schema"][..], &["-q", "-v", "schema"]] {
        refused(wrong);
    }
}

#[test]
fn what_is_wrong_is_shown_at_its_place() {
    let folder = Folder::new();
    // A line of a scenario, with a caret.
    let scenario = folder.path("scenario.toml");
    fs::write(&scenario, "mount = \"equatorial\"\nsize = 12\n").unwrap();
    let out = folder.path("made");
    let said = refused(&["simulate", shown(&scenario), "-o", shown(&out)]);
    assert!(
        said.contains("scenario.toml") && said.contains("size"),
        "{said}"
    );
    assert!(!out.exists());
    // A line of a table, with a caret.
    let log = fs::read_to_string(folder.path("weather.csv")).unwrap();
    let broken: Vec<String> = log
        .lines()
        .enumerate()
        .map(|(index, it)| {
            if index == 4 {
                it.replacen(',', ",x", 1)
            } else {
                it.to_owned()
            }
        })
        .collect();
    fs::write(folder.path("weather.csv"), broken.join("\n")).unwrap();
    let said = refused(&["reduce", shown(&folder.path("session.toml")), "--dry-run"]);
    for word in ["weather.csv:5:", "  5 | ", "^", "found", "allowed", "cure"] {
        assert!(said.contains(word), "\"{word}\" is not in: {said}");
    }
    fs::write(folder.path("weather.csv"), log).unwrap();
    // A keyword of a header, with file, HDU, what was found, what is right, and a cure.
    let cards = [truelimb::frames::Card::text("DATE-OBS", "14/06/26", "")];
    let path = folder.path("burst_000.fits");
    let mut file = truelimb::frames::FitsWriter::create(&path).unwrap();
    file.image_f32(None, &ndarray::Array2::<f32>::zeros((384, 384)), &cards)
        .unwrap();
    file.finish().unwrap();
    let said = refused(&["reduce", shown(&folder.path("session.toml")), "--dry-run"]);
    for word in [
        "burst_000.fits",
        "HDU 0",
        "DATE-OBS",
        "'14/06/26'",
        "YYYY-MM-DDThh:mm:ss",
        "[headers]",
    ] {
        assert!(said.contains(word), "\"{word}\" is not in: {said}");
    }
}
