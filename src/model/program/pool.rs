//! The workers of a program: who answers which points, and what happens when one of them does not.
//!
//! Points are handed out in batches, one batch a worker at a time: between two batches a worker is seen to be silent, so
//! that an answer too few or too many cannot slip into the next batch. Answers are kept by the number of their point;
//! nothing depends on which worker gave them or on how the batches were cut.

use super::mishap::Cause;
use super::mishap::Mishap;
use super::mishap::ProgramError;
use super::pace::Pace;
use super::protocol::decimal;
use super::spec::ProgramSpec;
use super::worker::Event;
use super::worker::Tagged;
use super::worker::Worker;
use crate::model::ModelError;
use crate::model::Surroundings;
use crate::numeric::Points;
use std::collections::VecDeque;
use std::sync::Arc;
use std::sync::mpsc::Receiver;
use std::sync::mpsc::Sender;
use std::sync::mpsc::channel;
use std::time::Duration;
use std::time::Instant;

/// How often an interruption is looked for.
const TICK: Duration = Duration::from_millis(50);
/// After its first batch a new process must be silent for so long: what it says unasked would be taken for an answer.
const SETTLE: Duration = Duration::from_millis(5);
/// Mishaps of a program that has never answered, after which it is not tried again.
const BARREN: u32 = 3;
/// Mishaps in a row that made points be given up, without any answer between, after which the run stops.
const GIVEN_UP: usize = 20;
/// Restarts, and points given up, that are told one by one; the others go to the log.
const TOLD: u64 = 10;
/// After a mishap the rest of a batch is cut into so many pieces.
const PIECES: usize = 8;

/// Points that a worker is asked, by their numbers.
#[derive(Debug)]
struct Task {
    points: Vec<usize>,
    /// The first point was answered before: its answer must be the same again.
    check_first: bool,
}

#[derive(Debug)]
enum Slot {
    Empty,
    Idle(Worker),
    /// A new worker after its first batch.
    Settling(Worker, Instant),
    Busy(Busy),
}

#[derive(Debug)]
struct Busy {
    worker: Worker,
    task: Task,
    answered: usize,
    sent: Instant,
    heard: Instant,
    first: bool,
}

/// All workers of a program.
pub(crate) struct Pool {
    spec: ProgramSpec,
    slots: Vec<Slot>,
    sender: Sender<Tagged>,
    events: Receiver<Tagged>,
    started: u64,
    pace: Pace,
    ever_answered: bool,
    barren: u32,
    given_up_in_a_row: usize,
    given_up: u64,
    restarts: u64,
    surroundings: Arc<dyn Surroundings>,
}

/// One call: the points, and what is known of them.
struct Call<'a> {
    inputs: &'a Points,
    width: usize,
    answers: Vec<f64>,
    asked: Vec<u32>,
    next: usize,
    again: VecDeque<Task>,
}

impl Pool {
    pub(crate) fn new(spec: &ProgramSpec, surroundings: Arc<dyn Surroundings>) -> Self {
        let (sender, events) = channel();
        let slots = (0..spec.workers.max(1)).map(|_| Slot::Empty).collect();
        Self {
            spec: spec.clone(),
            slots,
            sender,
            events,
            started: 0,
            pace: Pace::default(),
            ever_answered: false,
            barren: 0,
            given_up_in_a_row: 0,
            given_up: 0,
            restarts: 0,
            surroundings,
        }
    }

    /// Answers to all points, one after the other; NaN for those that were given up.
    pub(crate) fn answers(&mut self, inputs: &Points) -> Result<Vec<f64>, ModelError> {
        let (n, width) = (inputs.len(), self.spec.width());
        let mut call = Call {
            inputs,
            width,
            answers: vec![f64::NAN; n * width],
            asked: vec![0; n],
            next: 0,
            again: VecDeque::new(),
        };
        let outcome = self.work(&mut call);
        if outcome.is_err() {
            // Whatever is still being worked at belongs to no call any more.
            self.slots.iter_mut().for_each(|slot| *slot = Slot::Empty);
        }
        outcome.map(|()| call.answers)
    }

