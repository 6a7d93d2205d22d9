//! `donelight assess`: the capability of readings, or of a summary, that came from elsewhere.

use std::fs;
use std::path::Path;

use donelight_core::capability::{IndexError, Specification, SpecificationError};
use donelight_core::interval::{Kind, Method, MethodError};
use donelight_core::sigma::{Sigma, SubgroupSize};

use crate::cli::{Assess, Summary};
use crate::files;
use crate::output::{Answer, Exit, Explain, Failure};
use crate::readings::{self, Columns};
use crate::report::analysis::{self, Analysis, Trouble};
use crate::report::words::{self, Outcome, Verdict};
use crate::report::{Data, Fact, Question, Reading, Study, export, number, page};

/// Answers `donelight assess …`.
///
/// # Errors
/// Limits that contradict each other, a file without readings, readings without an estimate, a page that cannot be
/// written.
pub(super) fn run(options: &Assess) -> Result<Answer, Failure> {
    let specification = Specification::new(options.lsl, options.usl, options.target)?;
    if options.require.is_some() && options.kind() == Kind::Upper {
        return Err(AssessError::RequireWithUpper.into());
    }
    if let (Some(report), Some(file)) = (&options.report, &options.file) {
        files::keep_apart(report, &[file])?;
    }
    let study = study(options, specification)?;
    let analysis = analysis::of(&study);
    if let Err(trouble) = analysis.asked {
        return Err(AssessError::NoEstimate(trouble).into());
    }
    if let Some(report) = &options.report {
        files::write(report, page::page(&study, &analysis).as_bytes())?;
    }
    let verdict = words::verdict(&study, &analysis);
    let exit = if verdict.outcome == Outcome::NotShown { Exit::Refused } else { Exit::Done };
    let mut json = export::json(&study, &analysis);
    if let (Some(object), Some(report)) = (json.as_object_mut(), &options.report) {
        object.insert("report".to_owned(), report.to_string_lossy().into());
    }
    Ok(Answer { text: text(&study, &analysis, &verdict, options.report.as_deref()), json, exit })
}

/// What goes wrong after the files are read.
#[derive(Debug, thiserror::Error)]
enum AssessError {
    #[error("--require needs a lower limit, and --kind upper has none")]
    RequireWithUpper,
    #[error("{0}")]
    NoEstimate(Trouble),
    #[error("neither a file with its resolution nor a summary is given")]
    NothingGiven,
    #[error("{0}")]
    Method(#[from] MethodError),
    #[error("the degrees of freedom of total sigma come from the readings, and a summary has none")]
    TotalOfSummary,
}

impl Explain for AssessError {
    fn kind(&self) -> &'static str {
        match self {
            Self::RequireWithUpper => "contradictory-options",
            Self::NoEstimate(Trouble::Sample(_)) => "no-estimate",
            Self::NoEstimate(Trouble::Index(_)) => "index-not-defined",
            Self::NothingGiven => "usage",
            Self::TotalOfSummary => "sigma-options",
            Self::Method(_) => "method-options",
        }
    }

    fn help(&self) -> String {
        match self {
            Self::RequireWithUpper => "Use --kind lower or --kind two-sided.".to_owned(),
            // The core's message says what to do.
            Self::NoEstimate(_) | Self::Method(_) => String::new(),
            Self::NothingGiven => "See donelight assess --help.".to_owned(),
            Self::TotalOfSummary => "Give the readings in a file, or another sigma.".to_owned(),
        }
    }

    fn exit(&self) -> Exit {
        match self {
            Self::NoEstimate(Trouble::Sample(_) | Trouble::Index(IndexError::NotFinite)) => Exit::Refused,
            // The index and the limits given on the command line do not go together.
            Self::RequireWithUpper
            | Self::NothingGiven
            | Self::TotalOfSummary
            | Self::Method(_)
            | Self::NoEstimate(Trouble::Index(_)) => Exit::WrongUse,
        }
    }
}

impl Explain for SpecificationError {
    fn kind(&self) -> &'static str {
        "contradictory-limits"
    }

    fn help(&self) -> String {
        String::new()
    }

    fn exit(&self) -> Exit {
        Exit::WrongUse
    }
}

