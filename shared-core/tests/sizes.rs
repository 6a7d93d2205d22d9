//! Sample sizes against a table computed independently, with mpmath and scipy.

use donelight_core::capability::Index;
use donelight_core::interval::Kind;
use donelight_core::quantity::{Confidence, Millionths, Precision};
use donelight_core::sizing::{power, precision};

/// One row: `task,method,delta,side,level,c0_or_index,c1,goal_relwidth,goal_power,n,at_n,at_n_minus_1,crit,…`.
struct Row(Vec<&'static str>);

impl Row {
    fn all(task: &str) -> Vec<Self> {
        let table = include_str!("../../tests/reference/sizes_bissell.csv");
        let rows = table.lines().skip(2).map(|line| Self(line.split(',').collect()));
        rows.filter(|row| row.0[0] == task).collect()
    }

    fn number(&self, column: usize) -> f64 {
        self.0[column].parse().unwrap()
    }

    fn millionths(&self, column: usize) -> u32 {
        (self.number(column) * 1e6).round() as u32
    }

    /// Equal to all nine printed decimals.
    fn assert_printed(&self, column: usize, computed: f64) {
        assert!((self.number(column) - computed).abs() <= 5.01e-10, "{:?}: {computed}", self.0);
    }
}

#[test]
fn every_size_by_precision_of_the_table_is_met() {
    let rows = Row::all("precision");
    assert_eq!(rows.len(), 225);
    for row in rows {
        let kind: Kind = row.0[3].parse().unwrap();
        let confidence = Confidence::from_millionths(row.millionths(4)).unwrap();
        let goal = row.millionths(7);
        let relative = Precision::Relative(Millionths(goal));
        let size = precision::smallest(Index::Cpk, row.number(5), relative, confidence, kind).unwrap();
        assert_eq!(f64::from(size.n.get()), row.number(9), "{:?}", row.0);
        row.assert_printed(10, size.achieved);
        row.assert_printed(11, size.achieved_before.unwrap());

        let absolute = Precision::Absolute(Millionths((f64::from(goal) * row.number(5)).round() as u32));
        let size = precision::smallest(Index::Cpk, row.number(5), absolute, confidence, kind).unwrap();
        assert_eq!(f64::from(size.n.get()), row.number(9), "{:?}", row.0);
    }
}

#[test]
fn every_size_by_power_of_the_table_is_met() {
    let rows = Row::all("power");
    assert_eq!(rows.len(), 320);
    for row in rows {
        let (claim, against) = (row.number(5), row.number(6));
        assert_eq!(row.0[3], if against < claim { "down" } else { "up" });
        let goal = Confidence::from_millionths(row.millionths(8)).unwrap();
        let alpha = Millionths(row.millionths(4));
        let size = power::smallest(Index::Cpk, claim, against, alpha, goal).unwrap();
        assert_eq!(f64::from(size.n.get()), row.number(9), "{:?}", row.0);
        row.assert_printed(10, size.achieved);
        row.assert_printed(11, size.achieved_before.unwrap());
        row.assert_printed(12, size.critical);
    }
}
