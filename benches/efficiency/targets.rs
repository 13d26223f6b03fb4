//! The density rows: log densities with exact gradients, starts, budgets and exact answers.

use evenpoise::model::Closure;
use evenpoise::numeric::linear::{cholesky, invert_lower};
use evenpoise::numeric::{exp, ln};
use evenpoise::problem::{Aim, Problem, Variable};
use std::f64::consts::PI;
use std::sync::Arc;

/// Value and gradient of one point: the gradient is written where its slice is not empty.
pub type Function = Arc<dyn Fn(&[f64], &mut [f64]) -> f64 + Sync + Send>;

/// A row of the table.
pub struct Row {
    pub name: &'static str,
    pub near: Vec<f64>,
    pub spread: Vec<f64>,
    pub budget: u64,
    pub function: Function,
    pub gradient: bool,
    /// Exact log normalising constant.
    pub log_z: f64,
    /// Exact means and standard deviations, coordinate by coordinate (empty: unknown).
    pub mean: Vec<f64>,
    pub sd: Vec<f64>,
    /// Centres of separate modes, the radius that counts as theirs, and their masses.
    pub modes: Vec<(Vec<f64>, f64, f64)>,
    pub gaussian: bool,
    /// The ESS fraction to reach (median over seeds).
    pub goal: f64,
    /// The median of the prototype that this loop began with.
    pub before: f64,
}

impl Row {
    /// The row as a problem, through the same door as a user's.
    pub fn problem(&self) -> Problem {
        let names: Vec<String> = (1..=self.near.len()).map(|j| format!("x{j}")).collect();
        let all = f64::INFINITY;
        let variables =
            (0..self.near.len()).map(|j| Variable::range(&names[j], -all, all, self.near[j], self.spread[j])).collect();
        let f = Arc::clone(&self.function);
        let mut model = Closure::new(self.near.len(), move |x| f(x, &mut []));
        if self.gradient {
            let f = Arc::clone(&self.function);
            model = model.with_gradient(move |x, g| f(x, g));
        }
        Problem::from_model(self.name, variables, Aim::Density, Box::new(model)).unwrap()
    }
}

/// A mixture of Gaussians (df infinite) or t distributions as a target.
fn mixture(shares: &[f64], means: &[Vec<f64>], scales: &[Vec<f64>], df: f64) -> Function {
    let d = means[0].len();
    let parts: Vec<(f64, Vec<f64>, Vec<f64>)> = shares
        .iter()
        .zip(means)
        .zip(scales)
        .map(|((a, m), s)| {
            let l = cholesky(s, d).unwrap();
            let log_det: f64 = (0..d).map(|i| ln(l[i * d + i])).sum();
            let half = 0.5 * d as f64;
            let c = if df.is_infinite() {
                -half * ln(2.0 * PI)
            } else {
                libm::lgamma(0.5 * df + half) - libm::lgamma(0.5 * df) - half * ln(df * PI)
            };
            (ln(*a) + c - log_det, m.clone(), invert_lower(&l, d))
        })
        .collect();
    Arc::new(move |x, g| {
        let mut terms = Vec::with_capacity(parts.len());
        let mut slopes = Vec::with_capacity(parts.len());
        for (c, m, inverse) in &parts {
            let z: Vec<f64> = (0..d).map(|i| (0..=i).map(|j| inverse[i * d + j] * (x[j] - m[j])).sum()).collect();
            let q: f64 = z.iter().map(|v| v * v).sum();
            let (l, u) = if df.is_infinite() {
                (c - 0.5 * q, 1.0)
            } else {
                (c - 0.5 * (df + d as f64) * ln(1.0 + q / df), (df + d as f64) / (df + q))
            };
            terms.push(l);
            if !g.is_empty() {
                let back: Vec<f64> =
                    (0..d).map(|j| -u * (j..d).map(|i| inverse[i * d + j] * z[i]).sum::<f64>()).collect();
                slopes.push(back);
            }
        }
        let total = evenpoise::numeric::log_sum_exp(&terms);
        if !g.is_empty() {
            g.fill(0.0);
            for (t, s) in terms.iter().zip(&slopes) {
                let r = exp(t - total);
                for j in 0..d {
                    g[j] += r * s[j];
                }
            }
        }
        total
    })
}

