//! Random valid plans: every index, kind, sigma, subgroup size, confidence, resolution and goal.

use std::sync::OnceLock;

use donelight::plan_file;
use donelight_core::capability::Index;
use donelight_core::counts::{Decimal, Resolution};
use donelight_core::interval::{Kind, Method};
use donelight_core::plan::{Draft, LineSettings, Parity, Plan};
use donelight_core::quantity::{Confidence, Count, Millionths, Precision};
use donelight_core::sigma::{Sigma, SubgroupSize};
use donelight_core::stopping::early::{Boundary, EarlyDecision, Look, Spending};
use donelight_core::stopping::{Goal, StoppingRule};
use donelight_core::text::Text;

use crate::random::Random;

/// The indices of most plans; beside them Cpm, which takes twice as long.
const INDICES: [Index; 4] = [Index::Cp, Index::Cpl, Index::Cpu, Index::Cpk];

/// So many pieces at most, so that a short sequence comes to the end.
const PIECES_MAX: i64 = 24;

/// What readings need to know of a plan's scale.
#[derive(Clone, Debug)]
pub(super) struct Scale {
    /// The middle of what is measured, in counts.
    pub(super) middle: i64,
    /// Half the distance of the limits, in counts.
    pub(super) reach: i64,
}

/// A random plan without a fault, and its scale.
pub(super) fn plan(random: &mut Random) -> (Plan, Scale) {
    loop {
        let (draft, scale) = draft(random);
        if let Ok(plan) = Plan::try_from(draft) {
            return (plan, scale);
        }
    }
}

/// A plan from which each draft starts, so that what is not named here is as in a plan file that leaves it out.
fn usual() -> &'static Draft {
    static USUAL: OnceLock<Plan> = OnceLock::new();
    USUAL
        .get_or_init(|| {
            let text = "name = \"Bell rims\"\nresolution = \"0.01\"\n[specification]\nlower = \"1\"\n\
                        upper = \"2\"\n[capability]\nindex = \"cpk\"\n[stop]\nplanned = 10\nprecision = \"90%\"\n\
                        limit = 20\n";
            plan_file::from_text(text).expect("a valid plan")
        })
        .draft()
}

fn draft(random: &mut Random) -> (Draft, Scale) {
    let mut draft = usual().clone();
    draft.name = text(random, 1, 40);
    draft.part = text(random, 0, 24);
    draft.characteristic = text(random, 0, 24);
    draft.unit = Text::new(random.one(&["", "", "mm", "um", "in", "N", "degrees"])).expect("short");
    draft.resolution = resolution(random);
    draft.index = if random.chance(1, 32) { Index::Cpm } else { random.one(&INDICES) };
    let scale = limits(random, &mut draft);
    draft.confidence = confidence(random);
    draft.kind = random.one(&[Kind::TwoSided, Kind::Lower, Kind::Upper]);
    draft.method = method(random, draft.index);
    draft.gauge = line_settings(random);
    draft.same_in_a_row = random.one(&[0, 0, 3, 3, 4, 5, 9]);
    draft.sigma = sigma(random);
    draft.rule = if draft.sigma == Sigma::Overall && random.chance(1, 2) {
        StoppingRule::deciding_early(early(random))
    } else {
        by_precision(random, draft.sigma)
    };
    (draft, scale)
}

fn text<const N: usize>(random: &mut Random, least: i64, most: i64) -> Text<N> {
    let most = if random.chance(1, 16) { most } else { most / 4 };
    let length = random.between(least, most);
    let letters: String = (0..length).map(|_| random.one(&['a', 'e', 'r', 'T', '7', '-', '.'])).collect();
    Text::new(&letters).expect("plain letters")
}

fn resolution(random: &mut Random) -> Resolution {
    let step = match random.below(4) {
        0 => 1,
        1 => random.one(&[2, 5, 25, 50, 125]),
        2 => random.between(1, 100) as u16,
        _ => random.between(1, u16::MAX.into()) as u16,
    };
    Resolution::new(step, random.between(0, Resolution::MAX_DECIMALS.into()) as u8).expect("within bounds")
}

