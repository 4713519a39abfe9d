//! Whole made sessions: what selection and the stack do to a shape that is known.

use truelimb::pipeline::{self, Options, Outcome, Silent};
use truelimb::result::record::{KeptPoint, Record};
use truelimb::{session, synth};

fn reduced(scenario: &synth::Scenario, seed: u64, stack: bool) -> Outcome {
    let folder = tempfile::tempdir().unwrap();
    let made = folder.path().join("session");
    synth::make(scenario, seed, &made, &|| ()).unwrap();
    let session = session::read(&made.join("session.toml")).unwrap();
    let options = Options { seed: 1, stack };
    pipeline::reduce(&session, &options, &Silent).unwrap()
}

fn with_frames(frames: usize) -> synth::Scenario {
    let mut out = synth::Scenario::default();
    for it in &mut out.sequences {
        it.frames = frames;
    }
    out
}

fn at(record: &Record, fraction: f64) -> &KeptPoint {
    record
        .shape
        .kept_curve
        .iter()
        .find(|it| (it.fraction - fraction).abs() < 1e-9)
        .unwrap()
}

/// Source: the same air in the same frames with 50 mas more of oblateness, so that the difference is free
/// of the turbulence; the figure is our own requirement. Light without photon noise, as its draw
/// would differ between the two and exchange frames at the cut.
#[test]
fn fifty_mas_come_back_with_a_tenth_of_the_frames_kept() {
    let injected_mas = 50.0;
    for seed in [3, 4] {
        let mut scenario = with_frames(40);
        scenario.photon_noise = false;
        let without = reduced(&scenario, seed, false).record;
        scenario.shape.oblateness_mas += injected_mas;
        let with = reduced(&scenario, seed, false).record;
        for fraction in [1.0, 0.4, 0.1] {
            let (a, b) = (at(&without, fraction), at(&with, fraction));
            let frames = (160.0 * fraction).round() as usize;
            assert_eq!((a.frames, b.frames), (frames, frames));
            let back = (b.oblateness_mas.unwrap() - a.oblateness_mas.unwrap()) / injected_mas;
            assert!(
                (back - 1.0).abs() < 0.03,
                "seed {seed}, {fraction} kept: {back} of the injected came back"
            );
            // The turbulence that was not averaged away is far larger than the tolerance.
            assert!(a.oblateness_sigma_mas.unwrap() > 10.0);
        }
        let selection = &with.selection;
        let [all, kept] = selection.sigma_all_and_kept_mas.unwrap();
        assert!(all > 0.0 && (all / kept / selection.gain - 1.0).abs() < 1e-9);
        assert!(
            selection
                .weighting_gain
                .is_some_and(|it| it > 0.8 && it < 2.0)
        );
    }
}

/// Without turbulence and photons nothing but resampling stands between the routes, and its twin takes
/// that off. The aperture is small enough that pixels of 2 arcsec sample its edge.
#[test]
fn in_quiet_air_the_stack_is_a_tenth_of_a_mas_from_the_frames() {
    let mut scenario = with_frames(6);
    scenario.aperture_m = 0.06;
    scenario.size_px = 1024;
    scenario.scale_arcsec_px = 2.05;
    scenario.layers.clear();
    scenario.photon_noise = false;
    scenario.read_noise_e = 0.0;
    let shape = reduced(&scenario, 5, true).record.shape;
    let stack = &shape.by_stack;
    let off = |a: Option<f64>, b: Option<f64>| (a.unwrap() - b.unwrap()).abs();
    let oblateness = off(stack.oblateness.value, shape.oblateness.value);
    let radius = 1e3 * off(stack.radius.value, shape.radius.value);
    let p4 = off(stack.p4.value, shape.p4.value);
    assert!(
        oblateness < 0.1 && radius < 0.1 && p4 < 0.1,
        "oblateness {oblateness}, radius {radius}, P4 {p4} mas from the frames' route"
    );
    // What was taken off for it is larger.
    let removed = stack.removed_mas.unwrap();
    assert!(removed[0].abs() > 0.1, "{removed:?}");
}

#[test]
fn the_stack_is_as_much_sharper_as_the_frames_say_and_its_error_is_theirs() {
    let scenario = with_frames(30);
    let record = reduced(&scenario, 6, true).record;
    let stack = &record.shape.by_stack;
    let sharpness = stack.sharpness.as_ref().unwrap();
    // A pointing of 2 arcsec rms on pixels of 4 arcsec blurs a plain mean.
    assert!(
        sharpness.gain > 1.1 && (sharpness.gain / sharpness.gain_predicted - 1.0).abs() < 0.03,
        "{sharpness:?}"
    );
    assert_eq!(stack.stacks, 4 * 6);
    let (by_stack, by_frame) = (&stack.oblateness, &record.shape.oblateness);
    // 24 stacks know their scatter to some 16 percent.
    let errors = by_stack.sigma_random.unwrap() / by_frame.sigma_random.unwrap();
    assert!((0.5..2.0).contains(&errors), "{errors}");
    let apart = by_stack.value.unwrap() - by_frame.value.unwrap();
    assert!(
        apart.abs() < 0.3 * by_frame.sigma_random.unwrap(),
        "{apart} mas"
    );
    // Chance: 120 frames know no slope.
    let slope = &record.shape.kept_slope;
    let test = slope.oblateness.as_ref().unwrap();
    assert!(test.sigma_mas > 0.0 && test.pull.abs() < 4.0, "{slope:?}");
    let warned = record.warnings.iter().any(|it| it.code == "kept-slope");
    let expected = [&slope.oblateness, &slope.radius]
        .into_iter()
        .flatten()
        .any(|it| it.chance < 0.01);
    assert_eq!(warned, expected);
}
