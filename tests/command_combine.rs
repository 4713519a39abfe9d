//! `truelimb combine` as a person runs it.

use std::path::{Path, PathBuf};
use std::process::{Command, Output};
use truelimb::pipeline::{self, Options, Silent, products};
use truelimb::session;

fn truelimb(arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_truelimb"))
        .args(arguments)
        .output()
        .unwrap()
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

/// Three results: the small session, and the same as if it had been observed later, with other values.
fn results(in_folder: &Path) -> Vec<PathBuf> {
    let session = session::read("tests/data/session/session.toml".as_ref()).unwrap();
    let options = Options {
        seed: 1,
        stack: false,
    };
    let mut outcome = pipeline::reduce(&session, &options, &Silent).unwrap();
    (0..3)
        .map(|k| {
            let out = in_folder.join(format!("night-{k}"));
            if k > 0 {
                for it in &mut outcome.record.time_utc {
                    let year: i32 = it[..4].parse().unwrap();
                    *it = format!("{}{}", year + 1, &it[4..]);
                }
                outcome.record.created_from[0].sha256 = format!("{k:064}");
                let oblateness = &mut outcome.record.shape.oblateness;
                oblateness.value = oblateness.value.map(|it| it + 1.5);
            }
            products::write(&outcome, &session, &out).unwrap();
            out
        })
        .collect()
}

#[test]
fn any_order_and_a_folder_of_folders_give_the_same_bytes() {
    let at = tempfile::tempdir().unwrap();
    let season = at.path().join("season");
    std::fs::create_dir(&season).unwrap();
    let folders = results(&season);
    let [a, b, c] = [0, 1, 2].map(|k| folders[k].to_str().unwrap());
    let outs: Vec<PathBuf> = (0..3).map(|k| at.path().join(format!("out-{k}"))).collect();
    let mut printed = Vec::new();
    for (out, list) in
        outs.iter()
            .zip([vec![a, b, c], vec![c, a, b], vec![season.to_str().unwrap()]])
    {
        let mut arguments = vec!["combine", "-o", out.to_str().unwrap()];
        arguments.extend(list);
        let run = truelimb(&arguments);
        assert_eq!(run.status.code(), Some(0), "{}", text(&run.stderr));
        printed.push(text(&run.stdout));
    }
    assert!(printed[0].contains("from 3 sessions"), "{}", printed[0]);
    assert!(printed[0].contains("shared by them"), "{}", printed[0]);
    assert!(printed[0].contains("J2"), "{}", printed[0]);
    assert_eq!(printed[0], printed[1]);
    for name in [
        "combined.json",
        "combined.html",
        "figures/oblateness-series.svg",
        "figures/radius-series.svg",
    ] {
        let read = |k: usize| std::fs::read(outs[k].join(name)).unwrap();
        assert!(read(0).len() > 500, "{name}");
        assert_eq!(read(0), read(1), "{name}");
        assert_eq!(read(0), read(2), "{name}");
    }
    let html = std::fs::read_to_string(outs[0].join("combined.html")).unwrap();
    for it in ["http://", "https://"] {
        let outside = html
            .match_indices(it)
            .filter(|(at, _)| !html[*at..].starts_with("http://www.w3.org/"))
            .count();
        assert_eq!(outside, 0);
    }

    let run = truelimb(&["combine", "--json", a, b]);
    let json: serde_json::Value = serde_json::from_slice(&run.stdout).unwrap();
    assert_eq!(json["oblateness"]["sessions_used"], 2);
    assert!(json["oblateness"]["mean"]["sigma"].as_f64().unwrap() > 0.0);
    // The limb's model is shared: the radius of two sessions is no better in it than that of one.
    let shared = json["radius"]["shared"].as_array().unwrap();
    assert!(shared.iter().any(|it| it["scope"] == "model"), "{shared:?}");

    let covariate = at.path().join("index.csv");
    std::fs::write(&covariate, "epoch,index\n2000,1\n2100,5\n").unwrap();
    let run = truelimb(&[
        "combine",
        "--covariate",
        covariate.to_str().unwrap(),
        "--common",
        "plate scale",
        a,
        b,
        c,
    ]);
    assert_eq!(run.status.code(), Some(0), "{}", text(&run.stderr));
    assert!(
        text(&run.stdout).contains("against index"),
        "{}",
        text(&run.stdout)
    );
}

#[test]
fn what_cannot_be_combined_is_refused_with_status_2() {
    let at = tempfile::tempdir().unwrap();
    let empty = at.path().to_str().unwrap();
    let run = truelimb(&["combine", empty]);
    assert_eq!(run.status.code(), Some(2));
    assert!(
        text(&run.stderr).contains("no result.json"),
        "{}",
        text(&run.stderr)
    );
    let broken = at.path().join("broken");
    std::fs::create_dir(&broken).unwrap();
    std::fs::write(broken.join("result.json"), "{\"schema_version\": 1}").unwrap();
    let run = truelimb(&["combine", broken.to_str().unwrap()]);
    assert_eq!(run.status.code(), Some(2));
    let said = text(&run.stderr);
    assert!(
        said.contains("result.json") && said.contains("reduce the session again"),
        "{said}"
    );
    let run = truelimb(&["combine"]);
    assert_eq!(run.status.code(), Some(2));
}
