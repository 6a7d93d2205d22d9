//! How the demo shows itself: with a live bar on a terminal, in plain lines elsewhere, not at all for scripts.

use std::io::{self, IsTerminal};
use std::thread;
use std::time::Duration;

use donelight_core::interval::Estimate;
use indicatif::{ProgressBar, ProgressStyle};
use serde_json::Value;

use crate::output::Console;

/// On a terminal a piece takes so long, so that the interval is seen to narrow.
const PIECE_SHOWN: Duration = Duration::from_millis(50);
/// On a terminal an incident stands still so long.
const INCIDENT_SHOWN: Duration = Duration::from_millis(900);
/// In plain lines each so-manieth piece is told.
const LINE_EVERY: u32 = 25;

/// The ruler's ends, as index values, and its length in characters.
const RULER: (f64, f64, usize) = (0.8, 2.2, 40);

/// Where the demo speaks.
pub(super) struct Show<'c> {
    console: &'c mut Console,
    bar: Option<ProgressBar>,
    live: bool,
}

impl<'c> Show<'c> {
    pub(super) fn new(console: &'c mut Console) -> Self {
        let live = !console.json() && io::stdout().is_terminal() && io::stderr().is_terminal();
        Self { console, bar: None, live }
    }

    /// Says a line.
    pub(super) fn line(&mut self, text: &str) {
        if self.console.json() {
            return;
        }
        let console = &mut *self.console;
        match &self.bar {
            Some(bar) => bar.suspend(|| console.say(text, &Value::Null)),
            None => console.say(text, &Value::Null),
        }
    }

    /// Says what went wrong on the bench, and lets it be read.
    pub(super) fn incident(&mut self, text: &str) {
        self.line(text);
        self.wait(INCIDENT_SHOWN);
    }

    /// Begins to show a study of so many planned pieces.
    pub(super) fn begin(&mut self, planned: u32) {
        if self.live {
            let bar = ProgressBar::new(u64::from(planned));
            let template = "  {bar:40} {pos} pieces, {len} planned\n  {msg}";
            // The template is fixed, and a test draws it.
            if let Ok(style) = ProgressStyle::with_template(template) {
                bar.set_style(style.progress_chars("=> "));
            }
            self.bar = Some(bar);
        }
    }

    /// Shows the study at `n` pieces.
    pub(super) fn progress(&mut self, n: u32, estimate: Option<&Estimate>) {
        if let Some(bar) = &self.bar {
            bar.set_position(u64::from(n));
            bar.set_message(
                estimate
                    .map(|estimate| format!("{}  {}", ruler(estimate), words(estimate)))
                    .unwrap_or_default(),
            );
        } else if let Some(estimate) = estimate
            && n.is_multiple_of(LINE_EVERY)
        {
            self.line(&format!("  {n:>3} pieces  {}", words(estimate)));
        }
        self.wait(PIECE_SHOWN);
    }

    /// The study is over; the bar stays as it is.
    pub(super) fn end(&mut self) {
        if let Some(bar) = self.bar.take() {
            bar.abandon();
        }
    }

    fn wait(&self, time: Duration) {
        if self.live {
            thread::sleep(time);
        }
    }
}

/// `Cpk 1.49, 1.34 to 1.64`
pub(super) fn words(estimate: &Estimate) -> String {
    let interval = match (estimate.interval.low, estimate.interval.high) {
        (Some(low), Some(high)) => format!(", {low:.2} to {high:.2}"),
        (Some(low), None) => format!(", at least {low:.2}"),
        (None, Some(high)) => format!(", at most {high:.2}"),
        (None, None) => String::new(),
    };
    format!("Cpk {:.2}{interval}", estimate.estimate)
}

/// The interval drawn to scale: `0.8 ......[====|====]...... 2.2`
fn ruler(estimate: &Estimate) -> String {
    let (begin, end, length) = RULER;
    let place = |value: f64| {
        let share = ((value - begin) / (end - begin)).clamp(0.0, 1.0);
        (share * (length - 1) as f64).round() as usize
    };
    let low = estimate.interval.low.map_or(0, place);
    let high = estimate.interval.high.map_or(length - 1, place);
    let middle = place(estimate.estimate);
    let drawn: String = (0..length)
        .map(|at| match at {
            _ if at == middle => '|',
            _ if at == low => '[',
            _ if at == high => ']',
            _ if low < at && at < high => '=',
            _ => '.',
        })
        .collect();
    format!("{begin} {drawn} {end}")
}

#[cfg(test)]
mod tests {
    use donelight_core::interval::Interval;

    use super::*;

    fn estimate(estimate: f64, low: f64, high: f64) -> Estimate {
        let interval = Interval { low: Some(low), high: Some(high) };
        Estimate { estimate, interval, half_width: (high - low) / 2.0 }
    }

    #[test]
    fn the_ruler_is_drawn_to_scale_and_clipped_at_its_ends() {
        let fine = ruler(&estimate(1.52, 1.35, 1.65));
        assert_eq!(fine, format!("0.8 {}[====|===]{} 2.2", ".".repeat(15), ".".repeat(15)));
        let wide = ruler(&estimate(1.52, -3.0, 9.0));
        assert_eq!(wide, format!("0.8 [{}|{}] 2.2", "=".repeat(19), "=".repeat(18)));
        assert_eq!(ruler(&estimate(f64::MAX, 0.1, 0.2)).len(), fine.len());
    }

    #[test]
    fn the_words_say_the_estimate_and_its_interval() {
        assert_eq!(words(&estimate(1.487, 1.339, 1.635)), "Cpk 1.49, 1.34 to 1.64");
    }
}
