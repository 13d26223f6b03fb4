//! Random streams: one for every purpose, round and block, so that results do not depend on threads or shards.

use rand::SeedableRng;
use rand::rngs::ChaCha12Rng;
use rand_distr::{Distribution, Open01};

/// The generator of every draw: ChaCha with 12 rounds, named and stable across releases and machines.
pub type Stream = ChaCha12Rng;

/// What a stream is for. Two purposes never share a number.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[repr(u8)]
pub enum Purpose {
    /// Starts of the survey's climbs and searches.
    Survey = 1,
    /// Draws of a tuning round.
    Round = 2,
    /// Choices inside a refit: subsamples, seeds, splits, hold-outs.
    Refit = 3,
    /// Draws that decide between finalists.
    Confirm = 4,
    /// Draws that are reported.
    Report = 5,
    /// Production draws.
    Production = 6,
    /// Trial evaluations of `check`.
    Trial = 7,
    /// Resampling to even weights.
    Resample = 8,
    /// Draws of a comparison of proposals.
    Compare = 9,
}

/// The stream of `purpose`, `round` and `block` under `seed`: independent of every other one.
///
/// ```
/// use evenpoise::numeric::{Purpose, stream, uniform};
/// let mut a = stream(7, Purpose::Round, 1, 0);
/// let mut b = stream(7, Purpose::Round, 1, 0);
/// assert_eq!(uniform(&mut a), uniform(&mut b));
/// ```
#[must_use]
pub fn stream(seed: u64, purpose: Purpose, round: u32, block: u32) -> Stream {
    let mut rng = ChaCha12Rng::seed_from_u64(seed);
    rng.set_stream((u64::from(purpose as u8) << 56) | (u64::from(round & 0x00FF_FFFF) << 32) | u64::from(block));
    rng
}

/// A uniform number in the open interval (0, 1), a multiple of `2^-53` plus half of one.
pub fn uniform(rng: &mut Stream) -> f64 {
    Open01.sample(rng)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn streams_differ_by_every_part_of_their_name() {
        let first = |s, p, r, b| uniform(&mut stream(s, p, r, b));
        let base = first(1, Purpose::Round, 1, 1);
        for other in [
            first(2, Purpose::Round, 1, 1),
            first(1, Purpose::Report, 1, 1),
            first(1, Purpose::Round, 2, 1),
            first(1, Purpose::Round, 1, 2),
        ] {
            assert_ne!(base, other);
        }
    }
}
