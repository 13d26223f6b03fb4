//! What a tuning is written down as: its tables, its summary, and the inputs of its figures.
//!
//! * [`DrawsTable`]: every report draw in natural units, as in `points.csv`;
//! * [`round_rows`]: one row a round, as in `rounds.csv`;
//! * [`Summary`], [`RareSummary`]: scores, verdict, choices and provenance, as in `summary.json`;
//! * [`page`]: the page and its Markdown twin;
//! * [`draw_columns`], [`kept_columns`]: production draws in natural units;
//! * [`ComparisonSummary`], [`comparison_figures`]: a comparison of proposals, as in `comparison.json`;
//! * [`trial`]: a look at a problem before it is tuned;
//! * [`RunData`]: what the figures are drawn from, out of a tuning or out of a run's files alike.
//!
//! **Invariant:** no clock is read here, and nothing depends on the number of threads.

pub mod trial;

mod comparison;
mod comparison_figures;
mod drawn;
mod draws;
mod figure_data;
mod marginal;
mod outline;
mod places;
mod pool;
mod production;
mod rare_facts;
mod rare_figures;
mod rare_summary;
mod rounds;
mod sizing;
mod summary;
mod summary_head;

pub mod page;

pub use comparison::{COMPARISON_FORMAT, ComparisonSummary, ContestantSummary, INTERVALS, YardstickSummary, shared};
pub use comparison_figures::comparison_figures;
pub use drawn::{draw_columns, draw_names, first_discrete, has_nominal, kept_columns, kept_names};
pub use draws::DrawsTable;
pub use figure_data::{RunData, SURVEY_PHASE, draw_figures};
pub use places::places;
pub use pool::{PoolError, pooled};
pub use production::{BAND_SHARES, bands_figures, course_figure, has_columns};
pub use rare_facts::{RareFacts, RareRow};
pub use rare_summary::{
    NoHit, PROBABILITY_NOTE, Pooled, RareCandidateSummary, RareRoundCandidates, RareSummary, RareSurveySummary,
};
pub use rounds::{
    RARE_ROUND_COLUMNS, ROUND_COLUMNS, RoundRow, read_rounds, round_rows, write_rare_rounds, write_rounds,
};
pub use sizing::{ProductionPlan, SizedQuantity, plan_of};
pub use summary::{
    CandidateSummary, Evaluations, FinalistSummary, NamedValues, ProposalSummary, Provenance, RoundCandidates,
    SUMMARY_FORMAT, Summary, SummaryCheck, SurveySummary, ValueWithError, read_evaluations,
};
pub use summary_head::SummaryHead;
