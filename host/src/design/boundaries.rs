//! From two risks to the boundaries of every look: each look's boundary is where what may be spent by then is spent.

use donelight_core::stopping::early::Spending;

use super::spending::spent;
use super::walk::{Going, Look, Walk};

/// A wrong way to leave: the process under which it is wrong, and the risk of it.
pub(super) struct Error<'w, W> {
    pub(super) walk: &'w W,
    pub(super) risk: f64,
}

/// What a look's boundaries are in terms of the estimate, whatever coordinate the walk has; rounded so that the risk is
/// kept: a low boundary down, a high one up.
pub(super) trait Scale<W> {
    /// `None` if there is no boundary so low.
    fn low(&self, walk: &W, n: u32, x: f64) -> Option<f64>;
    /// `None` if there is no boundary so high.
    fn high(&self, walk: &W, n: u32, x: f64) -> Option<f64>;
    /// Back to the walk's coordinate.
    fn x(&self, walk: &W, n: u32, boundary: f64) -> f64;
}

/// Which of the two risks the last look uses up; the other one gets what is left.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Last {
    /// Leaving low.
    Low,
    /// Leaving high.
    High,
    /// Both, with a gap between: only for checks of the spending itself.
    #[cfg(test)]
    Open,
}

/// One look's boundaries.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Row {
    pub(super) n: u32,
    pub(super) low: Option<f64>,
    pub(super) high: Option<f64>,
}

/// The boundaries, and what they spend in truth.
#[derive(Clone, Debug)]
pub(super) struct Boundaries {
    pub(super) rows: Vec<Row>,
    /// The chance to leave low where that is wrong.
    pub(super) spent_low: f64,
    /// The chance to leave high where that is wrong.
    pub(super) spent_high: f64,
    /// The largest defect of mass that the integration showed.
    pub(super) defect: f64,
}

/// What is left to spend at a look below this is not worth a boundary: it would lie where the integration cannot see.
const LEAST_SPENDING: f64 = 1e-8;

/// Spends both risks over the looks. If the boundaries meet before the last look, the table ends there.
pub(super) fn spend<W: Walk + Sync>(
    low: &Error<'_, W>,
    high: &Error<'_, W>,
    spending: Spending,
    looks: &[u32],
    scale: &(impl Scale<W> + Sync),
    last: Last,
) -> Boundaries {
    let mut table = Boundaries { rows: Vec::new(), spent_low: 0.0, spent_high: 0.0, defect: 0.0 };
    let most = f64::from(looks.last().copied().unwrap_or_default());
    let (mut going_low, mut going_high): (Option<Going<_>>, Option<Going<_>>) = (None, None);
    for (i, &n) in looks.iter().enumerate() {
        let (at_low, at_high) = rayon::join(
            || Look::new(low.walk, going_low.as_ref(), n),
            || Look::new(high.walk, going_high.as_ref(), n),
        );
        table.defect = table.defect.max(at_low.defect()).max(at_high.defect());
        let due = |risk: f64, so_far: f64| Some(spent(spending, risk, f64::from(n) / most) - so_far);
        let worth = |due: &f64| *due >= LEAST_SPENDING;
        let mut row = Row {
            n,
            low: due(low.risk, table.spent_low)
                .filter(worth)
                .and_then(|due| scale.low(low.walk, n, at_low.leaving_below(due))),
            high: due(high.risk, table.spent_high)
                .filter(worth)
                .and_then(|due| scale.high(high.walk, n, at_high.leaving_above(due))),
        };
        let meets = row.low.zip(row.high).is_some_and(|(low, high)| low >= high);
        let ends = meets || i + 1 == looks.len();
        if ends {
            match last {
                Last::Low => row.high = row.low,
                Last::High => row.low = row.high,
                #[cfg(test)]
                Last::Open => {}
            }
        }
        let x = |walk: &W, boundary: Option<f64>, none: f64| boundary.map_or(none, |b| scale.x(walk, n, b));
        let (l, h) = (f64::NEG_INFINITY, f64::INFINITY);
        table.spent_low += at_low.below(x(low.walk, row.low, l));
        table.spent_high += row.high.map_or(0.0, |b| at_high.above(scale.x(high.walk, n, b)));
        table.rows.push(row);
        if ends {
            break;
        }
        let next = looks[i + 1];
        let (next_low, next_high) = rayon::join(
            || at_low.go_on(x(low.walk, row.low, l), x(low.walk, row.high, h), next),
            || at_high.go_on(x(high.walk, row.low, l), x(high.walk, row.high, h), next),
        );
        (going_low, going_high) = (Some(next_low), Some(next_high));
    }
    table
}

/// Where a process leaves a table of boundaries.
pub(super) struct Course<S> {
    /// The chance to leave low at each look.
    pub(super) low: Vec<f64>,
    /// The chance to leave high at each look.
    pub(super) high: Vec<f64>,
    /// What goes on behind the table, if that was asked for.
    pub(super) going: Option<Going<S>>,
}

/// Sends a process through a table, and on from it to a look after `next` pieces, if there is one.
pub(super) fn course<W: Walk>(
    walk: &W,
    rows: &[Row],
    scale: &impl Scale<W>,
    next: Option<u32>,
) -> Course<W::State> {
    let mut course = Course { low: Vec::new(), high: Vec::new(), going: None };
    for (i, row) in rows.iter().enumerate() {
        let look = Look::new(walk, course.going.as_ref(), row.n);
        let low = row.low.map_or(f64::NEG_INFINITY, |b| scale.x(walk, row.n, b));
        let high = row.high.map_or(f64::INFINITY, |b| scale.x(walk, row.n, b));
        course.low.push(look.below(low));
        course.high.push(if high.is_finite() { look.above(high) } else { 0.0 });
        let next = rows.get(i + 1).map(|row| row.n).or(next);
        course.going = next.map(|next| look.go_on(low, high, next));
    }
    course
}

#[cfg(test)]
mod tests;