/// Puts limits, perhaps one only, and perhaps a target into the draft.
fn limits(random: &mut Random, draft: &mut Draft) -> Scale {
    let step = i64::from(draft.resolution.step());
    // Readings may come to 10^12 units of the last decimal.
    let most = 1_000_000_000_000 / step;
    let middle = match random.below(4) {
        0 => 0,
        1 => random.between(-most, most),
        _ => random.between(-1_000, 1_000),
    };
    let digits = random.between(1, 9) as u32;
    let reach = random.between(1, 10_i64.pow(digits)).min(most);
    let at = |random: &mut Random, counts: i64| {
        let decimals = draft.resolution.decimals();
        let finer = random.below(4) as u8 % (Decimal::MAX_DECIMALS - decimals + 1);
        let off_grid = random.below(10_u64.pow(finer.into())) as i64;
        let mantissa = (counts.clamp(-most, most) * step).checked_mul(10_i64.pow(finer.into()))?;
        Decimal::new(mantissa.checked_add(off_grid)?, decimals + finer).ok()
    };
    let (lower, upper) = (at(random, middle - reach), at(random, middle + reach));
    let keep = match draft.index {
        Index::Cp | Index::Cpm => (true, true),
        Index::Cpl => (true, random.chance(1, 2)),
        Index::Cpu => (random.chance(1, 2), true),
        Index::Cpk => random.one(&[(true, true), (true, true), (true, false), (false, true)]),
    };
    draft.lower = lower.filter(|_| keep.0);
    draft.upper = upper.filter(|_| keep.1);
    let target = middle + random.between(-reach, reach) / 2;
    draft.target = at(random, target).filter(|_| draft.index == Index::Cpm || random.chance(1, 3));
    Scale { middle, reach }
}

fn confidence(random: &mut Random) -> Confidence {
    let millionths = match random.below(4) {
        0 => random.one(&[500_000, 900_000, 990_000, 999_999]),
        1 => random.between(500_000, 999_999) as u32,
        _ => 950_000,
    };
    Confidence::from_millionths(millionths).expect("within bounds")
}

/// Most have a method that a core without floating point computes in no time; one that does not suit is refused with the
/// draft.
fn method(random: &mut Random, index: Index) -> Method {
    match index {
        Index::Cpm => Method::Boyles,
        Index::Cp if random.chance(1, 2) => Method::ChiSquare,
        Index::Cpl | Index::Cpu | Index::Cpk if random.chance(1, 32) => {
            random.one(&[Method::NoncentralT, Method::NoncentralT, Method::Exact])
        }
        _ => Method::Bissell,
    }
}

fn line_settings(random: &mut Random) -> LineSettings {
    LineSettings {
        baud: random.one(&[300, 9_600, 9_600, 9_600, 115_200]),
        data_bits: random.one(&[8, 8, 7]),
        parity: random.one(&[Parity::None, Parity::None, Parity::Even, Parity::Odd]),
        stop_bits: random.one(&[1, 1, 2]),
    }
}

fn sigma(random: &mut Random) -> Sigma {
    let size = if random.chance(1, 4) { random.between(2, 25) } else { random.between(2, 5) };
    let size = SubgroupSize::new(size as u8).expect("2 to 25");
    // By ranges a core without floating point takes ten times as long: one in 100 has each.
    match random.below(100) {
        0 => Sigma::MovingRanges,
        1 => Sigma::Ranges(size),
        2..35 => Sigma::Pooled(size),
        _ => Sigma::Overall,
    }
}

fn count(pieces: i64) -> Count {
    Count::new(pieces as u32).expect("few")
}

/// From 3 % to 300 %: at the lower end the limit of a short study is reached first, or the plan is refused.
fn by_precision(random: &mut Random, sigma: Sigma) -> StoppingRule {
    let whole = i64::from(sigma.step());
    let most = (PIECES_MAX / whole).max(2);
    let planned = random.between(1, most) * whole;
    let limit = planned + random.between(0, most / 2) * whole;
    let goal = (1e6 * 0.03 * 100_f64.powf(random.fraction())) as u32;
    let goal = Millionths(goal);
    let precision = if random.chance(1, 4) { Precision::Absolute(goal) } else { Precision::Relative(goal) };
    StoppingRule { planned: count(planned), goal: Goal::Precision(precision), limit: count(limit) }
}

