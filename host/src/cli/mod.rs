//! The command line: every command and option, with examples in `--help`.
//!
//! A value out of range is wrong use (exit code 2).

mod value;

use std::path::PathBuf;

use clap::{Args, Parser, Subcommand};
use donelight_core::capability::Index;
use donelight_core::counts::{Decimal, Resolution};
use donelight_core::interval::{Kind, Method};
use donelight_core::quantity::{Confidence, Millionths, Precision};
use donelight_core::sigma::{Sigma, SigmaError, SubgroupSize};
use donelight_core::stopping::early::Spending;

pub use value::{NormalProcess, Summary};

/// Plan a capability study, load it to a station, pull its log, keep it and report it.
#[derive(Debug, Parser)]
#[command(name = "donelight", version, propagate_version = true, arg_required_else_help = true)]
#[command(after_help = "\
The usual order:
  donelight size precision --index cpk --at 1.5 --within 10%   how many pieces?
  donelight plan new plan.toml                                 write a plan, then edit it
  donelight plan check plan.toml                               is it sound?
  donelight station load plan.toml                             load it to the station
  donelight station pull                                       fetch and keep the readings
  donelight report -o report.html                              the verdict and the pictures

With nothing attached: donelight demo

Exit codes: 0 done, 1 refused or not shown, 2 wrong use.")]
pub struct Cli {
    /// Answer in JSON (errors too), one object a line
    #[arg(long, global = true)]
    pub json: bool,
    /// What to do
    #[command(subcommand)]
    pub command: Command,
}

/// The commands.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// How many pieces does the study need?
    #[command(subcommand, arg_required_else_help = true)]
    Size(Size),
    /// Write or check a sampling plan
    #[command(subcommand, arg_required_else_help = true)]
    Plan(Plan),
    /// Talk to a station on a serial port
    #[command(subcommand, arg_required_else_help = true)]
    Station(Station),
    /// Verify what is kept, back it up, restore it
    #[command(subcommand, arg_required_else_help = true)]
    Ledger(Ledger),
    /// A station without hardware: the station's own code, its journal in a folder
    Virtual(Virtual),
    /// Capability of readings, or of a summary, that came from elsewhere
    Assess(Assess),
    /// The page on a study that is kept in the ledger
    Report(Report),
    /// The whole job with nothing attached, in under a minute
    Demo(Demo),
}

/// `donelight size …`
#[derive(Debug, Subcommand)]
pub enum Size {
    /// The smallest n whose interval is as narrow as wanted
    #[command(after_help = "\
Examples:
  donelight size precision --index cpk --at 1.5 --within 10%
  donelight size precision --index cpk --at 1.33 --within 0.1 --confidence 90% --kind lower
  donelight size precision --index cpk --at 1.5 --within 10% --subgroups 5
  donelight size precision --index cpu --at 1.5 --within 10% --method noncentral-t")]
    Precision(SizePrecision),
    /// The smallest n that tells a claimed index from another one
    #[command(after_help = "\
Examples:
  donelight size power --index cpk --claim 1.5 --against 1.3
  donelight size power --index cpk --claim 1.33 --against 1.67 --alpha 10% --power 90%
  donelight size power --index cpk --claim 1.5 --against 1.3 --method exact
  donelight size power --index cpk --claim 1.5 --against 1.3 --early

With --early the claim is looked at after several numbers of pieces, and the study stops as soon as one of these looks
decides; both promises hold for the whole. Cpk is sized for two limits and the worst place between them; for a
specification with one limit, take cpl or cpu. donelight plan new --early writes a plan that does this.")]
    Power(SizePower),
}

/// Which sigma the index takes.
#[derive(Debug, Args)]
pub struct SigmaChoice {
    /// Which sigma: of all readings (the trade then writes Pp, Ppk for Cp, Cpk), within subgroups, of neighbours, or the
    /// total of within and between subgroups (Ppk too) [default: overall; with subgroups: pooled]
    #[arg(long, value_name = "SIGMA", value_parser = value::sigma(), ignore_case = true)]
    pub sigma: Option<String>,
    /// Pieces in a subgroup, 2 to 25: so many readings that follow each other
    #[arg(long, value_name = "PIECES")]
    pub subgroups: Option<SubgroupSize>,
}

