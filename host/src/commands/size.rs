//! `donelight size`: how many pieces a study needs, by precision or by power.

use donelight_core::capability::Index;
use donelight_core::interval::{Interval, Kind, Method, coverage};
use donelight_core::quantity::{Confidence, Count, DegreesOfFreedom, Millionths, Precision};
use donelight_core::sigma::{Sigma, SigmaError, SubgroupSize};
use donelight_core::sizing::power::{self, PowerSize};
use donelight_core::sizing::precision::{self, PrecisionSize};
use donelight_core::sizing::{self, Design, SizingError, Span, Truth};
use serde_json::{Value, json};

use crate::cli::{Size, SizePower, SizePrecision};
use crate::design::{self, DesignError, Limits, Question};
use crate::level;
use crate::output::{Answer, Exit, Explain, Failure};
use crate::plan_file::early as early_words;
use crate::report::{number, words};

impl Explain for SizingError {
    fn kind(&self) -> &'static str {
        match self {
            Self::AboveLimit => "size-above-limit",
            Self::SigmaTotal => "no-size-beforehand",
            _ => "size-options",
        }
    }

    fn help(&self) -> String {
        String::new()
    }

    fn exit(&self) -> Exit {
        match self {
            Self::AboveLimit | Self::SigmaTotal => Exit::Refused,
            _ => Exit::WrongUse,
        }
    }
}

impl Explain for SigmaError {
    fn kind(&self) -> &'static str {
        "sigma-options"
    }

    fn help(&self) -> String {
        match self {
            Self::NeedsSize => "Say for example --subgroups 5.",
            Self::TakesNoSize => "Leave out --subgroups, or say --sigma pooled.",
            Self::Unknown | Self::SizeOutOfRange => "",
        }
        .to_owned()
    }

    fn exit(&self) -> Exit {
        Exit::WrongUse
    }
}

/// Answers `donelight size …`.
///
/// # Errors
/// Options that contradict each other, or a demand that no study meets.
pub(super) fn run(size: &Size) -> Result<Answer, Failure> {
    match size {
        Size::Precision(options) => by_precision(options),
        Size::Power(options) if options.early => early(options),
        Size::Power(options) => by_power(options),
    }
}

/// How the size was come by.
fn about(design: &Design, kind: Kind, n: Count) -> String {
    let sigma = match design.sigma() {
        _ if design.index() == Index::Cpm => {
            "the spread about the target, with n degrees of freedom or more".to_owned()
        }
        Sigma::Overall => "sigma overall with n \u{2212} 1 degrees of freedom".to_owned(),
        sigma => {
            let nu = sigma.degrees_of_freedom(n).map_or(0.0, DegreesOfFreedom::get);
            let nu = number::degrees_of_freedom(nu);
            format!("sigma {} with {nu} degrees of freedom", words::sigma_name(sigma))
        }
    };
    format!(
        "Method: {}; {sigma}.\nIt supposes a stable process and readings near to normal.",
        words::about_method(design.method(), design.index(), kind),
    )
}

/// The same of a test.
fn about_test(design: &Design, n: Count) -> String {
    about(design, Kind::Lower, n)
}

/// From the worst or best position of the mean to the other.
fn span(span: Span) -> Value {
    json!({ "from": span.from, "to": span.to })
}

/// "212 pieces", "260 pieces: 52 subgroups of 5".
fn in_subgroups(sigma: Sigma, n: Count) -> String {
    match sigma.subgroup() {
        Some(size) => format!("{}: {} subgroups of {size}", pieces(n.get()), n.get() / size.get()),
        None => pieces(n.get()),
    }
}

/// What every size says of its sigma.
fn with_sigma(mut json: Value, index: Index, sigma: Sigma, n: Count) -> Value {
    if let Some(json) = json.as_object_mut() {
        json.insert("name".to_owned(), index.trade_name(sigma).into());
        json.insert("sigma".to_owned(), sigma.word().into());
        json.insert("subgroup_size".to_owned(), sigma.subgroup().map(SubgroupSize::get).into());
        json.insert("nu".to_owned(), sigma.degrees_of_freedom(n).map(DegreesOfFreedom::get).into());
    }
    json
}

