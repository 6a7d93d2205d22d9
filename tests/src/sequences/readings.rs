//! Random gauge lines: readings of a process, equal ones, some near a limit, extreme ones, and rubbish.

use donelight_core::counts::Counts;
use donelight_core::plan::Plan;

use super::plans::Scale;
use crate::random::Random;

/// A gauge at a process.
#[derive(Clone, Debug)]
pub(super) struct Gauge {
    plan: Plan,
    scale: Scale,
    /// The process's mean and standard deviation, in counts.
    mean: f64,
    spread: f64,
    /// The largest reading, in counts.
    most: i64,
    latest: i64,
    /// So many more readings are like the latest.
    stuck: u64,
}

impl Gauge {
    /// A gauge for this plan, at a process somewhere between hopeless and splendid.
    pub(super) fn new(random: &mut Random, plan: &Plan, scale: Scale) -> Self {
        let reach = scale.reach as f64;
        let spread = reach / (3.0 * (0.4 + 2.0 * random.fraction()));
        let mean = scale.middle as f64 + reach * 0.8 * (random.fraction() - 0.5);
        let most = 1_000_000_000_000 / i64::from(plan.resolution.step());
        Self { plan: plan.clone(), scale, mean, spread, most, latest: 0, stuck: 0 }
    }

    /// The next line, without its end.
    pub(super) fn line(&mut self, random: &mut Random) -> Vec<u8> {
        if random.chance(1, 24) {
            return rubbish(random);
        }
        if random.chance(1, 16) {
            self.stuck = random.below(7);
        }
        self.latest = self.next(random).clamp(-self.most, self.most);
        let counts = Counts::new(self.latest).expect("within bounds");
        let number = self.plan.resolution.show(counts).to_string();
        let unit = self.plan.unit.as_str();
        match random.below(8) {
            0 => format!("  {number} {unit}"),
            1 => format!("{number}{unit}"),
            2 if !number.starts_with('-') => format!("+00{number}"),
            3 => number.replace('.', ","),
            _ => number,
        }
        .into_bytes()
    }

    fn next(&mut self, random: &mut Random) -> i64 {
        if self.stuck > 0 {
            self.stuck -= 1;
            return self.latest;
        }
        let Scale { middle, reach } = self.scale;
        match random.below(40) {
            0 => random.one(&[-self.most, self.most, 0, 1, -1]),
            1 | 2 => random.one(&[middle - reach, middle + reach]) + random.between(-1, 1),
            3 => random.between(-self.most, self.most),
            _ => (self.mean + self.spread * random.deviate()).round() as i64,
        }
    }
}

/// What is no reading.
pub(super) fn rubbish(random: &mut Random) -> Vec<u8> {
    match random.below(8) {
        0 => b"--".to_vec(),
        1 => b"Err 5".to_vec(),
        2 => b"1.2.3".to_vec(),
        3 => b"9999999999999999999".to_vec(),
        4 => b"0.00000000001".to_vec(),
        5 => "12,5 µm".as_bytes().to_vec(),
        6 => vec![b'7'; random.between(60, 90) as usize],
        _ => (0..random.below(20)).map(|_| random.bits() as u8).collect(),
    }
}
