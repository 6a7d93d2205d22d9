//! Sigma: its words and bytes, its factors and degrees of freedom against published ones, its sums against rationals.

mod exact;
mod published;
mod simulated;

use std::string::ToString;
use std::vec::Vec;

use super::*;
use crate::capability::Specification;
use crate::counts::{Counts, Resolution};
use crate::moments::MomentsError;

fn size(pieces: u8) -> SubgroupSize {
    SubgroupSize::new(pieces).unwrap()
}

fn count(n: u32) -> Count {
    Count::new(n).unwrap()
}

/// Any specification: sigma does not depend on it.
fn wide() -> Specification {
    Specification::new(None, Some("1000000".parse().unwrap()), None).unwrap()
}

fn tally(sigma: Sigma, readings: &[i64]) -> Tally {
    let mut tally = Tally::new(sigma);
    for reading in readings {
        tally.add(Counts::new(*reading).unwrap()).unwrap();
    }
    tally
}

fn every_sigma() -> Vec<Sigma> {
    let mut all = std::vec![Sigma::Overall, Sigma::MovingRanges];
    for pieces in 2..=25 {
        all.extend([Sigma::Pooled(size(pieces)), Sigma::Ranges(size(pieces)), Sigma::Total(size(pieces))]);
    }
    all
}

#[test]
fn every_sigma_comes_back_from_its_word_and_from_its_bytes() {
    for sigma in every_sigma() {
        assert_eq!(Sigma::new(Some(sigma.word()), sigma.subgroup()), Ok(sigma));
        let mut bytes = [0; 8];
        let stored = postcard::to_slice(&sigma, &mut bytes).unwrap();
        assert_eq!(postcard::from_bytes(stored), Ok(sigma));
    }
    for bytes in [[0, 5], [1, 0], [1, 1], [1, 26], [3, 2], [5, 5]] {
        assert!(postcard::from_bytes::<Sigma>(&bytes).is_err(), "{bytes:?}");
    }
}

#[test]
fn words_and_sizes_that_do_not_go_together_are_told_apart() {
    let five = Some(size(5));
    assert_eq!(Sigma::new(None, None), Ok(Sigma::Overall));
    assert_eq!(Sigma::new(None, five), Ok(Sigma::Pooled(size(5))));
    assert_eq!(Sigma::new(Some("within"), five), Err(SigmaError::Unknown));
    assert_eq!(Sigma::new(Some("pooled"), None), Err(SigmaError::NeedsSize));
    assert_eq!(Sigma::new(Some("overall"), five), Err(SigmaError::TakesNoSize));
    assert_eq!(Sigma::new(Some("moving-ranges"), five), Err(SigmaError::TakesNoSize));
    for text in ["1", "26", "five", "-3", "", "256"] {
        assert_eq!(text.parse::<SubgroupSize>(), Err(SigmaError::SizeOutOfRange));
        assert!(SigmaError::SizeOutOfRange.to_string().contains("2 to 25"));
    }
}

#[test]
fn the_trade_speaks_of_capability_within_subgroups_and_else_of_performance() {
    use crate::capability::Index;
    for sigma in every_sigma() {
        let within = matches!(sigma.word(), "pooled" | "ranges" | "moving-ranges");
        assert_eq!(Index::Cpk.trade_name(sigma), if within { "Cpk" } else { "Ppk" });
        assert_eq!(Index::Cp.trade_name(sigma), if within { "Cp" } else { "Pp" });
        assert_eq!(Index::Cpm.trade_name(sigma), "Cpm");
    }
}

#[test]
fn degrees_of_freedom_are_those_of_whole_subgroups() {
    let nu = |sigma: Sigma, n| sigma.degrees_of_freedom(count(n)).map(DegreesOfFreedom::get);
    assert_eq!(nu(Sigma::Overall, 50), Some(49.0));
    assert_eq!(nu(Sigma::Pooled(size(5)), 50), Some(40.0));
    assert_eq!(nu(Sigma::Pooled(size(5)), 54), Some(40.0));
    assert_eq!(nu(Sigma::Pooled(size(5)), 4), None);
    assert_eq!(nu(Sigma::Ranges(size(5)), 54), nu(Sigma::Ranges(size(5)), 50));
    assert_eq!(nu(Sigma::Total(size(5)), 9), None);
    assert_eq!(nu(Sigma::Total(size(5)), 12), Some(9.0));
    for sigma in every_sigma() {
        assert_eq!(nu(sigma, 0), None);
        assert_eq!(nu(sigma, 1), None);
        // More pieces never give fewer, and within never more than overall.
        let mut before = 0.0;
        for n in (1..400).chain([1_000, 10_000, 1_000_000]) {
            let now = nu(sigma, n).unwrap_or(0.0);
            assert!(now >= before && now <= f64::from(n - 1) * (1.0 + 1e-12), "{sigma:?} {n}: {now}");
            before = now;
        }
    }
}

#[test]
fn too_few_subgroups_and_no_spread_are_told_apart() {
    use crate::capability::SampleError;
    let one: Resolution = "1".parse().unwrap();
    let sample = |sigma, readings: &[i64]| tally(sigma, readings).sample(one, &wide()).map(|s| s.sigma());
    let three = size(3);
    assert_eq!(sample(Sigma::Pooled(three), &[1, 2]), Err(SampleError::TooFewSubgroups));
    assert_eq!(sample(Sigma::Ranges(three), &[1, 2]), Err(SampleError::TooFewSubgroups));
    assert_eq!(sample(Sigma::Total(three), &[1, 2, 3, 4, 5]), Err(SampleError::TooFewSubgroups));
    assert_eq!(sample(Sigma::MovingRanges, &[1]), Err(SampleError::TooFew));
    // Spread between subgroups, none within.
    for sigma in [Sigma::Pooled(three), Sigma::Ranges(three)] {
        assert_eq!(sample(sigma, &[1, 1, 1, 5, 5, 5]), Err(SampleError::NoSpread));
    }
    // Of subgroups with nothing within, all is between: the mean is worth one piece a subgroup.
    let total = tally(Sigma::Total(three), &[1, 1, 1, 5, 5, 5]).sample(one, &wide()).unwrap();
    assert_eq!((total.n().get(), total.nu().get()), (2, 1.0));
    assert_eq!(total.sigma(), 8_f64.sqrt());
}

#[test]
fn only_the_last_reading_can_be_taken_back() {
    for sigma in every_sigma().into_iter().skip(1) {
        let mut tally = tally(sigma, &[5, 6, 7]);
        let before = tally.clone();
        assert_eq!(tally.take_back(Counts::new(6).unwrap()), Err(MomentsError::Impossible));
        assert_eq!(tally, before);
    }
    // A range is closed by the next reading.
    let mut moving = tally(Sigma::MovingRanges, &[5, 6, 7]);
    moving.take_back(Counts::new(7).unwrap()).unwrap();
    assert_eq!(moving.take_back(Counts::new(6).unwrap()), Err(MomentsError::Impossible));
}
