//! Option values, read from text once into types that carry their meaning. Each error says what to write instead.

use clap::builder::{PossibleValuesParser, TypedValueParser};
use donelight_core::capability::Index;
use donelight_core::interval::{Kind, Method};
use donelight_core::quantity::{Confidence, Count, Millionths, Precision};
use donelight_core::sigma::Sigma;
use donelight_core::stopping::early::Spending;

use crate::level;

/// `normal:MEAN,SD`
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct NormalProcess {
    /// Finite.
    pub mean: f64,
    /// Finite and above 0.
    pub sd: f64,
}

/// `n=…,mean=…,sd=…`
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Summary {
    /// Number of readings.
    pub n: Count,
    /// Their mean.
    pub mean: f64,
    /// Their standard deviation, with n − 1.
    pub sd: f64,
}

pub(super) fn index() -> impl TypedValueParser<Value = Index> {
    PossibleValuesParser::new(["cp", "cpl", "cpu", "cpk", "cpm"]).try_map(|name| name.parse::<Index>())
}

pub(super) fn sigma() -> PossibleValuesParser {
    PossibleValuesParser::new(Sigma::WORDS)
}

pub(super) fn kind() -> impl TypedValueParser<Value = Kind> {
    PossibleValuesParser::new(["two-sided", "lower", "upper"]).try_map(|name| name.parse::<Kind>())
}

pub(super) fn method() -> impl TypedValueParser<Value = Method> {
    PossibleValuesParser::new(Method::ALL.map(Method::name)).try_map(|name| name.parse::<Method>())
}

/// |μ − T|/σ, as the core takes it.
pub(super) fn offset(text: &str) -> Result<f64, String> {
    finite(text).and_then(|offset| {
        if (0.0..=100.0).contains(&offset) { Ok(offset) } else { Err("not from 0 to 100".to_owned()) }
    })
}

pub(super) fn confidence(text: &str) -> Result<Confidence, String> {
    let level = level::read(text).map_err(|error| error.to_string())?;
    Confidence::from_millionths(level.millionths).ok_or_else(|| "not between 50% and 99.9999%".to_owned())
}

pub(super) fn alpha(text: &str) -> Result<Millionths, String> {
    level::alpha(text)
}

pub(super) fn index_value(text: &str) -> Result<Millionths, String> {
    level::index_value(text)
}

pub(super) fn spending() -> impl TypedValueParser<Value = Spending> {
    PossibleValuesParser::new(["pocock", "obrien-fleming"]).try_map(|name| name.parse::<Spending>())
}

pub(super) fn precision(text: &str) -> Result<Precision, String> {
    let level = level::read(text).map_err(|error| error.to_string())?;
    match level {
        level::Level { millionths: 0, .. } => Err("a width must be above zero".to_owned()),
        level::Level { percent: true, millionths } => Ok(Precision::Relative(Millionths(millionths))),
        level::Level { percent: false, millionths } => Ok(Precision::Absolute(Millionths(millionths))),
    }
}

pub(super) fn finite(text: &str) -> Result<f64, String> {
    match text.trim().parse::<f64>() {
        Ok(value) if value.is_finite() => Ok(value),
        _ => Err(format!("{text:?} is not a number with a decimal point, such as 2.001")),
    }
}

pub(super) fn count(text: &str) -> Result<Count, String> {
    let n = text.parse().map_err(|_| format!("n={text} is not a whole number"))?;
    Count::new(n).ok_or_else(|| format!("n={text} is above one million"))
}

pub(super) fn rate(text: &str) -> Result<f64, String> {
    finite(text).and_then(|rate| {
        if rate > 0.0 && rate <= 100_000.0 {
            Ok(rate)
        } else {
            Err("not above 0 and up to 100000".to_owned())
        }
    })
}

pub(super) fn normal_process(text: &str) -> Result<NormalProcess, String> {
    let numbers = text.strip_prefix("normal:").and_then(|rest| rest.split_once(','));
    let Some((mean, sd)) = numbers else {
        return Err("write normal:MEAN,SD, for example normal:2.000,0.012".to_owned());
    };
    let (mean, sd) = (finite(mean)?, finite(sd)?);
    if sd > 0.0 {
        Ok(NormalProcess { mean, sd })
    } else {
        Err("the standard deviation must be above zero".to_owned())
    }
}

pub(super) fn summary(text: &str) -> Result<Summary, String> {
    let (mut n, mut mean, mut sd) = (None, None, None);
    for item in text.split(',') {
        let (name, value) =
            item.split_once('=').ok_or("write n=…,mean=…,sd=…, for example n=50,mean=2.001,sd=0.01")?;
        let (name, value) = (name.trim(), value.trim());
        let twice = match name {
            "n" => n.replace(count(value)?).is_some(),
            "mean" => mean.replace(finite(value)?).is_some(),
            "sd" => sd.replace(finite(value)?).is_some(),
            _ => return Err(format!("{name:?} is not known; write n=…,mean=…,sd=…")),
        };
        if twice {
            return Err(format!("{name} is given twice"));
        }
    }
    match (n, mean, sd) {
        (Some(n), Some(mean), Some(sd)) => Ok(Summary { n, mean, sd }),
        _ => Err("n, mean and sd are all needed: n=…,mean=…,sd=…".to_owned()),
    }
}