    fn work(&mut self, call: &mut Call<'_>) -> Result<(), ModelError> {
        // What came since the last call came unasked.
        while let Ok(event) = self.events.try_recv() {
            self.receive(call, event)?;
        }
        loop {
            self.hand_out(call)?;
            if self.slots.iter().all(|slot| matches!(slot, Slot::Empty | Slot::Idle(_))) {
                return Ok(());
            }
            match self.events.recv_timeout(self.patience()) {
                Ok(event) => self.receive(call, event)?,
                Err(_) => self.look_at_the_clock(call)?,
            }
            if self.surroundings.interrupted() {
                return Err(ModelError::Interrupted);
            }
        }
    }

    /// Gives every free worker a batch, as long as there are points.
    fn hand_out(&mut self, call: &mut Call<'_>) -> Result<(), ModelError> {
        for k in 0..self.slots.len() {
            if let Slot::Settling(_, until) = &self.slots[k]
                && *until <= Instant::now()
                && let Slot::Settling(worker, _) = std::mem::replace(&mut self.slots[k], Slot::Empty)
            {
                self.slots[k] = Slot::Idle(worker);
            }
            if !matches!(self.slots[k], Slot::Empty | Slot::Idle(_)) {
                continue;
            }
            let Some(task) = self.next_task(call) else { continue };
            let (worker, first) = match std::mem::replace(&mut self.slots[k], Slot::Empty) {
                Slot::Idle(worker) => (worker, false),
                _ => (self.start()?, true),
            };
            let mut values = Vec::with_capacity(task.points.len() * call.inputs.dim());
            for &i in &task.points {
                values.extend((0..call.inputs.dim()).map(|j| call.inputs.get(i, j)));
                call.asked[i] += 1;
            }
            worker.send(values);
            let now = Instant::now();
            self.slots[k] = Slot::Busy(Busy { worker, task, answered: 0, sent: now, heard: now, first });
        }
        Ok(())
    }

    fn next_task(&self, call: &mut Call<'_>) -> Option<Task> {
        if let Some(task) = call.again.pop_front() {
            return Some(task);
        }
        let left = call.inputs.len() - call.next;
        if left == 0 {
            return None;
        }
        let size = self.pace.size(left, self.slots.len(), self.spec.batch);
        call.next += size;
        Some(Task { points: (call.next - size..call.next).collect(), check_first: false })
    }

    fn start(&mut self) -> Result<Worker, ProgramError> {
        self.started += 1;
        Worker::start(&self.spec, self.started, &self.sender, &self.surroundings)
    }

    /// How long may be waited for the next event.
    fn patience(&self) -> Duration {
        let now = Instant::now();
        let deadline = |slot: &Slot| match slot {
            Slot::Settling(_, until) => Some(*until),
            Slot::Busy(busy) => self.spec.timeout.map(|timeout| busy.heard + timeout),
            _ => None,
        };
        let nearest = self.slots.iter().filter_map(deadline).min();
        nearest.map_or(TICK, |at| at.saturating_duration_since(now).min(TICK))
    }

    fn look_at_the_clock(&mut self, call: &mut Call<'_>) -> Result<(), ModelError> {
        let Some(timeout) = self.spec.timeout else { return Ok(()) };
        for k in 0..self.slots.len() {
            let hangs = matches!(&self.slots[k], Slot::Busy(busy) if busy.heard.elapsed() >= timeout);
            if hangs && let Slot::Busy(busy) = std::mem::replace(&mut self.slots[k], Slot::Empty) {
                self.mishap(call, busy, Some(Cause::Hung { waited: timeout }))?;
            }
        }
        Ok(())
    }

