//! How far each number can be trusted: the errors of special functions, of confidence limits and of what sizes rest on,
//! kept in `ACCURACY.md` beside the crate. The test fails when an entry worsens.
//! `DONELIGHT_WRITE_ACCURACY=1 cargo test -p donelight-core --test accuracy` writes the tables anew.

mod limits;
mod sizes;
mod special;

use std::fmt::Write;

const HEAD: &str = "# Accuracy\n\n\
    Errors against values computed independently of this code. Made by `tests/accuracy`, which fails when an entry worsens.\n\
    Two digits, rounded up; a 0 is none that a double can show.\n";

/// A part of the file.
struct Section {
    title: &'static str,
    about: &'static str,
    head: &'static str,
    points: Vec<Point>,
    /// The error that its worst and median columns tell.
    error: fn(&Point) -> f64,
}

fn sections() -> [Section; 3] {
    [
        Section {
            title: "Special functions",
            about: "Relative errors against values of mpmath at 52 digits (`tests/reference/special.csv`, `normal.csv`) and 40 \
                digits\n(`special_wide.csv`). Of a distribution function, the smaller tail counts; the last column is the \
                largest absolute\nerror of either tail. `a` is ν, `b` the noncentrality δ or λ. libm's own functions are listed \
                because all rests on them.",
            head: "| function | points | a from, to | largest b | worst | where (a b x) | median | absolute |\n\
                |---|---:|---|---:|---:|---|---:|---:|",
            points: special::points(),
            error: |point| point.relative,
        },
        Section {
            title: "Confidence limits",
            about: "Relative errors of both ends against `tests/reference/intervals.csv` and `intervals_bissell.csv`, which \
                print 15 digits:\nup to 5·10^-15 of an error may be theirs. At confidences of 90, 95 and 99 %, two-sided and \
                one-sided.",
            head: "| index and method | limits | n from, to | | worst | where (n, estimate, confidence, kind) | median | |\n\
                |---|---:|---|---|---:|---|---:|---|",
            points: limits::points(),
            error: |point| point.relative,
        },
        Section {
            title: "What sizes rest on",
            about: "Absolute errors of the relative half-width and of the power, at the smallest n and at one piece fewer, \
                against\n`tests/reference/sizes.csv`, which prints nine decimals: up to 5·10^-10 are its rounding. The closest \
                call between two n\nis 2·10^-8 wide, and every n is met.",
            head: "| what | values | n from, to | | worst | where (n, kind or side, level, index) | median | |\n\
                |---|---:|---|---|---:|---|---:|---|",
            points: sizes::points(),
            error: |point| point.absolute,
        },
    ]
}

/// One value compared.
struct Point {
    function: String,
    /// ν, or n.
    a: Option<f64>,
    /// The noncentrality.
    b: Option<f64>,
    place: String,
    relative: f64,
    absolute: f64,
}

fn relative_error(computed: f64, exact: f64) -> f64 {
    if exact == 0.0 { computed.abs() } else { ((computed - exact) / exact).abs() }
}

/// Two digits, rounded up, so that the written number is a bound.
fn rounded_up(error: f64) -> String {
    if error == 0.0 {
        return "0".to_owned();
    }
    let unit = 10_f64.powi(error.log10().floor() as i32 - 1);
    format!("{:.1e}", (error / unit).ceil() * unit)
}

impl Section {
    /// The functions in the order in which they come up.
    fn functions(&self) -> Vec<&str> {
        let mut functions: Vec<&str> = Vec::new();
        for Point { function, .. } in &self.points {
            if !functions.contains(&function.as_str()) {
                functions.push(function);
            }
        }
        functions
    }

    fn rows(&self) -> Vec<String> {
        self.functions().into_iter().map(|function| self.row(function)).collect()
    }

