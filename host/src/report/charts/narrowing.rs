//! How estimate and interval went as the readings came in.

use maud::{Markup, html};

use crate::report::number;

use super::{Caption, Frame, WIDTH, axis, axis::Scale, clip, mark, mark::Mark, mark::Meaning, path, picture};

const HEIGHT: f64 = 380.0;

/// The estimate after `n` readings, and its interval; a bound has one limit only.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Step {
    /// Readings so far.
    pub n: u32,
    /// The index estimated from them.
    pub estimate: f64,
    /// Lower limit, if this kind of interval has one.
    pub low: Option<f64>,
    /// Upper limit, if this kind of interval has one.
    pub high: Option<f64>,
}

/// What the picture shows.
#[derive(Clone, Debug)]
pub struct Narrowing<'a> {
    /// In order of `n`.
    pub steps: &'a [Step],
    /// The plan's number of pieces.
    pub planned: Option<u32>,
    /// The index that is required.
    pub required: Option<f64>,
    /// The index's name.
    pub index: &'a str,
}

/// Draws the band between the limits, or the one limit, and the estimate in it.
#[must_use]
pub fn draw(caption: &Caption<'_>, narrowing: &Narrowing<'_>) -> Markup {
    let Narrowing { steps, planned, required, index } = narrowing;
    let last_n = steps.last().map_or(2, |step| step.n).max(planned.unwrap_or(0));
    let wanted: Vec<Mark> = required
        .map(|value| Mark {
            value,
            label: format!("required {}", number::nearest(value, 2)),
            meaning: Meaning::Wanted,
        })
        .into_iter()
        .chain(end_marks(steps))
        .collect();
    let range = seen(steps, *required);
    let draft = Scale::new(range, (1.0, 0.0)).ticks(7);
    let frame = Frame {
        left: axis::left_margin(&draft),
        right: WIDTH - mark::right_margin(&wanted),
        top: 36.0,
        bottom: HEIGHT - 52.0,
    };
    let y = Scale::new(range, (frame.bottom, frame.top));
    let x = Scale::new((0.0, f64::from(last_n)), (frame.left, frame.right));
    let at = |step: &Step, value: f64| (x.at(f64::from(step.n)), y.at(value.clamp(-1e6, 1e6)));
    let lows = || steps.iter().filter_map(|step| step.low.map(|low| at(step, low)));
    let highs = || steps.iter().filter_map(|step| step.high.map(|high| at(step, high)));
    let planned_mark: Vec<Mark> = planned
        .map(|n| Mark { value: f64::from(n), label: format!("planned: {n}"), meaning: Meaning::Wanted })
        .into_iter()
        .collect();
    let fitting = axis::level_ticks_that_fit(frame.right - frame.left, &last_n.to_string());
    let content = html! {
        (axis::upright(&frame, &y, &y.ticks(7), index))
        (axis::level(&frame, &x, &x.whole_ticks(fitting), "readings counted so far"))
        (mark::upright(&frame, &x, &planned_mark))
        g clip-path=(clip(caption.id)) {
            @if lows().next().is_some() && highs().next().is_some() {
                @let back = highs().collect::<Vec<_>>().into_iter().rev();
                path class="band" d={ (path(lows().chain(back))) "Z" } {}
            }
            path class="bound" d=(path(lows())) {}
            path class="bound" d=(path(highs())) {}
            path class="estimate" d=(path(steps.iter().map(|step| at(step, step.estimate)))) {}
        }
        (mark::level(&frame, &y, &wanted))
    };
    picture(caption, HEIGHT, &frame, &content)
}

/// Where estimate and limits ended, named at the right; no line across.
fn end_marks(steps: &[Step]) -> impl Iterator<Item = Mark> {
    let end = steps.last().copied();
    let mark = |name: &str, value: f64, shown: String| Mark {
        value,
        label: format!("{name} {shown}"),
        meaning: Meaning::End,
    };
    end.into_iter().flat_map(move |end| {
        [
            end.high.map(|high| mark("upper", high, number::upper_limit(high))),
            Some(mark("estimate", end.estimate, number::nearest(end.estimate, 3))),
            end.low.map(|low| mark("lower", low, number::lower_limit(low))),
        ]
        .into_iter()
        .flatten()
    })
}

/// The first few readings have intervals of any width; what is seen is set by the later seven eighths.
fn seen(steps: &[Step], required: Option<f64>) -> (f64, f64) {
    let last = steps.last().map_or(0, |step| step.n);
    let later = steps.iter().filter(|step| u64::from(step.n) * 8 >= u64::from(last));
    let values = later
        .flat_map(|step| [Some(step.estimate), step.low, step.high])
        .chain([required])
        .flatten()
        .filter(|value| value.is_finite());
    let (low, high) = values.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(v), h.max(v)));
    let air = 0.06 * (high - low);
    (low - air, high + air)
}
