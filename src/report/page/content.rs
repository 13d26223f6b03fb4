//! What the page says, in order, before it has a form.

use super::blocks::{Block, Span, plain};
use super::data::{PageData, ScheduleKind};
use super::method;
use super::numbers::{UNKNOWN, column, count, measured, number, share, share_column, short};
use super::sources::Bibliography;
use crate::problem::Aim;
use crate::weights::TailReason;
use crate::weights::verdict::Word;

/// The mark that numbers of an unfit run bear.
pub(crate) const MARK: &str = "not to be reported";
/// Points of the survey and variables of a point that are shown.
const MOST_POINTS: usize = 12;
const MOST_COORDINATES: usize = 6;

/// What the word means for the reader.
pub(crate) fn meaning(word: Word) -> &'static str {
    match word {
        Word::Sound => "The numbers on this page may be reported.",
        Word::Strained => "The numbers on this page are usable, with the caution stated here.",
        Word::Unfit => "Do not report numbers from this run. They stand here so that the fault can be found.",
    }
}

/// The caution that goes with every computed probability.
pub(crate) const PROBABILITY_CAUTION: &str = "A computed probability depends on the model and on the distributions put in. It is no substitute \
     for the applicable code of practice or for review by a licensed professional, and it must not be the only ground for a decision that can \
     hurt people.";

/// All blocks below the title and the verdict.
pub(crate) fn blocks(data: &PageData) -> Vec<Block> {
    let mut bibliography = Bibliography::default();
    let mut blocks = answers(data);
    blocks.extend(problem(data));
    blocks.push(Block::Heading(2, "Method".into()));
    blocks.extend(method::paragraphs(data.aim, &mut bibliography));
    blocks.extend(survey(data));
    blocks.extend(tuning(data));
    blocks.extend(checks(data));
    blocks.extend(figures(data));
    blocks.extend(cautions(data));
    blocks.extend(provenance(data));
    blocks.push(Block::Heading(2, "Sources".into()));
    blocks.push(Block::Sources(bibliography.listed()));
    blocks
}

fn unfit(data: &PageData) -> bool {
    data.verdict.word == Word::Unfit
}

fn answers(data: &PageData) -> Vec<Block> {
    let mut blocks = vec![Block::Heading(2, "Answers".into())];
    let mark = if unfit(data) { format!(" ({MARK})") } else { String::new() };
    if data.answers.is_empty() {
        blocks.push(Block::text("No draw met the target, so there is no number to report."));
        return blocks;
    }
    let rows = data.answers.iter().map(|answer| {
        let [value, se, interval] = measured(answer.value, answer.se, answer.interval_95);
        let value = if answer.value.is_finite() { format!("{value}{mark}") } else { UNKNOWN.to_owned() };
        let name =
            if answer.note.is_empty() { answer.name.clone() } else { format!("{} ({})", answer.name, answer.note) };
        vec![name, value, se, interval, effective(answer.effective_draws)]
    });
    blocks.push(Block::table(
        &format!("Answers from {} report draws{mark}", count(data.run.report_draws)),
        &["quantity", "value#", "standard error#", "95 % interval#", "effective draws#"],
        rows.collect(),
    ));
    let mut methods: Vec<&str> = Vec::new();
    for answer in &data.answers {
        if !methods.contains(&answer.interval_method.as_str()) {
            methods.push(&answer.interval_method);
        }
    }
    let aim = match data.aim {
        Aim::Density => {
            "The normalising constant is that of the density as stated below; the other quantities are means under it."
        }
        Aim::Expectation => "Means under the distributions of the variables.",
        Aim::Probability => "The probability of the event as stated below, under the distributions of the variables.",
    };
    blocks.push(Block::text(format!(
        "{aim} Effective draws: how many independent draws would know the quantity as well. Intervals: {}.",
        methods.join(", ")
    )));
    blocks
}