    /// What is written about a function.
    fn row(&self, function: &str) -> String {
        let mut own: Vec<&Point> = self.points.iter().filter(|point| point.function == function).collect();
        own.sort_by(|left, right| (self.error)(left).total_cmp(&(self.error)(right)));
        let absolute = own.iter().map(|point| point.absolute).fold(0.0, f64::max);
        let worst = own[own.len() - 1];
        let (from, to) = own
            .iter()
            .filter_map(|point| point.a)
            .fold((f64::INFINITY, f64::NEG_INFINITY), |(from, to), a| (from.min(a), to.max(a)));
        let range = if from <= to { format!("{from}, {to}") } else { String::new() };
        let largest = own.iter().filter_map(|point| point.b).reduce(f64::max);
        let mut row = format!("| {function} | {} | {range} | ", own.len());
        write!(row, "{} | ", largest.map_or(String::new(), |b| b.to_string())).unwrap();
        write!(row, "{} | {} | ", rounded_up((self.error)(worst)), worst.place).unwrap();
        let shown = if function.ends_with("cdf") { rounded_up(absolute) } else { String::new() };
        write!(row, "{} | {shown} |", rounded_up((self.error)(own[own.len() / 2]))).unwrap();
        row
    }
}

/// The largest errors that the project allows: relative, absolute.
fn allowed(function: &str, place: &str) -> (f64, f64) {
    match function {
        // Rounding z / √2 alone costs a far normal tail z² half-units.
        "norm_cdf" if place.parse::<f64>().unwrap().abs() > 8.5 => (1e-12, 1e-15),
        "norm_cdf" => (1e-13, 1e-15),
        "norm_ppf" | "erfc" | "lgamma" => (1e-15, f64::INFINITY),
        "nct_cdf" => (1e-11, 1e-14),
        function if function.ends_with("cdf") => (1e-12, 1e-14),
        function if function.ends_with("ppf") || function.ends_with("isf") => (1e-12, f64::INFINITY),
        function if function.starts_with("width") || function.starts_with("power") => {
            (f64::INFINITY, 5.01e-10)
        }
        _ => (1e-11, f64::INFINITY),
    }
}

#[test]
fn every_value_of_the_tables_is_met_to_what_the_project_allows() {
    let sections = sections();
    assert_eq!(sections.each_ref().map(|section| section.points.len()), [934 + 230, 6804, 2 * 2535]);
    for Point { function, place, relative, absolute, .. } in
        sections.iter().flat_map(|section| &section.points)
    {
        let (most_relative, most_absolute) = allowed(function, place);
        assert!(*relative <= most_relative, "{function} {place}: {relative:e}");
        assert!(*absolute <= most_absolute, "{function} {place}: {absolute:e}");
    }
}

#[test]
fn no_entry_of_the_accuracy_tables_worsens() {
    let sections = sections();
    if std::env::var_os("DONELIGHT_WRITE_ACCURACY").is_some() {
        let mut text = HEAD.to_owned();
        for section in &sections {
            let Section { title, about, head, .. } = section;
            write!(text, "\n## {title}\n\n{about}\n\n{head}\n{}\n", section.rows().join("\n")).unwrap();
        }
        std::fs::write(concat!(env!("CARGO_MANIFEST_DIR"), "/ACCURACY.md"), text).unwrap();
        return;
    }
    let kept = include_str!("../../ACCURACY.md");
    for row in sections.iter().flat_map(Section::rows) {
        let cells: Vec<&str> = row.split('|').map(str::trim).collect();
        let before = kept.lines().find(|line| line.starts_with(&format!("| {} |", cells[1])));
        let before: Vec<&str> = before.expect("every function has a row").split('|').map(str::trim).collect();
        assert_eq!(cells[2], before[2], "{}: as many points as before", cells[1]);
        for (name, column) in [("worst", 5), ("median", 7), ("absolute", 8)] {
            let number = |cells: &[&str]| cells[column].parse::<f64>().unwrap_or(0.0);
            assert!(number(&cells) <= number(&before), "{} {name} worsens: {row}", cells[1]);
        }
    }
}