fn row(name: &'static str, near: Vec<f64>, spread: Vec<f64>, budget: u64, function: Function) -> Row {
    Row {
        name,
        near,
        spread,
        budget,
        function,
        gradient: true,
        log_z: 0.0,
        mean: vec![],
        sd: vec![],
        modes: vec![],
        gaussian: false,
        goal: f64::NAN,
        before: f64::NAN,
    }
}

fn five(name: &'static str, width: f64, budget: u64) -> Row {
    let means: Vec<Vec<f64>> =
        [[-10.0, -10.0], [0.0, 16.0], [13.0, 8.0], [-9.0, 7.0], [14.0, -14.0]].iter().map(|m| m.to_vec()).collect();
    let scales: Vec<Vec<f64>> = [
        [2.0, 0.6, 0.6, 1.0],
        [2.0, -0.4, -0.4, 2.0],
        [2.0, 0.8, 0.8, 2.0],
        [3.0, 0.0, 0.0, 0.5],
        [2.0, -0.1, -0.1, 2.0],
    ]
    .iter()
    .map(|s| s.to_vec())
    .collect();
    Row {
        mean: vec![1.6, 1.4],
        sd: vec![108.84_f64.sqrt(), 132.54_f64.sqrt()],
        modes: means.iter().map(|m| (m.clone(), 4.0, 0.2)).collect(),
        goal: 0.965,
        before: 0.978,
        ..row(name, vec![0.0; 2], vec![width; 2], budget, mixture(&[0.2; 5], &means, &scales, f64::INFINITY))
    }
}

fn banana(name: &'static str, d: usize, budget: u64, goal: f64, before: f64) -> Row {
    let (b, s2) = (0.03, 100.0);
    let function: Function = Arc::new(move |x, g| {
        let y = x[1] + b * (x[0] * x[0] - s2);
        let rest: f64 = x[2..].iter().map(|v| v * v).sum();
        if !g.is_empty() {
            g[0] = -x[0] / s2 - y * 2.0 * b * x[0];
            g[1] = -y;
            for j in 2..d {
                g[j] = -x[j];
            }
        }
        -0.5 * (x[0] * x[0] / s2 + y * y + rest) - 0.5 * d as f64 * ln(2.0 * PI) - 0.5 * ln(s2)
    });
    let mut spread = vec![2.0; d];
    spread[0] = 200.0_f64.sqrt();
    spread[1] = 50.0_f64.sqrt();
    let mut sd = vec![1.0; d];
    sd[0] = 10.0;
    sd[1] = 19.0_f64.sqrt();
    Row { mean: vec![0.0; d], sd, goal, before, ..row(name, vec![0.0; d], spread, budget, function) }
}

fn banana_2d() -> Row {
    let function: Function = Arc::new(|x, g| {
        let e = 4.0 - 10.0 * x[0] - x[1] * x[1];
        if !g.is_empty() {
            g[0] = e * 10.0 / 16.0 - x[0] / 12.25;
            g[1] = e * 2.0 * x[1] / 16.0 - x[1] / 12.25;
        }
        -e * e / 32.0 - x[0] * x[0] / 24.5 - x[1] * x[1] / 24.5
    });
    Row {
        log_z: ln(7.997_921_353_6),
        mean: vec![-0.484_482_015, 0.0],
        sd: vec![1.381_327_063_3_f64.sqrt(), 8.908_099_433_9_f64.sqrt()],
        goal: 0.95,
        before: 0.94,
        ..row("banana-2", vec![0.0; 2], vec![10.0; 2], 5000, function)
    }
}

fn correlated_t() -> Row {
    let d = 10;
    let mut scale = vec![0.8; d * d];
    for i in 0..d {
        scale[i * d + i] = 1.0;
    }
    let mean: Vec<f64> = (0..d).map(|i| i as f64).collect();
    Row {
        sd: vec![3.0_f64.sqrt(); d],
        goal: 0.97,
        before: 0.967,
        mean: mean.clone(),
        ..row("t-10", vec![0.0; d], vec![10.0; d], 8000, mixture(&[1.0], &[mean], &[scale], 3.0))
    }
}

