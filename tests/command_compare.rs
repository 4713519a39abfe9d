//! `truelimb compare` as a person runs it, on the small session and on invented values.

use serde_json::{Value, json};
use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};
use std::sync::OnceLock;

fn run(arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_truelimb"))
        .args(arguments)
        .env("NO_COLOR", "1")
        .output()
        .unwrap()
}

fn text(bytes: &[u8]) -> &str {
    std::str::from_utf8(bytes).unwrap()
}

/// A folder with the result of the small session, made once.
fn result() -> &'static Path {
    static ONCE: OnceLock<tempfile::TempDir> = OnceLock::new();
    ONCE.get_or_init(|| {
        let folder = tempfile::tempdir().unwrap();
        let session = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/session/session.toml");
        let output = run(&[
            "reduce",
            session.to_str().unwrap(),
            "-o",
            folder.path().to_str().unwrap(),
            "--no-stack",
            "-q",
        ]);
        assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
        folder
    })
    .path()
}

fn record() -> Value {
    serde_json::from_str(&fs::read_to_string(result().join("result.json")).unwrap()).unwrap()
}

/// The comparison of the result with a table, as JSON.
fn compared(arguments: &[&str]) -> Value {
    let mut all = vec!["compare", result().to_str().unwrap(), "--json"];
    all.extend(arguments);
    let output = run(&all);
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    serde_json::from_slice(&output.stdout).unwrap()
}

const HEADER: &str = "label,platform,epoch,wavelength_nm,quantity,value,unit,sigma_random,sigma_systematic,definition,blur_fwhm_arcsec,of,distance,b0_deg,group,note\n";

/// A table in a folder of its own.
fn table(rows: &str) -> (tempfile::TempDir, PathBuf) {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("values.csv");
    fs::write(&path, format!("{HEADER}{rows}")).unwrap();
    (folder, path)
}

fn of<'a>(comparison: &'a Value, quantity: &str) -> &'a Value {
    comparison["quantities"]
        .as_array()
        .unwrap()
        .iter()
        .find(|it| it["quantity"] == quantity)
        .unwrap()
}

fn number(value: &Value) -> f64 {
    value
        .as_f64()
        .unwrap_or_else(|| panic!("{value} is no number"))
}

fn demo_values() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-data/values.csv")
}

/// Six laboratories of a key comparison (from memory), as if they were values from space.
const SIX: [(f64, f64); 6] = [
    (34.30, 1.03),
    (32.90, 0.69),
    (34.53, 0.83),
    (32.42, 0.29),
    (31.90, 0.40),
    (35.80, 0.38),
];

fn six() -> String {
    let rows: Vec<String> = SIX
        .iter()
        .enumerate()
        .map(|(i, (x, u))| {
            format!(
                "P{i},space,20{:02}-06-14,550,oblateness,{x},mas,{u},0,model,,radius,1 AU,0,,\n",
                10 + i
            )
        })
        .collect();
    rows.concat()
}