fn by_precision(options: &SizePrecision) -> Result<Answer, Failure> {
    let &SizePrecision { index, at, within, confidence, kind, method, offset, ref sigma } = options;
    let sigma = sigma.choose(None)?;
    let method = method.unwrap_or(Method::default_of_plan(index, kind));
    let design = Design::new(index, method)?.with_sigma(sigma)?.with_offset(offset)?;
    let size = precision::smallest(&design, at.to_f64(), within, confidence, kind)?;
    let PrecisionSize { n, achieved, achieved_before, interval } = size;
    let coverage = coverage::range(method, &design.evidence(at.to_f64(), n)?, confidence, kind);
    let really = coverage.map_or_else(String::new, |found| {
        format!(
            "If that is the true {index}, such an interval covers it in {} of studies{}.\n",
            words::span(found.from, found.to),
            words::depending(found.from, found.to)
        )
    });
    let before = achieved_before.map_or_else(
        || "Fewer pieces have no interval.".to_owned(),
        |before| {
            let fewer = pieces(n.get() - sigma.step());
            format!("With {fewer} it would be {}, which is too far.", width(within, before))
        },
    );
    let text = format!(
        "Measure {}.\n\nIf {index} then comes out at {}, {} is {}.\n\
         It reaches {} from the estimate; {} is wanted. {before}\n{really}\n{}",
        in_subgroups(sigma, n),
        level::plain(at.0),
        called(confidence, kind),
        shown(&interval),
        width(within, achieved),
        wanted(within),
        about(&design, kind, n),
    );
    Ok(Answer::done(
        text,
        with_sigma(
            json!({
                "n": n.get(),
                "achieved": achieved,
                "achieved_before": achieved_before,
                "low": interval.low,
                "high": interval.high,
                "index": index.name().to_lowercase(),
                "at": at.to_f64(),
                "within": goal_json(within),
                "confidence": confidence.to_f64(),
                "kind": kind.name(),
                "method": method.name(),
                "coverage": coverage.map(|found| json!({ "from": found.from, "to": found.to })),
            }),
            index,
            sigma,
            n,
        ),
    ))
}

fn by_power(options: &SizePower) -> Result<Answer, Failure> {
    let &SizePower { index, claim, against, alpha, power, method, ref sigma, .. } = options;
    let sigma = sigma.choose(None)?;
    let method = method.unwrap_or(Method::default_of_plan(index, Kind::TwoSided));
    let design = Design::new(index, method)?.with_sigma(sigma)?;
    let size = power::smallest(&design, claim.to_f64(), against.to_f64(), alpha, power)?;
    let PowerSize { n, achieved, achieved_before, critical } = size;
    let truth = sizing::truth(&design, n, critical, claim.to_f64(), against.to_f64())?;
    let really = truth.map_or_else(String::new, |Truth { size, power }| {
        format!(
            "By the exact distribution a true claim is rejected with a risk of {}, and {} is noticed with {}{}.\n",
            words::span(size.from, size.to),
            level::plain(against.0),
            words::span(power.from, power.to),
            words::depending(size.from, size.to),
        )
    });
    let side = if against < claim { "below" } else { "above" };
    let before = achieved_before.map_or_else(
        || "Fewer pieces have no test.".to_owned(),
        |before| {
            let fewer = pieces(n.get() - sigma.step());
            format!("{fewer} would notice it with only {}.", percent(before, 4))
        },
    );
    let text = format!(
        "Measure {}.\n\nReject the claim that {index} is {} if the estimate is {side} {critical:.4}.\n\
         A true claim is then rejected with a risk of {}; an index of {} is noticed with {}.\n{before}\n{really}\n{}",
        in_subgroups(sigma, n),
        level::plain(claim.0),
        level::percent(alpha.0),
        level::plain(against.0),
        percent(achieved, 4),
        about_test(&design, n),
    );
    Ok(Answer::done(
        text,
        with_sigma(
            json!({
                "n": n.get(),
                "achieved": achieved,
                "achieved_before": achieved_before,
                "critical": critical,
                "index": index.name().to_lowercase(),
                "claim": claim.to_f64(),
                "against": against.to_f64(),
                "alpha": alpha.to_f64(),
                "power": power.to_f64(),
                "method": method.name(),
                "true_size": truth.map(|truth| span(truth.size)),
                "true_power": truth.map(|truth| span(truth.power)),
            }),
            index,
            sigma,
            n,
        ),
    ))
}

