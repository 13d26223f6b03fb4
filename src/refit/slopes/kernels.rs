//! The inner loops over the lanes of a block: plain arithmetic on columns, compiled for several instruction sets, no contraction.

use super::Regression;
use crate::numeric::BLOCK;
use crate::proposal::Component;
use multiversion::multiversion;

/// Sums run over this many lanes at once.
const LANES: usize = 8;

/// The points of a block that weigh on a component, side by side, filled up with nothing to whole groups of lanes.
pub(super) struct Lanes {
    d: usize,
    n: usize,
    /// Responsibilities times weights, Student-t factors, whether there is a gradient.
    r: [f64; BLOCK],
    u: [f64; BLOCK],
    sound: [f64; BLOCK],
    /// Columns: standardised coordinates, slope left over by the mixture, slope of the component's part (standardised).
    y: Vec<f64>,
    slope: Vec<f64>,
    h: Vec<f64>,
}

impl Lanes {
    pub(super) fn new(d: usize) -> Self {
        let columns = || vec![0.0; d * BLOCK];
        let (r, u, sound) = ([0.0; BLOCK], [0.0; BLOCK], [0.0; BLOCK]);
        Self { d, n: 0, r, u, sound, y: columns(), slope: columns(), h: columns() }
    }

    /// Takes the points with a positive `r`; whether there are any.
    pub(super) fn choose(
        &mut self,
        r: &[f64],
        y: &[f64],
        slope: &[f64],
        u: &[f64; BLOCK],
        sound: &[f64; BLOCK],
    ) -> bool {
        let (mut at, mut count) = ([0; BLOCK], 0);
        for (t, &v) in r.iter().enumerate() {
            if v > 0.0 {
                at[count] = t;
                count += 1;
            }
        }
        self.n = count.next_multiple_of(LANES);
        self.r[count..self.n].fill(0.0);
        for (slot, &t) in at[..count].iter().enumerate() {
            self.r[slot] = r[t];
            self.u[slot] = u[t];
            self.sound[slot] = sound[t];
        }
        for j in 0..self.d {
            let column = j * BLOCK;
            for (from, to) in [(y, &mut self.y), (slope, &mut self.slope)] {
                for (slot, &t) in at[..count].iter().enumerate() {
                    to[column + slot] = from[column + t];
                }
                to[column + count..column + self.n].fill(0.0);
            }
        }
        count > 0
    }
}

/// Columns of `L^-1 (x - m)`.
pub(super) fn standardise(component: &Component, block: &[f64], out: &mut [f64]) {
    let (shape, widening) = component.shape();
    lower_times(&shape.inverse, &shape.location, 1.0 / widening.sqrt(), block, out);
}

#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx512bw+avx2", "x86_64+avx2", "aarch64+neon"))]
fn lower_times(inverse: &[f64], location: &[f64], factor: f64, block: &[f64], out: &mut [f64]) {
    let mut at = 0;
    for i in 0..location.len() {
        let mut sum = [0.0; BLOCK];
        for j in 0..=i {
            let (a, m) = (inverse[at + j], location[j]);
            let column = &block[j * BLOCK..(j + 1) * BLOCK];
            for t in 0..BLOCK {
                sum[t] += a * (column[t] - m);
            }
        }
        at += i + 1;
        for t in 0..BLOCK {
            out[i * BLOCK + t] = sum[t] * factor;
        }
    }
}

/// Adds `pull L'^-1 y`: takes the component's part of the mixture's own gradient out of the slope.
pub(super) fn add_back(component: &Component, y: &[f64], pull: &[f64; BLOCK], slope: &mut [f64]) {
    let (shape, widening) = component.shape();
    upper_times(component.dim(), &shape.inverse, 1.0 / widening.sqrt(), y, pull, slope);
}

#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx512bw+avx2", "x86_64+avx2", "aarch64+neon"))]
fn upper_times(d: usize, inverse: &[f64], factor: f64, y: &[f64], pull: &[f64; BLOCK], slope: &mut [f64]) {
    for j in 0..d {
        let mut sum = [0.0; BLOCK];
        for i in j..d {
            let a = inverse[i * (i + 1) / 2 + j];
            let column = &y[i * BLOCK..(i + 1) * BLOCK];
            for t in 0..BLOCK {
                sum[t] += a * column[t];
            }
        }
        let to = &mut slope[j * BLOCK..(j + 1) * BLOCK];
        for t in 0..BLOCK {
            to[t] += factor * pull[t] * sum[t];
        }
    }
}