impl SigmaChoice {
    /// The choice; `found` is a size of subgroups that the data show.
    ///
    /// # Errors
    /// Word and size do not go together.
    pub fn choose(&self, found: Option<SubgroupSize>) -> Result<Sigma, SigmaError> {
        Sigma::new(self.sigma.as_deref(), self.subgroups.or(found))
    }
}

/// `donelight size precision …`
#[derive(Debug, Args)]
pub struct SizePrecision {
    /// The index
    #[arg(long, value_parser = value::index(), ignore_case = true, default_value = "cpk")]
    pub index: Index,
    /// The index assumed, such as 1.5
    #[arg(long, value_name = "INDEX", value_parser = value::index_value)]
    pub at: Millionths,
    /// How far the interval may reach from the estimate: 10% of it, or 0.15 of index
    #[arg(long, value_name = "WIDTH", value_parser = value::precision)]
    pub within: Precision,
    /// The interval's confidence: 95% or 0.95
    #[arg(long, value_name = "LEVEL", value_parser = value::confidence, default_value = "95%")]
    pub confidence: Confidence,
    /// Two limits, or only a lower or an upper one
    #[arg(long, value_parser = value::kind(), ignore_case = true, default_value = "two-sided")]
    pub kind: Kind,
    /// How the interval is computed [default: chi-square for cp and cpm, noncentral-t for cpl and cpu; of cpk bissell, noncentral-t for a lower
    /// bound, exact for an upper one]
    #[arg(long, value_parser = value::method(), ignore_case = true)]
    pub method: Option<Method>,
    /// With --method boyles: the assumed distance of the mean from the target, in standard deviations
    #[arg(long, value_name = "SIGMAS", value_parser = value::offset, default_value = "0", hide_default_value = true)]
    pub offset: f64,
    /// Which sigma
    #[command(flatten)]
    pub sigma: SigmaChoice,
}

/// `donelight size power …`
#[derive(Debug, Args)]
pub struct SizePower {
    /// The index
    #[arg(long, value_parser = value::index(), ignore_case = true, default_value = "cpk")]
    pub index: Index,
    /// The index claimed: what is rejected with a risk of alpha although it is true
    #[arg(long, value_name = "INDEX", value_parser = value::index_value)]
    pub claim: Millionths,
    /// The other index: what shall be noticed with the wanted power
    #[arg(long, value_name = "INDEX", value_parser = value::index_value)]
    pub against: Millionths,
    /// The risk of rejecting a true claim: 5% or 0.05
    #[arg(long, value_name = "LEVEL", value_parser = value::alpha, default_value = "5%")]
    pub alpha: Millionths,
    /// The chance of noticing the other index: 95% or 0.95
    #[arg(long, value_name = "LEVEL", value_parser = value::confidence, default_value = "95%")]
    pub power: Confidence,
    /// How the test is computed [default: chi-square for cp and cpm, noncentral-t for cpl and cpu, bissell for cpk; exact
    /// holds wherever the mean lies]
    #[arg(long, value_parser = value::method(), ignore_case = true, conflicts_with = "early")]
    pub method: Option<Method>,
    /// Which sigma
    #[command(flatten)]
    pub sigma: SigmaChoice,
    /// Decide early, at looks that are named beforehand; sigma is the overall one
    #[arg(long, conflicts_with_all = ["sigma", "subgroups"])]
    pub early: bool,
    /// How the looks are laid out
    #[command(flatten)]
    pub layout: Layout,
}

/// How the looks of an early decision are laid out.
#[derive(Clone, Copy, Debug, Args)]
pub struct Layout {
    /// With --early: so many equally spaced looks, 2 to 12
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u8).range(2..=12), default_value_t = 8, requires = "early")]
    pub looks: u8,
    /// With --early: how the risks are spent; pocock stops earlier on average, obrien-fleming has an earlier last look
    #[arg(long, value_parser = value::spending(), ignore_case = true, default_value = "pocock", requires = "early")]
    pub spending: Spending,
}

