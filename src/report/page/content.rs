//! What the page says, in order, before it has a form.

use super::blocks::{Block, plain};
use super::course::{survey, tuning};
use super::data::PageData;
use super::method;
use super::numbers::{UNKNOWN, count, measured, number, share, short};
use super::sources::Bibliography;
use crate::problem::Aim;
use crate::report::PROBABILITY_NOTE;
use crate::report::places::resolved;
use crate::weights::TailReason;
use crate::weights::verdict::Word;

/// The mark that numbers of an unfit run bear.
pub(crate) const MARK: &str = "not to be reported";

/// What the word means for the reader.
pub(crate) fn meaning(word: Word) -> &'static str {
    match word {
        Word::Sound => "The numbers on this page may be reported.",
        Word::Strained => "The numbers on this page are usable, with the caution stated here.",
        Word::Unfit => "Do not report numbers from this run. They stand here so that the fault can be found.",
    }
}

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
        &format!("Answers from {} {}{mark}", count(data.run.report_draws), drawn(data.aim)),
        &["quantity", "value#", "standard error#", "95 % interval#", "effective draws#"],
        rows.collect(),
    ));
    let mut methods: Vec<&str> = Vec::new();
    for answer in &data.answers {
        let method = answer.interval_method.as_str();
        if !method.is_empty() && !methods.contains(&method) {
            methods.push(method);
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
    blocks.extend(data.remarks.iter().map(Block::text));
    blocks
}

/// What the draws are called that the answers rest on.
pub(crate) fn drawn(aim: Aim) -> &'static str {
    match aim {
        Aim::Density => "report draws",
        Aim::Probability | Aim::Expectation => "draws of the counted rounds",
    }
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
        vec![name, v.unit.clone().unwrap_or_else(|| "–".into()), v.law.clone(), support, v.coordinate.to_owned(), {
            let [centre, low, high] = [centre, low, high].map(|x| resolved(x, high - low));
            format!("{centre} ({low} to {high})")
        }]
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
        blocks.push(Block::Caution(vec![plain(PROBABILITY_NOTE)]));
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
        row(&format!("of these, {}", drawn(data.aim)), count(run.report_draws)),
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
