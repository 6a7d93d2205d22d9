//! Error spending: how much of a risk may be used up by the time that a part of the pieces is measured. Lan & DeMets
//! (1983), Discrete sequential boundaries for clinical trials, Biometrika 70:659–663; from memory.

use donelight_core::special::normal;
use donelight_core::stopping::early::Spending;

/// The part of `risk` that may be spent when `part` of the most pieces is measured: 0 at 0, all of it at 1.
///
/// O'Brien and Fleming's kind spends 2 − 2Φ(z(risk/2)/√part), next to nothing at first; Pocock's spends
/// risk ln(1 + (e − 1) part), nearly in proportion.
pub(super) fn spent(spending: Spending, risk: f64, part: f64) -> f64 {
    if part <= 0.0 {
        return 0.0;
    }
    if part >= 1.0 {
        return risk;
    }
    match spending {
        Spending::ObrienFleming => 2.0 * normal::upper_tail(normal::upper_quantile(0.5 * risk) / part.sqrt()),
        Spending::Pocock => risk * (part * (std::f64::consts::E - 1.0)).ln_1p(),
    }
}
