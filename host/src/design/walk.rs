//! The recursion over looks: how a Markov process that is looked at after given numbers of pieces goes on between two
//! boundaries or leaves them.
//!
//! At each look the process has a coordinate x (the estimate, stretched) and perhaps more that it remembers. What goes on
//! is kept as points with masses, a product rule of numerical integration on the strip between the boundaries; the next
//! look's density is the sum over these points. This is the recursion of Armitage, McPherson & Rowe (1969), in as many
//! dimensions as the process has.

use super::quadrature::{Integral, gauss_legendre};

/// A process that can be looked at.
pub(super) trait Walk {
    /// What it remembers from one look to the next.
    type State: Copy + Send + Sync;
    /// What is computed once for a pair of looks.
    type Step: Sync;

    /// Where x lies at a look, but for a chance of about 10⁻¹⁰.
    fn range(&self, n: u32) -> (f64, f64);

    /// Where x may come to after `n` pieces from between `low` and `high` after `before` pieces, as narrowly as it is known.
    fn reach(&self, before: u32, low: f64, high: f64, n: u32) -> (f64, f64);

    /// About the standard deviation of x at a look.
    fn spread(&self, n: u32) -> f64;

    /// The states with this x and their weights, a rule of integration along them. `detail` is the width of the finest
    /// detail to integrate, in standard deviations.
    fn fibre(&self, n: u32, x: f64, detail: f64) -> Vec<(Self::State, f64)>;

    /// The density of a state at a first look.
    fn start(&self, n: u32, state: &Self::State) -> f64;

    /// From one look to a later one.
    fn step(&self, from: u32, to: u32) -> Self::Step;

    /// The density of a state, coming from an earlier one.
    fn density(&self, step: &Self::Step, from: &Self::State, to: &Self::State) -> f64;
}

/// What has not left at any look so far.
pub(super) struct Going<S> {
    n: u32,
    /// Between these x.
    strip: (f64, f64),
    /// States and the mass that each stands for.
    points: Vec<(S, f64)>,
    mass: f64,
}

/// What a process may do at a look.
pub(super) struct Look<'w, W: Walk> {
    walk: &'w W,
    before: Option<&'w Going<W::State>>,
    n: u32,
    /// The finest detail of the densities, in standard deviations.
    detail: f64,
    law: Integral,
    /// How much comes to this look.
    mass: f64,
}

/// The finest detail of the first look's densities, in their standard deviations.
const DETAIL_AT_START: f64 = 1.0;

/// Points on a stretch of so many finest details, for the rules that crowd their points at the ends. A normal density
/// sampled at 1.05 of its standard deviation is integrated to 2 exp(−2π²/1.05²), about 3·10⁻⁸.
pub(super) fn points(details: f64) -> usize {
    let points = 8.0 + std::f64::consts::FRAC_PI_2 * details / SAMPLED_AT;
    // At most some hundred: the ratio of looks bounds it.
    points.ceil().clamp(8.0, 2_000.0) as usize
}

/// The distance of points, in finest details.
pub(super) const SAMPLED_AT: f64 = 1.05;

impl<'w, W: Walk> Look<'w, W> {
    /// The look after `n` pieces, coming from what went on before, if there was an earlier look.
    pub(super) fn new(walk: &'w W, before: Option<&'w Going<W::State>>, n: u32) -> Self {
        let detail = before.map_or(DETAIL_AT_START, |going| detail(going.n, n));
        let density = Density::new(walk, before, n);
        let (low, high) = before
            .map_or_else(|| walk.range(n), |going| walk.reach(going.n, going.strip.0, going.strip.1, n));
        // To any point of it and not over the whole only: that takes twice the points.
        let count = 2 * points((high - low) / walk.spread(n) / detail);
        let law = Integral::of(count, low, high, |x| {
            walk.fibre(n, x, detail).iter().map(|(state, weight)| weight * density.at(state)).sum()
        });
        Self { walk, before, n, detail, law, mass: before.map_or(1.0, |going| going.mass) }
    }

    /// The chance to be here and at or below `x`.
    pub(super) fn below(&self, x: f64) -> f64 {
        self.law.to(x)
    }

    /// The chance to be here and above `x`.
    pub(super) fn above(&self, x: f64) -> f64 {
        self.mass - self.law.to(x)
    }

    /// The x that leaves a chance of `goal` below it.
    pub(super) fn leaving_below(&self, goal: f64) -> f64 {
        self.law.point(goal)
    }

    /// The x that leaves a chance of `goal` above it.
    pub(super) fn leaving_above(&self, goal: f64) -> f64 {
        self.law.point(self.mass - goal)
    }

    /// What has been lost or gained on the way here by the integration: a measure of its error.
    pub(super) fn defect(&self) -> f64 {
        (self.law.whole() - self.mass).abs()
    }

    /// What goes on between two boundaries, to be looked at again after `next` pieces.
    pub(super) fn go_on(&self, low: f64, high: f64, next: u32) -> Going<W::State> {
        let (lowest, highest) = self.walk.range(self.n);
        let (low, high) = (low.max(lowest), high.min(highest));
        let detail = self.detail.min(detail(self.n, next));
        let density = Density::new(self.walk, self.before, self.n);
        let mut states = Vec::new();
        if low < high {
            let count = points((high - low) / self.walk.spread(self.n) / detail);
            for (x, weight) in gauss_legendre(count, low, high) {
                for (state, along) in self.walk.fibre(self.n, x, detail) {
                    let mass = weight * along * density.at(&state);
                    if mass > NEGLIGIBLE {
                        states.push((state, mass));
                    }
                }
            }
        }
        let mass = (self.below(high) - self.below(low)).max(0.0);
        Going { n: self.n, strip: (low, high), points: states, mass }
    }
}

/// Points that carry less stand for nothing: a thousand of them do not make the error that the rules have.
const NEGLIGIBLE: f64 = 1e-13;

/// The finest detail between two looks, in standard deviations: m new pieces make a kernel that is √(m/n′) wide, and its
/// product with a normal density is √(m/(n′ + m)) wide.
fn detail(from: u32, to: u32) -> f64 {
    let (new, all) = (f64::from(to - from), f64::from(to));
    (new / (all + new)).sqrt()
}

/// The density at a look of what comes to it.
struct Density<'w, W: Walk> {
    walk: &'w W,
    n: u32,
    before: Option<(&'w Going<W::State>, W::Step)>,
}

impl<'w, W: Walk> Density<'w, W> {
    fn new(walk: &'w W, before: Option<&'w Going<W::State>>, n: u32) -> Self {
        Self { walk, n, before: before.map(|going| (going, walk.step(going.n, n))) }
    }

    fn at(&self, state: &W::State) -> f64 {
        match &self.before {
            None => self.walk.start(self.n, state),
            Some((going, step)) => {
                going.points.iter().map(|(from, mass)| mass * self.walk.density(step, from, state)).sum()
            }
        }
    }
}