/// Claims and looks as they come: what they promise does not matter here.
fn early(random: &mut Random) -> EarlyDecision {
    let index = |random: &mut Random| random.between(5_000, 25_000) as u32;
    let (claim, against) = (index(random), index(random));
    let mut looks = heapless::Vec::new();
    let mut n = 1;
    let number = random.between(1, 6);
    for look in 1..=number {
        n += random.between(1, 6);
        let (one, other) = (index(random), index(random));
        let (low, high) = if look == number { (one, one) } else { (one.min(other), one.max(other)) };
        let (keep, reject) = if against < claim { (high, low) } else { (low, high) };
        let perhaps =
            |there: bool, boundary| there.then(|| Boundary::from_ten_thousandths(boundary)).flatten();
        let (keeps, rejects) = (look == number || random.chance(1, 2), look == number || random.chance(1, 2));
        let look = Look { n: count(n), keep: perhaps(keeps, keep), reject: perhaps(rejects, reject) };
        looks.push(look).expect("six fit");
    }
    EarlyDecision {
        claim: Millionths(claim * 100),
        against: Millionths(against * 100),
        alpha: Millionths(random.between(1, 500_000) as u32),
        power: confidence(random),
        spending: random.one(&[Spending::ObrienFleming, Spending::Pocock]),
        looks,
    }
}

#[cfg(test)]
mod tests {
    use std::collections::BTreeSet;

    use super::*;

    #[test]
    fn plans_of_every_index_kind_sigma_size_method_goal_and_resolution_come_up() {
        let mut seen = BTreeSet::new();
        let mut random = Random::new(1);
        for _ in 0..30_000 {
            let (plan, _) = plan(&mut random);
            let goal = match &plan.rule.goal {
                Goal::Precision(Precision::Relative(_)) => "relative",
                Goal::Precision(Precision::Absolute(_)) => "absolute",
                Goal::Decision(_) => "decision",
            };
            let limits = [plan.lower.is_some(), plan.upper.is_some(), plan.target.is_some()];
            let size = plan.sigma.subgroup().map_or(0, SubgroupSize::get);
            seen.insert(format!("{} {} {limits:?}", plan.index, plan.kind));
            seen.insert(format!("{} of {size}", plan.sigma.word()));
            seen.insert(format!("{} by {}", plan.index, plan.method));
            seen.insert(format!("{} decimals", plan.resolution.decimals()));
            seen.insert(goal.to_owned());
            seen.insert(format!("{} %", plan.confidence.to_f64() * 100.0).replace("99.9999", "all but 100"));
        }
        let wanted = |words: &str| words.split(", ").map(str::to_owned).collect::<Vec<_>>();
        let sizes = |word: &'static str, most| (2..=most).map(move |size| format!("{word} of {size}"));
        let both = "[true, true, false]";
        let all =
            wanted("relative, absolute, decision, overall of 0, moving-ranges of 0, 50 %, all but 100 %")
                .into_iter()
                .chain(sizes("pooled", 25))
                // Too seldom for the larger ones to come up in so few plans.
                .chain(sizes("ranges", 5))
                .chain((0..=9).map(|decimals| format!("{decimals} decimals")))
                .chain(["Cp", "Cpl", "Cpu", "Cpk"].into_iter().flat_map(move |index| {
                    ["two-sided", "lower", "upper"].map(|kind| format!("{index} {kind} {both}"))
                }))
                .chain(["Cpk lower [true, false, false]", "Cpk lower [false, true, true]"].map(String::from))
                .chain(
                    ["Cpm two-sided [true, true, true]", "Cpl upper [true, false, false]"].map(String::from),
                )
                .chain(wanted(
                    "Cp by chi-square, Cp by bissell, Cpl by noncentral-t, Cpk by exact, Cpm by boyles",
                ));
        for one in all {
            assert!(seen.contains(&one), "never: {one}");
        }
    }
}
