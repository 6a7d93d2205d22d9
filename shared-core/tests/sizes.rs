//! Sample sizes against a table computed independently, with mpmath and scipy.

use donelight_core::capability::Index;
use donelight_core::interval::{Kind, Method};
use donelight_core::quantity::{Confidence, Millionths, Precision};
use donelight_core::sizing::{self, Design, power, precision};

/// One row: `task,method,delta,side,level,c0_or_index,c1,goal_relwidth,goal_power,n,at_n,at_n_minus_1,crit,…`.
struct Row(Vec<&'static str>);

impl Row {
    fn all(task: &str) -> Vec<Self> {
        let table = include_str!("../../tests/reference/sizes.csv");
        let rows = table.lines().skip(2).map(|line| Self(line.split(',').collect()));
        rows.filter(|row| row.0[0] == task).collect()
    }

    fn number(&self, column: usize) -> f64 {
        self.0[column].parse().unwrap()
    }

    fn millionths(&self, column: usize) -> u32 {
        (self.number(column) * 1e6).round() as u32
    }

    fn design(&self) -> Design {
        let (index, method) = match self.0[1] {
            "Cp/chi2" => (Index::Cp, Method::ChiSquare),
            "Cpl_Cpu/nct" => (Index::Cpu, Method::NoncentralT),
            "Cpk/bissell" => (Index::Cpk, Method::Bissell),
            "Cpk/exact_conservative" => (Index::Cpk, Method::Exact),
            "Cpm/boyles" => {
                let design = Design::new(Index::Cpm, Method::Boyles).unwrap();
                return design.with_offset(self.number(2)).unwrap();
            }
            other => panic!("unknown method {other}"),
        };
        Design::new(index, method).unwrap()
    }

    /// Equal to all nine printed decimals.
    fn assert_printed(&self, column: usize, computed: f64) {
        assert!((self.number(column) - computed).abs() <= 5.01e-10, "{:?}: {computed}", self.0);
    }
}

#[test]
fn every_size_by_precision_of_the_table_is_met() {
    let rows = Row::all("precision");
    assert_eq!(rows.len(), 1575);
    for row in rows {
        let kind: Kind = row.0[3].parse().unwrap();
        let confidence = Confidence::from_millionths(row.millionths(4)).unwrap();
        let (design, at, goal) = (row.design(), row.number(5), row.millionths(7));
        let relative = Precision::Relative(Millionths(goal));
        let size = precision::smallest(&design, at, relative, confidence, kind).unwrap();
        assert_eq!(f64::from(size.n.get()), row.number(9), "{:?}", row.0);
        row.assert_printed(10, size.achieved);
        row.assert_printed(11, size.achieved_before.unwrap());

        let absolute = Precision::Absolute(Millionths((f64::from(goal) * at).round() as u32));
        let size = precision::smallest(&design, at, absolute, confidence, kind).unwrap();
        assert_eq!(f64::from(size.n.get()), row.number(9), "{:?}", row.0);
    }
}

#[test]
fn every_size_by_power_of_the_table_is_met_and_tells_what_it_really_does() {
    let rows = Row::all("power");
    assert_eq!(rows.len(), 960);
    for row in rows {
        let (design, claim, against) = (row.design(), row.number(5), row.number(6));
        assert_eq!(row.0[3], if against < claim { "down" } else { "up" });
        let goal = Confidence::from_millionths(row.millionths(8)).unwrap();
        let alpha = Millionths(row.millionths(4));
        let size = power::smallest(&design, claim, against, alpha, goal).unwrap();
        assert_eq!(f64::from(size.n.get()), row.number(9), "{:?}", row.0);
        row.assert_printed(10, size.achieved);
        row.assert_printed(11, size.achieved_before.unwrap());
        row.assert_printed(12, size.critical);

        let truth = sizing::truth(&design, size.n, size.critical, claim, against).unwrap().unwrap();
        if design.method() == Method::Bissell {
            // Centred size and power, then those of a single limit; five decimals.
            let printed = |column: usize| row.number(column);
            for (span, centred, one) in
                [(truth.size, printed(13), printed(15)), (truth.power, printed(14), printed(16))]
            {
                assert!((span.from - centred.min(one)).abs() <= 5.01e-6, "{:?}: {span:?}", row.0);
                assert!((span.to - centred.max(one)).abs() <= 5.01e-6, "{:?}: {span:?}", row.0);
            }
        } else {
            // An exact method does what it says.
            assert!((truth.size.to - alpha.to_f64()).abs() < 1e-12, "{:?}: {truth:?}", row.0);
            assert!((truth.power.from - size.achieved).abs() < 1e-12, "{:?}: {truth:?}", row.0);
        }
    }
}
