//! NIST's univariate data sets with their certified values.
//!
//! Source: NIST Statistical Reference Datasets, <https://www.itl.nist.gov/div898/strd/univ/homepage.html>.

/// One set.
#[derive(Clone, Copy, Debug)]
pub struct Set {
    /// Its name at NIST.
    pub name: &'static str,
    /// The smallest step of its values.
    pub resolution: &'static str,
    table: &'static str,
}

/// All of them: three counted or measured ones, one of a constant with noise, four made to defeat naive sums.
pub const SETS: [Set; 8] = [
    Set { name: "Lew", resolution: "1", table: include_str!("../reference/nist_lew.csv") },
    Set { name: "Lottery", resolution: "1", table: include_str!("../reference/nist_lottery.csv") },
    Set { name: "Mavro", resolution: "0.00001", table: include_str!("../reference/nist_mavro.csv") },
    Set { name: "Michelso", resolution: "0.01", table: include_str!("../reference/nist_michelso.csv") },
    Set { name: "NumAcc1", resolution: "1", table: include_str!("../reference/nist_numacc1.csv") },
    Set { name: "NumAcc2", resolution: "0.1", table: include_str!("../reference/nist_numacc2.csv") },
    Set { name: "NumAcc3", resolution: "0.1", table: include_str!("../reference/nist_numacc3.csv") },
    Set { name: "NumAcc4", resolution: "0.1", table: include_str!("../reference/nist_numacc4.csv") },
];

impl Set {
    /// The set of this name.
    ///
    /// # Panics
    /// If there is none.
    #[must_use]
    pub fn named(name: &str) -> Self {
        *SETS.iter().find(|set| set.name == name).expect("a set of NIST's")
    }

    /// The readings as NIST prints them, in order.
    ///
    /// # Panics
    /// If our copy does not hold as many as NIST certifies.
    #[must_use]
    pub fn readings(&self) -> Vec<&'static str> {
        let readings: Vec<_> = self.table.lines().filter(|line| !line.starts_with('#')).skip(1).collect();
        assert_eq!(readings.len().to_string(), self.certified("n"));
        readings
    }

    /// The certified `n`, `mean` or `sd` (n − 1), as printed.
    ///
    /// # Panics
    /// If our copy names none.
    #[must_use]
    pub fn certified(&self, what: &str) -> &'static str {
        let line = self
            .table
            .lines()
            .find_map(|line| line.strip_prefix("# certified ")?.strip_prefix(what)?.strip_prefix('='));
        line.and_then(|line| line.split(' ').next()).expect("a certified value")
    }

    /// `computed` shows the very digits that NIST certifies, written with as many decimals. Of the sets that NIST made
    /// up, whose certified values are exact, it is the nearest double.
    ///
    /// # Panics
    /// If it does not.
    #[track_caller]
    pub fn assert_certified(&self, what: &str, computed: f64) {
        let certified = self.certified(what);
        if self.name.starts_with("NumAcc") {
            assert_eq!(Ok(computed), certified.parse::<f64>(), "{what} of {}", self.name);
        }
        let decimals = certified.split_once('.').map_or(0, |(_, fraction)| fraction.len());
        assert_eq!(format!("{computed:.decimals$}"), certified, "{what} of {}", self.name);
    }
}
