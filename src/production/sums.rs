//! All that is remembered of the draws: sums without error, largest values, counts. Sums of parts are the sums of the whole.

use super::bins::Bins;
use super::exact::ExactSum;
use super::job::Job;
use super::largest::Largest;
use serde::Deserialize;
use serde::Serialize;

/// What the draws of a part of the sequence came to, one entry a draw.
#[derive(Debug, Clone, Default)]
pub struct Terms {
    /// `z`: the scaled weight; for a probability that of the draws in the event; for an expectation times the integrand.
    pub term: Vec<f64>,
    /// Scaled nominal weight of draws whose evaluation failed, else zero. Empty for a density.
    pub failed_weight: Vec<f64>,
    /// Whether the evaluation failed.
    pub failed: Vec<bool>,
    /// Stratum of each.
    pub stratum: Vec<u32>,
    /// Whether each came from the nominal component.
    pub nominal: Vec<bool>,
    /// Values of the estimates, a column an estimate.
    pub estimates: Vec<Vec<f64>>,
    /// Number of the first draw in the sequence.
    pub first: u64,
}

/// Sums over draws. Everything in here is the same in whatever order and by whomever the draws were added.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Sums {
    /// Draws.
    pub draws: u64,
    /// Failed evaluations.
    pub failed: u64,
    /// Draws whose term is not zero.
    pub hits: u64,
    /// Draws from the nominal component.
    pub nominal: u64,
    /// A stratum and a half of the draws (every other one): `2 stratum + half`.
    pub cells: Vec<Cell>,
    /// Strata.
    pub strata: Vec<Stratum>,
    /// `sum z^3`.
    pub cubes: ExactSum,
    /// `sum z^4`.
    pub fourths: ExactSum,
    /// The largest `|z|`.
    pub largest: Largest,
    /// The estimates, in the order of the job.
    pub estimates: Vec<EstimateSums>,
}

/// Sums over a stratum's half.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Cell {
    /// Draws.
    pub draws: u64,
    /// `sum z`.
    pub terms: ExactSum,
    /// `sum |z|`, where terms have signs.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub sizes: Option<ExactSum>,
}

/// Sums over a stratum.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Stratum {
    /// `sum z^2`.
    pub squares: ExactSum,
    /// Sum of the weights of failed draws.
    pub failed: ExactSum,
    /// Sum of their squares.
    pub failed_squares: ExactSum,
}

/// Sums of an estimate `f`, with `u = |z|` the weight and `g = f - centre`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct EstimateSums {
    /// `sum u g` of every cell.
    pub cells: Vec<ExactSum>,
    /// `sum u^2 g` of every stratum.
    pub crossed: Vec<ExactSum>,
    /// `sum u^2 g^2` of every stratum.
    pub squares: Vec<ExactSum>,
    /// `sum u g^2`.
    pub spread: ExactSum,
    /// `sum |u f|`.
    pub sizes: ExactSum,
    /// `sum (u f)^2`.
    pub size_squares: ExactSum,
    /// `max |u f|`.
    pub largest_size: Largest,
    /// `sum u` where `f` is undefined.
    pub undefined: ExactSum,
    /// The largest `|u g|`.
    pub largest: Largest,
    /// Weighted counts, for quantiles.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub bins: Option<Bins>,
}

impl Cell {
    /// `sum |z|`.
    #[must_use]
    pub fn sizes(&self) -> &ExactSum {
        self.sizes.as_ref().unwrap_or(&self.terms)
    }
}

impl Sums {
    /// No draw yet.
    #[must_use]
    pub fn new(job: &Job) -> Self {
        let strata = job.strata as usize;
        let cell = Cell { sizes: job.signed().then(ExactSum::default), ..Cell::default() };
        let estimate = |borders: &[f64]| EstimateSums {
            cells: vec![ExactSum::default(); 2 * strata],
            crossed: vec![ExactSum::default(); strata],
            squares: vec![ExactSum::default(); strata],
            spread: ExactSum::default(),
            sizes: ExactSum::default(),
            size_squares: ExactSum::default(),
            largest_size: Largest::new(1),
            undefined: ExactSum::default(),
            largest: Largest::new(job.estimate_tail()),
            bins: (!borders.is_empty()).then(|| Bins::new(borders.len())),
        };
        Self {
            draws: 0,
            failed: 0,
            hits: 0,
            nominal: 0,
            cells: vec![cell; 2 * strata],
            strata: vec![Stratum::default(); strata],
            cubes: ExactSum::default(),
            fourths: ExactSum::default(),
            largest: Largest::new(job.tail()),
            estimates: job.estimates.iter().map(|e| estimate(&e.borders)).collect(),
        }
    }

