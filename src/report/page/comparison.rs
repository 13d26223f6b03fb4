//! The page of a comparison, and its Markdown twin.

use super::blocks::{Block, Span, plain};
use super::data::PageFigure;
use super::html;
use super::markdown;
use super::numbers::{NOTHING, count, number, share, short};
use super::sources::{Bibliography, Source};
use crate::adapt::compare::{Difference, Interval, Kind, Tails};
use crate::problem::Aim;
use crate::report::PROBABILITY_NOTE;
use crate::report::{ComparisonSummary, ContestantSummary};
use crate::weights::verdict::checks::TAIL_SOUND;

/// All that the page says about a comparison.
#[derive(Debug, Clone, PartialEq)]
pub struct ComparisonPage {
    /// What was found.
    pub summary: ComparisonSummary,
    /// The aim.
    pub aim: Aim,
    /// Its figures.
    pub figures: Vec<PageFigure>,
    /// Program and version.
    pub program: String,
    /// The command that makes the same comparison again, in its folder.
    pub command: String,
    /// The problem file, with every default.
    pub statement: String,
}

/// The page as HTML.
#[must_use]
pub fn comparison_html(page: &ComparisonPage) -> String {
    html::document(&page.summary.title, &lead(page), "", &blocks(page), &page.figures)
}

/// The page as Markdown.
#[must_use]
pub fn comparison_markdown(page: &ComparisonPage) -> String {
    markdown::document(&page.summary.title, &lead(page), &blocks(page), &page.figures)
}

fn lead(page: &ComparisonPage) -> String {
    format!("Comparison of proposals, aim {}, by {}", page.aim.word(), page.program)
}

fn blocks(page: &ComparisonPage) -> Vec<Block> {
    let summary = &page.summary;
    let heading = match summary.recommendation.tails {
        Tails::Heavy => "Recommendation: heavy tails",
        Tails::Light => "Recommendation: light tails",
        Tails::Undecided => "Recommendation: none, the evidence does not separate them",
    };
    let mut blocks = vec![
        Block::Heading(2, heading.to_owned()),
        Block::Paragraph(vec![Span::Strong(summary.recommendation.sentence.clone())]),
        Block::text(
            "It speaks of what the draws have met: a part of the target that no draw came near is not in these numbers.",
        ),
    ];
    blocks.push(Block::Heading(2, "Scores on fresh draws".into()));
    blocks.push(Block::text(summary.shared.clone()));
    blocks.push(scores(summary));
    blocks.push(needs(summary));
    if let Some(yardstick) = &summary.yardstick {
        blocks.push(Block::text(format!(
            "The line of plain draws is computed from the draws of {}; nothing was evaluated for it.",
            yardstick.from
        )));
    }
    blocks.push(differences(&summary.differences));
    blocks.push(Block::Heading(2, "Figures".into()));
    blocks.extend((0..page.figures.len()).map(Block::Figure));
    let mut bibliography = Bibliography::default();
    blocks.push(Block::Heading(2, "Method".into()));
    blocks.extend(method(page, &mut bibliography));
    if page.aim == Aim::Probability {
        blocks.push(Block::Caution(vec![plain(PROBABILITY_NOTE)]));
    }
    blocks.extend(provenance(page));
    blocks.push(Block::Heading(2, "Sources".into()));
    blocks.push(Block::Sources(bibliography.listed()));
    blocks
}

fn scores(summary: &ComparisonSummary) -> Block {
    let row = |c: &ContestantSummary| {
        let upper = c.tail_shape_upper.map_or(NOTHING.to_owned(), short);
        vec![
            c.name.clone(),
            with_interval(c.ess_fraction, share),
            with_interval(c.weight_variance, short),
            with_interval(c.tail_shape, short),
            upper,
            with_interval(c.largest_share, share),
        ]
    };
    Block::table(
        "Evenness of the weights, with 95 % intervals",
        &["proposal", "ESS fraction#", "weight variance#", "tail shape#", "at most#", "largest share#"],
        summary.contestants.iter().map(row).collect(),
    )
}

fn needs(summary: &ComparisonSummary) -> Block {
    let row = |c: &ContestantSummary| {
        vec![
            c.name.clone(),
            count(c.tuning_evaluations),
            count(c.draws as u64),
            with_interval(c.relative_error, share),
            with_interval(c.draws_for_one_percent, whole),
        ]
    };
    let mut rows: Vec<Vec<String>> = summary.contestants.iter().map(row).collect();
    if let Some(yardstick) = &summary.yardstick {
        let cells = [NOTHING.to_owned(), NOTHING.to_owned(), NOTHING.to_owned()];
        let mut line = vec!["Plain draws".to_owned()];
        line.extend(cells);
        line.push(with_interval(yardstick.draws_for_one_percent, whole));
        rows.push(line);
    }
    Block::table(
        "What an answer costs, with 95 % intervals",
        &["proposal", "tuned with#", "fresh draws#", "relative error#", "draws for 1 %#"],
        rows,
    )
}