// The published arithmetic of `data/meta_worked_examples.csv` through the whole command.
#[test]
fn the_mean_of_six_values_is_that_of_the_worked_example() {
    let (_folder, path) = table(&six());
    let comparison = compared(&[path.to_str().unwrap()]);
    let it = of(&comparison, "oblateness");
    let space = &it["platforms"][1];
    assert_eq!(space["platform"], "space");
    let consensus = &space["consensus"];
    assert!((number(&consensus["mean"]["value"]) - 33.585341).abs() <= 5.1e-7);
    assert!((number(&consensus["mean"]["sigma"]) - 0.627564).abs() <= 5.1e-7);
    assert!((number(&consensus["dark_mas"]).powi(2) - 1.974545).abs() <= 5.1e-7);
    assert!((number(&consensus["birge"]) - 3.693654).abs() <= 5.1e-7);
    // 2.5706 of Student's t with five degrees of freedom.
    let half = number(&consensus["interval_95"][1]) - 33.585341;
    assert!((half / 0.627564 - 2.5706).abs() < 1e-4);

    // This result minus space: the difference of the two, and their errors together.
    let record = record();
    let own = &record["shape"]["oblateness"];
    let (value, sigma) = (number(&own["value"]), number(&own["sigma"]));
    let this = &it["this_result"]["against_space"];
    let difference = number(&this["difference"]["value"]);
    assert!((difference - (value - 33.585341)).abs() < 1e-5);
    let found = number(&this["difference"]["sigma"]);
    assert!(
        found > 0.9 * sigma && found < sigma.hypot(0.63) * 1.001,
        "{found} {sigma}"
    );
    let shown = number(&this["smallest_shown_mas"]);
    let interval = number(&this["interval_95_mas"][1]) - difference;
    assert!((shown - interval).abs() < 1e-9 && shown >= 1.959 * found);
    assert!(number(&this["found_in_95_mas"]) > 3.6 * found);

    // Had space been the truth: the middle is space, the place of the report follows from the pull.
    let reverse = &it["this_result"]["reverse"];
    assert!((number(&reverse["predicted"]["value"]) - 33.585341).abs() <= 5.1e-7);
    let share = number(&reverse["share_below"]);
    let as_far = number(&reverse["as_far"]);
    assert!((as_far - 2.0 * share.min(1.0 - share)).abs() < 1e-9);
    let quantiles = reverse["quantiles"].as_array().unwrap();
    assert!(
        quantiles
            .windows(2)
            .all(|it| number(&it[0][1]) < number(&it[1][1]))
    );
    let shares: f64 = reverse["causes"]
        .as_array()
        .unwrap()
        .iter()
        .map(|it| number(&it["share"]))
        .sum();
    assert!((shares - 1.0).abs() < 1e-9);
    assert!(reverse["forms"].as_array().unwrap().len() >= 4);
}

#[test]
fn every_value_is_the_sum_of_its_steps() {
    let values = demo_values();
    let comparison = compared(&[values.to_str().unwrap()]);
    let list = comparison["values"].as_array().unwrap();
    assert_eq!(list.len(), 12);
    for it in list {
        let mas = if it["common"]["unit"] == "arcsec" {
            1000.0
        } else {
            1.0
        };
        let mut at = None;
        for step in it["steps"].as_array().unwrap() {
            let (change, after) = (number(&step["change_mas"]), number(&step["after"]) * mas);
            if let Some(before) = at {
                let sum: f64 = before + change;
                assert!((sum - after).abs() < 1e-5, "{step}");
            }
            at = Some(after);
            assert!(!step["how"].as_str().unwrap().is_empty());
        }
        let common = &it["common"];
        assert!((at.unwrap() - number(&common["value"]) * mas).abs() < 1e-5);
        let parts = ["sigma_random", "sigma_systematic", "sigma_footing"]
            .map(|part| number(&common[part]).powi(2));
        let sigma = number(&common["sigma"]);
        assert!((parts.iter().sum::<f64>().sqrt() - sigma).abs() < 1e-9 * sigma);
        // All of them are the Sun.
        if common["unit"] == "arcsec" {
            assert!((958.5..961.0).contains(&number(&common["value"])), "{it}");
        }
    }
    // The two of one instrument share their systematic error, the others nothing.
    let pairwise = of(&comparison, "oblateness")["pairwise"]
        .as_array()
        .unwrap();
    let correlated = pairwise
        .iter()
        .filter(|it| number(&it["correlation"]) > 0.1)
        .count();
    assert_eq!(correlated, 1);
}

