//! Values of the functions against references.

use evenpoise::expression::{Program, Scope, Wanted};
use evenpoise::numeric::Points;

use crate::world::{program, scope};

/// The value of `text`, in which no name is used, and that with its numbers as variables: the first is folded when
/// the formula is read, the second evaluated with the point.
fn both(text: &str) -> (f64, f64) {
    let folded = Scope::new().compile(&[("f", text, Wanted::Number)]).unwrap().values(&Points::from_rows(0, &[]));
    assert!(folded[0].is_empty());
    let mut scope = Scope::new();
    let start = text.find('(').unwrap();
    let numbers: Vec<f64> = text[start + 1..text.len() - 1].split(", ").map(|number| number.parse().unwrap()).collect();
    let names: Vec<String> = (0..numbers.len()).map(|k| scope_name(&mut scope, k)).collect();
    let varied = format!("{}({})", &text[..start], names.join(", "));
    let program = scope.compile(&[("fixed", text, Wanted::Number), ("varied", &varied, Wanted::Number)]).unwrap();
    let values = program.values(&Points::from_rows(numbers.len(), &numbers));
    (values[0].get(0, 0), values[1].get(0, 0))
}

fn scope_name(scope: &mut Scope, k: usize) -> String {
    let name = format!("a{k}");
    scope.variable(&name);
    name
}

/// Relative error within `tolerance` roundings of `want`, or absolute within as many of one when the value is a
/// difference of terms of that size.
fn check(text: &str, want: f64, tolerance: f64) {
    let (folded, varied) = both(text);
    assert_eq!(folded.to_bits(), varied.to_bits(), "{text}: {folded} as a constant, {varied} as a value");
    let error = (folded - want).abs();
    assert!(error <= tolerance * f64::EPSILON * want.abs(), "{text}: {folded:e}, wanted {want:e}, off {error:e}");
}

/// Source: mpmath 1.3.0 at 50 digits, from the textbook formulas (`loggamma`, `beta`, `binomial`) of the arguments
/// as decimals. 60 roundings: sums of up to six terms some ten times as large as the result.
#[test]
fn log_densities_match_mpmath() {
    for (text, want) in [
        ("log_density_normal(0.3, 1.5, 0.2)", -17.309_500_620_770_572_367),
        ("log_density_normal(-1e3, 2, 1e-3)", -502_001_999_994.011_183_25),
        ("log_density_student_t(2.5, 3, 1, 0.5)", -3.080_330_391_303_345_638_7),
        ("log_density_student_t(1.25, 1e8, 0.25, 2)", -1.737_085_717_358_368_049_9),
        ("log_density_student_t(-40, 0.5, 1, 2)", -7.055_069_616_694_600_350_9),
        ("log_density_lognormal(2.5, 0.5, 0.75)", -1.701_589_835_688_664_358_6),
        ("log_density_lognormal(1e-5, 0, 2)", -6.667_591_844_039_383_414_1),
        ("log_density_gamma(2.5, 0.7, 3)", -7.266_725_864_026_236_25),
        ("log_density_gamma(1e-3, 4, 0.5)", -25.288_114_028_414_247_395),
        ("log_density_gamma(60, 50, 1)", -3.942_860_397_461_952_452_2),
        ("log_density_beta(0.25, 2, 3.5)", 0.651_340_823_022_299_131_63),
        ("log_density_beta(0.999, 0.5, 0.5)", 2.309_648_003_808_460_118_6),
        ("log_density_exponential(2, 0.25)", -1.886_294_361_119_890_618_8),
        ("log_density_cauchy(5, 1, 0.5)", -4.625_969_975_185_091_975_4),
        ("log_density_cauchy(1e6, 0, 1)", -28.775_751_001_778_948_382),
        ("log_mass_poisson(3, 2.5)", -1.542_887_273_605_589_805_3),
        ("log_mass_poisson(200, 150)", -11.104_928_373_154_323_493),
        ("log_mass_poisson(0, 1e-3)", -0.001),
        ("log_mass_binomial(3, 10, 0.2)", -1.602_826_853_719_723_419_9),
        ("log_mass_binomial(50, 50, 0.99)", -0.502_516_792_675_072_059_18),
        ("log_mass_bernoulli(1, 0.3)", -1.203_972_804_325_935_992_6),
        ("log_mass_bernoulli(0, 1e-9)", -1.000_000_000_500_000_000_3e-9),
        ("log_mass_bernoulli_odds(1, -40)", -40.000_000_000_000_000_004),
        ("log_mass_bernoulli_odds(0, -40)", -4.248_354_255_291_588_986_3e-18),
        ("log_mass_bernoulli_odds(1, 2.5)", -0.078_889_734_292_549_623_344),
        ("log_mass_negative_binomial(4, 2.5, 0.8)", -2.513_531_876_807_230_163_4),
        ("log_mass_negative_binomial(4, 2.5, 1e-9)", -2.012_890_903_726_325_358_6),
        ("log_mass_negative_binomial(300, 200, 0.05)", -6.898_936_423_635_555_045_1),
        ("log_mass_negative_binomial(0, 3, 2)", -0.972_955_074_527_656_652_55),
    ] {
        // ln 50! = 148 and ln 200! = 863 are parts of a few of them.
        let large_parts = text.contains("50") || text.contains("00");
        check(text, want, if large_parts { 400.0 } else { 60.0 });
    }
}

