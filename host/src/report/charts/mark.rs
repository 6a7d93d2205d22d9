//! Labelled lines across a picture: limits, target, mean, a required index. Labels that would touch are moved apart.

use maud::{Markup, html};

use super::{Frame, axis::Scale, label_width, line, text};

/// What a line means; the style sheet gives each its own dash and colour.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Meaning {
    /// A specification limit.
    Limit,
    /// The target.
    Target,
    /// The mean of the readings.
    Mean,
    /// What is wanted: a required index, the planned count.
    Wanted,
    /// Where something drawn ended; named at the edge, without a line.
    End,
}

impl Meaning {
    const fn class(self) -> &'static str {
        match self {
            Self::Limit => "limit",
            Self::Target => "target",
            Self::Mean => "mean",
            Self::Wanted => "wanted",
            Self::End => "end",
        }
    }
}

/// A labelled line at a value.
#[derive(Clone, Debug, PartialEq)]
pub struct Mark {
    /// Where.
    pub value: f64,
    /// What it says, with its number: `USL 2.050 mm`.
    pub label: String,
    /// What it means.
    pub meaning: Meaning,
}

/// The range that shows the data and the marks too, with some air; but marks so far away that the data would shrink
/// to a line are left off (they are then named at the edge).
#[must_use]
pub fn range(data: Option<(f64, f64)>, marks: &[Mark]) -> (f64, f64) {
    const AT_MOST_TIMES_THE_DATA: f64 = 20.0;
    let values = || marks.iter().map(|mark| mark.value);
    let all = values().chain(data.into_iter().flat_map(|(low, high)| [low, high]));
    let (low, high) =
        all.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), v| (low.min(v), high.max(v)));
    let (low, high) = match data {
        Some((data_low, data_high)) if data_high > data_low => {
            let reach = AT_MOST_TIMES_THE_DATA * (data_high - data_low);
            let near = |value: &f64| (data_low - reach..=data_high + reach).contains(value);
            values().filter(near).fold((data_low, data_high), |(low, high), v| (low.min(v), high.max(v)))
        }
        _ => (low, high),
    };
    let air = 0.06 * (high - low);
    (low - air, high + air)
}

/// Moves labels apart along a line: each is given by its middle and its extent; the order stays, none leaves
/// `low..high` as long as there is room for all.
#[must_use]
pub fn spread(labels: &[(f64, f64)], low: f64, high: f64) -> Vec<f64> {
    let mut order: Vec<usize> = (0..labels.len()).collect();
    order.sort_by(|&a, &b| labels[a].0.total_cmp(&labels[b].0));
    let mut middles: Vec<f64> = labels.iter().map(|label| label.0).collect();
    let mut free_from = low;
    for &i in &order {
        let half = labels[i].1 / 2.0;
        middles[i] = middles[i].max(free_from + half);
        free_from = middles[i] + half;
    }
    let mut free_to = high;
    for &i in order.iter().rev() {
        let half = labels[i].1 / 2.0;
        middles[i] = middles[i].min(free_to - half);
        free_to = middles[i] - half;
    }
    middles
}

/// How wide the right margin must be for the labels of level lines, an arrow before them included.
#[must_use]
pub fn right_margin(marks: &[Mark]) -> f64 {
    34.0 + marks.iter().map(|mark| label_width(&mark.label)).fold(0.0, f64::max)
}

/// Level lines, labelled at the right of the frame.
#[must_use]
pub fn level(frame: &Frame, scale: &Scale, marks: &[Mark]) -> Markup {
    let labels: Vec<(f64, f64)> = marks.iter().map(|mark| (scale.at_most(mark.value), 17.0)).collect();
    let places = spread(&labels, frame.top - 8.0, frame.bottom + 8.0);
    html! {
        @for (mark, place) in marks.iter().zip(places) {
            @let y = scale.at_most(mark.value);
            @let class = mark.meaning.class();
            @if scale.holds(mark.value) {
                @if mark.meaning != Meaning::End { (line(class, (frame.left, y), (frame.right, y))) }
                (line("leader", (frame.right, y), (frame.right + 10.0, place)))
                (text(&format!("label {class}-label"), (frame.right + 14.0, place + 4.5), "start", &mark.label))
            } @else {
                @let arrow = if mark.value > scale.range().1 { "\u{2191} " } else { "\u{2193} " };
                (text(&format!("label {class}-label"), (frame.right + 14.0, place + 4.5), "start",
                    &format!("{arrow}{}", mark.label)))
            }
        }
    }
}

/// Upright lines, labelled above the frame.
#[must_use]
pub fn upright(frame: &Frame, scale: &Scale, marks: &[Mark]) -> Markup {
    let texts: Vec<String> = marks
        .iter()
        .map(|mark| match scale.range() {
            (low, _) if mark.value < low => format!("\u{2190} {}", mark.label),
            (_, high) if mark.value > high => format!("{} \u{2192}", mark.label),
            _ => mark.label.clone(),
        })
        .collect();
    let labels: Vec<(f64, f64)> = marks
        .iter()
        .zip(&texts)
        .map(|(mark, text)| (scale.at_most(mark.value), label_width(text) + 12.0))
        .collect();
    let places = spread(&labels, frame.left - 40.0, super::WIDTH);
    html! {
        @for ((mark, label), place) in marks.iter().zip(&texts).zip(places) {
            @let x = scale.at_most(mark.value);
            @let class = mark.meaning.class();
            @if scale.holds(mark.value) {
                (line(class, (x, frame.top), (x, frame.bottom)))
                (line("leader", (x, frame.top), (place, frame.top - 10.0)))
            }
            (text(&format!("label {class}-label"), (place, frame.top - 15.0), "middle", label))
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn labels_at_the_same_place_are_moved_apart_and_stay_inside() {
        let labels = [(10.0, 20.0), (10.0, 20.0), (11.0, 20.0), (95.0, 20.0)];
        let places = spread(&labels, 0.0, 100.0);
        for (i, a) in places.iter().enumerate() {
            assert!((10.0..=90.0).contains(a), "{places:?}");
            for b in &places[i + 1..] {
                assert!((a - b).abs() >= 20.0 - 1e-9, "{places:?}");
            }
        }
    }

    #[test]
    fn labels_with_room_stay_where_they_are() {
        assert_eq!(spread(&[(70.0, 10.0), (20.0, 10.0)], 0.0, 100.0), [70.0, 20.0]);
    }

    #[test]
    fn a_limit_far_away_does_not_flatten_the_data() {
        let mark = |value: f64| Mark { value, label: String::new(), meaning: Meaning::Limit };
        let (low, high) = range(Some((1.0, 2.0)), &[mark(1_000_000.0), mark(0.0)]);
        assert!(low < 0.0 && high < 3.0, "{low} {high}");
        let (low, high) = range(Some((5.0, 5.0)), &[mark(4.0), mark(6.0)]);
        assert!(low < 4.0 && high > 6.0, "{low} {high}");
    }
}