/// Rotations of neighbouring axes by fixed angles: a full matrix of condition 1e4, stated without a random generator.
fn gauss(gradient: bool) -> Row {
    let d = 50;
    let mut vectors = vec![vec![0.0; d]; d];
    for (i, v) in vectors.iter_mut().enumerate() {
        v[i] = 1.0;
    }
    for sweep in 0..6 {
        for i in 0..d {
            let j = (i + 1 + 7 * sweep) % d;
            let angle = 0.7 + 0.37 * ((i * 13 + sweep * 5) % 11) as f64;
            let (c, s) = (libm::cos(angle), libm::sin(angle));
            for v in &mut vectors {
                let (a, b) = (v[i], v[j]);
                v[i] = c * a - s * b;
                v[j] = s * a + c * b;
            }
        }
    }
    let values: Vec<f64> = (0..d).map(|i| 0.01 * libm::pow(1e4, i as f64 / (d - 1) as f64)).collect();
    let scale = evenpoise::numeric::linear::compose(&vectors, &values);
    let sd = (0..d).map(|i| scale[i * d + i].sqrt()).collect();
    Row {
        mean: vec![2.0; d],
        sd,
        gradient,
        goal: if gradient { 0.96 } else { f64::NAN },
        before: if gradient { 0.962 } else { f64::NAN },
        ..row(
            if gradient { "gauss-50" } else { "gauss-50-plain" },
            vec![0.0; d],
            vec![10.0; d],
            30_000,
            mixture(&[1.0], &[vec![2.0; d]], &[scale], f64::INFINITY),
        )
    }
}

fn two_modes() -> Row {
    let d = 20;
    let scaled = |v: f64| {
        let mut s = vec![0.0; d * d];
        for i in 0..d {
            s[i * d + i] = v;
        }
        s
    };
    let means = vec![vec![-1.5; d], vec![1.5; d]];
    let radius = (2.0 * d as f64).sqrt();
    Row {
        mean: vec![-0.6; d],
        sd: vec![(0.7_f64 * 0.25 + 0.3 * 0.5 + 0.21 * 9.0).sqrt(); d],
        modes: vec![(means[0].clone(), radius, 0.7), (means[1].clone(), radius, 0.3)],
        goal: 0.95,
        before: 0.947,
        ..row(
            "two-20",
            vec![0.0; d],
            vec![3.0; d],
            60_000,
            mixture(&[0.7, 0.3], &means, &[scaled(0.25), scaled(0.5)], f64::INFINITY),
        )
    }
}

/// Coaching data of Rubin (1981), effects written by hand: (mu, log tau, eight effects).
fn coaching(proper: bool) -> Row {
    const Y: [f64; 8] = [28.0, 8.0, -3.0, 7.0, -1.0, 1.0, 18.0, 12.0];
    const S: [f64; 8] = [15.0, 10.0, 16.0, 11.0, 9.0, 11.0, 10.0, 18.0];
    let function: Function = Arc::new(move |x, g| {
        let (mu, lt, theta) = (x[0], x[1], &x[2..]);
        let precision = exp(-2.0 * lt);
        let mut l = -7.0 * lt - 8.0 * ln(2.0 * PI);
        let (mut gm, mut gl) = (0.0, -7.0);
        for j in 0..8 {
            let (a, b) = ((theta[j] - Y[j]) / S[j], theta[j] - mu);
            l -= 0.5 * a * a + ln(S[j]) + 0.5 * b * b * precision;
            gm += b * precision;
            gl += b * b * precision;
            if !g.is_empty() {
                g[2 + j] = -a / S[j] - b * precision;
            }
        }
        if proper {
            let t2 = exp(2.0 * lt) / 25.0;
            l += -mu * mu / 50.0 - 0.5 * ln(2.0 * PI * 25.0) + ln(2.0 / PI / 5.0) - ln(1.0 + t2);
            gm -= mu / 25.0;
            gl -= 2.0 * t2 / (1.0 + t2);
        }
        if !g.is_empty() {
            g[0] = gm;
            g[1] = gl;
        }
        l
    });
    let mut near = vec![8.0; 10];
    near[1] = 2.0;
    let mut spread = vec![12.0; 10];
    spread[0] = 10.0;
    spread[1] = 1.5;
    let base = row(if proper { "coaching-proper" } else { "coaching-flat" }, near, spread, 30_000, function);
    if proper {
        Row {
            log_z: -31.311_347_352_3,
            mean: vec![
                4.396_820_713_8,
                0.802_142_263_9,
                6.211_88,
                4.940_18,
                3.927,
                4.757_1,
                3.615_48,
                4.042_61,
                6.296_72,
                4.854_25,
            ],
            sd: vec![3.317_7, 1.1, 5.5, 4.7, 5.1, 4.7, 4.6, 4.8, 5.0, 5.2],
            goal: 0.8,
            before: 0.72,
            ..base
        }
    } else {
        Row {
            log_z: -25.078_415_109_2,
            mean: vec![
                7.932_375_018_2,
                1.436_383_1,
                11.400_26,
                7.894_55,
                6.130_75,
                7.644_68,
                5.126_42,
                6.138_54,
                10.666_98,
                8.456_82,
            ],
            sd: vec![5.178_4, 1.1, 8.341_42, 6.274_84, 7.765_17, 6.546_26, 6.357_42, 6.710_29, 6.785_59, 7.888_2],
            goal: 0.75,
            before: 0.72,
            ..base
        }
    }
}

