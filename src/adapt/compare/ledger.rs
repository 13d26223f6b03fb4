//! Evaluations of a comparison: counted once, those of the survey shared by all tunings.

use crate::adapt::TuneError;
use crate::adapt::observer::{Answers, Batch, Observer, Stage};
use crate::adapt::rare::{RareRound, RareSurvey};
use crate::adapt::tuning::{Round, Survey};
use crate::numeric::Points;
use crate::problem::Problem;

/// Stands between the tunings and the observer of the comparison.
pub(super) struct Ledger<'a> {
    problem: &'a Problem,
    observer: &'a mut dyn Observer,
    /// Points that were evaluated.
    paid: u64,
    /// What the first survey asked, in order, with its answers.
    survey: Vec<(Points, bool, Answers)>,
    /// The survey at hand has asked so often; none once it went its own way.
    place: Option<usize>,
    /// Whether any of it was not paid again.
    shared: bool,
}

impl<'a> Ledger<'a> {
    pub(super) fn new(problem: &'a Problem, observer: &'a mut dyn Observer) -> Self {
        Self { problem, observer, paid: 0, survey: Vec::new(), place: None, shared: false }
    }

    /// Evaluations so far.
    pub(super) fn paid(&self) -> u64 {
        self.paid
    }

    /// Evaluations of the survey that more than one tuning had part in.
    pub(super) fn survey(&self) -> u64 {
        if self.shared { self.survey.iter().map(|(points, ..)| points.len() as u64).sum() } else { 0 }
    }

    /// Another contestant's turn.
    pub(super) fn begin(&mut self, name: &str) {
        self.observer.contestant(name);
        self.place = Some(0);
    }

    /// Evaluates fresh draws.
    pub(super) fn evaluate(&mut self, points: &Points) -> Result<Answers, TuneError> {
        let batch = Batch { stage: Stage::Compare, first: self.paid, points, gradient: false };
        if self.observer.interrupted() {
            return Err(TuneError::Interrupted { evaluations: self.paid });
        }
        let answers = match self.observer.recorded(&batch) {
            Some(answers) => answers,
            None => {
                let evaluation = self.problem.evaluate(points)?;
                let gradients = Points::new(points.dim());
                let (log_density, value, hit) = (evaluation.log_density, evaluation.value, evaluation.hit);
                let answers = Answers { log_density, gradients, value, hit };
                self.observer.evaluated(&batch, &answers).map_err(TuneError::Observer)?;
                answers
            }
        };
        self.paid += points.len() as u64;
        Ok(answers)
    }

    fn remember(&mut self, batch: &Batch, answers: &Answers) {
        // Only the first survey is kept; a later one that goes its own way pays for itself.
        if batch.stage == Stage::Survey && self.place == Some(self.survey.len()) {
            self.survey.push((batch.points.clone(), batch.gradient, answers.clone()));
            self.place = Some(self.survey.len());
        } else {
            self.place = None;
        }
        self.paid += batch.points.len() as u64;
    }
}

impl Observer for Ledger<'_> {
    fn recorded(&mut self, batch: &Batch) -> Option<Answers> {
        let place = self.place.filter(|_| batch.stage == Stage::Survey);
        let known = place.and_then(|place| self.survey.get(place));
        if let Some((points, gradient, answers)) = known
            && points == batch.points
            && *gradient == batch.gradient
        {
            self.place = place.map(|place| place + 1);
            self.shared = true;
            return Some(answers.clone());
        }
        let answers = self.observer.recorded(&Batch { first: self.paid, ..*batch })?;
        self.remember(batch, &answers);
        Some(answers)
    }

    fn evaluated(&mut self, batch: &Batch, answers: &Answers) -> Result<(), crate::BoxError> {
        self.observer.evaluated(&Batch { first: self.paid, ..*batch }, answers)?;
        self.remember(batch, answers);
        Ok(())
    }

    fn stage(&mut self, stage: Stage) {
        self.observer.stage(stage);
    }

    fn surveyed(&mut self, survey: &Survey) {
        self.observer.surveyed(survey);
    }

    fn round(&mut self, round: &Round) {
        self.observer.round(round);
    }

    fn rare_surveyed(&mut self, survey: &RareSurvey) {
        self.observer.rare_surveyed(survey);
    }

    fn rare_round(&mut self, round: &RareRound) {
        self.observer.rare_round(round);
    }

    fn interrupted(&self) -> bool {
        self.observer.interrupted()
    }
}