/// `h = L' s - u y`: the slope of the component's part of the target, in its standardised coordinates.
pub(super) fn own_slope(factor: &[f64], lanes: &mut Lanes) {
    own_slope_columns(factor, lanes.d, lanes.n, &lanes.y, &lanes.u, &lanes.slope, &mut lanes.h);
}

#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx512bw+avx2", "x86_64+avx2", "aarch64+neon"))]
fn own_slope_columns(factor: &[f64], d: usize, n: usize, y: &[f64], u: &[f64; BLOCK], slope: &[f64], out: &mut [f64]) {
    for i in 0..d {
        let mut sum = [0.0; BLOCK];
        for j in i..d {
            let a = factor[j * d + i];
            let column = &slope[j * BLOCK..j * BLOCK + n];
            for (s, v) in sum.iter_mut().zip(column) {
                *s += a * v;
            }
        }
        let (y, out) = (&y[i * BLOCK..i * BLOCK + n], &mut out[i * BLOCK..i * BLOCK + n]);
        for t in 0..n {
            out[t] = sum[t] - u[t] * y[t];
        }
    }
}

/// Adds the chosen lanes to the sums of every coordinate and pair.
pub(super) fn accumulate(lanes: &Lanes, heavy: bool, first: &mut [Regression], second: &mut [Regression]) {
    let one = [1.0; BLOCK];
    let u = if heavy { &lanes.u } else { &one };
    accumulate_columns(lanes.d, lanes.n, &lanes.y, &lanes.h, &lanes.r, u, &lanes.sound, first, second);
}

#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx512bw+avx2", "x86_64+avx2", "aarch64+neon"))]
#[allow(clippy::too_many_arguments)]
fn accumulate_columns(
    d: usize,
    n: usize,
    y: &[f64],
    h: &[f64],
    r: &[f64; BLOCK],
    u: &[f64; BLOCK],
    sound: &[f64; BLOCK],
    first: &mut [Regression],
    second: &mut [Regression],
) {
    let nothing = [0.0; BLOCK];
    let (mut pulled, mut half_y, mut half_h) = ([0.0; BLOCK], [0.0; BLOCK], [0.0; BLOCK]);
    let mut at = 0;
    for i in 0..d {
        let (yi, hi) = (&y[i * BLOCK..i * BLOCK + n], &h[i * BLOCK..i * BLOCK + n]);
        for t in 0..n {
            pulled[t] = u[t] * yi[t];
            half_y[t] = 0.5 * sound[t] * yi[t];
            half_h[t] = 0.5 * sound[t] * hi[t];
        }
        let mut sums = [[0.0; LANES]; 5];
        for from in (0..n).step_by(LANES) {
            for l in 0..LANES {
                let t = from + l;
                add(&mut sums, l, r[t], pulled[t], 2.0 * half_h[t]);
            }
        }
        first[i].take(&sums);
        for j in 0..=i {
            let (yj, hj) = (&y[j * BLOCK..j * BLOCK + n], &h[j * BLOCK..j * BLOCK + n]);
            let unit = if i == j { sound } else { &nothing };
            let mut sums = [[0.0; LANES]; 5];
            for from in (0..n).step_by(LANES) {
                for l in 0..LANES {
                    let t = from + l;
                    add(&mut sums, l, r[t], pulled[t] * yj[t], half_h[t] * yj[t] + half_y[t] * hj[t] + unit[t]);
                }
            }
            second[at].take(&sums);
            at += 1;
        }
    }
}

#[inline(always)]
fn add(sums: &mut [[f64; LANES]; 5], l: usize, r: f64, value: f64, control: f64) {
    let once = r * control;
    let twice = r * once;
    sums[0][l] += r * value;
    sums[1][l] += once;
    sums[2][l] += twice * value;
    sums[3][l] += twice * control;
    sums[4][l] += twice;
}

impl Regression {
    #[inline(always)]
    fn take(&mut self, sums: &[[f64; LANES]; 5]) {
        let total = |s: &[f64; LANES]| ((s[0] + s[4]) + (s[2] + s[6])) + ((s[1] + s[5]) + (s[3] + s[7]));
        self.value += total(&sums[0]);
        self.control += total(&sums[1]);
        self.both += total(&sums[2]);
        self.squares += total(&sums[3]);
        self.weighted += total(&sums[4]);
    }
}