fn study(options: &Assess, specification: Specification) -> Result<Study, Failure> {
    let (data, column, origin, sigma) = match (&options.file, options.summary, options.resolution) {
        (Some(file), _, Some(resolution)) => {
            if options.subgroup_column.is_some() {
                // Before the file is read: a column of subgroups has some size, which one does not matter here.
                options.sigma.choose(Some(SubgroupSize::MIN))?;
            }
            let columns = Columns {
                readings: options.column.as_deref(),
                subgroups: options.subgroup_column.as_deref(),
            };
            let found = readings::read_columns(file, &columns, resolution, &options.unit)?;
            let sigma = options.sigma.choose(found.subgroup)?;
            let readings = found.readings.into_iter().map(Reading::counted).collect();
            let mut origin = vec![Fact::new("File", full_path(file))];
            origin.extend(found.title.as_ref().map(|title| Fact::new("Column", title)));
            origin.push(Fact::new("SHA-256 of the file", found.fingerprint));
            (Data::Readings { resolution, readings }, found.title, origin, sigma)
        }
        (_, Some(Summary { n, mean, sd }), _) => {
            let sigma = options.sigma.choose(None)?;
            if matches!(sigma, Sigma::Total(_)) {
                return Err(AssessError::TotalOfSummary.into());
            }
            let origin =
                vec![Fact::new("Summary", "number, mean and standard deviation as given; no readings seen")];
            (Data::Summary { n, mean, sd }, None, origin, sigma)
        }
        // clap asks for a file with its resolution, or a summary.
        _ => return Err(AssessError::NothingGiven.into()),
    };
    let title = options.title.clone().or_else(|| {
        options
            .file
            .as_ref()
            .and_then(|file| file.file_name())
            .map(|name| name.to_string_lossy().into_owned())
    });
    Ok(Study {
        title: title.unwrap_or_else(|| "Summary".to_owned()),
        part: String::new(),
        characteristic: column.unwrap_or_default(),
        unit: options.unit.clone(),
        specification,
        question: Question {
            index: options.index,
            confidence: options.confidence,
            kind: options.kind(),
            required: options.require,
            sigma,
            method: method(options)?,
        },
        data,
        planned: None,
        origin,
        incidents: Vec::new(),
    })
}

/// The method that was asked for, or the default.
fn method(options: &Assess) -> Result<Method, AssessError> {
    let (index, kind) = (options.index, options.kind());
    let method = options.method.unwrap_or(Method::default_for(index, kind));
    match method.promise(index, kind) {
        Some(_) => Ok(method),
        None if method.promise(index, Kind::TwoSided).is_some() => Err(MethodError::TwoSidedOnly.into()),
        None => Err(MethodError::Unsuited { method, index }.into()),
    }
}

fn full_path(path: &Path) -> String {
    fs::canonicalize(path).as_deref().unwrap_or(path).display().to_string()
}

/// "pooled within subgroups of 5; 40 degrees of freedom".
fn resting(study: &Study, analysis: &Analysis) -> String {
    let Question { index, sigma, .. } = study.question;
    let nu = analysis.nu.map_or_else(|| "no".to_owned(), number::degrees_of_freedom);
    let trade = match index.trade_name(sigma) {
        name if name == index.name() => String::new(),
        name => format!("; the trade also calls {index} with it {name}"),
    };
    format!("{}; {nu} degrees of freedom{trade}", words::sigma_name(sigma))
}

/// The verdict and the numbers in words.
pub(super) fn text(study: &Study, analysis: &Analysis, verdict: &Verdict, report: Option<&Path>) -> String {
    let mut lines = vec![verdict.headline.clone()];
    lines.extend(verdict.more.iter().cloned());
    lines.push(String::new());
    let unit = if study.unit.is_empty() { String::new() } else { format!(" {}", study.unit) };
    let number = |value: Option<f64>| value.map_or_else(|| "none".to_owned(), |value| value.to_string());
    lines.push(format!("  n     {}", analysis.n));
    lines.push(format!("  mean  {}{unit}", number(analysis.mean)));
    if analysis.sd.is_some() || study.question.sigma == Sigma::Overall {
        lines.push(format!("  sd    {}{unit}  (n \u{2212} 1)", number(analysis.sd)));
    }
    if study.question.sigma != Sigma::Overall {
        lines.push(format!("  sigma {}{unit}  ({})", number(analysis.sigma), resting(study, analysis)));
    }
    let none = words::no_interval(study);
    for row in &analysis.rows {
        let interval = row.interval.map_or_else(|| none.to_owned(), |i| words::interval_text(&i));
        let estimate = format!("{:.4}", row.estimate).replace('-', "\u{2212}");
        lines.push(format!("  {:<4}  {estimate}  {interval}", row.index));
    }
    lines.push(String::new());
    if let Ok(asked) = &analysis.asked {
        let method = words::method(study, asked);
        if !method.is_empty() {
            lines.extend([method, String::new()]);
        }
    }
    lines.extend(words::doubts(study, analysis));
    lines.push(String::new());
    lines.push(words::SAFETY.to_owned());
    if let Some(report) = report {
        lines.push(String::new());
        lines.push(format!("The page is in {}", report.display()));
    }
    lines.join("\n")
}