/// `donelight plan …`
#[derive(Debug, Subcommand)]
pub enum Plan {
    /// Write a complete, valid, commented plan to start from
    #[command(after_help = "\
Examples:
  donelight plan new plan.toml
  donelight plan new plan.toml --early --claim 1.5 --against 1.3")]
    New(NewPlan),
    /// Say all that is wrong with a plan, or what it asks for and what it gives, by simulation
    #[command(after_help = "\
Examples:
  donelight plan check plan.toml
  donelight plan check plan.toml --studies 1000000 --json")]
    Check {
        /// The plan
        file: PathBuf,
        /// Simulated studies of each process [default: as many as two seconds allow, up to 10000]
        #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(1..=10_000_000))]
        studies: Option<u32>,
        /// Where the random numbers begin: the same seed gives the same figures
        #[arg(long, value_name = "N", default_value_t = 1)]
        seed: u64,
    },
}

/// `donelight plan new …`
#[derive(Debug, Args)]
pub struct NewPlan {
    /// The file to write
    pub file: PathBuf,
    /// Replace the file if there is one
    #[arg(long)]
    pub force: bool,
    /// A plan that decides a claim about Cpk early, between two limits
    #[arg(long, requires_all = ["claim", "against"])]
    pub early: bool,
    /// With --early: the index claimed, rejected with a risk of alpha although it is true
    #[arg(long, value_name = "INDEX", value_parser = value::index_value, requires = "early")]
    pub claim: Option<Millionths>,
    /// With --early: the other index, noticed with the wanted power
    #[arg(long, value_name = "INDEX", value_parser = value::index_value, requires = "early")]
    pub against: Option<Millionths>,
    /// With --early: the risk of rejecting a true claim
    #[arg(long, value_name = "LEVEL", value_parser = value::alpha, default_value = "5%", requires = "early")]
    pub alpha: Millionths,
    /// With --early: the chance of noticing the other index
    #[arg(long, value_name = "LEVEL", value_parser = value::confidence, default_value = "95%", requires = "early")]
    pub power: Confidence,
    /// How the looks are laid out
    #[command(flatten)]
    pub layout: Layout,
}

/// Which station.
#[derive(Debug, Args)]
pub struct Port {
    /// The station's serial port; not needed when just one station is attached
    #[arg(long, value_name = "PORT")]
    pub port: Option<String>,
}

/// `donelight station …`
#[derive(Debug, Subcommand)]
pub enum Station {
    /// The stations that are attached
    List,
    /// What a station is doing
    Status {
        /// Which one
        #[command(flatten)]
        port: Port,
    },
    /// Load a plan
    #[command(after_help = "\
Examples:
  donelight station load plan.toml
  donelight station load plan.toml --replace --port /dev/ttyACM0")]
    Load {
        /// The plan
        plan: PathBuf,
        /// Give up a study that is under way; its readings stay in the log
        #[arg(long)]
        replace: bool,
        /// Which one
        #[command(flatten)]
        port: Port,
    },
    /// Fetch the records that the ledger does not have yet, and keep them
    #[command(after_help = "Example:\n  donelight station pull --ledger lot7.sqlite")]
    Pull {
        /// The ledger [default: in the user's data folder]
        #[arg(long, value_name = "FILE")]
        ledger: Option<PathBuf>,
        /// Which one
        #[command(flatten)]
        port: Port,
    },
    /// Set the station's clock to this computer's
    Clock {
        /// Which one
        #[command(flatten)]
        port: Port,
    },
    /// Let the station's lamps blink, to see which one it is
    Blink {
        /// Which one
        #[command(flatten)]
        port: Port,
    },
}

