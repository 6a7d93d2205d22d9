//! Donelight's statistics beside SciPy's, in one run: errors against 52 digits and time a call, for the noncentral t
//! distribution, the chi-square quantile and a whole search for a sample size.
//!
//! `cargo bench -p donelight-tests --bench scipy`; needs Python 3 with venv and pip, and the network once, for SciPy. It says
//! so and is left out otherwise. `DONELIGHT_SEED` takes other points.
//!
//! Exact values come from `tests/reference/special.csv` or are computed here by `exact.py`, at 52 digits. SciPy is timed in
//! array calls; a call with a single number costs it about a microsecond more (last column).

mod points;
mod python;

use std::hint::black_box;
use std::time::Instant;

use donelight_core::capability::Index;
use donelight_core::interval::Method;
use donelight_core::quantity::{Confidence, Millionths};
use donelight_core::sizing::Design;
use donelight_core::sizing::power::smallest;
use points::{Group, Point, ours};
use python::Peer;
use serde_json::{Value, json};

/// How many of a group's points are computed to 52 digits, which takes up to seconds each; quantiles longer than tails.
const EXACT_TAILS: usize = 10;
const EXACT_QUANTILES: usize = 5;

/// Rounds in which both sides are timed in turn; the best of each counts.
const ROUNDS: usize = 3;

fn main() {
    let seed = std::env::var("DONELIGHT_SEED").ok().and_then(|text| text.parse().ok()).unwrap_or(0);
    let mut peer = match Peer::start() {
        Ok(peer) => peer,
        Err(missing) => {
            println!("LEFT OUT: the comparison with SciPy: {missing}");
            return;
        }
    };
    let versions = peer.ask(&json!({"do": "versions"}));
    println!(
        "SciPy {}, NumPy {}, mpmath {}; seed {seed}",
        versions["scipy"], versions["numpy"], versions["mpmath"]
    );
    compare(&mut peer, "noncentral-t-cdf", &points::noncentral_t_cdf(seed));
    compare(&mut peer, "noncentral-t-quantile", &points::noncentral_t_quantile(seed));
    let quantiles = points::chi_square_quantile(seed);
    compare(&mut peer, "chi-square-quantile-lower", &quantiles);
    compare(&mut peer, "chi-square-quantile-upper", &quantiles);
    search(&mut peer);
}

fn compare(peer: &mut Peer, function: &str, groups: &[Group]) {
    println!("\n{function}: relative error, worst and median, and microseconds a call");
    println!(
        "| {:<38} | {:>8} {:>8} | {:>8} {:>8} | {:>7} | {:>7} | {:>6} | {:>7} |",
        "points", "ours", "", "SciPy", "", "ours", "SciPy", "times", "scalar"
    );
    for group in groups {
        let (own, theirs) = errors(peer, function, &group.points);
        let (own_time, array, scalar) = times(peer, function, &group.points);
        println!(
            "| {:<38} | {:>8.1e} {:>8.1e} | {:>8.1e} {:>8.1e} | {own_time:>7.3} | {array:>7.3} | {:>6.1} | {scalar:>7.2} |",
            group.name,
            own.0,
            own.1,
            theirs.0,
            theirs.1,
            array / own_time
        );
    }
}

/// The worst and the median error of each side.
fn errors(peer: &mut Peer, function: &str, points: &[Point]) -> ((f64, f64), (f64, f64)) {
    let known = points[0].exact.is_some();
    let exact = if function.ends_with("cdf") { EXACT_TAILS } else { EXACT_QUANTILES };
    let step = if known { 1 } else { points.len().div_ceil(exact) };
    let points: Vec<Point> = points.iter().step_by(step).cloned().collect();
    let mut question = question("errors", function, &points);
    let one_or_both = |values: Vec<Value>| if values.len() == 1 { values[0].clone() } else { json!(values) };
    let own =
        points.iter().map(|point| one_or_both(ours(function, point).into_iter().map(Value::from).collect()));
    question["ours"] = own.collect();
    let exact = points.iter().map(|point| {
        let digits = point.exact.clone()?;
        Some(one_or_both(digits.into_iter().map(Value::from).collect()))
    });
    question["exact"] = exact.map(Value::from).collect();
    let answer = peer.ask(&question);
    let summary = |side: &str| {
        let values = answer[side].as_array().expect("a list").iter();
        // SciPy's failures come as null.
        let mut values: Vec<f64> = values.map(|value| value.as_f64().unwrap_or(f64::INFINITY)).collect();
        values.sort_by(f64::total_cmp);
        (values[values.len() - 1], values[values.len() / 2])
    };
    (summary("ours"), summary("scipy"))
}

