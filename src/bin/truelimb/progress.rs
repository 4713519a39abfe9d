//! A progress bar on a terminal, plain lines elsewhere, nothing when quiet; both with the rate and
//! the time that is left.

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use std::io::IsTerminal;
use std::sync::Mutex;
use std::time::{Duration, Instant};
use truelimb::pipeline::Progress;

/// Says one thing to the person at the terminal.
pub(crate) fn say(text: &str) {
    anstream::eprintln!("{text}");
}

/// Says why it failed and, where it is known, what to do; in colour on a terminal that wants it.
pub(crate) fn fail(text: &str, cure: Option<&str>) {
    let cure = cure.map(|it| format!("; {it}")).unwrap_or_default();
    anstream::eprintln!("\x1b[1;31merror:\x1b[0m {text}{cure}");
}

/// Time from one plain line to the next.
const LINE_EVERY: Duration = Duration::from_secs(10);

/// Progress on stderr.
pub(crate) struct Bar {
    stage: Mutex<Option<Stage>>,
    quiet: bool,
    verbose: bool,
    terminal: bool,
}

/// The stage that runs.
struct Stage {
    name: String,
    steps: u64,
    done: u64,
    began: Instant,
    said: Instant,
    bar: Option<ProgressBar>,
}

impl Bar {
    /// A bar, or silence.
    pub(crate) fn new(quiet: bool) -> Self {
        Self {
            stage: Mutex::new(None),
            quiet,
            verbose: false,
            terminal: std::io::stderr().is_terminal(),
        }
    }

    /// The same, which tells more.
    pub(crate) fn verbose(mut self, verbose: bool) -> Self {
        self.verbose = verbose;
        self
    }

    /// Says what only those want to know who asked for more.
    pub(crate) fn detail(&self, text: &str) {
        if self.verbose {
            say(text);
        }
    }

    /// Ends the stage that runs.
    pub(crate) fn finish(&self) {
        let Ok(mut slot) = self.stage.lock() else {
            return;
        };
        let Some(it) = slot.take() else { return };
        if let Some(bar) = it.bar {
            bar.finish_and_clear();
        }
        if self.verbose || (!self.quiet && !self.terminal) {
            say(&finished(&it.name, it.done, it.began.elapsed()));
        }
    }
}

impl Progress for Bar {
    fn stage(&self, name: &str, steps: u64) {
        self.finish();
        if self.quiet {
            return;
        }
        let bar = if self.terminal {
            let bar = ProgressBar::with_draw_target(Some(steps), ProgressDrawTarget::stderr());
            let style = ProgressStyle::with_template(
                "{msg:28} {wide_bar} {pos}/{len}  {per_sec}  {eta} left",
            );
            if let Ok(it) = style {
                bar.set_style(it);
            }
            bar.set_message(name.to_owned());
            Some(bar)
        } else {
            say(&format!("{name}: {steps} steps"));
            None
        };
        let now = Instant::now();
        if let Ok(mut slot) = self.stage.lock() {
            *slot = Some(Stage {
                name: name.to_owned(),
                steps,
                done: 0,
                began: now,
                said: now,
                bar,
            });
        }
    }

    fn tick(&self) {
        let Ok(mut slot) = self.stage.lock() else {
            return;
        };
        let Some(it) = slot.as_mut() else { return };
        it.done += 1;
        if let Some(bar) = &it.bar {
            bar.inc(1);
        } else if it.said.elapsed() >= LINE_EVERY {
            it.said = Instant::now();
            say(&under_way(&it.name, it.done, it.steps, it.began.elapsed()));
        }
    }
}

/// How far a stage is.
fn under_way(name: &str, done: u64, steps: u64, elapsed: Duration) -> String {
    let rate = done as f64 / elapsed.as_secs_f64();
    let left_s = steps.saturating_sub(done) as f64 / rate;
    if rate.is_finite() && rate > 0.0 {
        format!(
            "{name}: {done} of {steps}, {rate:.1} a second, {} left",
            duration(left_s)
        )
    } else {
        format!("{name}: {done} of {steps}")
    }
}

/// How a stage went.
fn finished(name: &str, done: u64, elapsed: Duration) -> String {
    let rate = done as f64 / elapsed.as_secs_f64();
    let rate = if rate.is_finite() && done > 0 {
        format!(", {rate:.1} a second")
    } else {
        String::new()
    };
    format!(
        "{name}: {done} done in {}{rate}",
        duration(elapsed.as_secs_f64())
    )
}

/// A duration as people say it.
pub(crate) fn duration(seconds: f64) -> String {
    if seconds < 10.0 {
        return format!("{seconds:.1} s");
    }
    let whole = seconds.round() as u64;
    let (hours, minutes, seconds) = (whole / 3600, whole / 60 % 60, whole % 60);
    match (hours, minutes) {
        (0, 0) => format!("{seconds} s"),
        (0, _) => format!("{minutes} min {seconds} s"),
        _ => format!("{hours} h {minutes} min"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_line_has_the_rate_and_what_is_left() {
        let said = under_way("sequence 1: limbs", 120, 480, Duration::from_secs_f64(10.0));
        assert_eq!(
            said,
            "sequence 1: limbs: 120 of 480, 12.0 a second, 30 s left"
        );
        assert_eq!(under_way("a", 0, 5, Duration::from_secs(1)), "a: 0 of 5");
        assert_eq!(
            finished("a", 30, Duration::from_secs(20)),
            "a: 30 done in 20 s, 1.5 a second"
        );
    }

    #[test]
    fn durations_are_said_in_their_own_unit() {
        for (seconds, said) in [
            (0.04, "0.0 s"),
            (9.6, "9.6 s"),
            (59.4, "59 s"),
            (59.6, "1 min 0 s"),
            (3599.0, "59 min 59 s"),
            (7260.0, "2 h 1 min"),
        ] {
            assert_eq!(duration(seconds), said);
        }
    }
}