/// Source: mpmath 1.3.0 at 50 digits, its functions of these names (`ncdf` for `normal_cdf`).
#[test]
fn functions_match_mpmath() {
    for (text, want) in [
        ("erf(0.3)", 0.328_626_759_459_127_427_64),
        ("erfc(6)", 2.151_973_671_249_891_311_7e-17),
        ("normal_cdf(-8)", 6.220_960_574_271_784_123_5e-16),
        ("normal_cdf(1.2)", 0.884_930_329_778_291_731_98),
        ("normal_quantile(0.975)", 1.959_963_984_540_054_235_5),
        ("lgamma(0.3)", 1.095_797_994_818_075_521_7),
        ("lgamma(-2.5)", -0.056_243_716_497_674_050_673),
        ("lgamma(50)", 144.565_743_946_344_886_01),
        ("log1p(1e-9)", 9.999_999_995_000_000_003_3e-10),
        ("expm1(1e-9)", 1.000_000_000_500_000_000_2e-9),
        ("tanh(0.4)", 0.379_948_962_255_224_885_27),
        ("asin(0.4)", 0.411_516_846_067_488_019_38),
        ("acos(0.4)", 1.159_279_480_727_408_599_8),
        ("atan(3)", 1.249_045_772_398_254_425_8),
        ("tan(1.5)", 14.101_419_947_171_719_388),
        ("sinh(1.5)", 2.129_279_455_094_817_496_8),
        ("cosh(1.5)", 2.352_409_615_243_247_325_8),
        ("log10(0.02)", -1.698_970_004_336_018_804_8),
        ("logit(0.1)", -2.197_224_577_336_219_382_8),
        ("log_normal_below(-30)", -454.321_243_956_343_197_11),
        ("atan2(1, -2)", 2.677_945_044_588_987_122_2),
        ("hypot(2, 3)", 3.605_551_275_463_989_293_1),
    ] {
        // The argument's own rounding is magnified most at normal_cdf(-8): 64 times.
        check(text, want, if text.starts_with("normal_cdf(-8") { 100.0 } else { 20.0 });
    }
}

/// Every log density with data in front and parameters that vary; `k` stands for counts.
const OF_COLUMNS: [&str; 13] = [
    "log_density_normal(level, x, y)",
    "log_density_normal(level, x*flow, y*flow)",
    "log_density_student_t(level, y, x, 1 + effect[station]^2)",
    "log_density_lognormal(flow, x*level, y)",
    "log_density_gamma(flow, x, y*flow)",
    "log_density_beta(flow/4, x, y)",
    "log_density_exponential(flow, x*y)",
    "log_density_cauchy(level, effect[station], y)",
    "log_mass_poisson(4*flow, exp(x*level))",
    "log_mass_binomial(4*flow, 12, logistic(x + effect[station]))",
    "log_mass_bernoulli(if(flow > 1, 1, 0), logistic(x*level))",
    "log_mass_bernoulli_odds(if(flow > 1, 1, 0), x*level + y)",
    "log_mass_negative_binomial(4*flow, exp(y*level), x)",
];

