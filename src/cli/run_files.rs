//! The files that a finished tuning leaves in its run folder.

use super::header;
use anyhow::Context;
use evenpoise::adapt::Tuning;
use evenpoise::figures::Drawing;
use evenpoise::figures::Style;
use evenpoise::problem::Problem;
use evenpoise::report::DrawsTable;
use evenpoise::report::RoundRow;
use evenpoise::report::RunData;
use evenpoise::report::Summary;
use evenpoise::report::draw_figures;
use evenpoise::report::write_rounds;
use evenpoise::store::MadeBy;
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
    let made_by = MadeBy {
        program: header::PROGRAM.to_owned(),
        digests: provenance.digests.clone(),
        seed,
        evaluations: tuning.evaluations,
    };
    let mut proposal = ProposalFile::new(problem, &tuning.chosen, made_by);
    proposal.scores = tuning.score.as_ref().map(ScoresEntry::of);
    proposal.verdict = Some(tuning.verdict.word.to_string());
    let draws = DrawsTable::of(problem, tuning);
    write_rounds(&folder.join("rounds.csv"), &tuning.rounds)?;
    draws.write(&folder.join("points.csv"))?;
    proposal.write(&folder.join("proposal.json"))?;
    let data = RunData {
        problem,
        mixture: &proposal.mixture().context("the chosen proposal, as its file gives it")?,
        draws: &draws,
        rounds: &tuning.rounds.iter().map(RoundRow::from).collect::<Vec<_>>(),
        survey_evaluations: tuning.survey.evaluations,
        evaluations: tuning.evaluations,
    };
    let figures = folder.create_inside("figures")?;
    write_figures(&figures, &draw_figures(&data, &[], &Style::default()), Form::Png)?;
    let summary = Summary::of(problem, tuning, provenance);
    write_json(&folder.join("summary.json"), &summary)?;
    Ok(summary)
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
