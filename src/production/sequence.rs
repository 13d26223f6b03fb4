//! The one sequence of production draws: the same, draw by draw, whoever draws which part of it.

use crate::numeric::BLOCK;
use crate::numeric::Points;
use crate::numeric::Purpose;
use crate::numeric::stream;
use crate::numeric::uniform;
use crate::proposal::Mixture;
use rayon::prelude::*;
use std::ops::Range;

/// Draws whose components are shared out together. Within a chunk the numbers from each component are fixed (systematic
/// sampling) and their order is random, so that any part of a chunk is a fair sample as well.
pub const CHUNK: u64 = 1024;
/// Streams of a chunk: one for the components, one for each block of points.
const STREAMS: u32 = 1 + CHUNK as u32 / BLOCK as u32;
/// A stratum is closed once it holds this share of the draws ...
const STRATUM_SHARE: f64 = 1.0 / 128.0;
/// ... and this many draws of every chunk.
const STRATUM_DRAWS: f64 = 8.0;

/// The longest sequence whose streams have different names.
pub const MOST_DRAWS: u64 = (u32::MAX / STREAMS) as u64 * CHUNK;

/// Draw `i` of stage `stage` under `seed`, for every `i`.
///
/// The draws of a number known beforehand (`planned`) are stratified in their last, shorter chunk too. The draws depend on the
/// mixture, the seed, the stage, and in the last chunk on the number; not on threads, nor on who draws which part.
///
/// ```
/// use evenpoise::production::Sequence;
/// use evenpoise::proposal::{Component, Mixture};
/// let mixture = Mixture::single(Component::new(vec![0.0], &[1.0], f64::INFINITY).unwrap());
/// let sequence = Sequence::new(&mixture, 7, 1, Some(3000));
/// let (whole, part) = (sequence.draw(0..3000), sequence.draw(1500..1502));
/// assert_eq!(part.point(1), whole.point(1501));
/// ```
#[derive(Debug, Clone)]
pub struct Sequence<'a> {
    mixture: &'a Mixture,
    seed: u64,
    stage: u32,
    planned: Option<u64>,
}

impl<'a> Sequence<'a> {
    /// The sequence of a mixture.
    #[must_use]
    pub fn new(mixture: &'a Mixture, seed: u64, stage: u32, planned: Option<u64>) -> Self {
        Self { mixture, seed, stage, planned }
    }

    /// The mixture.
    #[must_use]
    pub fn mixture(&self) -> &'a Mixture {
        self.mixture
    }

    /// The points of a part of the sequence.
    #[must_use]
    pub fn draw(&self, part: Range<u64>) -> Points {
        let d = self.mixture.dim();
        let chunks: Vec<u64> = (part.start / CHUNK..part.end.div_ceil(CHUNK)).collect();
        let drawn: Vec<Vec<Vec<f64>>> = chunks.par_iter().map(|&chunk| self.blocks_of(chunk, &part)).collect();
        let mut points = Points::zeros(d, (part.end - part.start) as usize);
        let first = part.start / CHUNK * CHUNK;
        if part.start.is_multiple_of(BLOCK as u64) {
            for b in 0..points.n_blocks() {
                let at = (part.start - first) as usize / BLOCK + b;
                let per_chunk = CHUNK as usize / BLOCK;
                points.block_mut(b).copy_from_slice(&drawn[at / per_chunk][at % per_chunk]);
            }
            return points;
        }
        for i in part.clone() {
            let at = (i - first) as usize;
            let block = &drawn[at / CHUNK as usize][at % CHUNK as usize / BLOCK];
            let to = (i - part.start) as usize;
            for j in 0..d {
                points.set(to, j, block[j * BLOCK + at % BLOCK]);
            }
        }
        points
    }

    /// The component of every draw of a part of the sequence.
    #[must_use]
    pub fn labels(&self, part: Range<u64>) -> Vec<u32> {
        let mut labels = Vec::with_capacity((part.end - part.start) as usize);
        for chunk in part.start / CHUNK..part.end.div_ceil(CHUNK) {
            let own = self.labels_of(chunk);
            let first = chunk * CHUNK;
            let from = part.start.saturating_sub(first).min(own.len() as u64) as usize;
            let to = (part.end - first).min(own.len() as u64) as usize;
            labels.extend_from_slice(&own[from..to]);
        }
        labels
    }

    /// Which stratum the draws of each component belong to: components join in their order, so that a stratum is never small.
    /// The strata depend on the shares and the planned number, never on the draws.
    #[must_use]
    pub fn strata(&self) -> Vec<u32> {
        let together = self.planned.map_or(CHUNK, |planned| planned.clamp(1, CHUNK)) as f64;
        let least = STRATUM_SHARE.max(STRATUM_DRAWS / together);
        let (mut stratum, mut held) = (0, 0.0);
        let mut of_component: Vec<u32> = Vec::with_capacity(self.mixture.len());
        for &share in self.mixture.shares() {
            if held >= least {
                (stratum, held) = (stratum + 1, 0.0);
            }
            held += share;
            of_component.push(stratum);
        }
        if held < least && stratum > 0 {
            of_component.iter_mut().for_each(|s| *s = (*s).min(stratum - 1));
        }
        of_component
    }

    fn labels_of(&self, chunk: u64) -> Vec<u32> {
        let length = self.planned.map_or(CHUNK, |planned| planned.saturating_sub(chunk * CHUNK).min(CHUNK)) as usize;
        let mut rng = stream(self.seed, Purpose::Production, self.stage, chunk as u32 * STREAMS);
        let mut labels = self.mixture.systematic_labels(length, uniform(&mut rng));
        for i in (1..length).rev() {
            let j = (uniform(&mut rng) * (i + 1) as f64) as usize;
            labels.swap(i, j);
        }
        labels
    }

    /// Blocks of a chunk; those outside `part` are left empty.
    fn blocks_of(&self, chunk: u64, part: &Range<u64>) -> Vec<Vec<f64>> {
        let labels = self.labels_of(chunk);
        let mut blocks = Vec::new();
        for (b, own) in labels.chunks(BLOCK).enumerate() {
            let first = chunk * CHUNK + (b * BLOCK) as u64;
            let mut block = Vec::new();
            if first < part.end && first + own.len() as u64 > part.start {
                block.resize(self.mixture.dim() * BLOCK, 0.0);
                let name = chunk as u32 * STREAMS + 1 + b as u32;
                let mut rng = stream(self.seed, Purpose::Production, self.stage, name);
                self.mixture.draw_block(own, &mut rng, &mut block);
            }
            blocks.push(block);
        }
        blocks
    }
}