fn problem(data: &PageData) -> Vec<Block> {
    let d = data.variables.len();
    let many = if d == 1 { "one variable".to_owned() } else { format!("{d} variables") };
    let stated = match data.aim {
        Aim::Density => format!(
            "Wanted are the logarithm of the normalising constant Z = ∫ f(x) dx over {many} x, and means under the density f(x) / Z. \
             The logarithm of f is the sum of the log densities of all variables that have a distribution and of the factor stated in the problem."
        ),
        Aim::Expectation => format!(
            "Wanted is the mean E[h(x)] = ∫ h(x) p(x) dx of the integrand h, where p is the joint density of {many} x."
        ),
        Aim::Probability => {
            format!(
                "Wanted is the probability P = ∫ 1[x in the event] p(x) dx, where p is the joint density of {many} x."
            )
        }
    };
    let rows = data.variables.iter().map(|v| {
        let mut name = v.name.clone();
        let remarks: Vec<&str> = v.label.iter().chain(&v.note).map(String::as_str).collect();
        if !remarks.is_empty() {
            name = format!("{name} ({})", remarks.join("; "));
        }
        let support = match v.support {
            [low, high] if low.is_nan() || high.is_nan() => "depends on others".to_owned(),
            [low, high] => format!("{} to {}", number(low), number(high)),
        };
        let support = if v.discrete { format!("{support}, whole numbers") } else { support };
        let [centre, low, high] = v.start;
        vec![
            name,
            v.unit.clone().unwrap_or_else(|| "–".into()),
            v.law.clone(),
            support,
            v.coordinate.to_owned(),
            format!("{} ({} to {})", short(centre), short(low), short(high)),
        ]
    });
    let mut blocks = vec![
        Block::Heading(2, "Problem".into()),
        Block::text(stated),
        Block::table(
            "Variables; the start is its centre and its central 95 %",
            &["variable", "unit", "distribution", "support", "coordinate", "start"],
            rows.collect(),
        ),
        Block::text(
            "The proposal sees every variable in a coordinate that lives on the whole line: the variable itself (natural), the logarithm of its \
             distance to the end of its support (log), the log odds of its place between both ends (logit), or its standard normal score. \
             Jacobians are included, and every number on this page is in the variables' own units.",
        ),
    ];
    blocks.extend(data.notes.iter().map(Block::text));
    let formulas = excerpt(&data.statement);
    if !formulas.is_empty() {
        blocks.push(Block::text(
            "Constants, formulas and target, as the problem file states them (the whole file is at the end):",
        ));
        blocks.push(Block::Listing(formulas));
    }
    blocks
}

/// Constants, formulas, target and estimates out of a problem file: its tables of other names are shown elsewhere.
fn excerpt(statement: &str) -> String {
    const SHOWN: [&str; 4] = ["[constants]", "[formulas]", "[target]", "[estimates]"];
    let mut out = String::new();
    let mut shown = false;
    for line in statement.lines() {
        if line.starts_with('[') {
            shown = SHOWN.contains(&line);
        }
        if shown && line != "require = []" {
            out.push_str(line);
            out.push('\n');
        }
    }
    out.trim().to_owned()
}

/// Independent draws that would do as well.
fn effective(draws: f64) -> String {
    if (0.0..1e15).contains(&draws) { count(draws.round() as u64) } else { short(draws) }
}

fn survey(data: &PageData) -> Vec<Block> {
    let survey = &data.survey;
    let mut blocks = vec![Block::Heading(2, "Survey".into()), Block::text(survey.sentences.join(" "))];
    if !survey.points.is_empty() {
        let rows = survey.points.iter().take(MOST_POINTS).enumerate().map(|(k, point)| {
            let mut place: Vec<String> = data
                .variables
                .iter()
                .zip(&point.location)
                .take(MOST_COORDINATES)
                .map(|(v, x)| format!("{} = {}", v.name, short(*x)))
                .collect();
            if point.location.len() > MOST_COORDINATES {
                place.push("…".into());
            }
            vec![(k + 1).to_string(), place.join(", "), share(point.share), count(u64::from(point.hits))]
        });
        let caption = match survey.points.len() {
            n if n > MOST_POINTS => format!("The first {MOST_POINTS} of {n} {}s found", survey.point_name),
            _ => format!("Every {} found", survey.point_name),
        };
        blocks.push(Block::table(
            &caption,
            &[survey.point_name, "place", "share of the mass by curvature#", "searches that ended there#"],
            rows.collect(),
        ));
    }
    blocks.push(Block::Paragraph(vec![
        Span::Strong("What could have been missed: ".into()),
        plain(format!(
            "one that attracts {} of the start or less may have been missed with a chance of 5 % and more (1 − 0.05^(1/searches)).",
            share(survey.basin_share)
        )),
    ]));
    blocks
}

