//! From values to places, and the ticks of an axis.

use maud::{Markup, html};

use super::{Frame, label_width, line, text};
use crate::report::number;

/// Maps values on an axis to user units.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Scale {
    low: f64,
    high: f64,
    start: f64,
    end: f64,
}

impl Scale {
    /// `low` … `high` is drawn from `start` to `end`. An empty or broken range is widened, so that the scale is always
    /// usable.
    #[must_use]
    pub fn new((low, high): (f64, f64), (start, end): (f64, f64)) -> Self {
        let (low, high) = widened(low, high);
        Self { low, high, start, end }
    }

    /// The place of a value.
    #[must_use]
    pub fn at(&self, value: f64) -> f64 {
        self.start + (value - self.low) / (self.high - self.low) * (self.end - self.start)
    }

    /// The place of a value, or of the axis's end that is nearer.
    #[must_use]
    pub fn at_most(&self, value: f64) -> f64 {
        self.at(value.clamp(self.low, self.high))
    }

    /// Whether the value is on the axis.
    #[must_use]
    pub fn holds(&self, value: f64) -> bool {
        (self.low..=self.high).contains(&value)
    }

    /// The lowest and the highest value on the axis.
    #[must_use]
    pub const fn range(&self) -> (f64, f64) {
        (self.low, self.high)
    }

    /// About `wanted` ticks at round values.
    #[must_use]
    pub fn ticks(&self, wanted: u32) -> Vec<Tick> {
        ticks(self.low, self.high, wanted)
    }

    /// The same, at whole numbers only.
    #[must_use]
    pub fn whole_ticks(&self, wanted: u32) -> Vec<Tick> {
        let mut ticks = ticks(self.low, self.high, wanted);
        ticks.retain(|tick| tick.value.fract() == 0.0);
        for tick in &mut ticks {
            tick.label = format!("{:.0}", tick.value);
        }
        ticks
    }
}

/// One tick of an axis.
#[derive(Clone, Debug, PartialEq)]
pub struct Tick {
    /// Where.
    pub value: f64,
    /// What it says.
    pub label: String,
}

fn widened(low: f64, high: f64) -> (f64, f64) {
    if !low.is_finite() || !high.is_finite() {
        return (0.0, 1.0);
    }
    let (low, high) = if low <= high { (low, high) } else { (high, low) };
    let least = low.abs().max(high.abs()).max(1e-300) * 1e-9;
    if high - low > least { (low, high) } else { (low - least.max(1e-9), high + least.max(1e-9)) }
}

/// Steps of 1, 2 or 5 times a power of ten, about `wanted` of them.
fn ticks(low: f64, high: f64, wanted: u32) -> Vec<Tick> {
    let rough = (high - low) / f64::from(wanted.max(1));
    let power = rough.log10().floor();
    let magnitude = 10_f64.powf(power);
    let factor =
        [1.0, 2.0, 5.0, 10.0].into_iter().find(|factor| factor * magnitude >= 0.8 * rough).unwrap_or(10.0);
    let step = factor * magnitude;
    let power = if factor == 10.0 { power + 1.0 } else { power };
    let places = (-power).clamp(0.0, 12.0) as usize;
    let first = (low / step).ceil();
    let last = (high / step).floor();
    let count = (last - first).clamp(0.0, 100.0) as u32;
    (0..=count)
        .map(|i| (first + f64::from(i)) * step)
        .filter(|value| (low..=high).contains(value))
        .map(|value| Tick { value, label: number::nearest(value, places) })
        .collect()
}

/// How wide the labels of an upright axis need the left margin to be, its name included.
#[must_use]
pub fn left_margin(ticks: &[Tick]) -> f64 {
    44.0 + ticks.iter().map(|tick| label_width(&tick.label)).fold(0.0, f64::max)
}

/// The upright axis: grid lines, labels, and the name turned along it.
#[must_use]
pub fn upright(frame: &Frame, scale: &Scale, ticks: &[Tick], name: &str) -> Markup {
    let middle = f64::midpoint(frame.top, frame.bottom);
    html! {
        @for tick in ticks {
            @let y = scale.at(tick.value);
            (line("grid", (frame.left, y), (frame.right, y)))
            (text("tick", (frame.left - 8.0, y + 4.5), "end", &tick.label))
        }
        g transform={ "translate(15 " (super::Px(middle)) ") rotate(-90)" } {
            (text("name", (0.0, 0.0), "middle", name))
        }
    }
}

/// The level axis: a base line, short ticks, labels, and the name below.
#[must_use]
pub fn level(frame: &Frame, scale: &Scale, ticks: &[Tick], name: &str) -> Markup {
    let y = frame.bottom;
    html! {
        (line("base", (frame.left, y), (frame.right, y)))
        @for tick in ticks {
            @let x = scale.at(tick.value);
            (line("base", (x, y), (x, y + 5.0)))
            (text("tick", (x, y + 19.0), "middle", &tick.label))
        }
        (text("name", (f64::midpoint(frame.left, frame.right), y + 40.0), "middle", name))
    }
}

/// How many level ticks fit without their labels touching.
#[must_use]
pub fn level_ticks_that_fit(width: f64, widest_label: &str) -> u32 {
    // Up to a quarter more ticks than asked for may come.
    (width / (label_width(widest_label) + 24.0) / 1.25).clamp(2.0, 10.0) as u32
}

#[cfg(test)]
mod tests {
    use super::*;

    fn labels(low: f64, high: f64, wanted: u32) -> Vec<String> {
        ticks(low, high, wanted).into_iter().map(|tick| tick.label).collect()
    }

    #[test]
    fn ticks_are_round_numbers_with_as_many_decimals_as_their_step() {
        assert_eq!(labels(1.94, 2.06, 6), ["1.94", "1.96", "1.98", "2.00", "2.02", "2.04", "2.06"]);
        assert_eq!(labels(0.0, 212.0, 5), ["0", "50", "100", "150", "200"]);
        assert_eq!(labels(-3.0, 3.0, 3), ["\u{2212}2", "0", "2"]);
        assert_eq!(labels(10_000_000.0, 10_000_000.4, 4).len(), 5);
    }

    #[test]
    fn a_scale_without_width_or_with_rubbish_still_gives_finite_places() {
        for range in
            [(2.0, 2.0), (0.0, 0.0), (f64::NAN, 1.0), (f64::NEG_INFINITY, f64::INFINITY), (3.0, -3.0)]
        {
            let scale = Scale::new(range, (0.0, 100.0));
            assert!(scale.at(2.0).is_finite(), "{range:?}");
            assert!(scale.ticks(5).len() < 20, "{range:?}");
        }
    }

    #[test]
    fn whole_ticks_never_name_half_a_piece() {
        let scale = Scale::new((0.0, 2.0), (0.0, 100.0));
        let labels: Vec<_> = scale.whole_ticks(8).into_iter().map(|tick| tick.label).collect();
        assert_eq!(labels, ["0", "1", "2"]);
    }
}
