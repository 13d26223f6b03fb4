//! Production: many draws from a frozen proposal, remembered in sums that have no error, so that any number of machines and
//! interruptions come to the same answer, bit for bit.
//!
//! * [`Sequence`]: the one sequence of draws, of which a [`Shard`] takes a part;
//! * [`ExactSum`], [`Largest`], [`Bins`]: what is remembered;
//! * [`Job`]: what a run is; [`Production`]: a run under way; [`Sums`]: where it stands;
//! * [`Outcome`]: what the sums say: answer, estimates, intervals, verdict;
//! * [`pilot_draws`]: how many draws a relative error asks for, from a pilot; [`size`]: the same from the report draws of a
//!   tuning.
//!
//! **Invariant:** what a run says depends on its job and its sums alone, and sums of parts are the sums of the whole. No clock is
//! read here and no file touched.

mod bins;
mod exact;
mod job;
mod largest;
mod moments;
mod numbers;
mod outcome;
mod pilot;
mod run;
mod sequence;
mod sizing;
mod sums;
mod verdict;

pub use bins::{BINS, Bins, Quantile, borders};
pub use exact::{ExactSum, ExactSumError};
pub use job::{EstimateJob, Job};
pub use largest::Largest;
pub use moments::{RelativeVariance, relative_variance};
pub use outcome::{
    EstimateOutcome, FailuresOutcome, LogOutcome, NoHitOutcome, Outcome, Pair, QuantileOutcome, ValueOutcome,
    course_point, course_stop,
};
pub use pilot::{PILOT_DRAWS, PILOT_EFFECTIVE, PILOT_MOST, PilotNumber, pilot_draws};
pub use run::{Production, ProductionError, Step};
pub use sequence::{CHUNK, MOST_DRAWS, Sequence, Shard};
pub use sizing::{Sized, WeightedDraws, size};
pub use sums::{Cell, EstimateSums, Stratum, Sums, Terms};
