//! The files that a finished tuning leaves in its run folder.

use super::header;
use anyhow::Context;
use evenpoise::adapt::Tuning;
use evenpoise::adapt::rare::RareTuning;
use evenpoise::figures::Drawing;
use evenpoise::figures::Style;
use evenpoise::problem::Problem;
use evenpoise::report::DrawsTable;
use evenpoise::report::Evaluations;
use evenpoise::report::RareSummary;
use evenpoise::report::RoundRow;
use evenpoise::report::RunData;
use evenpoise::report::Summary;
use evenpoise::report::draw_figures;
use evenpoise::report::write_rare_rounds;
use evenpoise::report::write_rounds;
use evenpoise::store::ProposalFile;
use evenpoise::store::RunFolder;
use evenpoise::store::ScoresEntry;
use evenpoise::store::StoreError;
use evenpoise::store::write_atomically;
use evenpoise::store::write_json;
use std::path::Path;

/// Form of a figure's file.
#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
pub(crate) enum Form {
    /// Pixels, 300 to the inch.
    Png,
    /// Lines and letters.
    Svg,
}

/// Writes everything but the timings and the log, and gives the summary back.
pub(crate) fn write(folder: &RunFolder, problem: &Problem, tuning: &Tuning, seed: u64) -> anyhow::Result<Summary> {
    let provenance = header::provenance(problem, seed);
    let made_by = header::made_by(&provenance, tuning.evaluations);
    let mut proposal = ProposalFile::new(problem, &tuning.chosen, made_by);
    proposal.scores = tuning.score.as_ref().map(ScoresEntry::of);
    proposal.verdict = Some(tuning.verdict.word.to_string());
    write_rounds(&folder.join("rounds.csv"), &tuning.rounds)?;
    let rounds: Vec<RoundRow> = tuning.rounds.iter().map(RoundRow::from).collect();
    let draws = DrawsTable::of(problem, tuning);
    let evaluations = Evaluations { all: tuning.evaluations, survey: tuning.survey.evaluations };
    write_common(folder, problem, &proposal, &draws, &rounds, evaluations)?;
    let summary = Summary::of(problem, tuning, provenance);
    write_json(&folder.join("summary.json"), &summary)?;
    Ok(summary)
}

/// The same for a probability or an expectation.
pub(crate) fn write_rare(
    folder: &RunFolder,
    problem: &Problem,
    tuning: &RareTuning,
    seed: u64,
) -> anyhow::Result<RareSummary> {
    let provenance = header::provenance(problem, seed);
    let made_by = header::made_by(&provenance, tuning.evaluations);
    let summary = RareSummary::of(problem, tuning, provenance);
    let mut proposal = ProposalFile::new(problem, &tuning.chosen, made_by);
    proposal.scores = Some(summary.scores(tuning));
    proposal.verdict = Some(tuning.verdict.word.to_string());
    write_rare_rounds(&folder.join("rounds.csv"), problem.aim(), &tuning.rounds)?;
    let rounds: Vec<RoundRow> = tuning.rounds.iter().map(RoundRow::from).collect();
    let draws = DrawsTable::of_rare(problem, &tuning.draws);
    let evaluations = Evaluations { all: tuning.evaluations, survey: tuning.survey.evaluations };
    write_common(folder, problem, &proposal, &draws, &rounds, evaluations)?;
    write_json(&folder.join("summary.json"), &summary)?;
    Ok(summary)
}

fn write_common(
    folder: &RunFolder,
    problem: &Problem,
    proposal: &ProposalFile,
    draws: &DrawsTable,
    rounds: &[RoundRow],
    evaluations: Evaluations,
) -> anyhow::Result<()> {
    draws.write(&folder.join("points.csv"))?;
    proposal.write(&folder.join("proposal.json"))?;
    let mixture = proposal.mixture().context("the chosen proposal, as its file gives it")?;
    let data = RunData {
        problem,
        mixture: &mixture,
        draws,
        rounds,
        survey_evaluations: evaluations.survey,
        evaluations: evaluations.all,
    };
    let figures = folder.create_inside("figures")?;
    write_figures(&figures, &draw_figures(&data, &[], &Style::default()), Form::Png)
}

/// Writes figures, the numbers behind each, and their captions.
pub(crate) fn write_figures(folder: &Path, drawings: &[Drawing], form: Form) -> anyhow::Result<()> {
    let mut captions = String::from("# Captions\n");
    for drawing in drawings {
        match form {
            Form::Png => write_bytes(&folder.join(format!("{}.png", drawing.name)), &drawing.png())?,
            Form::Svg => write_bytes(&folder.join(format!("{}.svg", drawing.name)), drawing.svg().as_bytes())?,
        }
        write_bytes(&folder.join(format!("{}.csv", drawing.name)), drawing.table.to_csv()?.as_bytes())?;
        captions.push_str(&format!("\n## {}\n\n{}\n", drawing.name, drawing.caption));
    }
    Ok(write_bytes(&folder.join("captions.md"), captions.as_bytes())?)
}

pub(crate) fn write_bytes(path: &Path, bytes: &[u8]) -> Result<(), StoreError> {
    write_atomically(path, |file| file.write_all(bytes))
}