    /// Adds draws, but for the counts in bins.
    pub(super) fn add(&mut self, job: &Job, terms: &Terms, rows: std::ops::Range<usize>) {
        for i in rows {
            let stratum = terms.stratum[i] as usize;
            let cell = 2 * stratum + ((terms.first + i as u64) % 2) as usize;
            let z = terms.term[i];
            self.draws += 1;
            self.failed += u64::from(terms.failed[i]);
            self.nominal += u64::from(terms.nominal[i]);
            self.cells[cell].draws += 1;
            if let Some(&weight) = terms.failed_weight.get(i)
                && weight != 0.0
            {
                self.strata[stratum].failed.add(weight);
                self.strata[stratum].failed_squares.add(weight * weight);
            }
            if z == 0.0 {
                continue;
            }
            self.hits += 1;
            self.cells[cell].terms.add(z);
            let u = z.abs();
            if let Some(sizes) = &mut self.cells[cell].sizes {
                sizes.add(u);
            }
            let square = z * z;
            self.strata[stratum].squares.add(square);
            self.cubes.add(square * z);
            self.fourths.add(square * square);
            self.largest.add(u);
            for (k, estimate) in self.estimates.iter_mut().enumerate() {
                estimate.add(u, terms.estimates[k][i], job.estimates[k].centre, (stratum, cell));
            }
        }
    }

    /// Counts the draws in the bins of estimate `k`.
    pub(super) fn count(bins: &mut Bins, borders: &[f64], terms: &Terms, k: usize) {
        for (&z, &f) in terms.term.iter().zip(&terms.estimates[k]) {
            if z != 0.0 && f.is_finite() {
                bins.add(borders, f, z.abs());
            }
        }
    }

    /// Adds all that others hold; `false` where they were not laid out alike, and nothing is changed.
    #[must_use]
    pub fn merge(&mut self, other: &Self) -> bool {
        if !self.is_like(other) {
            return false;
        }
        self.draws += other.draws;
        self.failed += other.failed;
        self.hits += other.hits;
        self.nominal += other.nominal;
        for (a, b) in self.cells.iter_mut().zip(&other.cells) {
            a.draws += b.draws;
            a.terms.merge(&b.terms);
            if let (Some(a), Some(b)) = (&mut a.sizes, &b.sizes) {
                a.merge(b);
            }
        }
        for (a, b) in self.strata.iter_mut().zip(&other.strata) {
            a.squares.merge(&b.squares);
            a.failed.merge(&b.failed);
            a.failed_squares.merge(&b.failed_squares);
        }
        self.cubes.merge(&other.cubes);
        self.fourths.merge(&other.fourths);
        self.largest.merge(&other.largest);
        self.estimates.iter_mut().zip(&other.estimates).for_each(|(a, b)| a.merge(b));
        true
    }

    /// Whether these sums have the layout that `job` asks for.
    #[must_use]
    pub fn belong_to(&self, job: &Job) -> bool {
        self.is_like(&Self::new(job))
    }

    /// Puts what has no order of its own into the one that a file shows.
    pub fn settle(&mut self) {
        self.largest.settle();
        for estimate in &mut self.estimates {
            estimate.largest.settle();
            estimate.largest_size.settle();
        }
    }

    fn is_like(&self, other: &Self) -> bool {
        let bins = |e: &EstimateSums| e.bins.as_ref().map(Bins::len);
        let lengths = |e: &EstimateSums| (e.cells.len(), e.crossed.len(), e.squares.len());
        self.cells.len() == other.cells.len()
            && self.strata.len() == other.strata.len()
            && self.cells.iter().zip(&other.cells).all(|(a, b)| a.sizes.is_some() == b.sizes.is_some())
            && self.estimates.len() == other.estimates.len()
            && self.estimates.iter().zip(&other.estimates).all(|(a, b)| bins(a) == bins(b) && lengths(a) == lengths(b))
    }
}

impl EstimateSums {
    #[inline]
    fn add(&mut self, u: f64, f: f64, centre: f64, (stratum, cell): (usize, usize)) {
        if !f.is_finite() {
            self.undefined.add(u);
            return;
        }
        let (g, size) = (f - centre, (u * f).abs());
        let part = u * g;
        self.cells[cell].add(part);
        self.crossed[stratum].add(u * part);
        self.squares[stratum].add(part * part);
        self.spread.add(part * g);
        self.sizes.add(size);
        self.size_squares.add(size * size);
        self.largest_size.add(size);
        self.largest.add(part.abs());
    }

    fn merge(&mut self, other: &Self) {
        let each = |a: &mut Vec<ExactSum>, b: &[ExactSum]| a.iter_mut().zip(b).for_each(|(a, b)| a.merge(b));
        each(&mut self.cells, &other.cells);
        each(&mut self.crossed, &other.crossed);
        each(&mut self.squares, &other.squares);
        self.spread.merge(&other.spread);
        self.sizes.merge(&other.sizes);
        self.size_squares.merge(&other.size_squares);
        self.largest_size.merge(&other.largest_size);
        self.undefined.merge(&other.undefined);
        self.largest.merge(&other.largest);
        if let (Some(a), Some(b)) = (&mut self.bins, &other.bins) {
            a.merge(b);
        }
    }
}
