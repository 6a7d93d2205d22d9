//! How often each value came, with the limits and the fitted normal curve.

use maud::{Markup, html};

use super::{Caption, Frame, Px, WIDTH, axis, axis::Scale, clip, mark, mark::Mark, path, picture};

const HEIGHT: f64 = 400.0;
const BINS_MAX: i64 = 60;

/// Bins of equal width that hold whole counts of the resolution, so that none holds more possible values than its
/// neighbour.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Bins {
    /// The lowest count of the first bin.
    pub first: i64,
    /// Counts in each bin, 1 or more.
    pub width: i64,
    /// Readings in each bin.
    pub readings: Vec<u32>,
}

impl Bins {
    /// Sorts readings into bins as wide as Scott's rule says, 3.49·s·n^(−1/3) (Scott 1979, from memory), rounded to
    /// whole counts. `sd` is in counts. Without readings there are no bins.
    #[must_use]
    pub fn new(counts: &[i64], sd: f64) -> Self {
        let (Some(&low), Some(&high)) = (counts.iter().min(), counts.iter().max()) else {
            return Self { first: 0, width: 1, readings: Vec::new() };
        };
        // A float-to-integer `as` saturates, and rubbish becomes 0.
        let wanted = (3.49 * sd / (counts.len() as f64).cbrt()).round() as i64;
        let width = wanted.max((high - low) / BINS_MAX + 1).max(1);
        let first = low.div_euclid(width) * width;
        let bin = |count: i64| usize::try_from((count - first) / width).unwrap_or(0);
        let mut readings = vec![0; bin(high) + 1];
        for &count in counts {
            if let Some(n) = readings.get_mut(bin(count)) {
                *n += 1;
            }
        }
        Self { first, width, readings }
    }

    /// The edges of bin `i` in counts: half a count outside of what it holds.
    #[must_use]
    fn edges(&self, i: usize) -> (f64, f64) {
        let left = self.first as f64 + i as f64 * self.width as f64 - 0.5;
        (left, left + self.width as f64)
    }
}

/// The normal curve with the readings' own mean and standard deviation, in the unit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Curve {
    /// Its middle.
    pub mean: f64,
    /// Its standard deviation, above 0.
    pub sd: f64,
    /// Its area: readings times bin width in the unit.
    pub area: f64,
}

impl Curve {
    fn at(&self, value: f64) -> f64 {
        let z = (value - self.mean) / self.sd;
        self.area * (-0.5 * z * z).exp() / (self.sd * std::f64::consts::TAU.sqrt())
    }
}

/// What the picture shows.
#[derive(Clone, Debug)]
pub struct Histogram<'a> {
    /// The readings; none where only a summary is known.
    pub bins: &'a Bins,
    /// One count in the unit.
    pub resolution: f64,
    /// The fitted curve; `None` where the readings do not spread.
    pub curve: Option<Curve>,
    /// The level axis's name, with the unit.
    pub name: &'a str,
}