fn differences(differences: &[Difference]) -> Block {
    let points = |x: Option<f64>| x.map_or(NOTHING.to_owned(), |x| number(100.0 * x));
    let row = |d: &Difference| {
        let chance = d
            .significance
            .map_or("not known".to_owned(), |p| if p < 0.001 { "below 0.1 %".to_owned() } else { share(p) });
        vec![d.name.clone(), points(Some(d.value)), points(d.se), points(d.se_independent), chance]
    };
    Block::table(
        "ESS fraction less that of the Gaussian mixture, in points",
        &["proposal", "difference#", "error, draw by draw#", "error, as if independent#", "chance, were there none#"],
        differences.iter().map(row).collect(),
    )
}

fn with_interval(x: Interval, write: impl Fn(f64) -> String) -> String {
    if x.low.is_nan() || x.high.is_nan() {
        return if x.value == f64::NEG_INFINITY { "bounded".to_owned() } else { write(x.value) };
    }
    format!("{} ({} to {})", write(x.value), write(x.low), write(x.high))
}

/// A number of draws, to three digits.
fn whole(x: f64) -> String {
    if (1.0..1e9).contains(&x) {
        count(format!("{x:.2e}").parse::<f64>().unwrap_or(x).round() as u64)
    } else {
        short(x)
    }
}

fn method(page: &ComparisonPage, bibliography: &mut Bibliography) -> Vec<Block> {
    let ess = bibliography.cite(&[Source::Kong]);
    let tail = bibliography.cite(&[Source::ZhangStephens, Source::Vehtari]);
    let made = match page.aim {
        Aim::Density => {
            "Every contestant is the outcome of a whole tuning with an equal share of three fifths of the budget; the Gaussian one has no \
             heavy-tailed layers, the Student-t ones have. \"Moment matching\" is the plain loop: from the modes found, every Gaussian component \
             takes the weighted mean and covariance of its draws, round by round."
        }
        Aim::Expectation | Aim::Probability => {
            "Three fifths of the budget went into one tuning; each contestant is a cross-entropy fit of its family to the draws of that \
             tuning, mixed with 3 % of the density of the variables. \"Moment matching\" has one Gaussian with their weighted mean and \
             covariance; \"As tuned\" is the proposal that the tuning chose."
        }
    };
    let yard = format!(
        "Heavy tails are preferred where the light contestant's tail shape may exceed {TAIL_SOUND} (upper bound, nine chances in ten) and the heavy \
         one's does not, or where the light one's ESS fraction is lower by more than a point and by more than chance (1 %). Light tails are enough where \
         their tail shape is below the limit, or their weights too even for it to matter, heavy tails gain nothing that counts, and the \
         fitted degrees of freedom do not speak of a power tail. All else is undecided."
    );
    vec![
        Block::text(made),
        Block::Paragraph(vec![
            plain(
                "The rest of the budget was spent on fresh draws that neither made nor chose a proposal. The ESS fraction",
            ),
            ess,
            plain(" is the mean of the weights squared over the mean of their squares; the tail shape"),
            tail,
            plain(" says how heavy their largest are: above 0.5 their variance is not finite."),
        ]),
        Block::text(format!("Intervals, {}.", page.summary.intervals)),
        Block::text(
            "Differences are judged by the influence of every draw on both ESS fractions: random numbers that two proposals have in common \
             cancel. Beside it stands the error as if they had none. Where a tail shape is above 0.5 the error of a difference is not known.",
        ),
        Block::text(yard),
    ]
}

fn provenance(page: &ComparisonPage) -> Vec<Block> {
    let summary = &page.summary;
    let mut rows = vec![
        vec!["program".to_owned(), page.program.clone()],
        vec!["seed".to_owned(), summary.provenance.seed.to_string()],
        vec!["evaluations".to_owned(), count(summary.evaluations)],
        vec!["failed among fresh draws".to_owned(), count(summary.failed)],
        vec!["command".to_owned(), page.command.clone()],
    ];
    let digests = summary.provenance.digests.iter();
    rows.extend(digests.map(|(name, digest)| vec![format!("digest of {name}"), digest.clone()]));
    let given = summary.contestants.iter().any(|c| c.kind == Kind::Given);
    let mut blocks = vec![
        Block::Heading(2, "Provenance".into()),
        Block::table("Where the numbers come from", &["what", "value"], rows),
    ];
    if given {
        blocks.push(Block::text("Proposals named after a file were made before; what they cost is not counted here."));
    }
    blocks.push(Block::Heading(3, "The problem".into()));
    blocks.push(Block::Listing(page.statement.clone()));
    blocks
}