/// Microseconds a call: ours, SciPy's in arrays, SciPy's with single numbers.
fn times(peer: &mut Peer, function: &str, points: &[Point]) -> (f64, f64, f64) {
    let question = question("times", function, points);
    let mut least = [f64::INFINITY; 3];
    for _ in 0..ROUNDS {
        let answer = peer.ask(&question);
        let own = best(|| {
            points.iter().for_each(|point| {
                black_box(ours_alone(function, black_box(point)));
            })
        }) / points.len() as f64;
        for (least, now) in
            least.iter_mut().zip([own, answer["array"].as_f64().unwrap(), answer["scalar"].as_f64().unwrap()])
        {
            *least = least.min(now);
        }
    }
    least.into()
}

/// The one number that SciPy is asked for.
fn ours_alone(function: &str, point: &Point) -> f64 {
    use donelight_core::special::{chi_square, noncentral_t};
    let &Point { nu, delta, x, .. } = point;
    match function {
        "noncentral-t-cdf" => noncentral_t::tails(x, nu, delta).lower,
        "noncentral-t-quantile" => noncentral_t::quantile(x, nu, delta),
        "chi-square-quantile-lower" => chi_square::quantile(x, nu),
        _ => chi_square::upper_quantile(x, nu),
    }
}

fn question(task: &str, function: &str, points: &[Point]) -> Value {
    let column = |of: fn(&Point) -> f64| points.iter().map(of).collect::<Value>();
    json!({
        "do": task, "function": function,
        "nu": column(|point| point.nu), "delta": column(|point| point.delta), "x": column(|point| point.x),
    })
}

/// Microseconds of the best of some runs, each long enough to be timed.
fn best(mut work: impl FnMut()) -> f64 {
    let mut least = f64::INFINITY;
    for _ in 0..7 {
        let begin = Instant::now();
        let mut runs = 0.0;
        while begin.elapsed().as_micros() < 2000 {
            work();
            runs += 1.0;
        }
        least = least.min(begin.elapsed().as_secs_f64() * 1e6 / runs);
    }
    least
}

/// The smallest n whose test by the noncentral t tells a claimed one-sided index from a worse one, both sides by the same
/// search: so with as many quantiles and tails.
fn search(peer: &mut Peer) {
    println!("\nsmallest n of an exact test by the noncentral t: microseconds a search");
    println!("| claim against alpha power |     n | SciPy's n | evaluations |    ours |   SciPy | times |");
    let design = Design::new(Index::Cpu, Method::NoncentralT).expect("they suit");
    for (claim, against, alpha, power) in [
        (2.0, 1.0, 50_000, 900_000),
        (1.67, 1.33, 50_000, 900_000),
        (1.5, 1.3, 50_000, 950_000),
        (1.33, 1.0, 50_000, 800_000),
        (1.33, 1.25, 50_000, 900_000),
    ] {
        let (risk, goal) = (Millionths(alpha), Confidence::from_millionths(power).expect("a confidence"));
        let (alpha, power) = (f64::from(alpha) / 1e6, f64::from(power) / 1e6);
        let question =
            json!({"do": "search", "claim": claim, "against": against, "alpha": alpha, "power": power});
        let (mut own, mut theirs) = (f64::INFINITY, f64::INFINITY);
        let (mut n, mut answer) = (0, Value::Null);
        for _ in 0..ROUNDS {
            answer = peer.ask(&question);
            theirs = theirs.min(answer["microseconds"].as_f64().expect("a number"));
            own = own.min(best(|| {
                n = smallest(&design, black_box(claim), against, risk, goal).expect("there is one").n.get();
            }));
        }
        println!(
            "| {claim:>5} {against:>7} {alpha:>5} {power:>5} | {n:>5} | {:>9} | {:>11} | {own:>7.1} | {theirs:>7.1} | {:>5.1} |",
            answer["n"],
            answer["evaluations"],
            theirs / own
        );
        assert_eq!(answer["n"], n, "both find the same n");
    }
}
