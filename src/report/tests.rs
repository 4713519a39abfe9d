//! Tests of the whole report on invented sessions.

mod sentence;

use super::sample::{Session, session};
use super::{ReportError, render, summary_sentence};
use crate::result::record::{Record, Rejection, Status, Traces};

const ALL: [Session; 3] = [Session::Short, Session::Season, Session::Refused];

/// Every number in the record and the traces, at any depth, texts included.
fn numbers_in(record: &Record, traces: &Traces) -> Vec<f64> {
    let mut found = Vec::new();
    let mut pending = vec![
        serde_json::to_value(record).expect("a record is JSON"),
        serde_json::to_value(&traces.frames).expect("frames are JSON"),
        serde_json::to_value(&traces.limb).expect("a limb is JSON"),
    ];
    while let Some(value) = pending.pop() {
        match value {
            serde_json::Value::Number(number) => found.extend(number.as_f64()),
            serde_json::Value::String(text) => {
                found.extend(tokens(&text).into_iter().map(|token| token.0));
            }
            serde_json::Value::Array(items) => pending.extend(items),
            serde_json::Value::Object(items) => pending.extend(items.into_iter().map(|it| it.1)),
            _ => {}
        }
    }
    found
}

/// Numbers written in a text, each with half a unit of its last written place.
fn tokens(text: &str) -> Vec<(f64, f64)> {
    let mut found = Vec::new();
    let plain = text.replace('\u{2212}', "-").replace('\u{202f}', "");
    let raised: Vec<char> = "⁰¹²³⁴⁵⁶⁷⁸⁹".chars().collect();
    let mut power = 1.0;
    if let Some((_, exponent)) = plain.split_once("× 10") {
        let digits: String = exponent
            .chars()
            .filter_map(|c| raised.iter().position(|r| *r == c).map(|d| d.to_string()))
            .collect();
        let sign = if exponent.starts_with('⁻') { -1 } else { 1 };
        power = 10f64.powi(sign * digits.parse::<i32>().expect("an exponent"));
    }
    let written = plain.split("× 10").next().unwrap_or_default();
    for word in written.split(|c: char| !(c.is_ascii_digit() || c == '.' || c == '-')) {
        let word = word.trim_end_matches(['.', '-']);
        let Ok(value) = word.parse::<f64>() else {
            continue;
        };
        let half = if let Some((_, fraction)) = word.split_once('.') {
            0.5 / 10f64.powf(fraction.len() as f64)
        } else {
            let zeros = word.len() - word.trim_end_matches('0').len();
            0.5 * 10f64.powf(if value == 0.0 { 0.0 } else { zeros as f64 })
        };
        found.push((value * power, half * power * (1.0 + 1e-9)));
    }
    found
}

/// The text without its encoded picture, whose letters are of no account.
fn without_picture(text: &str) -> String {
    let mut parts = text.split("data:image/png;base64,");
    let mut out = parts.next().unwrap_or_default().to_owned();
    for part in parts {
        out.push_str(part.split_once('"').map_or("", |it| it.1));
    }
    out
}

/// Texts of the number cells of every table.
fn number_cells(html: &str) -> Vec<String> {
    html.split("<td class=\"n\">")
        .skip(1)
        .map(|rest| {
            rest.split("</td>")
                .next()
                .unwrap_or_default()
                .replace('\u{a0}', " ")
        })
        .collect()
}

#[test]
fn every_number_in_the_tables_is_a_rounded_number_of_the_record() {
    for which in ALL {
        let (record, traces) = session(which);
        let known = numbers_in(&record, &traces);
        let html = render(&record, &traces).expect("a report").html;
        let cells = number_cells(&html);
        assert!(
            cells.len() > 200,
            "{which:?} has only {} cells",
            cells.len()
        );
        for cell in cells {
            for (value, half) in tokens(&cell) {
                // Shares are shown in percent: the one conversion that tables make.
                let ok = known
                    .iter()
                    .any(|it| (it - value).abs() <= half || (100.0 * it - value).abs() <= half);
                assert!(
                    ok,
                    "{which:?}: {value} of the cell {cell:?} is not in the record"
                );
            }
        }
    }
}

