//! The readings in their order, with the limits: drift, jumps and stuck gauges show here.

use maud::{Markup, html};

use crate::report::Belonging;

use super::{Caption, Frame, Px, WIDTH, axis, axis::Scale, line, mark, mark::Mark, path, picture};

const HEIGHT: f64 = 380.0;
/// Beyond so many readings, neighbours are drawn together, from their lowest to their highest.
pub const DRAWN_APART_MAX: usize = 1500;
const COLUMNS: usize = 600;

impl Belonging {
    const ALL: [Self; 3] = [Self::Counted, Self::Surplus, Self::Voided];

    const fn class(self) -> &'static str {
        match self {
            Self::Counted => "counted",
            Self::Surplus => "surplus",
            Self::Voided => "voided",
        }
    }
}

/// One reading.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Point {
    /// In the unit.
    pub value: f64,
    /// Whether it counts.
    pub belonging: Belonging,
}

/// Draws the readings as number 1, 2, 3 …; `name` is the upright axis's, with the unit.
#[must_use]
pub fn draw(caption: &Caption<'_>, points: &[Point], marks: &[Mark], name: &str) -> Markup {
    let values = points.iter().map(|point| point.value);
    let data = values.fold(None, |range: Option<(f64, f64)>, v| {
        Some(range.map_or((v, v), |(low, high)| (low.min(v), high.max(v))))
    });
    let range = mark::range(data, marks);
    let draft = Scale::new(range, (1.0, 0.0)).ticks(7);
    let frame = Frame {
        left: axis::left_margin(&draft),
        right: WIDTH - mark::right_margin(marks),
        top: 16.0,
        bottom: HEIGHT - 52.0,
    };
    let y = Scale::new(range, (frame.bottom, frame.top));
    let last = points.len().max(2) as f64;
    let x = Scale::new((1.0, last), (frame.left + 10.0, frame.right - 10.0));
    let fitting = axis::level_ticks_that_fit(frame.right - frame.left, &points.len().to_string());
    let content = html! {
        (axis::upright(&frame, &y, &y.ticks(7), name))
        (axis::level(&frame, &x, &numbers(&x, fitting), "reading number"))
        (mark::level(&frame, &y, marks))
        @if points.len() <= DRAWN_APART_MAX {
            (apart(points, &x, &y))
        } @else {
            (together(points, &x, &y))
        }
    };
    picture(caption, HEIGHT, &frame, &content)
}

/// Whole numbers from 1 on: the first reading is labelled as such.
fn numbers(x: &Scale, fitting: u32) -> Vec<axis::Tick> {
    let mut ticks = x.whole_ticks(fitting);
    let step = match ticks.as_slice() {
        [first, second, ..] => second.value - first.value,
        _ => 1.0,
    };
    if ticks.first().is_none_or(|first| first.value > 1.0 + 0.4 * step) {
        ticks.insert(0, axis::Tick { value: 1.0, label: "1".to_owned() });
    }
    ticks
}

fn apart(points: &[Point], x: &Scale, y: &Scale) -> Markup {
    let place = |(i, point): (usize, &Point)| (x.at((i + 1) as f64), y.at(point.value));
    let counted = points.iter().enumerate().filter(|(_, point)| point.belonging == Belonging::Counted);
    let radius = if points.len() > 400 { 1.8 } else { 2.8 };
    html! {
        path class="thread" d=(path(counted.map(place))) {}
        @for (i, point) in points.iter().enumerate() {
            @let (cx, cy) = place((i, point));
            (symbol(point.belonging, cx, cy, radius))
        }
    }
}

/// A dot, a diamond or a cross: told apart without colour.
fn symbol(belonging: Belonging, x: f64, y: f64, r: f64) -> Markup {
    let class = belonging.class();
    match belonging {
        Belonging::Counted => html! { circle class=(class) cx=(Px(x)) cy=(Px(y)) r=(Px(r)) {} },
        Belonging::Surplus => {
            let r = r + 1.0;
            let corners = path([(x, y - r), (x + r, y), (x, y + r), (x - r, y)]);
            html! { path class=(class) d={ (corners) "Z" } {} }
        }
        Belonging::Voided => {
            let r = r + 1.0;
            html! {
                path class=(class)
                    d={ (path([(x - r, y - r), (x + r, y + r)])) (path([(x - r, y + r), (x + r, y - r)])) } {}
            }
        }
    }
}

fn together(points: &[Point], x: &Scale, y: &Scale) -> Markup {
    let size = points.len().div_ceil(COLUMNS);
    html! {
        @for (column, chunk) in points.chunks(size).enumerate() {
            @let at = x.at((column * size + 1) as f64 + (chunk.len() - 1) as f64 / 2.0);
            @for belonging in Belonging::ALL {
                @let values = chunk.iter().filter(|point| point.belonging == belonging).map(|point| point.value);
                @let (low, high) = values.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(v), h.max(v)));
                @if low <= high {
                    // Half a unit more at both ends, so that a single value is a dot and not nothing.
                    (line(&format!("column {}", belonging.class()), (at, y.at(low) + 0.5), (at, y.at(high) - 0.5)))
                }
            }
        }
    }
}