/// A part of a run: number `index` of `of`, from 1.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, serde::Serialize, serde::Deserialize)]
pub struct Shard {
    /// Which, from 1.
    pub index: u32,
    /// Of how many.
    pub of: u32,
}

impl Shard {
    /// The whole run.
    pub const WHOLE: Self = Self { index: 1, of: 1 };

    /// The draws of this shard among `draws`: the shards follow each other without a gap.
    #[must_use]
    pub fn part(self, draws: u64) -> Range<u64> {
        let end = |k: u32| (u128::from(draws) * u128::from(k) / u128::from(self.of.max(1))) as u64;
        end(self.index - 1)..end(self.index)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::proposal::Component;

    fn mixture() -> Mixture {
        let one = |x: f64, df: f64| Component::new(vec![x, -x], &[1.0, 0.3, 0.3, 2.0], df).unwrap();
        Mixture::new(
            &[0.5, 0.3, 0.17, 0.03],
            vec![one(0.0, 5.0), one(3.0, f64::INFINITY), one(-2.0, 9.0), one(0.5, 3.0)],
        )
        .unwrap()
    }

    /// Whatever the number of shards, they hold the same draws, end to end.
    #[test]
    fn shards_hold_the_same_draws() {
        let mixture = mixture();
        let sequence = Sequence::new(&mixture, 3, 1, Some(5000));
        let whole = sequence.draw(0..5000);
        let labels = sequence.labels(0..5000);
        for of in [1, 3, 64, 999, 6000] {
            let mut at = 0;
            for index in 1..=of {
                let part = Shard { index, of }.part(5000);
                assert_eq!(part.start, at);
                at = part.end;
                if of <= 64 {
                    let points = sequence.draw(part.clone());
                    let same = (0..points.len()).all(|i| points.point(i) == whole.point(part.start as usize + i));
                    assert!(same, "shard {index} of {of}");
                    assert_eq!(sequence.labels(part.clone()), labels[part.start as usize..part.end as usize]);
                }
            }
            assert_eq!(at, 5000);
        }
    }

    /// Each chunk, the shorter last one included, holds every component as often as its share says, to one draw.
    #[test]
    fn chunks_are_stratified_and_mixed() {
        let mixture = mixture();
        let labels = Sequence::new(&mixture, 3, 1, Some(2500)).labels(0..2500);
        for chunk in labels.chunks(CHUNK as usize) {
            for (k, share) in mixture.shares().iter().enumerate() {
                let count = chunk.iter().filter(|&&label| label as usize == k).count() as f64;
                assert!((count - share * chunk.len() as f64).abs() <= 1.0, "component {k}: {count}");
            }
            // Half of a chunk: hypergeometric, 512 of 1024 with half of them of component 0: sd 8; 4.5 of them (false alarm 7e-6).
            let half = chunk.len() / 2;
            let first = chunk[..half].iter().filter(|&&label| label == 0).count() as f64;
            assert!((first - 0.5 * half as f64).abs() < 4.5 * (half as f64 / 8.0).sqrt() + 1.0, "{first} of {half}");
        }
    }

    #[test]
    fn strata_are_never_small() {
        let mixture = mixture();
        assert_eq!(Sequence::new(&mixture, 1, 1, None).strata(), [0, 1, 2, 3]);
        assert_eq!(Sequence::new(&mixture, 1, 1, Some(200)).strata(), [0, 1, 2, 2]);
        assert_eq!(Sequence::new(&mixture, 1, 1, Some(30)).strata(), [0, 1, 1, 1]);
        assert_eq!(Sequence::new(&mixture, 1, 1, Some(5)).strata(), [0, 0, 0, 0]);
    }

    #[test]
    fn stages_have_other_draws() {
        let mixture = mixture();
        let first = |stage| Sequence::new(&mixture, 3, stage, None).draw(0..1).point(0);
        assert_ne!(first(1), first(2));
    }
}
