//! What the first sentence says in each case, and what it must not say.

use crate::report::sample::{Session, session};
use crate::report::summary_sentence;

#[test]
fn the_sentence_promises_an_upper_limit_where_the_error_exceeds_the_value() {
    let (record, _) = session(Session::Short);
    let sentence = summary_sentence(&record);
    assert!(sentence.contains("by less than 34 mas"), "{sentence}");
    assert!(
        sentence.contains("the error exceeds the value, 9 ± 12 mas"),
        "{sentence}"
    );
    assert!(sentence.contains("it is good for the seeing"), "{sentence}");
    assert!(
        sentence.contains("which the plate scale limits"),
        "{sentence}"
    );
    assert!(
        sentence.contains("lowered the error by 12 percent"),
        "{sentence}"
    );
}

#[test]
fn the_sentence_gives_a_value_only_where_the_interval_is_clear_of_zero() {
    let (mut record, _) = session(Session::Season);
    let sentence = summary_sentence(&record);
    assert!(sentence.starts_with(
        "The equatorial radius exceeds the polar radius by 8.00 ± 0.60 mas (95 percent interval \
         6.79 to 9.21 mas)"
    ), "{sentence}");
    // Sigma is below the value, yet the 95 percent interval reaches zero: no detection.
    record.shape.oblateness.sigma = Some(5.0);
    record.shape.oblateness.interval_95 = Some([-2.3, 18.3]);
    let sentence = summary_sentence(&record);
    assert!(sentence.contains("by less than 18.3 mas"), "{sentence}");
    assert!(
        sentence.contains("the 95 percent interval reaches zero"),
        "{sentence}"
    );
    // Wholly below zero: neither value nor limit.
    record.shape.oblateness.value = Some(-20.0);
    record.shape.oblateness.interval_95 = Some([-30.0, -10.0]);
    let sentence = summary_sentence(&record);
    assert!(
        sentence.contains("take neither a value nor a limit"),
        "{sentence}"
    );
    record.shape.oblateness.interval_95 = None;
    assert!(summary_sentence(&record).contains("no stated error"));
}

#[test]
fn the_sentence_says_why_nothing_was_separated() {
    let (record, _) = session(Session::Refused);
    let sentence = summary_sentence(&record);
    assert!(sentence.starts_with("No oblateness can be given: a distortion of the instrument"));
    assert!(
        sentence.contains("observe at rolls 45 degrees apart"),
        "{sentence}"
    );
    assert!(!sentence.contains("exceeds the polar radius"), "{sentence}");
}

#[test]
fn a_reason_of_two_sentences_still_makes_one() {
    let (mut record, _) = session(Session::Refused);
    record.shape.oblateness.reason =
        Some("The axis turned by 0.5 degrees only. Turn the camera, as told.".to_owned());
    let sentence = summary_sentence(&record);
    assert!(
        sentence.contains("by 0.5 degrees only; turn the camera, as told; this session"),
        "{sentence}"
    );
    assert!(!sentence.trim_end_matches('.').contains(". "), "{sentence}");
}

#[test]
fn the_scale_is_named_only_where_it_limits_the_radius() {
    let (mut record, _) = session(Session::Season);
    assert!(summary_sentence(&record).contains("limited by the plate scale"));
    for line in &mut record.budget {
        if line.term == "plate scale" {
            line.sigma_radius_mas = 0.1;
        }
    }
    assert!(!summary_sentence(&record).contains("plate scale"));
}

#[test]
fn selection_is_said_to_help_only_where_it_did() {
    let (mut record, _) = session(Session::Season);
    for (gain, kept, words) in [
        (0.8, 0.5, "raised the error by 25 percent"),
        (1.002, 0.5, "changed the error by less than 1 percent"),
        (1.0, 1.0, "all usable frames count"),
        (1.25, 0.5, "lowered the error by 20 percent"),
    ] {
        record.selection.gain = gain;
        record.selection.kept_fraction = kept;
        let sentence = summary_sentence(&record);
        assert!(sentence.contains(words), "{sentence}");
    }
}
