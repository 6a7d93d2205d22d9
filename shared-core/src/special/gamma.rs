//! The two pieces of the gamma distribution's density in saddle-point form, which keep its digits where
//! exp(a ln x − x − ln Γ(a + 1)) loses five of them (measured at a = 5·10⁴).
//!
//! Loader (2000), Fast and accurate computation of binomial probabilities: x^a e^−x / Γ(a + 1) =
//! exp(−δ(a) − a D(x/a)) / √(2πa), with Stirling's error δ and the deviance D(r) = r − 1 − ln r; from memory.

use core::f64::consts::TAU;

/// δ(a) = ln Γ(a) − (a − 1/2) ln a + a − ln √(2π), for a > 0.
///
/// Stirling's series (Abramowitz & Stegun 1964, 6.1.41) from 12 on, absolute error below 10^-16; smaller `a` step
/// upwards by δ(a) − δ(a + 1) = (a + 1/2) ln(1 + 1/a) − 1, a series of positive terms in 1/(2a + 1)².
pub(crate) fn stirling_error(a: f64) -> f64 {
    let mut base = a;
    let mut steps = 0.0;
    while base < 12.0 {
        let square = 1.0 / ((2.0 * base + 1.0) * (2.0 * base + 1.0));
        let (mut power, mut odd) = (square, 3.0);
        while power > 1e-18 {
            steps += power / odd;
            power *= square;
            odd += 2.0;
        }
        base += 1.0;
    }
    const SERIES: [f64; 6] =
        [1.0 / 12.0, -1.0 / 360.0, 1.0 / 1260.0, -1.0 / 1680.0, 1.0 / 1188.0, -691.0 / 360_360.0];
    let square = 1.0 / (base * base);
    steps + SERIES.iter().rev().fold(0.0, |sum, c| sum * square + c) / base
}

/// D(x/a) = (x − a)/a − ln(x/a), for positive x and a; 0 at x = a. Relative error a few 10^-16.
pub(crate) fn deviance(x: f64, a: f64) -> f64 {
    let r = (x - a) / a;
    if r.abs() > 0.5 {
        return r - libm::log(x / a);
    }
    // ln(1 + r) = 2 artanh v = 2v + 2v³/3 + …, and r − 2v = r v exactly.
    let v = r / (2.0 + r);
    let square = v * v;
    let (mut power, mut odd, mut sum) = (2.0 * v * square, 3.0, 0.0);
    while power.abs() > 1e-18 * r * r {
        sum += power / odd;
        power *= square;
        odd += 2.0;
    }
    r * v - sum
}

/// x^a e^−x / Γ(a + 1), for a ≥ 0 and x > 0: the Poisson probability of a events where x are expected.
pub(crate) fn poisson(a: f64, x: f64) -> f64 {
    if a == 0.0 { libm::exp(-x) } else { Poisson::new(a).at(x) }
}

/// [`poisson`] of one a, above 0, at any number of x.
#[derive(Clone, Copy)]
pub(crate) struct Poisson {
    a: f64,
    form: Form,
}

#[derive(Clone, Copy)]
enum Form {
    /// For a small a that is a whole number or a half more: nothing cancels in x^a e^−x / Γ(a + 1) as it stands.
    Plain(Factorial),
    /// By the saddle point: e^−δ(a) / √(2πa).
    SaddlePoint(f64),
}

impl Poisson {
    pub(crate) fn new(a: f64) -> Self {
        let form = Factorial::of(a).map_or_else(|| Form::SaddlePoint(saddle_point(a)), Form::Plain);
        Self { a, form }
    }

    /// Whether a is a small whole number or a half more.
    pub(crate) const fn is_plain(&self) -> bool {
        matches!(self.form, Form::Plain(_))
    }

    pub(crate) fn at(&self, x: f64) -> f64 {
        let scale = match self.form {
            // Far out e^−x alone would run out of digits.
            Form::Plain(factorial) if x < 600.0 => {
                return factorial.power(x) * libm::exp(-x) / factorial.value;
            }
            Form::Plain(_) => saddle_point(self.a),
            Form::SaddlePoint(scale) => scale,
        };
        scale * libm::exp(-self.a * deviance(x, self.a))
    }

    /// ln Γ(a + 1)
    pub(crate) fn log_factorial(&self) -> f64 {
        match self.form {
            Form::Plain(factorial) => libm::log(factorial.value),
            Form::SaddlePoint(scale) => self.a * (libm::log(self.a) - 1.0) - libm::log(scale),
        }
    }
}

fn saddle_point(a: f64) -> f64 {
    libm::exp(-stirling_error(a)) / libm::sqrt(TAU * a)
}

/// Γ(a + 1) of an a that is a whole number up to 20, or a half more.
#[derive(Clone, Copy)]
struct Factorial {
    value: f64,
    /// a without its half.
    whole: u32,
    half: bool,
}

impl Factorial {
    /// A product that is exact, or nearly, and for a half √π times one.
    fn of(a: f64) -> Option<Self> {
        if a > 20.5 || 2.0 * a != libm::floor(2.0 * a) {
            return None;
        }
        let half = a != libm::floor(a);
        let (mut value, mut factor) = if half { (0.5 * ROOT_PI, 0.5) } else { (1.0, 0.0) };
        let mut whole = 0;
        while factor < a {
            factor += 1.0;
            value *= factor;
            whole += 1;
        }
        Some(Self { value, whole, half })
    }

    /// x^a, by squaring.
    fn power(&self, x: f64) -> f64 {
        let mut power = if self.half { libm::sqrt(x) } else { 1.0 };
        let (mut square, mut rest) = (x, self.whole);
        while rest > 0 {
            if rest & 1 == 1 {
                power *= square;
            }
            square *= square;
            rest >>= 1;
        }
        power
    }
}

const ROOT_PI: f64 = 1.772_453_850_905_516;
