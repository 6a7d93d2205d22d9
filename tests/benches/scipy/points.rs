//! The points at which both sides are asked.

use donelight_core::special::{chi_square, noncentral_t};

/// Points of one function under one heading.
pub(crate) struct Group {
    pub(crate) name: String,
    pub(crate) points: Vec<Point>,
}

/// Degrees of freedom, noncentrality (0 if the function has none), and where.
#[derive(Clone)]
pub(crate) struct Point {
    pub(crate) nu: f64,
    pub(crate) delta: f64,
    pub(crate) x: f64,
    /// Both tails or the quantile, to 20 digits, if a table has them.
    pub(crate) exact: Option<Vec<String>>,
}

impl Point {
    fn new(nu: f64, delta: f64, x: f64) -> Self {
        Self { nu, delta, x, exact: None }
    }
}

/// Numbers spread evenly over 0 to 1, apart in each dimension: the fractions of multiples of an irrational number.
struct Spread {
    seed: u32,
    count: u32,
}

impl Spread {
    fn new(seed: u32) -> Self {
        Self { seed, count: 0 }
    }

    fn next(&mut self) -> f64 {
        self.count += 1;
        // The golden ratio for one seed, its sums with others for the rest.
        (f64::from(self.count) * (0.618_033_988_749_895 + 0.324_717_957_244_746 * f64::from(self.seed)))
            .fract()
    }

    fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.next()
    }

    /// A probability whose odds are spread evenly in their logarithm.
    fn probability(&mut self, least: f64) -> f64 {
        let reach = (1.0 / least).ln();
        1.0 / (1.0 + self.between(-reach, reach).exp())
    }
}

const POINTS: usize = 60;

/// For n pieces, ν = n − 1 and δ = 3√n C, C an index of 0.5 to 2.
const PIECES: [u32; 12] = [2, 3, 4, 5, 10, 20, 30, 50, 100, 300, 1000, 5000];

/// What a study of n pieces asks the noncentral t: `x_of(p, ν, δ)` says where.
fn studies(seed: u32, least: f64, x_of: fn(f64, f64, f64) -> f64) -> Vec<Group> {
    let mut groups: Vec<Group> = PIECES
        .map(|n| {
            let (mut place, mut index) = (Spread::new(seed), Spread::new(seed + 1));
            let points = (0..POINTS).map(|_| {
                let (nu, delta) = (f64::from(n - 1), 3.0 * f64::from(n).sqrt() * index.between(0.5, 2.0));
                Point::new(nu, delta, x_of(place.probability(least), nu, delta))
            });
            Group { name: format!("n = {n}, index 0.5 to 2"), points: points.collect() }
        })
        .into();
    let (mut place, mut freedom, mut shift) =
        (Spread::new(seed), Spread::new(seed + 1), Spread::new(seed + 2));
    let mut others = |name: &str, nu: &dyn Fn(f64) -> f64, low: f64, high: f64| {
        let points = (0..POINTS).map(|_| {
            let (nu, delta) = (nu(freedom.next()), shift.between(low, high));
            Point::new(nu, delta, x_of(place.probability(least), nu, delta))
        });
        groups.push(Group { name: name.to_owned(), points: points.collect() });
    };
    others("ν fractional, 1 to 30, δ 0 to 20", &|u| 30_f64.powf(u), 0.0, 20.0);
    others("ν fractional, 30 to 3000, δ 0 to 100", &|u| 30.0 * 100_f64.powf(u), 0.0, 100.0);
    others("ν whole, 2 to 50, δ −5 to 0", &|u| (2.0 * 25_f64.powf(u)).floor(), -5.0, 0.0);
    groups
}

pub(crate) fn noncentral_t_cdf(seed: u32) -> Vec<Group> {
    let mut groups = studies(seed, 1e-10, |p, nu, delta| {
        if p < 0.5 {
            noncentral_t::quantile(p, nu, delta)
        } else {
            noncentral_t::upper_quantile(1.0 - p, nu, delta)
        }
    });
    groups.push(table("nct_cdf", true));
    groups
}

pub(crate) fn noncentral_t_quantile(seed: u32) -> Vec<Group> {
    let mut groups = studies(seed + 3, 1e-9, |p, _, _| p);
    groups.push(table("nct_ppf", false));
    groups
}

pub(crate) fn chi_square_quantile(seed: u32) -> Vec<Group> {
    let mut groups: Vec<Group> =
        [1.0, 2.0, 3.0, 4.0, 5.0, 7.0, 10.0, 20.0, 29.0, 49.0, 99.0, 299.0, 999.0, 4999.0, 1e5, 1e6]
            .map(|nu| {
                let mut tail = Spread::new(seed);
                let points = (0..POINTS).map(|_| Point::new(nu, 0.0, 0.5 * 1e-10_f64.powf(tail.next())));
                Group { name: format!("ν = {nu}"), points: points.collect() }
            })
            .into();
    let (mut tail, mut freedom) = (Spread::new(seed), Spread::new(seed + 1));
    let points = (0..POINTS).map(|_| {
        let nu = 1000_f64.powf(freedom.next());
        Point::new(nu, 0.0, 0.5 * 1e-10_f64.powf(tail.next()))
    });
    groups.push(Group { name: "ν fractional, 1 to 1000".to_owned(), points: points.collect() });
    groups
}

/// The rows of `tests/reference/special.csv` for a function: `fn,a,b,x,value,complement`.
pub(crate) fn table(function: &str, tails: bool) -> Group {
    let rows =
        include_str!("../../reference/special.csv").lines().map(|line| line.split(',').collect::<Vec<_>>());
    let points = rows.filter(|fields| fields[0] == function).map(|fields| {
        let number = |column: usize| fields[column].parse().unwrap_or(0.0);
        let exact = fields[4..if tails { 6 } else { 5 }].iter().map(|digits| (*digits).to_owned()).collect();
        Point { exact: Some(exact), ..Point::new(number(1), number(2), number(3)) }
    });
    Group { name: "rows of special.csv".to_owned(), points: points.collect() }
}

/// What the product computes at a point, by function: both tails, or the quantile alone.
pub(crate) fn ours(function: &str, point: &Point) -> Vec<f64> {
    let &Point { nu, delta, x, .. } = point;
    match function {
        "noncentral-t-cdf" => {
            let tails = noncentral_t::tails(x, nu, delta);
            vec![tails.lower, tails.upper]
        }
        "noncentral-t-quantile" => vec![noncentral_t::quantile(x, nu, delta)],
        "chi-square-quantile-lower" => vec![chi_square::quantile(x, nu)],
        "chi-square-quantile-upper" => vec![chi_square::upper_quantile(x, nu)],
        other => panic!("unknown function {other}"),
    }
}