fn o_ring() -> Row {
    const T: [f64; 23] = [
        66.0, 70.0, 69.0, 68.0, 67.0, 72.0, 73.0, 70.0, 57.0, 63.0, 70.0, 78.0, 67.0, 53.0, 67.0, 75.0, 70.0, 81.0,
        76.0, 79.0, 75.0, 76.0, 58.0,
    ];
    const D: [f64; 23] = [
        0.0, 1.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 1.0, 1.0, 1.0, 0.0, 0.0, 1.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 1.0, 0.0,
        1.0,
    ];
    let function: Function = Arc::new(|x, g| {
        let mut l = -0.5 * x[0] * x[0] / 100.0 - 0.5 * x[1] * x[1] / 6.25 - ln(2.0 * PI * 25.0);
        let (mut a, mut c) = (-x[0] / 100.0, -x[1] / 6.25);
        for (t, d) in T.iter().zip(&D) {
            let z = (t - 69.565_217_391_3) / 7.057_079_533_5;
            let e = x[0] + x[1] * z;
            l += d * e - evenpoise::numeric::log_add_exp(0.0, e);
            let r = d - 1.0 / (1.0 + exp(-e));
            a += r;
            c += r * z;
        }
        if !g.is_empty() {
            g[0] = a;
            g[1] = c;
        }
        l
    });
    Row {
        log_z: -14.496_805_971_463,
        mean: vec![-1.190_044_762_5, -1.804_307_332_7],
        sd: vec![0.604_121_475, 0.770_793_175_7],
        goal: 0.95,
        before: 0.969,
        ..row("o-ring", vec![0.0; 2], vec![10.0, 2.5], 5000, function)
    }
}

/// NIST StRD Norris, sigma integrated out: `-18 log RSS`, exactly a t with 34 degrees of freedom.
fn norris() -> Row {
    let b = [-0.262_323_073_774_029, 1.002_116_818_020_45];
    let se = [0.232_818_234_301_152, 0.429_796_848_199_937e-3];
    let r = -0.773_828_1;
    let rss = 26.617_398_529_422_4;
    let s2: f64 = 0.884_796_396_144_373 * 0.884_796_396_144_373;
    let det = se[0] * se[0] * se[1] * se[1] * (1.0 - r * r);
    let a = [se[1] * se[1] / det * s2, -r * se[0] * se[1] / det * s2, se[0] * se[0] / det * s2];
    let function: Function = Arc::new(move |x, g| {
        let y = [x[0] - b[0], x[1] - b[1]];
        let q = a[0] * y[0] * y[0] + 2.0 * a[1] * y[0] * y[1] + a[2] * y[1] * y[1];
        if !g.is_empty() {
            let f = -36.0 / (rss + q);
            g[0] = f * (a[0] * y[0] + a[1] * y[1]);
            g[1] = f * (a[1] * y[0] + a[2] * y[1]);
        }
        -18.0 * ln(1.0 + q / rss)
    });
    let log_z = -(libm::lgamma(18.0) - libm::lgamma(17.0) - ln(34.0 * PI) - 0.5 * ln(det));
    Row {
        log_z,
        mean: b.to_vec(),
        sd: se.iter().map(|s| s * (34.0_f64 / 32.0).sqrt()).collect(),
        goal: 0.95,
        before: 0.975,
        ..row("norris", vec![0.0, 1.0], vec![5.0, 0.05], 5000, function)
    }
}

