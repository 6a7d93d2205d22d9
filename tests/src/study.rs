//! Plans for NIST's sets, and where a study by such a plan must stop, computed apart from the product: plain doubles, two
//! passes, one formula.

use crate::nist::Set;

/// The two-sided 95 % quantile of the normal distribution, to 16 digits (Python 3.11, `statistics.NormalDist`).
const Z: f64 = 1.959_963_984_540_054;

/// A plan about the Cpk of a set, two-sided at 95 %, its limits 4.5 certified standard deviations off the mean.
#[derive(Clone, Debug)]
pub struct Study {
    /// The study's name.
    pub name: String,
    resolution: &'static str,
    lower: f64,
    upper: f64,
    /// Pieces planned.
    pub planned: usize,
    /// The wanted precision in percent.
    pub precision: u32,
    /// Pieces at most.
    pub limit: usize,
}

impl Study {
    /// A study of this set.
    ///
    /// # Panics
    /// If the set's certified values are no numbers.
    #[must_use]
    pub fn of(set: &Set, planned: usize, precision: u32) -> Self {
        let certified = |what| set.certified(what).parse::<f64>().expect("a number");
        let (mean, reach) = (certified("mean"), 4.5 * certified("sd"));
        // On the grid of the readings, so that the TOML's decimals are the doubles used here.
        let decimals = decimals(set.resolution);
        let on_grid = |value: f64| format!("{value:.decimals$}").parse().expect("a number");
        Self {
            name: format!("{} to {precision}%", set.name),
            resolution: set.resolution,
            lower: on_grid(mean - reach),
            upper: on_grid(mean + reach),
            planned,
            precision,
            limit: set.readings().len().max(10),
        }
    }

    /// The plan's file.
    #[must_use]
    pub fn toml(&self) -> String {
        let decimals = decimals(self.resolution);
        let Self { name, resolution, lower, upper, planned, precision, limit } = self;
        format!(
            "name = \"{name}\"\nresolution = \"{resolution}\"\n\
             [specification]\nlower = \"{lower:.decimals$}\"\nupper = \"{upper:.decimals$}\"\n\
             [capability]\nindex = \"cpk\"\n\
             [stop]\nplanned = {planned}\nprecision = \"{precision}%\"\nlimit = {limit}\n"
        )
    }

    /// The reading at which the done lamp must be lit, counted from 1: the first one, from the planned count on, with
    /// z·√(1/(9n) + Ĉ²/(2(n−1))) ≤ precision·Ĉ (Bissell 1990). `None` if there is none.
    ///
    /// # Panics
    /// If a reading is no number, or if the outcome hangs on the last digits of a double.
    #[must_use]
    pub fn done_at(&self, readings: &[&str]) -> Option<usize> {
        let values: Vec<f64> = readings.iter().map(|text| text.parse().expect("a number")).collect();
        let goal = f64::from(self.precision) / 100.0;
        (self.planned.max(2)..=values.len()).find(|n| {
            let Some(width) = self.relative_half_width(values.get(..*n).unwrap_or_default()) else {
                return false;
            };
            assert!((width / goal - 1.0).abs() > 1e-6, "too close to call: {width} at {n}");
            width <= goal
        })
    }

    /// `None` without spread.
    fn relative_half_width(&self, values: &[f64]) -> Option<f64> {
        let n = values.len() as f64;
        let mean = values.iter().sum::<f64>() / n;
        let squares: f64 = values.iter().map(|value| (value - mean).powi(2)).sum();
        let sd = (squares / (n - 1.0)).sqrt();
        let cpk = (self.upper - mean).min(mean - self.lower) / (3.0 * sd);
        (sd > 0.0).then(|| Z * (1.0 / (9.0 * n) + cpk * cpk / (2.0 * (n - 1.0))).sqrt() / cpk)
    }
}

fn decimals(resolution: &str) -> usize {
    resolution.split_once('.').map_or(0, |(_, fraction)| fraction.len())
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Worked by hand: 1, 3, 2 has mean 2 and standard deviation 1; with limits 4.5 off, Cpk is 1.5 and the half-width
    /// 1.96·√(1/27 + 2.25/4) = 1.5177, which is 101.2 % of it.
    #[test]
    fn the_formula_agrees_with_a_case_worked_by_hand() {
        let mut study = Study::of(&Set::named("NumAcc1"), 2, 102);
        (study.lower, study.upper) = (-2.5, 6.5);
        assert_eq!(study.done_at(&["1", "3", "2"]), Some(3));
        study.precision = 101;
        assert_eq!(study.done_at(&["1", "3", "2"]), None);
    }
}
