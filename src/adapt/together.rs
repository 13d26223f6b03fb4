//! Several searches at once, whose questions go out together.
//!
//! A model outside the file is asked best for many points at a time: every worker is busy, and where somebody has to
//! answer files, there are few. Each search is written as if it were alone and runs in a thread of its own; whenever all
//! that still run have asked, their points are evaluated as one batch, in the order of the searches. No search sees
//! another one's answers, so the outcome does not depend on how the threads take turns.

use super::TuneError;
use crate::numeric::Points;
use std::sync::Mutex;
use std::sync::PoisonError;
use std::sync::mpsc::Receiver;
use std::sync::mpsc::Sender;
use std::sync::mpsc::channel;
use std::thread;

/// What a search says.
enum Message {
    Asks(Points),
    Ended,
}

/// The line of one search to whoever evaluates; one answer of type `A` a point.
pub(crate) struct Line<A> {
    number: usize,
    out: Sender<(usize, Message)>,
    back: Receiver<Vec<A>>,
}

impl<A> Line<A> {
    /// Answers to the points.
    pub(crate) fn ask(&self, points: &Points) -> Result<Vec<A>, TuneError> {
        let hung_up = || TuneError::Survey("the other searches have stopped".to_owned());
        self.out.send((self.number, Message::Asks(points.clone()))).map_err(|_| hung_up())?;
        self.back.recv().map_err(|_| hung_up())
    }
}

impl<A> Drop for Line<A> {
    fn drop(&mut self) {
        // Nobody listens any more where the evaluation failed.
        let _ = self.out.send((self.number, Message::Ended));
    }
}

/// Runs `count` searches; `evaluate` answers all that they ask at the same time. What they found, in their order.
pub(crate) fn together<A: Send, T: Send>(
    count: usize,
    search: impl Fn(usize, Line<A>) -> Result<T, TuneError> + Sync,
    mut evaluate: impl FnMut(&Points) -> Result<Vec<A>, TuneError>,
) -> Result<Vec<T>, TuneError> {
    let (out, asked) = channel();
    let ends: Mutex<Vec<Option<Result<T, TuneError>>>> = Mutex::new((0..count).map(|_| None).collect());
    thread::scope(|scope| {
        let mut backs: Vec<Option<Sender<Vec<A>>>> = Vec::new();
        for number in 0..count {
            let (answer, back) = channel();
            backs.push(Some(answer));
            let line = Line { number, out: out.clone(), back };
            let (search, ends) = (&search, &ends);
            scope.spawn(move || {
                let found = search(number, line);
                ends.lock().unwrap_or_else(PoisonError::into_inner)[number] = Some(found);
            });
        }
        drop(out);
        serve(&asked, &mut backs, &mut evaluate)
    })?;
    let ends = ends.into_inner().unwrap_or_else(PoisonError::into_inner);
    ends.into_iter().flatten().collect()
}

/// Evaluates round after round until all searches have ended. On an error all lines are cut.
fn serve<A>(
    asked: &Receiver<(usize, Message)>,
    backs: &mut [Option<Sender<Vec<A>>>],
    evaluate: &mut impl FnMut(&Points) -> Result<Vec<A>, TuneError>,
) -> Result<(), TuneError> {
    let mut running = backs.len();
    let mut questions: Vec<Option<Points>> = backs.iter().map(|_| None).collect();
    let mut open = 0;
    while running > 0 {
        let Ok((number, message)) = asked.recv() else { break };
        match message {
            Message::Ended => running -= 1,
            Message::Asks(points) => {
                questions[number] = Some(points);
                open += 1;
            }
        }
        if open == 0 || open < running {
            continue;
        }
        let mut all: Option<Points> = None;
        for points in questions.iter().flatten() {
            match &mut all {
                Some(all) => all.extend(points),
                None => all = Some(points.clone()),
            }
        }
        let answers = all.map_or(Ok(Vec::new()), |all| evaluate(&all));
        let Ok(answers) = answers else {
            backs.iter_mut().for_each(|back| *back = None);
            return answers.map(drop);
        };
        let mut answers = answers.into_iter();
        for (question, back) in questions.iter_mut().zip(&*backs) {
            if let (Some(points), Some(back)) = (question.take(), back) {
                // A search that is gone needs no answer.
                let _ = back.send(answers.by_ref().take(points.len()).collect());
            }
        }
        open = 0;
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn questions_go_out_together_and_answers_find_their_way() {
        let mut batches = Vec::new();
        // Search k asks k + 1 times for the numbers 10 k + its turn; the answer is twice the number.
        let found = together(
            4,
            |k, line: Line<f64>| {
                let mut sum = 0.0;
                for turn in 0..=k {
                    sum += line.ask(&Points::from_rows(1, &[(10 * k + turn) as f64, 0.5]))?[0];
                }
                Ok(sum)
            },
            |points| {
                batches.push(points.coordinate(0));
                Ok(points.coordinate(0).iter().map(|x| 2.0 * x).collect())
            },
        )
        .unwrap();
        assert_eq!(found, [0.0, 42.0, 126.0, 252.0]);
        assert_eq!(batches.len(), 4);
        assert_eq!(batches[0], [0.0, 0.5, 10.0, 0.5, 20.0, 0.5, 30.0, 0.5]);
        assert_eq!(batches[3], [33.0, 0.5]);
    }

    #[test]
    fn an_error_ends_all_of_them() {
        let refused = together(
            3,
            |_, line: Line<f64>| {
                line.ask(&Points::from_rows(1, &[1.0]))?;
                line.ask(&Points::from_rows(1, &[2.0])).map(|_| ())
            },
            |points| match points.get(0, 0) {
                1.0 => Ok(points.coordinate(0)),
                _ => Err(TuneError::Unbounded),
            },
        );
        assert!(matches!(refused, Err(TuneError::Unbounded)));
    }
}