/// Draws bars, curve and marks.
#[must_use]
pub fn draw(caption: &Caption<'_>, histogram: &Histogram<'_>, marks: &[Mark]) -> Markup {
    let Histogram { bins, resolution, curve, name } = histogram;
    let bars: Vec<(f64, f64, u32)> = bins
        .readings
        .iter()
        .enumerate()
        .map(|(i, &n)| {
            let (left, right) = bins.edges(i);
            (left * resolution, right * resolution, n)
        })
        .collect();
    let range = mark::range(data_range(&bars, *curve), marks);
    let highest = bars.iter().map(|bar| f64::from(bar.2)).fold(0.0, f64::max);
    let highest = curve.map_or(highest, |curve| highest.max(curve.at(curve.mean)));
    let counted = !bars.is_empty();
    let draft = Scale::new((0.0, highest), (1.0, 0.0)).whole_ticks(6);
    let frame = Frame {
        left: if counted { axis::left_margin(&draft) } else { 40.0 },
        right: WIDTH - 24.0,
        top: 40.0,
        bottom: HEIGHT - 52.0,
    };
    let x = Scale::new(range, (frame.left, frame.right));
    let y = Scale::new((0.0, highest * 1.05), (frame.bottom, frame.top));
    let widest = x.ticks(8).into_iter().map(|tick| tick.label).max_by_key(String::len).unwrap_or_default();
    let fitting = axis::level_ticks_that_fit(frame.right - frame.left, &widest);
    let content = html! {
        @if counted { (axis::upright(&frame, &y, &y.whole_ticks(6), "readings")) }
        g clip-path=(clip(caption.id)) {
            @for &(left, right, n) in &bars {
                @let (from, to) = (x.at(left), x.at(right));
                @let gap = if to - from > 4.0 { 0.75 } else { 0.0 };
                @if n > 0 {
                    rect class="bar" x=(Px(from + gap)) y=(Px(y.at(f64::from(n))))
                        width=(Px((to - from - 2.0 * gap).max(0.5))) height=(Px(frame.bottom - y.at(f64::from(n)))) {}
                }
            }
            @if let Some(curve) = curve {
                path class="curve" d=(path(trace(*curve, &x, &y))) {}
            }
        }
        (axis::level(&frame, &x, &x.ticks(fitting), name))
        (mark::upright(&frame, &x, marks))
    };
    picture(caption, HEIGHT, &frame, &content)
}

/// What must be seen: all bars, and the curve out to four standard deviations.
fn data_range(bars: &[(f64, f64, u32)], curve: Option<Curve>) -> Option<(f64, f64)> {
    let bars = bars.first().zip(bars.last()).map(|(first, last)| (first.0, last.1));
    let curve = curve.map(|curve| (curve.mean - 4.0 * curve.sd, curve.mean + 4.0 * curve.sd));
    match (bars, curve) {
        (Some(a), Some(b)) => Some((a.0.min(b.0), a.1.max(b.1))),
        (one, other) => one.or(other),
    }
}

fn trace(curve: Curve, x: &Scale, y: &Scale) -> impl Iterator<Item = (f64, f64)> {
    const STEPS: i32 = 160;
    (0..=STEPS).map(move |i| {
        let value = curve.mean + curve.sd * 4.5 * (f64::from(i) / f64::from(STEPS) * 2.0 - 1.0);
        (x.at(value), y.at(curve.at(value)))
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_reading_is_in_exactly_one_bin() {
        for counts in
            [vec![5], vec![-3, -3, 8, 8, 9], (-1000..1000).step_by(7).collect(), vec![i64::from(i32::MIN), 0]]
        {
            let bins = Bins::new(&counts, 3.0);
            assert_eq!(bins.readings.iter().map(|&n| n as usize).sum::<usize>(), counts.len());
            assert!(bins.readings.len() <= BINS_MAX as usize + 1);
            for &count in &counts {
                let i = (0..bins.readings.len())
                    .filter(|&i| (bins.edges(i).0..bins.edges(i).1).contains(&(count as f64)))
                    .collect::<Vec<_>>();
                assert_eq!(i.len(), 1);
                assert!(bins.readings[i[0]] > 0);
            }
        }
    }

    #[test]
    fn no_reading_and_no_spread_make_no_trouble() {
        assert!(Bins::new(&[], f64::NAN).readings.is_empty());
        assert_eq!(Bins::new(&[7, 7, 7], 0.0), Bins { first: 7, width: 1, readings: vec![3] });
        assert_eq!(Bins::new(&[7, 7], f64::NAN).readings, [2]);
    }

    #[test]
    fn the_curves_area_is_what_it_says() {
        let curve = Curve { mean: 2.0, sd: 0.5, area: 30.0 };
        let step = 0.001;
        let sum: f64 = (-4000..4000).map(|i| curve.at(2.0 + f64::from(i) * step) * step).sum();
        assert!((sum - 30.0).abs() < 1e-6, "{sum}");
    }
}