fn tuning(data: &PageData) -> Vec<Block> {
    let mut blocks = vec![Block::Heading(2, "Tuning".into())];
    if data.rounds.is_empty() {
        blocks.push(Block::text("No round was made."));
        return blocks;
    }
    let estimates = data.rounds.iter().any(|r| r.estimate.is_some());
    let mut titles = vec![
        "round",
        "draws#",
        "evaluations#",
        "components#",
        "degrees of freedom#",
        "ESS predicted#",
        "ESS fresh#",
        "weight variance#",
        "tail shape#",
        "largest share#",
    ];
    if estimates {
        titles.extend(["estimate#", "its variation#"]);
    }
    let rows = data.rounds.iter().map(|r| {
        let mut row = vec![
            r.index.to_string(),
            count(u64::from(r.draws)),
            count(r.evaluations),
            count(r.components as u64),
            column(r.df),
            share_column(r.predicted_ess_fraction),
            share_column(r.ess_fraction),
            column(r.weight_variance),
            column(r.tail_shape),
            share_column(r.largest_share),
        ];
        if estimates {
            let [value, variation] = r.estimate.unwrap_or([f64::NAN; 2]);
            row.extend([column(value), share_column(variation)]);
        }
        row
    });
    blocks.push(Block::text(
        "Every round is scored on its own draws, which had no part in making the proposal they come from. ESS: effective sample size as a share of \
         the draws. Infinite degrees of freedom are Gaussian components.",
    ));
    blocks.push(Block::table("Rounds", &titles, rows.collect()));
    blocks.push(Block::text(format!("The rounds ended because {}.", data.stop)));
    blocks.extend(winners(data));
    if !data.finalists.is_empty() {
        let rows = data.finalists.iter().map(|f| {
            vec![
                f.name.clone(),
                share_column(f.predicted_ess_fraction),
                share_column(f.ess_fraction),
                if f.chosen { "chosen" } else { "not chosen" }.to_owned(),
            ]
        });
        blocks.push(Block::table("Finalists", &["proposal", "ESS predicted#", "ESS fresh#", "choice"], rows.collect()));
    }
    blocks.push(Block::text(data.proposal.clone()));
    blocks
}

fn winners(data: &PageData) -> Vec<Block> {
    let fitted: Vec<_> = data.rounds.iter().filter(|r| r.tried > 0).collect();
    if fitted.is_empty() {
        return Vec::new();
    }
    let schedule = match data.schedule {
        ScheduleKind::Exponent => "exponent#",
        ScheduleKind::Smoothing => "smoothing#",
    };
    let rows = fitted.iter().map(|r| {
        vec![
            r.index.to_string(),
            column(r.schedule),
            count(r.tried as u64),
            r.winner.clone(),
            column(r.gain),
            count(u64::from(r.births)),
        ]
    });
    let mut blocks = vec![Block::table(
        "Refits after the rounds, and who won",
        &["after round", schedule, "candidates#", "winner", "gain, nats#", "births#"],
        rows.collect(),
    )];
    let mut kinds: Vec<&str> = Vec::new();
    for round in fitted {
        if !kinds.contains(&round.winner.as_str()) {
            kinds.push(&round.winner);
        }
    }
    let explained: Vec<String> = kinds.iter().map(|kind| format!("{kind}, {}", method::refit_kind(kind))).collect();
    let what = match data.schedule {
        ScheduleKind::Exponent => "Exponent: the power of the target that the fit aimed at; 1 is the target itself.",
        ScheduleKind::Smoothing => "Smoothing: the width of the smoothed event; 0 is the event itself.",
    };
    blocks.push(Block::text(format!(
        "{what} Gain: weighted log density on held-out points over the present proposal's. Births: components added at heavy draws. \
         Winners: {}.",
        explained.join("; ")
    )));
    blocks
}