#[test]
fn the_same_record_gives_the_same_bytes() {
    for which in ALL {
        let (record, traces) = session(which);
        let first = render(&record, &traces).expect("a report");
        assert_eq!(first, render(&record, &traces).expect("a report"));
    }
}

/// The value with every text replaced but the names of statuses.
fn with_texts(value: serde_json::Value, text: &str) -> serde_json::Value {
    use serde_json::Value;
    match value {
        Value::String(old) if old == "measured" || old == "not_separated" => Value::String(old),
        Value::String(_) => Value::String(text.to_owned()),
        Value::Array(items) => items.into_iter().map(|it| with_texts(it, text)).collect(),
        Value::Object(items) => items
            .into_iter()
            .map(|(name, it)| (name, with_texts(it, text)))
            .collect(),
        other => other,
    }
}

#[test]
fn text_from_files_is_escaped_everywhere() {
    const BAD: &str = "<script>alert('1')</script>\" onload=\"x\u{0}]]>&lt;--";
    for which in ALL {
        let (record, traces) = session(which);
        let value = with_texts(
            serde_json::to_value(&record).expect("a record is JSON"),
            BAD,
        );
        let mut record: Record = serde_json::from_value(value).expect("still a record");
        record.settings = serde_json::json!({ BAD: BAD });
        for summary in [String::new(), BAD.to_owned()] {
            record.summary = summary;
            let rendered = render(&record, &traces).expect("a report");
            for text in rendered
                .figures
                .iter()
                .map(|figure| &figure.1)
                .chain([&rendered.html])
            {
                assert!(!text.contains("<script") && !text.contains("\" onload"));
                assert!(!text.contains('\u{0}') && !text.contains("]]>"));
            }
            assert!(rendered.html.matches("&lt;script&gt;").count() > 50);
        }
    }
}

#[test]
fn nothing_outside_the_file_is_asked_for() {
    let (record, traces) = session(Session::Short);
    let rendered = render(&record, &traces).expect("a report");
    let head = rendered.html.split("<head>\n").nth(1).expect("a head");
    assert!(head.starts_with("<meta http-equiv=\"Content-Security-Policy\""));
    assert!(!rendered.html.contains("<script") && !rendered.html.contains("http://"));
    assert!(!rendered.html.contains("https://") && !rendered.html.contains("@import"));
    assert!(rendered.html.len() < 2_000_000);
    for (stem, svg) in &rendered.figures {
        assert!(
            !svg.contains("var(--"),
            "{stem} needs a style sheet from outside"
        );
        assert!(svg.contains("<title ") && svg.contains("<desc "), "{stem}");
    }
}

#[test]
fn ids_are_unique_and_every_reference_has_its_target() {
    for which in ALL {
        let (record, traces) = session(which);
        let html = render(&record, &traces).expect("a report").html;
        let quoted = |start: &str| -> Vec<String> {
            html.split(start)
                .skip(1)
                .map(|rest| rest.split(['"', ')']).next().unwrap_or_default().to_owned())
                .collect()
        };
        let mut ids = quoted(" id=\"");
        ids.sort();
        let before = ids.len();
        ids.dedup();
        assert_eq!(before, ids.len());
        let mut wanted = quoted("href=\"#");
        wanted.extend(quoted("url(#"));
        for list in quoted("aria-labelledby=\"") {
            wanted.extend(list.split(' ').map(str::to_owned));
        }
        for target in wanted {
            assert!(
                ids.contains(&target),
                "{which:?}: no element has the id {target}"
            );
        }
    }
}

