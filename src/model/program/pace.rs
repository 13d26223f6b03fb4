//! How many points make a batch: enough to pay for the hand-over, few enough to keep every worker busy to the end.

/// Powers of two up to which sizes are tried.
const SIZES: usize = 17;
/// Seconds that a batch should take: long against the hand-over, short against a timeout and a round.
const AIM: f64 = 0.1;
/// A larger batch is tried once where the present one takes less than this many seconds.
const PATIENT: f64 = 1.0;
/// Work that is done before a second worker would have begun, in seconds.
const AT_ONCE: f64 = 1e-3;
/// Points of the very first batch, at most.
const FIRST: usize = 8;
/// A size whose pace is within this factor of the best will do.
const NEARLY_BEST: f64 = 1.15;
/// The fixed price of a batch may be this share of the work in it, to keep all workers busy at the end.
const PRICE: f64 = 0.5;

/// Seconds a point, measured for batches of every size.
#[derive(Debug, Clone, Default)]
pub(crate) struct Pace {
    seconds: [Option<f64>; SIZES],
    /// Points of the last batch of that size.
    points: [f64; SIZES],
}

impl Pace {
    /// Learns that a batch of `n` points took `seconds`.
    pub(crate) fn learn(&mut self, n: usize, seconds: f64) {
        let each = seconds.max(1e-9) / n as f64;
        self.points[bucket(n)] = n as f64;
        let known = &mut self.seconds[bucket(n)];
        *known = Some(known.map_or(each, |before| 0.5 * (before + each)));
    }

    /// Points of the next batch when `left` are to be asked by `workers`.
    pub(crate) fn size(&self, left: usize, workers: usize, limit: Option<usize>) -> usize {
        let most = limit.unwrap_or(1 << (SIZES - 1)).max(1);
        let Some(best) = self.best() else {
            return left.div_ceil(4 * workers).clamp(1, FIRST).min(most);
        };
        let wanted = 1 << self.wanted(best);
        let fair = left.div_ceil(2 * workers).max(self.least());
        let at_once = left as f64 * best < AT_ONCE;
        let size = if at_once { left } else { fair.min(wanted) };
        size.clamp(1, left.max(1)).min(most)
    }

    fn best(&self) -> Option<f64> {
        self.seconds.iter().flatten().copied().reduce(f64::min)
    }

    /// The smallest batch whose fixed price is worth paying: `f` of `seconds = f + e n`, from the smallest and the largest
    /// size that were measured.
    fn least(&self) -> usize {
        let measured = || (0..SIZES).filter_map(|k| self.seconds[k].map(|each| (self.points[k], each)));
        let (Some((few, slow)), Some((many, fast))) = (measured().next(), measured().next_back()) else { return 1 };
        if few == many {
            return few as usize;
        }
        let fixed = ((slow - fast) / (1.0 / few - 1.0 / many)).max(0.0);
        let each = fast - fixed / many;
        if each > 0.0 { (fixed / (PRICE * each)).ceil().clamp(1.0, many) as usize } else { many as usize }
    }

    fn smallest_within(&self, limit: f64) -> usize {
        self.seconds.iter().position(|each| each.is_some_and(|each| each <= limit)).unwrap_or(0)
    }

    /// Which power of two to ask next: the smallest good one, larger ones as long as they take no time, and once a
    /// neighbour that was never tried.
    fn wanted(&self, best: f64) -> usize {
        let mut k = self.smallest_within(best * NEARLY_BEST);
        let takes = |k: usize| self.seconds[k].map(|each| each * (1_u64 << k) as f64);
        while k + 1 < SIZES && takes(k).is_some_and(|seconds| seconds < AIM) {
            k += 1;
        }
        let Some(seconds) = takes(k) else { return k };
        if k + 1 < SIZES && seconds < PATIENT && self.seconds[k + 1].is_none() {
            k + 1
        } else if seconds > AIM && k > 0 && self.seconds[k - 1].is_none() {
            k - 1
        } else {
            k
        }
    }
}

/// Which power of two stands for `n` points.
fn bucket(n: usize) -> usize {
    (n.max(1).ilog2() as usize).min(SIZES - 1)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Runs `n` points of a model that takes `fixed + each * n` seconds a batch; the sizes of its batches.
    fn batches(n: usize, workers: usize, fixed: f64, each: f64) -> Vec<usize> {
        let mut pace = Pace::default();
        let mut left = n;
        let mut sizes = Vec::new();
        while left > 0 {
            let size = pace.size(left, workers, None);
            pace.learn(size, fixed + each * size as f64);
            left -= size;
            sizes.push(size);
        }
        sizes
    }

    #[test]
    fn slow_models_get_small_batches_and_fast_ones_large() {
        let slow = batches(4000, 2, 1e-4, 0.02);
        assert!(slow.iter().all(|&n| n <= 16) && slow.last() == Some(&1), "{slow:?}");
        let fast = batches(1_000_000, 2, 1e-4, 1e-6);
        assert!(fast.contains(&8192), "{fast:?}");
        let fixed = batches(100_000, 2, 0.05, 1e-5);
        assert!(fixed.len() < 60, "a fixed price for a batch asks for few of them: {fixed:?}");
    }

    #[test]
    fn limits_hold() {
        let mut pace = Pace::default();
        assert_eq!(pace.size(1000, 2, Some(3)), 3);
        pace.learn(8, 1e-5);
        assert_eq!(pace.size(1000, 2, Some(3)), 3);
        assert_eq!(pace.size(5, 2, None), 5);
        assert_eq!(pace.size(0, 2, None), 1);
    }
}
