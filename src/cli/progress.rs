//! How far a batch is, on one line of stderr that is written over; nothing where stderr is no terminal.

use super::output::Output;
use inrush::run::Progress;
use std::time::{Duration, Instant};

/// Time between two states of the line.
const EVERY: Duration = Duration::from_millis(250);

/// The line of a batch.
pub struct ProgressLine {
    /// What the items are, such as `sources`.
    items: &'static str,
    shown: bool,
    begun: Instant,
    next: Instant,
}

impl ProgressLine {
    /// A line for a batch that begins now; `items` is what it counts.
    pub fn begin(output: &Output, items: &'static str) -> Self {
        let now = Instant::now();
        Self {
            items,
            shown: output.shows_progress(),
            begun: now,
            next: now,
        }
    }

    /// Shows a state, not more often than people can read it.
    pub fn show(&mut self, progress: Progress) {
        let now = Instant::now();
        if !self.shown || (now < self.next && progress.done < progress.items) {
            return;
        }
        self.next = now + EVERY;
        let line = state(progress, self.items, now - self.begun);
        Output::transient(&line);
    }

    /// Takes the line away.
    pub fn end(self) {
        if self.shown {
            Output::transient("");
        }
    }
}

/// `120 of 400 sources, 31 a second, 9 s left`.
fn state(progress: Progress, items: &str, elapsed: Duration) -> String {
    let mut line = format!("{} of {} {items}", progress.done, progress.items);
    let rate = (progress.done - progress.before) as f64 / elapsed.as_secs_f64();
    if rate > 0.0 && rate.is_finite() {
        let left = (progress.items - progress.done) as f64 / rate;
        let rate = inrush::report::rounded_plain(rate);
        line.push_str(&format!(", {rate} a second, {} left", duration(left)));
    }
    line
}

/// `9 s`, `3 min`, `2.5 h`.
fn duration(seconds: f64) -> String {
    match seconds {
        ..100.0 => format!("{seconds:.0} s"),
        ..6000.0 => format!("{:.0} min", seconds / 60.0),
        _ => format!("{:.1} h", seconds / 3600.0),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_line_says_how_fast_and_how_long() {
        let progress = |done| Progress {
            done,
            before: 20,
            items: 400,
        };
        let after = |seconds| Duration::from_secs_f64(seconds);
        for (progress, elapsed, expected) in [
            (progress(20), after(0.0), "20 of 400 sources"),
            (
                progress(120),
                after(4.0),
                "120 of 400 sources, 25.0 a second, 11 s left",
            ),
            (
                progress(21),
                after(30.0),
                "21 of 400 sources, 0.0333 a second, 3.2 h left",
            ),
            (
                progress(40),
                after(10.0),
                "40 of 400 sources, 2.00 a second, 3 min left",
            ),
            (
                progress(400),
                after(10.0),
                "400 of 400 sources, 38.0 a second, 0 s left",
            ),
        ] {
            assert_eq!(state(progress, "sources", elapsed), expected);
        }
    }
}
