//! Densities from the literature on adaptive importance sampling, with exact normalising constants and moments.

use super::{Known, check};

/// Five Gaussian modes in the plane (Elvira, Martino, Luengo & Bugallo, Signal Processing 131 (2017) 77-91), far apart.
///
/// Exact: Z = 1; mean (1.6, 1.4); variances (108.84, 132.54): those of the mixture. Every mode holds a fifth.
#[test]
fn five_modes_are_found_and_weighed() {
    // Centre, variances and covariance of every component.
    let modes = [
        ([-10.0, -10.0], [2.0, 0.6, 1.0]),
        ([0.0, 16.0], [2.0, -0.4, 2.0]),
        ([13.0, 8.0], [2.0, 0.8, 2.0]),
        ([-9.0, 7.0], [3.0, 0.0, 0.5]),
        ([14.0, -14.0], [2.0, -0.1, 2.0]),
    ];
    let mut formulas = String::new();
    for (k, ([x, y], [a, b, c])) in modes.iter().enumerate() {
        let det = a * c - b * b;
        formulas.push_str(&format!(
            "m{k} = \"-log(2*pi*sqrt({det})) - ({c}*(x - ({x}))^2 - 2*({b})*(x - ({x}))*(y - ({y})) + {a}*(y - ({y}))^2) / (2*{det})\"\n"
        ));
    }
    let text = format!(
        r#"
title = "Five modes"
[variables]
x = {{ range = [-inf, inf], near = 0.0, spread = 10.0 }}
y = {{ range = [-inf, inf], near = 0.0, spread = 10.0 }}
[formulas]
{formulas}
[target]
aim = "density"
log_density = "logsumexp(m0, m1, m2, m3, m4) - log(5)"
[estimates]
mean_x = "x"
mean_y = "y"
square_x = "(x - 1.6)^2"
square_y = "(y - 1.4)^2"
upper_middle = "if(y > 12, 1, 0)"
"#
    );
    let tuning = check(&Known {
        text: &text,
        budget: 8000,
        seed: 7,
        log_normaliser: Some((0.0, 0.006)),
        estimates: &[
            ("mean_x", 1.6, 0.1),
            ("mean_y", 1.4, 0.1),
            ("square_x", 108.84, 1.0),
            ("square_y", 132.54, 1.5),
            // The modes at 16 and at 8 have the same variance: what one lacks above 12 the other has. The rest is below 1e-12.
            ("upper_middle", 0.2, 0.003),
        ],
        ess_fraction: 0.9,
    });
    assert_eq!(tuning.survey.modes.len(), 5);
}

/// A banana in two dimensions (Martino, Elvira, Luengo & Corander, Statistics and Computing 27 (2017) 599-623).
///
/// Source of the values: quadrature over the second variable, the first in closed form; mpmath.
#[test]
fn a_banana_has_its_integral_and_moments() {
    let text = r#"
title = "Banana"
[variables]
x1 = { range = [-inf, inf], near = 0.0, spread = 3.0 }
x2 = { range = [-inf, inf], near = 0.0, spread = 5.0 }
[target]
aim = "density"
log_density = "-(4 - 10*x1 - x2^2)^2 / 32 - (x1^2 + x2^2) / 24.5"
[estimates]
mean_1 = "x1"
mean_2 = "x2"
square_1 = "(x1 + 0.4844820150)^2"
square_2 = "x2^2"
"#;
    check(&Known {
        text,
        budget: 10_000,
        seed: 8,
        log_normaliser: Some((libm::log(7.997_921_353_6), 0.01)),
        estimates: &[
            ("mean_1", -0.484_482_015, 0.04),
            ("mean_2", 0.0, 0.08),
            ("square_1", 1.381_327_063_3, 0.08),
            ("square_2", 8.908_099_433_9, 0.25),
        ],
        ess_fraction: 0.8,
    });
}