    fn receive(&mut self, call: &mut Call<'_>, (number, event): Tagged) -> Result<(), ModelError> {
        let of = |slot: &Slot| match slot {
            Slot::Empty => false,
            Slot::Idle(worker) | Slot::Settling(worker, _) => worker.number == number,
            Slot::Busy(busy) => busy.worker.number == number,
        };
        // A worker that was ended may still have something in the channel.
        let Some(k) = self.slots.iter().position(of) else { return Ok(()) };
        match (std::mem::replace(&mut self.slots[k], Slot::Empty), event) {
            (Slot::Busy(busy), Event::Answers(values)) => self.slots[k] = self.take_answers(call, busy, &values)?,
            (Slot::Busy(busy), Event::Unreadable(what)) => {
                self.mishap(call, busy, Some(Cause::Unreadable { line: what.line, reason: what.reason }))?;
            }
            (Slot::Busy(busy), Event::Ended) => self.mishap(call, busy, None)?,
            // It said something unasked.
            (Slot::Idle(_) | Slot::Settling(..), Event::Answers(_) | Event::Unreadable(_)) => {
                let command = self.spec.reproduction(&call.inputs.point(0));
                return Err(ProgramError::Unasked { command }.into());
            }
            // It ended between two batches; another is started when there is work.
            (Slot::Idle(worker) | Slot::Settling(worker, _), Event::Ended) => {
                worker.buried();
            }
            (Slot::Empty, _) => {}
        }
        Ok(())
    }

    /// Keeps answers; the worker's slot as it is afterwards.
    fn take_answers(&mut self, call: &mut Call<'_>, mut busy: Busy, values: &[f64]) -> Result<Slot, ModelError> {
        let (came, asked) = (values.len() / call.width, busy.task.points.len());
        if busy.answered + came > asked {
            return Err(self.too_many(call, busy.answered + came, asked, busy.task.points[0]).into());
        }
        let first = busy.answered;
        for (answer, &i) in values.chunks_exact(call.width).zip(&busy.task.points[first..]) {
            let kept = &mut call.answers[i * call.width..][..call.width];
            if busy.task.check_first && i == busy.task.points[0] && !same(kept, answer) {
                let point = call.inputs.point(i);
                return Err(ModelError::Program(Box::new(ProgramError::OutOfStep {
                    point: self.spec.named(&point),
                    before: listed(kept),
                    now: listed(answer),
                    command: self.spec.reproduction(&point),
                })));
            }
            kept.copy_from_slice(answer);
        }
        self.keep(call, &busy.task.points[first..first + came], values);
        self.ever_answered = true;
        self.given_up_in_a_row = 0;
        busy.answered += came;
        busy.heard = Instant::now();
        if busy.answered < asked {
            return Ok(Slot::Busy(busy));
        }
        if busy.first {
            // The time to start is in the first batch: it says nothing about the pace.
            return Ok(Slot::Settling(busy.worker, Instant::now() + SETTLE));
        }
        self.pace.learn(asked, busy.sent.elapsed().as_secs_f64());
        Ok(Slot::Idle(busy.worker))
    }

    fn keep(&self, call: &Call<'_>, points: &[usize], values: &[f64]) {
        if !self.surroundings.keeps_answers() {
            return;
        }
        let inputs = call.inputs.select(points);
        self.surroundings.answered(&inputs, &Points::from_rows(call.width, values));
    }

    /// A worker died (`cause` is none), hung, or talked nonsense: what it answered is kept, the rest asked again.
    fn mishap(&mut self, call: &mut Call<'_>, busy: Busy, cause: Option<Cause>) -> Result<(), ModelError> {
        let Busy { worker, task, answered, .. } = busy;
        let (cause, said) = match cause {
            None => worker.buried(),
            Some(cause) => (cause, worker.ended()),
        };
        let culprit = task.points[answered];
        let point = call.inputs.point(culprit);
        let mishap = Mishap {
            cause,
            point: self.spec.named(&point),
            answered: (answered, task.points.len()),
            command: self.spec.reproduction(&point),
            said,
        };
        if !self.ever_answered {
            self.barren += 1;
            if self.barren >= BARREN || matches!(mishap.cause, Cause::Hung { .. }) {
                return Err(ProgramError::NeverAnswered(Box::new(mishap)).into());
            }
        }
        self.restarts += 1;
        let text = format!("A worker of the model program is started again. {mishap}");
        if self.restarts <= TOLD {
            self.surroundings.notice(&text);
        } else {
            self.surroundings.said(&format!("evenpoise: {text}"));
        }
        self.ask_again(call, &task, answered);
        let before = self.given_up;
        for &i in &task.points[answered..] {
            let checked_only = task.check_first && i == task.points[0];
            if call.asked[i] >= self.spec.tries.max(1) && !checked_only {
                self.give_up(call, i);
            }
        }
        self.given_up_in_a_row += usize::from(self.given_up > before);
        if self.given_up_in_a_row >= GIVEN_UP {
            return Err(ProgramError::GivenUp { times: self.given_up_in_a_row, last: Box::new(mishap) }.into());
        }
        Ok(())
    }

