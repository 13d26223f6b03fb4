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
use evenpoise::report::RareFacts;
use evenpoise::report::RareSummary;
use evenpoise::report::RoundRow;
use evenpoise::report::RunData;
use evenpoise::report::Summary;
use evenpoise::report::draw_figures;
use evenpoise::report::page::PageData;
use evenpoise::report::page::PageFigure;
use evenpoise::report::page::html;
use evenpoise::report::page::markdown;
use evenpoise::report::write_rare_rounds;
use evenpoise::report::write_rounds;
use evenpoise::store::ProposalFile;
use evenpoise::store::RunFolder;
use evenpoise::store::ScoresEntry;
use evenpoise::store::StoreError;
use evenpoise::store::write_atomically;
use evenpoise::store::write_json;
use rayon::prelude::*;
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
    let made_by = header::made_by(problem, &provenance, tuning.evaluations);
    let mut proposal = ProposalFile::new(problem, &tuning.chosen, made_by);
    proposal.scores = tuning.score.as_ref().map(ScoresEntry::of);
    proposal.verdict = Some(tuning.verdict.word.to_string());
    write_rounds(&folder.join("rounds.csv"), &tuning.rounds)?;
    let rounds: Vec<RoundRow> = tuning.rounds.iter().map(RoundRow::from).collect();
    let draws = DrawsTable::of(problem, tuning);
    let evaluations = Evaluations { all: tuning.evaluations, survey: tuning.survey.evaluations };
    let figures = write_common(folder, problem, &proposal, &draws, &rounds, evaluations, None)?;
    let facts =
        header::facts_of_run(&provenance, evaluations.all, tuning.failed, draws.len(), problem.text_for(folder.path()));
    write_page(folder, &PageData::of_density(problem, tuning, figures, facts))?;
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
    let made_by = header::made_by(problem, &provenance, tuning.evaluations);
    let facts = header::facts_of_run(
        &provenance,
        tuning.evaluations,
        tuning.failed,
        tuning.draws.log_nominal.len(),
        problem.text_for(folder.path()),
    );
    let summary = RareSummary::of(problem, tuning, provenance);
    let mut proposal = ProposalFile::new(problem, &tuning.chosen, made_by);
    proposal.scores = Some(summary.scores(tuning));
    proposal.verdict = Some(tuning.verdict.word.to_string());
    write_rare_rounds(&folder.join("rounds.csv"), problem.aim(), &tuning.rounds)?;
    let rounds: Vec<RoundRow> = tuning.rounds.iter().map(RoundRow::from).collect();
    let draws = DrawsTable::of_rare(problem, &tuning.draws);
    let evaluations = Evaluations { all: tuning.evaluations, survey: tuning.survey.evaluations };
    let figures = write_common(folder, problem, &proposal, &draws, &rounds, evaluations, Some(&RareFacts::of(tuning)))?;
    write_page(folder, &PageData::of_rare(problem, tuning, figures, facts))?;
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
    rare: Option<&RareFacts>,
) -> anyhow::Result<Vec<PageFigure>> {
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
        rare,
    };
    let drawings = draw_figures(&data, &[], &Style::default());
    let figures: Vec<PageFigure> = drawings.par_iter().map(PageFigure::of).collect();
    let inside = folder.create_inside("figures")?;
    write_tables(&inside, &drawings)?;
    for figure in &figures {
        write_bytes(&inside.join(format!("{}.png", figure.name)), &figure.png)?;
    }
    Ok(figures)
}

/// The report, as a page and as Markdown.
fn write_page(folder: &RunFolder, data: &PageData) -> Result<(), StoreError> {
    write_bytes(&folder.join("report.html"), html(data).as_bytes())?;
    write_bytes(&folder.join("report.md"), markdown(data).as_bytes())
}

/// Writes figures, the numbers behind each, and their captions.
pub(crate) fn write_figures(folder: &Path, drawings: &[Drawing], form: Form) -> anyhow::Result<()> {
    let drawn: Vec<(String, Vec<u8>)> = match form {
        Form::Png => drawings.par_iter().map(|d| (format!("{}.png", d.name), d.png())).collect(),
        Form::Svg => drawings.par_iter().map(|d| (format!("{}.svg", d.name), d.svg().into_bytes())).collect(),
    };
    for (name, bytes) in drawn {
        write_bytes(&folder.join(name), &bytes)?;
    }
    write_tables(folder, drawings)
}

/// Writes the numbers behind figures, and their captions.
fn write_tables(folder: &Path, drawings: &[Drawing]) -> anyhow::Result<()> {
    let mut captions = String::from("# Captions\n");
    for drawing in drawings {
        write_bytes(&folder.join(format!("{}.csv", drawing.name)), drawing.table.to_csv()?.as_bytes())?;
        captions.push_str(&format!("\n## {}\n\n{}\n", drawing.name, drawing.caption));
    }
    Ok(write_bytes(&folder.join("captions.md"), captions.as_bytes())?)
}

pub(crate) fn write_bytes(path: &Path, bytes: &[u8]) -> Result<(), StoreError> {
    write_atomically(path, |file| file.write_all(bytes))
}
