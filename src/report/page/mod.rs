//! The report: one self-contained page about a run, and the same content as Markdown.
//!
//! [`PageData`] holds what is said, as plain values; [`html`] and [`markdown`] say it. `content` puts the sentences and
//! tables together once, as blocks, so both forms tell the same; `method` explains what was computed and cites its sources.
//!
//! **Invariant:** no clock, no path of a machine, no script and nothing from a network: the same run gives the same bytes.
//! Every text that came from outside is escaped where it is written, and nowhere else.

mod base64;
mod blocks;
mod comparison;
mod content;
mod course;
mod data;
mod density;
mod html;
mod markdown;
mod method;
mod numbers;
mod raises;
mod rare;
mod sources;

pub use comparison::{ComparisonPage, comparison_html, comparison_markdown};
pub use data::{
    AnswerLine, FinalistLine, PageData, PageFigure, PointLine, RoundLine, RunFacts, ScheduleKind, SurveyLine,
    VariableLine,
};
pub use html::html;
pub use markdown::markdown;