const HERE: [f64; 5] = [0.75, 1.25, 0.5, -1.0, 0.25];

/// Sums leave out of the rows what is the same in all of them: that must change nothing but the last digits. The
/// rows themselves are those checked above.
#[test]
fn sums_of_log_densities_are_sums_of_their_rows() {
    for text in OF_COLUMNS {
        let sum = format!("sum({text})");
        let outputs = [("rows", text, Wanted::Column), ("sum", sum.as_str(), Wanted::Number)];
        let program = scope().compile(&outputs).unwrap_or_else(|errors| panic!("{text}: {errors:?}"));
        let values = program.values(&Points::from_rows(5, &HERE));
        let rows = values[0].point(0);
        let (want, size) = rows.iter().fold((0.0, 0.0), |(sum, size), row| (sum + row, size + f64::abs(*row)));
        let got = values[1].get(0, 0);
        // Ten roundings a row of parts as large as the row.
        assert!((got - want).abs() <= 10.0 * f64::EPSILON * size.max(1.0), "{text}: {got}, wanted {want}");
        assert!(want.is_finite() && size > 1.0, "{text}: {rows:?}");
    }
}

/// Central differences of the program's own values in input `i`, extrapolated, and what two steps disagree by.
fn difference(program: &Program, i: usize) -> (f64, f64) {
    let slope = |h: f64| {
        let at = |x: f64| {
            let mut moved = HERE;
            moved[i] = x;
            program.values(&Points::from_rows(5, &moved))[0].get(0, 0)
        };
        (at(HERE[i] + h) - at(HERE[i] - h)) / (2.0 * h)
    };
    let (wide, near) = (slope(2e-3), slope(1e-3));
    ((4.0 * near - wide) / 3.0, (near - wide).abs())
}

/// The gradients of sums of log densities and of single special functions against central differences: what is left
/// after extrapolation is below a thousandth of the correction, and rounding below 1e-12 over the step.
#[test]
fn gradients_of_log_densities_and_special_functions_are_exact() {
    let special = [
        "lgamma(x)*y",
        "lgamma(-x)",
        "erf(x) + y*erfc(y)",
        "normal_cdf(x*y)",
        "normal_quantile(x)",
        "logit(x)*logit(y/4)",
        "log_normal_tail(4*y) + log_normal_tail(5*y) + log_normal_tail(-x)",
        "log_normal_below(-8*x) + log_normal_below(x)",
        "log10(x) + tan(y) + sinh(x) + cosh(y) + asin(x/2)*acos(y/2)",
        "atan2(x, -y) + atan2(-y, x)",
        "x^y + y^x + x^-3 + y^2.5",
        "log_density_student_t(x, 100*y, 0.5, y)",
        "log_mass_negative_binomial(30, 20*y, x/100)",
        "log_mass_negative_binomial(3, 20*y, x)",
        "log_mass_binomial(3, 7, x)*log_density_beta(x, y, 3)",
        "log_density_gamma(y, 3*x, x)",
    ];
    let sums: Vec<String> = OF_COLUMNS.iter().map(|text| format!("sum({text})")).collect();
    for text in special.into_iter().chain(sums.iter().map(String::as_str)) {
        let program = program(text, Wanted::Number);
        let (value, gradient) = program.value_and_gradient(0, &Points::from_rows(5, &HERE));
        for i in 0..5 {
            let (want, correction) = difference(&program, i);
            let got = gradient.get(0, i);
            let bound = 1e-3 * correction + 1e-12 * value[0].abs().max(1.0) / 1e-3;
            assert!((got - want).abs() <= bound, "{text}: derivative {i} is {got}, wanted {want} +- {bound}");
        }
    }
}