fn checks(data: &PageData) -> Vec<Block> {
    let mut blocks = vec![Block::Heading(2, "Checks".into())];
    if let Some(score) = &data.score {
        let interval = score
            .ess_fraction_interval
            .map_or(String::new(), |[low, high]| format!(" (95 %: {} to {})", share(low), share(high)));
        let tail = match score.tail.reason {
            TailReason::Fitted => format!("{}, at most {} with 90 %", short(score.tail.shape), short(score.tail.upper)),
            TailReason::Bounded => "bounded: the largest weights are all equal".to_owned(),
            TailReason::TooFew => "not known: too few draws in the tail".to_owned(),
        };
        let row = |name: &str, value: String| vec![name.to_owned(), value];
        let rows = vec![
            row("report draws", count(score.draws as u64)),
            row(
                "effective sample size",
                format!("{} draws = {}{interval}", effective(score.ess), share(score.ess_fraction)),
            ),
            row("weight variance", short(score.weight_variance)),
            row("perplexity", short(score.perplexity)),
            row("tail shape", tail),
            row("largest share of one draw", share(score.largest_share)),
        ];
        blocks.push(Block::table("Scores of the report draws", &["score", "value"], rows));
    }
    let rows = data.verdict.checks.iter().map(|check| {
        vec![
            check.name.to_owned(),
            short(check.value),
            check.limit.clone(),
            check.word.to_string(),
            check.detail.clone(),
        ]
    });
    blocks.push(Block::text("Every check has a number, a limit and a word; the worst word is the verdict."));
    blocks.push(Block::table("Checks", &["check", "number#", "limit", "word", "in words"], rows.collect()));
    blocks
}

fn figures(data: &PageData) -> Vec<Block> {
    if data.figures.is_empty() {
        return Vec::new();
    }
    let mut blocks = vec![Block::Heading(2, "Figures".into())];
    blocks.extend((0..data.figures.len()).map(Block::Figure));
    blocks
}

fn cautions(data: &PageData) -> Vec<Block> {
    let mut blocks = vec![Block::Heading(2, "Cautions".into())];
    if data.aim == Aim::Probability {
        blocks.push(Block::Caution(vec![plain(PROBABILITY_CAUTION)]));
    }
    blocks.push(Block::List(vec![
        vec![plain(data.verdict.caution.clone())],
        vec![plain("Standard errors speak of the sampling alone. That the model and the data describe the world is not among the things checked here.")],
        vec![plain(
            "A tail shape says how the heaviest draws met so far fall off. Draws that are rarer than one in the number of draws are not in it.",
        )],
    ]));
    blocks
}

fn provenance(data: &PageData) -> Vec<Block> {
    let run = &data.run;
    let row = |name: &str, value: String| vec![name.to_owned(), value];
    let mut rows = vec![
        row("program", run.program.clone()),
        row("seed", run.seed.to_string()),
        row("evaluations", format!("{}, of which {} failed", count(run.evaluations), count(run.failed))),
        row("of these, survey", count(data.survey.evaluations)),
        row("of these, report draws", count(run.report_draws)),
    ];
    rows.extend(run.digests.iter().map(|(name, digest)| row(&format!("digest of {name}"), digest.clone())));
    vec![
        Block::Heading(2, "Provenance".into()),
        Block::table("Where the numbers come from", &["item", "value"], rows),
        Block::Heading(3, "How to make this run again".into()),
        Block::Listing(run.command.clone()),
        Block::text(
            "The same program version, problem, data and seed give the same bytes, whatever the machine's number of threads: digests that agree \
             with those above mean that the inputs are the same.",
        ),
        Block::Heading(3, "The problem as it was read".into()),
        Block::Listing(data.statement.clone()),
    ]
}