/// `donelight ledger …`
#[derive(Debug, Subcommand)]
pub enum Ledger {
    /// Compute everything anew from the stored bytes, and name the first record of each station that does not fit
    #[command(after_help = "\
Examples:
  donelight ledger verify
  donelight ledger verify --ledger lot7.sqlite --json

Exit code 1 if a record does not fit. The digest of the last record is the one that `donelight report` prints: a ledger
that was changed as a whole, and not only in part, shows by another digest than a report that was printed before.")]
    Verify {
        /// The ledger [default: in the user's data folder]
        #[arg(long, value_name = "FILE")]
        ledger: Option<PathBuf>,
    },
    /// Copy the ledger into one file, whole or not at all; a pull may go on meanwhile
    #[command(after_help = "Example:\n  donelight ledger backup friday.sqlite")]
    Backup {
        /// The file to write
        out: PathBuf,
        /// Replace the file if there is one
        #[arg(long)]
        force: bool,
        /// The ledger [default: in the user's data folder]
        #[arg(long, value_name = "FILE")]
        ledger: Option<PathBuf>,
    },
    /// Make the ledger what a backup is; refused if it has records that the backup lacks
    #[command(after_help = "\
Examples:
  donelight ledger restore friday.sqlite
  donelight ledger restore friday.sqlite --ledger again.sqlite")]
    Restore {
        /// The backup
        backup: PathBuf,
        /// Give up what the ledger has and the backup lacks, or what can no longer be read of it
        #[arg(long)]
        discard: bool,
        /// The ledger [default: in the user's data folder]
        #[arg(long, value_name = "FILE")]
        ledger: Option<PathBuf>,
    },
}

/// `donelight virtual …`
#[derive(Debug, Args)]
#[command(after_help = "\
The first line is the port; any `station` command can use it. Then each event is a line, until Ctrl-C.
Buttons, each a line on standard input: take back, seen

The simulated operator waits for a plan, waits while the station calls for someone to look, and stops when the study
is settled or spent. A simulated piece depends on the seed and on its place in the study only: a station that was
stopped goes on where it was. A file of lines starts at its beginning each time.

Examples:
  donelight virtual --store bench --process normal:2.000,0.012 --seed 7
  donelight virtual --store bench --process normal:2.000,0.012 --stuck-from 40
  donelight virtual --store bench --feed lines.txt --rate 20")]
pub struct Virtual {
    /// The folder of its journal; made if need be
    #[arg(long, value_name = "DIR")]
    pub store: PathBuf,
    /// A simulated process: normal:MEAN,SD in the plan's unit
    #[arg(long, value_name = "normal:MEAN,SD", value_parser = value::normal_process, conflicts_with = "feed", allow_hyphen_values = true)]
    pub process: Option<NormalProcess>,
    /// A file of gauge lines, sent as they are; then the gauge is silent
    #[arg(long, value_name = "FILE")]
    pub feed: Option<PathBuf>,
    /// The start of the simulation's random numbers
    #[arg(long, value_name = "N", default_value_t = 1)]
    pub seed: u64,
    /// Readings a second [default: 10 from a process; from a file as fast as the station takes them]
    #[arg(long, value_name = "PER_SECOND", value_parser = value::rate)]
    pub rate: Option<f64>,
    /// The process's mean moves by so much from one reading to the next
    #[arg(long, value_name = "STEP", value_parser = value::finite, requires = "process", allow_hyphen_values = true)]
    pub drift: Option<f64>,
    /// Every so many readings, one is an outlier, 8 standard deviations off to either side
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(1..), requires = "process")]
    pub outlier_every: Option<u32>,
    /// From this reading of the study on, the gauge repeats itself
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(1..), requires = "process")]
    pub stuck_from: Option<u32>,
    /// Measure on when the study is settled or spent: surplus, outside the study
    #[arg(long)]
    pub keep_measuring: bool,
}

/// `donelight assess …`
#[derive(Debug, Args)]
#[command(group = clap::ArgGroup::new("source").required(true))]
#[command(group = clap::ArgGroup::new("limits").required(true).multiple(true))]
#[command(after_help = "\
Examples:
  donelight assess lids.csv --lsl 1.95 --usl 2.05 --resolution 0.001
  donelight assess lids.csv --column thickness --usl 2.05 --resolution 0.001 --index cpu --require 1.33
  donelight assess lids.csv --lsl 1.95 --usl 2.05 --resolution 0.001 --subgroups 5 --sigma ranges
  donelight assess --summary n=212,mean=2.0013,sd=0.0101 --lsl 1.95 --usl 2.05 --report lids.html")]
