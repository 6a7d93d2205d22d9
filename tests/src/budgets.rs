//! The budgets that the benches are held to: `budgets.toml` beside this package's manifest.

use std::process::ExitCode;

const BUDGETS: &str = include_str!("../budgets.toml");

/// The budget of this name, such as `host.records_per_second_min`.
///
/// # Panics
/// If `budgets.toml` is no TOML or has no such number: then a bench would be held to nothing.
#[must_use]
pub fn of(name: &str) -> f64 {
    let budgets: toml::Table = BUDGETS.parse().expect("budgets.toml is TOML");
    let mut value = toml::Value::Table(budgets);
    for part in name.split('.') {
        value = value.get(part).unwrap_or_else(|| panic!("budgets.toml has no {name}")).clone();
    }
    #[allow(clippy::cast_precision_loss, reason = "budgets are far below 2^53")]
    value
        .as_float()
        .or_else(|| value.as_integer().map(|whole| whole as f64))
        .unwrap_or_else(|| panic!("{name} in budgets.toml is no number"))
}

/// Prints the figure beside its budget; a failure if it is below.
#[must_use]
pub fn at_least(name: &str, figure: f64) -> ExitCode {
    verdict(name, figure, figure >= of(name), "at least")
}

/// Prints the figure beside its budget; a failure if it is above.
#[must_use]
pub fn at_most(name: &str, figure: f64) -> ExitCode {
    verdict(name, figure, figure <= of(name), "at most")
}

fn verdict(name: &str, figure: f64, within: bool, sense: &str) -> ExitCode {
    let word = if within { "within" } else { "OUTSIDE" };
    println!("{name}: {figure:.0}, budget {sense} {:.0}: {word}", of(name));
    if within { ExitCode::SUCCESS } else { ExitCode::FAILURE }
}