#[test]
fn an_empty_record_still_gives_a_page() {
    let (mut record, mut traces) = session(Session::Refused);
    traces.frames.clear();
    traces.preview = None;
    for column in [
        &mut traces.limb.position_angle_deg,
        &mut traces.limb.residual_mas,
        &mut traces.limb.sigma_mas,
        &mut traces.limb.model_mas,
    ] {
        column.clear();
    }
    record.shape.radius.value = None;
    record.shape.radius.reason = Some("no frame had a usable limb".to_owned());
    record.shape.radius.status = Status::NotSeparated;
    record.shape.null_tests.clear();
    record.shape.instrument.clear();
    record.shape.kept_curve.clear();
    record.shape.definitions.clear();
    record.shape.separation.singular_values.clear();
    record.shape.covariance.terms.clear();
    record.shape.covariance.matrix.clear();
    record.seeing.r0.value = None;
    record.seeing.independent_frames.clear();
    record.seeing.layers.clear();
    record.refraction.clear();
    record.budget.clear();
    record.sequences.clear();
    record.masked.clear();
    record.warnings.clear();
    record.created_from.clear();
    record.selection.usable = 0;
    record.selection.gain = f64::NAN;
    record.selection.kept_fraction = f64::NAN;
    record.selection.rejected = vec![Rejection {
        reason: "cloud".to_owned(),
        frames: 3,
    }];
    let rendered = render(&record, &traces).expect("a report");
    assert!(rendered.figures.is_empty());
    assert!(!rendered.html.contains("NaN") && !rendered.html.contains("inf<"));
    assert!(rendered.html.contains("cloud"));
    let sentence = summary_sentence(&record);
    assert!(sentence.contains("neither radius nor seeing"), "{sentence}");
    assert!(
        sentence.contains("no frame had a usable limb"),
        "{sentence}"
    );
}

#[test]
fn numbers_that_are_not_finite_never_reach_a_drawing() {
    let (mut record, mut traces) = session(Session::Short);
    traces.frames[3].r0_blur_m = f64::NAN;
    traces.frames[4].cos2_mas = f64::INFINITY;
    traces.limb.residual_mas[7] = f64::NAN;
    traces.limb.model_mas[8] = f64::NAN;
    traces.limb.zenith_deg = f64::NAN;
    record.sequences[1].harmonics[0].cos_mas = f64::NAN;
    record.refraction[2].flattening_mas = f64::NAN;
    record.shape.kept_curve[0].radius_arcsec = f64::NAN;
    record.budget[1].sigma_radius_mas = f64::NAN;
    record.shape.null_tests[0].sigma = Some(0.0);
    record.shape.by_stack.oblateness.interval_68 = None;
    let rendered = render(&record, &traces).expect("a report");
    for (stem, svg) in &rendered.figures {
        let svg = without_picture(svg);
        assert!(!svg.contains("NaN") && !svg.contains("inf"), "{stem}");
    }
    assert!(!without_picture(&rendered.html).contains("NaN"));
}

#[test]
fn many_frames_are_thinned() {
    let (record, mut traces) = session(Session::Short);
    let few = traces.frames.clone();
    for copy in 1..40 {
        traces.frames.extend(few.iter().map(|frame| {
            let mut frame = frame.clone();
            frame.frame += 80 * copy;
            frame.time_s += 0.02 * copy as f64;
            frame
        }));
    }
    let rendered = render(&record, &traces).expect("a report");
    assert!(
        rendered.html.len() < 2_000_000,
        "{} bytes",
        rendered.html.len()
    );
    assert!(
        rendered
            .html
            .contains("One frame in 13; all of them are in limbs.fits")
    );
    for (stem, svg) in &rendered.figures {
        for path in svg.split("<path ") {
            assert!(path.matches("h.01").count() <= 2000, "{stem}");
        }
    }
}

#[test]
fn columns_of_unequal_length_are_refused() {
    let (record, mut traces) = session(Session::Short);
    traces.limb.sigma_mas.pop();
    let error = render(&record, &traces).expect_err("unequal columns");
    assert!(matches!(
        error,
        ReportError::LimbColumns {
            column: "sigma_mas",
            ..
        }
    ));
    let (record, mut traces) = session(Session::Short);
    traces.preview_radius_px = 0.0;
    let error = render(&record, &traces).expect_err("no disk");
    assert!(matches!(error, ReportError::PreviewRadius { .. }));
}
