//! Numerical integration: the rule of Gauss and Legendre, and Chebyshev series that are integrated term by term.

use std::f64::consts::PI;

/// Nodes and weights of Gauss and Legendre's rule on an interval: exact for polynomials of degree 2·count − 1.
pub(super) fn gauss_legendre(count: usize, low: f64, high: f64) -> Vec<(f64, f64)> {
    let n = count as f64;
    let (centre, half) = (0.5 * (low + high), 0.5 * (high - low));
    let node = |i: usize| {
        // Newton's method on the Legendre polynomial; this start is good to about n⁻⁴ (Abramowitz & Stegun 22.16.6,
        // from memory), so five steps are more than enough.
        let mut x = (PI * (i as f64 + 0.75) / (n + 0.5)).cos();
        let mut slope = 1.0;
        for _ in 0..6 {
            let (mut before, mut value) = (1.0, x);
            for k in 2..=count {
                let k = k as f64;
                (before, value) = (value, ((2.0 * k - 1.0) * x * value - (k - 1.0) * before) / k);
            }
            slope = n * (x * value - before) / (x * x - 1.0);
            x -= value / slope;
        }
        (centre + half * x, half * 2.0 / ((1.0 - x * x) * slope * slope))
    };
    match count {
        0 => Vec::new(),
        1 => vec![(centre, 2.0 * half)],
        _ => (0..count).map(node).collect(),
    }
}

/// The integral of a smooth function from the low end of an interval to any point of it.
#[derive(Clone, Debug)]
pub(super) struct Integral {
    low: f64,
    high: f64,
    /// Coefficients of the integral's Chebyshev series.
    terms: Vec<f64>,
}

impl Integral {
    /// Takes the function at `count` Chebyshev points.
    pub(super) fn of(count: usize, low: f64, high: f64, function: impl FnMut(f64) -> f64) -> Self {
        let (centre, half) = (0.5 * (low + high), 0.5 * (high - low));
        let angle = |i: usize| PI * (i as f64 + 0.5) / count as f64;
        let values: Vec<f64> = (0..count).map(|i| centre + half * angle(i).cos()).map(function).collect();
        let coefficient = |k: usize| {
            let sum: f64 = values.iter().enumerate().map(|(i, v)| v * (k as f64 * angle(i)).cos()).sum();
            2.0 * sum / count as f64
        };
        // The series' first term counts half. ∫ T_k = T_{k+1}/(2(k+1)) − T_{k−1}/(2(k−1)).
        let mut series: Vec<f64> = (0..count).map(coefficient).collect();
        series.extend([0.0, 0.0]);
        let mut terms = vec![0.0; count + 1];
        for (k, term) in terms.iter_mut().enumerate().skip(1) {
            *term = half * (series[k - 1] - series[k + 1]) / (2.0 * k as f64);
        }
        terms[0] = terms.iter().enumerate().skip(1).map(|(k, t)| if k % 2 == 0 { -t } else { *t }).sum();
        Self { low, high, terms }
    }

    /// From the low end to `x`; nothing lies outside of the interval.
    pub(super) fn to(&self, x: f64) -> f64 {
        if x <= self.low {
            return 0.0;
        }
        let x = (2.0 * x.min(self.high) - self.low - self.high) / (self.high - self.low);
        // Clenshaw's recurrence.
        let (mut one, mut two) = (0.0, 0.0);
        for term in self.terms.iter().skip(1).rev() {
            (one, two) = (2.0 * x * one - two + term, one);
        }
        x * one - two + self.terms.first().copied().unwrap_or_default()
    }

    /// Over the whole interval.
    pub(super) fn whole(&self) -> f64 {
        self.to(self.high)
    }

    /// The point up to which the integral of a function that is not negative is `goal`: by halving, to the last digits.
    pub(super) fn point(&self, goal: f64) -> f64 {
        let (mut low, mut high) = (self.low, self.high);
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            if self.to(middle) < goal {
                low = middle;
            } else {
                high = middle;
            }
        }
        0.5 * (low + high)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_rule_is_exact_for_polynomials_of_its_degree() {
        for count in [1, 2, 7, 40] {
            let rule = gauss_legendre(count, -1.0, 2.0);
            for degree in 0..2 * count.min(12) as i32 {
                let exact = (2f64.powi(degree + 1) - (-1f64).powi(degree + 1)) / f64::from(degree + 1);
                let found: f64 = rule.iter().map(|(x, w)| w * x.powi(degree)).sum();
                assert!(
                    (found / exact - 1.0).abs() < 1e-13,
                    "{count} nodes, degree {degree}: {found}, {exact}"
                );
            }
        }
    }

    #[test]
    fn an_integral_runs_from_nothing_to_the_whole_and_its_points_come_back() {
        let integral = Integral::of(48, -4.0, 1.0, f64::exp);
        for x in [-3.9, -2.0, 0.0, 0.3, 1.0] {
            let exact = f64::exp(x) - f64::exp(-4.0);
            assert!((integral.to(x) - exact).abs() < 1e-14, "{x}");
            assert!((integral.point(exact) - x).abs() < 1e-12, "{x}");
        }
        assert_eq!(integral.to(-5.0), 0.0);
        assert_eq!(integral.to(9.0), integral.whole());
    }
}