pub struct Assess {
    /// Readings: a CSV file, or text with one reading a line
    #[arg(value_name = "FILE.csv", group = "source")]
    pub file: Option<PathBuf>,
    /// Instead of readings: their number, mean and standard deviation (n − 1, or the sigma that --sigma names)
    #[arg(long, value_name = "n=…,mean=…,sd=…", value_parser = value::summary, group = "source")]
    pub summary: Option<Summary>,
    /// The column of the readings, by its title or number [default: the first with numbers]
    #[arg(long, value_name = "NAME|NUMBER", conflicts_with = "summary")]
    pub column: Option<String>,
    /// Which sigma
    #[command(flatten)]
    pub sigma: SigmaChoice,
    /// The column that names each reading's subgroup, by its title or number, instead of --subgroups
    #[arg(long, value_name = "NAME|NUMBER", conflicts_with_all = ["summary", "subgroups"])]
    pub subgroup_column: Option<String>,
    /// The gauge's step, such as 0.001: readings are counted in it, exactly
    #[arg(long, value_name = "STEP", required_unless_present = "summary")]
    pub resolution: Option<Resolution>,
    /// The unit's word
    #[arg(long, value_name = "WORD", default_value = "", hide_default_value = true)]
    pub unit: String,
    /// Lower specification limit
    #[arg(long, value_name = "LIMIT", group = "limits", allow_hyphen_values = true)]
    pub lsl: Option<Decimal>,
    /// Upper specification limit
    #[arg(long, value_name = "LIMIT", group = "limits", allow_hyphen_values = true)]
    pub usl: Option<Decimal>,
    /// Target
    #[arg(long, value_name = "VALUE", allow_hyphen_values = true)]
    pub target: Option<Decimal>,
    /// The index
    #[arg(long, value_parser = value::index(), ignore_case = true, default_value = "cpk")]
    pub index: Index,
    /// The interval's confidence: 95% or 0.95
    #[arg(long, value_name = "LEVEL", value_parser = value::confidence, default_value = "95%")]
    pub confidence: Confidence,
    /// Two limits, or only a lower or an upper one [default: two-sided; with --require: lower]
    #[arg(long, value_parser = value::kind(), ignore_case = true)]
    pub kind: Option<Kind>,
    /// How the interval is computed [default: chi-square for cp and cpm, noncentral-t for cpl and cpu; of cpk balanced, noncentral-t for a lower
    /// bound, exact for an upper one]
    #[arg(long, value_parser = value::method(), ignore_case = true)]
    pub method: Option<Method>,
    /// The index to be shown: exit code 1 unless the lower limit reaches it
    #[arg(long, value_name = "INDEX", value_parser = value::index_value)]
    pub require: Option<Millionths>,
    /// Write the page, with pictures
    #[arg(long, value_name = "FILE.html")]
    pub report: Option<PathBuf>,
    /// The page's title [default: the file's name]
    #[arg(long)]
    pub title: Option<String>,
}

impl Assess {
    /// The kind of interval: what is claimed to be at least so much is asked for its lower limit.
    #[must_use]
    pub fn kind(&self) -> Kind {
        let claimed = if self.require.is_some() { Kind::Lower } else { Kind::TwoSided };
        self.kind.unwrap_or(claimed)
    }
}

/// `donelight report …`
#[derive(Debug, Args)]
#[command(after_help = "\
Examples:
  donelight report -o report.html
  donelight report \"Wick tubes, lot 7\" --ledger lot7.sqlite -o lot7.html --csv lot7.csv")]
pub struct Report {
    /// The study's name or number [default: the newest]
    pub study: Option<String>,
    /// The ledger [default: in the user's data folder]
    #[arg(long, value_name = "FILE")]
    pub ledger: Option<PathBuf>,
    /// Write the page
    #[arg(short, long, value_name = "FILE.html")]
    pub output: Option<PathBuf>,
    /// Write the readings
    #[arg(long, value_name = "FILE")]
    pub csv: Option<PathBuf>,
    /// The index to be shown: exit code 1 unless the study is finished and the lower limit reaches it
    #[arg(long, value_name = "INDEX", value_parser = value::index_value)]
    pub require: Option<Millionths>,
}

/// `donelight demo …`
#[derive(Debug, Args)]
#[command(after_help = "Example:\n  donelight demo --out demo")]
pub struct Demo {
    /// Where plan.toml, ledger.sqlite and report.html go [default: a new folder donelight-demo]
    #[arg(long, value_name = "DIR")]
    pub out: Option<PathBuf>,
}