    /// Puts the unanswered points of a task back in line: the first by itself, for it is the likely cause, the others in
    /// ever smaller pieces, and each by itself for its last try.
    fn ask_again(&self, call: &mut Call<'_>, task: &Task, answered: usize) {
        let tries = self.spec.tries.max(1);
        let checked = usize::from(task.check_first && answered == 0);
        let open: Vec<usize> =
            task.points[answered + checked..].iter().copied().filter(|&i| call.asked[i] < tries).collect();
        let Some((&first, rest)) = open.split_first() else { return };
        let alone = |i: usize| Task { points: vec![i], check_first: false };
        let mut tasks = Vec::new();
        // A program that skips lines has given the last answer to the wrong point: the same question must have the same answer.
        match answered.checked_sub(1).map(|last| task.points[last]) {
            Some(last) => tasks.push(Task { points: vec![last, first], check_first: true }),
            None => tasks.push(alone(first)),
        }
        if rest.first().is_some_and(|&i| call.asked[i] + 1 >= tries) {
            tasks.extend(rest.iter().map(|&i| alone(i)));
        } else {
            let size = rest.len().div_ceil(PIECES).max(1);
            tasks.extend(rest.chunks(size).map(|piece| Task { points: piece.to_vec(), check_first: false }));
        }
        for task in tasks.into_iter().rev() {
            call.again.push_front(task);
        }
    }

    fn give_up(&mut self, call: &Call<'_>, i: usize) {
        self.given_up += 1;
        let point = call.inputs.point(i);
        let (named, command) = (self.spec.named(&point), self.spec.reproduction(&point));
        let tries = self.spec.tries.max(1);
        if self.given_up <= TOLD {
            self.surroundings.notice(&format!(
                "No answer after {tries} tries: this point counts as failed.\n  {named}\nTry it: {command}"
            ));
        } else {
            self.surroundings.said(&format!("evenpoise: no answer after {tries} tries: {named}"));
        }
        self.keep(call, &[i], &vec![f64::NAN; call.width]);
    }

    fn too_many(&self, call: &Call<'_>, answered: usize, asked: usize, first: usize) -> ProgramError {
        let command = self.spec.reproduction(&call.inputs.point(first));
        ProgramError::TooMany { answered, asked, command }
    }
}

impl Drop for Pool {
    /// All inputs are closed before the first process is waited for.
    fn drop(&mut self) {
        let mut workers: Vec<Worker> = Vec::new();
        for slot in self.slots.drain(..) {
            match slot {
                Slot::Idle(worker) | Slot::Settling(worker, _) => workers.push(worker),
                Slot::Busy(busy) => drop(busy.worker.ended()),
                Slot::Empty => {}
            }
        }
        workers.iter_mut().for_each(Worker::close_input);
        workers.into_iter().for_each(Worker::wait_or_kill);
    }
}

/// Whether two answers have the same bits; failed is failed.
fn same(a: &[f64], b: &[f64]) -> bool {
    a.iter().zip(b).all(|(x, y)| x.to_bits() == y.to_bits() || (x.is_nan() && y.is_nan()))
}

fn listed(answer: &[f64]) -> String {
    answer.iter().take(6).map(|x| decimal(*x)).collect::<Vec<_>>().join(" ")
}