impl Explain for DesignError {
    fn kind(&self) -> &'static str {
        match self {
            Self::Index(_) => "no-early-decision",
            Self::TooMany => "size-above-limit",
            Self::FixedIsSmall { .. } => "size-too-small-for-looks",
            Self::Inexact => "not-exact-enough",
            _ => "size-options",
        }
    }

    fn help(&self) -> String {
        String::new()
    }

    fn exit(&self) -> Exit {
        match self {
            Self::Index(_) | Self::TooMany | Self::FixedIsSmall { .. } | Self::Inexact => Exit::Refused,
            _ => Exit::WrongUse,
        }
    }
}

fn early(options: &SizePower) -> Result<Answer, Failure> {
    let &SizePower { index, claim, against, alpha, power, layout, .. } = options;
    let question =
        Question { index, limits: Limits::Two, claim, against, alpha, power, spending: layout.spending };
    let design = design::smallest(&question, layout.looks.into())?;
    let early = &design.early;
    let most = early.looks.last().map_or(0, |last| last.n.get());
    let sized = Design::new(index, Method::Bissell)
        .and_then(|usual| power::smallest(&usual, claim.to_f64(), against.to_f64(), alpha, power))
        .ok();
    let usual = sized.map(|size| {
        format!("(`size power` without --early says {}, by a normal approximation.)\n", size.n.get())
    });
    let text = format!(
        "Measure at most {}; stop at the first look that decides.\n\n{}.\n\n{}\n{}{}\n{}",
        pieces(most),
        early_words::question(index, early),
        early_words::table(index, early),
        early_words::effects(&design),
        usual.unwrap_or_default(),
        early_words::MEANING,
    );
    let mut json = early_words::design_json(&design);
    if let Some(object) = json.as_object_mut() {
        object.insert("n".to_owned(), json!(most));
        object.insert("index".to_owned(), json!(index.name().to_lowercase()));
        object.insert("method".to_owned(), json!("exact"));
    }
    Ok(Answer::done(text, json))
}

fn pieces(n: u32) -> String {
    format!("{n} pieces")
}

/// "its two-sided 95 % interval", "its lower 95 % bound".
fn called(confidence: Confidence, kind: Kind) -> String {
    let confidence = level::percent(confidence.millionths());
    match kind {
        Kind::TwoSided => format!("its two-sided {confidence} interval"),
        Kind::Lower => format!("its lower {confidence} bound"),
        Kind::Upper => format!("its upper {confidence} bound"),
    }
}

fn shown(interval: &Interval) -> String {
    match (interval.low, interval.high) {
        (Some(low), Some(high)) => format!("{low:.4} to {high:.4}"),
        (Some(end), None) | (None, Some(end)) => format!("{end:.4}"),
        (None, None) => "unknown".to_owned(),
    }
}

fn width(precision: Precision, achieved: f64) -> String {
    match precision {
        Precision::Relative(_) => percent(achieved, 4),
        Precision::Absolute(_) => format!("{achieved:.6}"),
    }
}

fn wanted(precision: Precision) -> String {
    match precision {
        Precision::Relative(Millionths(goal)) => format!("at most {}", level::percent(goal)),
        Precision::Absolute(Millionths(goal)) => format!("at most {}", level::plain(goal)),
    }
}

fn goal_json(precision: Precision) -> Value {
    match precision {
        Precision::Relative(goal) => json!({ "relative": goal.to_f64() }),
        Precision::Absolute(goal) => json!({ "absolute": goal.to_f64() }),
    }
}

fn percent(fraction: f64, places: usize) -> String {
    format!("{:.places$} %", fraction * 100.0)
}