#[test]
fn the_same_footing_at_both_ends_of_the_model() {
    let values = demo_values();
    let model = compared(&[values.to_str().unwrap()]);
    let fourier = compared(&[
        values.to_str().unwrap(),
        "--to",
        "fourier:10",
        "--to-blur-arcsec",
        "2",
    ]);
    let middle = |it: &Value| number(&of(it, "radius")["consensus"][2]["mean"]["value"]);
    // The transform finds the edge about an arcsecond inside, the same for all.
    let inside = middle(&model) - middle(&fourier);
    assert!((0.8..1.3).contains(&inside), "{inside}");
    let difference = |it: &Value| {
        number(&of(it, "radius")["this_result"]["against_space"]["difference"]["value"])
    };
    assert!((difference(&model) - difference(&fourier)).abs() < 20.0);
    assert_eq!(fourier["footing"]["definition"], "fourier:10");
    // An oblateness does not feel a blur that is the same all around.
    assert_eq!(
        of(&model, "oblateness")["places"],
        of(&fourier, "oblateness")["places"]
    );
    let mean = |it: &Value| number(&of(it, "oblateness")["consensus"][2]["mean"]["value"]);
    assert!((mean(&model) - mean(&fourier)).abs() < 1e-12);
}

#[test]
fn a_second_result_from_above_the_air_is_the_space_value() {
    let folder = tempfile::tempdir().unwrap();
    let mut other = record();
    other["site_name"] = json!("Lanthorn 3");
    other["settings"]["weather"] = json!({ "none": true });
    let radius = number(&other["shape"]["radius"]["value"]);
    other["shape"]["radius"]["value"] = json!(radius + 0.1);
    let path = folder.path().join("result.json");
    fs::write(&path, other.to_string()).unwrap();
    let comparison = compared(&[path.to_str().unwrap()]);
    let it = of(&comparison, "radius");
    let difference = number(&it["ground_minus_space"]["difference"]["value"]);
    assert!((difference + 100.0).abs() < 1e-6, "{difference}");
    // Of the same morning: a pair, and nothing left over.
    let pairs = &it["pairs"];
    assert_eq!(pairs["pairs"].as_array().unwrap().len(), 1);
    assert!((number(&pairs["by_scatter"]["value"]) + 100.0).abs() < 1e-6);
    assert!(pairs["left_out"].as_array().unwrap().is_empty());
    assert!(pairs["drift"]["reason"].is_string());
}

#[test]
fn epochs_are_paired_within_the_window_only() {
    let row = |label: &str, epoch: &str| {
        format!("{label},space,{epoch},550,oblateness,8,mas,1,0,model,,radius,1 AU,0,,\n")
    };
    let (_folder, path) = table(&(row("near", "2026-06-17") + &row("far", "2026-08-01")));
    let pairs = |window: &str| {
        let it = compared(&[path.to_str().unwrap(), "--window-days", window]);
        let pairs = &of(&it, "oblateness")["pairs"];
        (
            pairs["pairs"].as_array().unwrap().len(),
            pairs["left_out"].as_array().unwrap().len(),
        )
    };
    assert_eq!(pairs("1"), (0, 3));
    assert_eq!(pairs("5"), (1, 1));
}

#[test]
fn the_page_and_the_figure_are_complete_in_themselves() {
    let folder = tempfile::tempdir().unwrap();
    let out = folder.path().join("comparison");
    let (_table, path) = table(
        "<b>bold</b>,space,2026-06-14,600,radius,959.8,arcsec,0.01,0.1,inflection,1.2,radius,1 AU,0,,\"a & b, c\"\n",
    );
    let values = demo_values();
    let output = run(&[
        "compare",
        result().to_str().unwrap(),
        values.to_str().unwrap(),
        path.to_str().unwrap(),
        "-o",
        out.to_str().unwrap(),
    ]);
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    let printed = text(&output.stdout);
    for word in [
        "footing:",
        "ground minus space",
        "had space been the truth",
        "pairs",
    ] {
        assert!(printed.contains(word), "{word}: {printed}");
    }
    let page = fs::read_to_string(out.join("comparison.html")).unwrap();
    assert!(page.contains("&lt;b&gt;bold&lt;/b&gt;") && !page.contains("<b>bold"));
    assert!(!page.contains("<script") && !page.contains("http://") && !page.contains("https://"));
    assert!(page.contains("Veridel") && page.contains("High Skarrow flight 3"));
    let svg = fs::read_to_string(out.join("figures/forest.svg")).unwrap();
    assert!(svg.starts_with("<?xml") && !svg.contains("NaN") && !page.contains("NaN"));
    let record: Value =
        serde_json::from_str(&fs::read_to_string(out.join("comparison.json")).unwrap()).unwrap();
    assert_eq!(record["schema_version"], 1);
    assert_eq!(record["created_from"].as_array().unwrap().len(), 3);
}