const MISRA_X: [f64; 14] =
    [77.6, 114.9, 141.1, 190.8, 239.9, 289.0, 332.8, 378.4, 434.8, 477.3, 536.8, 593.1, 689.1, 760.0];
const MISRA_Y: [f64; 14] =
    [10.07, 14.73, 17.94, 23.93, 29.61, 35.18, 40.02, 44.82, 50.76, 55.05, 61.01, 66.40, 75.47, 81.78];

/// NIST StRD Misra1a, sigma integrated out: `-7 log RSS`.
fn misra() -> Row {
    let function: Function = Arc::new(|x, g| {
        let (mut rss, mut ga, mut gb) = (0.0, 0.0, 0.0);
        for (t, y) in MISRA_X.iter().zip(&MISRA_Y) {
            let e = exp(-x[1] * t);
            let r = y - x[0] * (1.0 - e);
            rss += r * r;
            ga -= 2.0 * r * (1.0 - e);
            gb -= 2.0 * r * x[0] * t * e;
        }
        if !g.is_empty() {
            g[0] = -7.0 * ga / rss;
            g[1] = -7.0 * gb / rss;
        }
        -7.0 * ln(rss / 0.124_551_388_94)
    });
    Row {
        // NumPy 2.4.6: log-sum-exp over b1 (8,001 points, 179 to 339) and over b2 across the ridge (4,001 points, 60 widths each way).
        log_z: -12.003_500_750_3,
        mean: vec![239.017_207_173_4, 5.500_708_117e-4],
        sd: vec![2.974_35, 7.972_99e-6],
        goal: 0.95,
        before: 0.955,
        ..row("misra1a", vec![250.0, 5e-4], vec![50.0, 1e-4], 5000, function)
    }
}

/// The hand-written funnel (Neal 2003): a trap at this budget.
fn funnel() -> Row {
    let d = 10;
    let function: Function = Arc::new(move |x, g| {
        let v = x[0];
        let e = exp(-v);
        let s: f64 = x[1..].iter().map(|y| y * y).sum();
        if !g.is_empty() {
            g[0] = -v / 9.0 + 0.5 * s * e - 4.5;
            for j in 1..d {
                g[j] = -x[j] * e;
            }
        }
        -v * v / 18.0 - 0.5 * ln(2.0 * PI * 9.0) - 0.5 * s * e - 4.5 * (v + ln(2.0 * PI))
    });
    let mut sd = vec![9.0; d];
    sd[0] = 3.0;
    Row {
        mean: vec![0.0; d],
        sd,
        before: 0.23,
        ..row("funnel", vec![0.0; d], vec![20.0_f64.sqrt(); d], 30_000, function)
    }
}

/// A t with 1.5 degrees of freedom under a Gaussian family: must not be called sound.
fn heavy() -> Row {
    let d = 8;
    let mut scale = vec![0.0; d * d];
    for i in 0..d {
        scale[i * d + i] = 1.0;
    }
    Row {
        gaussian: true,
        before: 0.058,
        ..row("t1.5-gaussian", vec![0.0; d], vec![5.0; d], 20_000, mixture(&[1.0], &[vec![0.0; d]], &[scale], 1.5))
    }
}

/// All rows.
pub fn all() -> Vec<Row> {
    vec![
        five("five-modes", 10.0, 4000),
        five("five-void", 5.0, 8000),
        banana("banana-10", 10, 30_000, 0.90, 0.904),
        banana("banana-10-100k", 10, 100_000, 0.93, 0.929),
        banana("banana-20", 20, 200_000, 0.90, 0.924),
        banana_2d(),
        correlated_t(),
        gauss(true),
        gauss(false),
        two_modes(),
        coaching(false),
        coaching(true),
        o_ring(),
        norris(),
        misra(),
        funnel(),
        heavy(),
    ]
}
