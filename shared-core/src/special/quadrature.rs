//! Gauss and Legendre's rule of 48 points, for integrands whose smoothness ends at an end point.

/// The positive nodes on (−1, 1) with their weights; computed at 50 digits as the roots of the Legendre polynomial of
/// degree 48.
const NODES: [(f64, f64); 24] = [
    (0.03238017096286936, 0.06473769681268392),
    (0.0970046992094627, 0.06446616443595009),
    (0.1612223560688917, 0.06392423858464819),
    (0.22476379039468905, 0.06311419228625402),
    (0.28736248735545555, 0.062039423159892665),
    (0.34875588629216075, 0.06070443916589388),
    (0.4086864819907167, 0.059114839698395635),
    (0.4669029047509584, 0.057277292100403214),
    (0.523160974722233, 0.055199503699984165),
    (0.5772247260839727, 0.05289018948519367),
    (0.6288673967765136, 0.05035903555385447),
    (0.6778723796326639, 0.04761665849249048),
    (0.7240341309238146, 0.04467456085669428),
    (0.7671590325157404, 0.04154508294346475),
    (0.8070662040294426, 0.03824135106583071),
    (0.8435882616243935, 0.03477722256477044),
    (0.8765720202742479, 0.03116722783279809),
    (0.9058791367155696, 0.027426509708356948),
    (0.9313866907065543, 0.02357076083932438),
    (0.9529877031604309, 0.01961616045735553),
    (0.9705915925462473, 0.015579315722943849),
    (0.9841245837228269, 0.01147723457923454),
    (0.9935301722663508, 0.0073275539012762625),
    (0.9987710072524261, 0.0031533460523058385),
];

/// Visits the nodes of a rule over `low` to `high`, cut into `panels` of equal width: `visit(x, weight)`.
pub(crate) fn visit(low: f64, high: f64, panels: u32, mut visit: impl FnMut(f64, f64)) {
    let half = 0.5 * (high - low) / f64::from(panels);
    for panel in 0..panels {
        let centre = low + half * f64::from(2 * panel + 1);
        for (node, weight) in NODES {
            visit(centre - half * node, half * weight);
            visit(centre + half * node, half * weight);
        }
    }
}

/// The integral of an even function from 0 to `end`, by the rule over −`end` to `end`, of which it is half.
pub(crate) fn even(end: f64, function: impl Fn(f64) -> f64) -> f64 {
    end * NODES.iter().map(|(node, weight)| weight * function(end * node)).sum::<f64>()
}