#[test]
fn the_template_is_read_back() {
    let output = run(&["compare", "--template"]);
    assert_eq!(output.status.code(), Some(0));
    let template = text(&output.stdout);
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("values.csv");
    // Its own example, taken out of the comment.
    let example = template
        .lines()
        .find(|it| it.starts_with("# Lanthorn"))
        .unwrap();
    let header = template.lines().last().unwrap();
    fs::write(&path, format!("{header}\n{}\n", &example[2..])).unwrap();
    let comparison = compared(&[path.to_str().unwrap()]);
    assert_eq!(
        of(&comparison, "oblateness")["places"]
            .as_array()
            .unwrap()
            .len(),
        2
    );
}

/// Refused as wrong input, with these words, and nothing on stdout.
fn refused(arguments: &[&str], words: &[&str]) {
    let output = run(arguments);
    let said = text(&output.stderr);
    assert_eq!(output.status.code(), Some(2), "{said}");
    assert!(output.stdout.is_empty());
    for word in words {
        assert!(said.contains(word), "{word}: {said}");
    }
}

#[test]
fn bad_input_is_refused_with_all_its_faults_and_nothing_is_written() {
    let folder = tempfile::tempdir().unwrap();
    let out = folder.path().join("out");
    let (_table, path) = table(
        "A,spcae,2026-06-14,550,oblateness,8,mas,1,0,model,,radius,1 AU,0,,\nB,space,soon,550,radius,1919,arcsec,1,0,inflection,,radius,1 AU,0,,\n",
    );
    let (values, own) = (path.to_str().unwrap(), result().to_str().unwrap());
    refused(
        &["compare", own, values, "-o", out.to_str().unwrap()],
        &[
            "values.csv:2: platform",
            "did you mean `space`?",
            "values.csv:3: epoch",
            "values.csv:3: blur_fwhm_arcsec",
            "values.csv:3: value",
        ],
    );
    assert!(!out.exists());
    refused(&["compare", values], &["values.csv"]);
    refused(&["compare", own], &["alone", "table of values"]);
    refused(
        &["compare", "no/such/folder.csv", own],
        &["no/such/folder.csv", "--template"],
    );
    let (_t, good) =
        table("A,space,2026,380,radius,959.6,arcsec,1,0,inflection,2,radius,1 AU,0,,\n");
    let good = good.to_str().unwrap();
    refused(&["compare", own, good], &["A: ", "380 nm"]);
    refused(
        &["compare", own, good, "--to", "fourier:99"],
        &["fourier:WINDOW"],
    );
    refused(
        &["compare", own, good, "--to", "inflection"],
        &["--to-blur-arcsec"],
    );
    refused(&["compare", own, good, "--window-days=-1"], &["window"]);
    let odd = folder.path().join("odd.json");
    fs::write(&odd, "{\"schema_version\": 1}").unwrap();
    refused(
        &["compare", odd.to_str().unwrap(), good],
        &["odd.json:1:", "not a result"],
    );
    assert_eq!(run(&["compare"]).status.code(), Some(2));
}

#[test]
fn it_explains_itself() {
    let output = run(&["compare", "--help"]);
    assert_eq!(output.status.code(), Some(0));
    assert!(text(&output.stdout).contains("Example: truelimb compare"));
}
