//! One process that answers points: started, written to, read from, ended.
//!
//! Three threads serve it. The writer and the reader are separate, so that neither side can block on a pipe that is full
//! in both directions; the third drains standard error. All that comes in goes to one channel, with the worker's number.

use super::mishap::Cause;
use super::mishap::ProgramError;
use super::protocol;
use super::protocol::Answers;
use super::protocol::Unreadable;
use super::spec::ProgramFormat;
use super::spec::ProgramSpec;
use crate::model::Surroundings;
use std::collections::VecDeque;
use std::io;
use std::io::BufRead;
use std::io::BufReader;
use std::io::Read;
use std::io::Write;
use std::process::Child;
use std::process::ChildStderr;
use std::process::ChildStdin;
use std::process::ChildStdout;
use std::process::ExitStatus;
use std::process::Stdio;
use std::sync::Arc;
use std::sync::Mutex;
use std::sync::mpsc::Receiver;
use std::sync::mpsc::Sender;
use std::sync::mpsc::channel;
use std::thread;
use std::time::Duration;
use std::time::Instant;

/// What came from a worker.
#[derive(Debug)]
pub(crate) enum Event {
    /// Whole answers, one after the other.
    Answers(Vec<f64>),
    /// Something that is no answer; nothing follows it.
    Unreadable(Unreadable),
    /// Its output has ended.
    Ended,
}

/// A worker's number, counted over all that were ever started, and what came from it.
pub(crate) type Tagged = (u64, Event);

/// Lines of standard error that are kept for messages, and bytes of one.
const TAIL: usize = 8;
const LONGEST_LINE: u64 = 4096;
/// Bytes read, and written, at once.
const PIECE: usize = 1 << 16;
/// Patience with a process whose input was closed, and with one whose output ended.
const GRACE: Duration = Duration::from_secs(3);
const SHORT_GRACE: Duration = Duration::from_millis(500);
const LOOK: Duration = Duration::from_millis(2);

/// A running process.
#[derive(Debug)]
pub(crate) struct Worker {
    pub(crate) number: u64,
    child: Child,
    to_writer: Option<Sender<Vec<f64>>>,
    tail: Arc<Mutex<VecDeque<String>>>,
    errors_read: Option<thread::JoinHandle<()>>,
}

impl Worker {
    /// Starts the program as worker `number`.
    pub(crate) fn start(
        spec: &ProgramSpec,
        number: u64,
        events: &Sender<Tagged>,
        surroundings: &Arc<dyn Surroundings>,
    ) -> Result<Self, ProgramError> {
        let mut command = spec.command();
        command.stdin(Stdio::piped()).stdout(Stdio::piped()).stderr(Stdio::piped());
        own_group(&mut command);
        let mut child = command.spawn().map_err(|error| not_started(spec, &error))?;
        let pipes = (child.stdin.take(), child.stdout.take(), child.stderr.take());
        let (Some(input), Some(output), Some(errors)) = pipes else {
            return Err(not_started(spec, &io::Error::other("it has no pipes")));
        };
        let (to_writer, batches) = channel();
        let (format, width) = (spec.format, spec.n_inputs());
        thread::spawn(move || write_batches(input, &batches, format, width));
        let (answers, sender) = (Answers::new(spec.format, spec.width()), events.clone());
        thread::spawn(move || read_answers(output, answers, number, &sender));
        let tail = Arc::new(Mutex::new(VecDeque::new()));
        let (kept, told) = (Arc::clone(&tail), Arc::clone(surroundings));
        let errors_read = Some(thread::spawn(move || drain(errors, &kept, told.as_ref())));
        Ok(Self { number, child, to_writer: Some(to_writer), tail, errors_read })
    }

    /// Sends a batch; a process that is gone is noticed by its output.
    pub(crate) fn send(&self, values: Vec<f64>) {
        if let Some(writer) = &self.to_writer {
            let _ = writer.send(values);
        }
    }

    /// Ends a process whose output has ended, and says how it came to that.
    pub(crate) fn buried(mut self) -> (Cause, Vec<String>) {
        self.to_writer = None;
        let status = wait(&mut self.child, SHORT_GRACE);
        self.kill();
        (status.map_or(Cause::Closed, cause_of), self.last_lines())
    }

    /// Ends a process that hangs or talks nonsense; its last words.
    pub(crate) fn ended(mut self) -> Vec<String> {
        self.to_writer = None;
        self.kill();
        self.last_lines()
    }

    /// Closes the input, which asks the process to end.
    pub(crate) fn close_input(&mut self) {
        self.to_writer = None;
    }

    /// Waits for the process with patience, then kills it.
    pub(crate) fn wait_or_kill(mut self) {
        self.to_writer = None;
        wait(&mut self.child, GRACE);
        self.kill();
    }

    fn last_lines(&mut self) -> Vec<String> {
        if let Some(thread) = self.errors_read.take() {
            let until = Instant::now() + SHORT_GRACE;
            while !thread.is_finished() && Instant::now() < until {
                thread::sleep(LOOK);
            }
        }
        self.tail.lock().map(|tail| tail.iter().cloned().collect()).unwrap_or_default()
    }

    /// Kills the process and all that it started, unless it has ended and nobody waits for it any more.
    fn kill(&mut self) {
        if matches!(self.child.try_wait(), Ok(None)) {
            kill_group(&self.child);
            let _ = self.child.kill();
            let _ = self.child.wait();
        }
    }
}

impl Drop for Worker {
    fn drop(&mut self) {
        self.to_writer = None;
        self.kill();
    }
}

fn not_started(spec: &ProgramSpec, error: &io::Error) -> ProgramError {
    let program = spec.run.first().cloned().unwrap_or_default();
    match error.kind() {
        io::ErrorKind::NotFound if !spec.folder.as_os_str().is_empty() && !spec.folder.is_dir() => {
            let reason = format!("there is no folder {}", spec.folder.display());
            ProgramError::NotStarted { program, reason }
        }
        io::ErrorKind::NotFound => {
            let beside = !program.contains('/') && spec.folder.join(&program).is_file();
            let hint = beside.then(|| format!("a file of that name lies in the folder: write \"./{program}\""));
            ProgramError::NotFound { program, hint }
        }
        io::ErrorKind::PermissionDenied => ProgramError::NotExecutable { program },
        _ => ProgramError::NotStarted { program, reason: error.to_string() },
    }
}

/// Waits up to `patience` for a process to end.
fn wait(child: &mut Child, patience: Duration) -> Option<ExitStatus> {
    let until = Instant::now() + patience;
    loop {
        match child.try_wait() {
            Ok(Some(status)) => return Some(status),
            Ok(None) if Instant::now() < until => thread::sleep(LOOK),
            _ => return None,
        }
    }
}

/// Writes batch after batch until the channel or the pipe closes.
fn write_batches(mut input: ChildStdin, batches: &Receiver<Vec<f64>>, format: ProgramFormat, width: usize) {
    let mut bytes = Vec::with_capacity(PIECE);
    while let Ok(values) = batches.recv() {
        let written = match format {
            ProgramFormat::F64 => input.write_all(&protocol::f64_batch(&values, width)),
            ProgramFormat::Text => write_lines(&mut input, &values, width, &mut bytes),
        };
        if written.is_err() {
            return; // Whoever reads learns that the process is gone.
        }
    }
}

fn write_lines(input: &mut ChildStdin, values: &[f64], width: usize, bytes: &mut Vec<u8>) -> io::Result<()> {
    let points = (PIECE / (16 * width)).max(1);
    let pieces = values.chunks(points * width);
    let last = pieces.len();
    for (k, piece) in pieces.enumerate() {
        bytes.clear();
        protocol::text_lines(bytes, piece, width);
        if k + 1 == last {
            bytes.push(b'\n');
        }
        input.write_all(bytes)?;
    }
    Ok(())
}

fn read_answers(mut output: ChildStdout, mut answers: Answers, number: u64, events: &Sender<Tagged>) {
    let mut bytes = vec![0; PIECE];
    loop {
        let length = match output.read(&mut bytes) {
            Ok(length) => length,
            Err(error) if error.kind() == io::ErrorKind::Interrupted => continue,
            Err(_) => 0,
        };
        if length == 0 {
            let _ = events.send((number, Event::Ended));
            return;
        }
        let mut values = Vec::new();
        let read = answers.take(&bytes[..length], &mut values);
        if !values.is_empty() && events.send((number, Event::Answers(values))).is_err() {
            return;
        }
        if let Err(unreadable) = read {
            let _ = events.send((number, Event::Unreadable(unreadable)));
            // The rest is read and thrown away, so that the process does not block before it is ended.
            let _ = io::copy(&mut output, &mut io::sink());
            return;
        }
    }
}

/// Passes standard error on line by line, and keeps the last lines.
fn drain(errors: ChildStderr, tail: &Mutex<VecDeque<String>>, told: &dyn Surroundings) {
    let mut errors = BufReader::with_capacity(PIECE, errors);
    let mut line = Vec::new();
    loop {
        line.clear();
        // A program that never ends its line must not fill the memory.
        match (&mut errors).take(LONGEST_LINE).read_until(b'\n', &mut line) {
            Ok(0) | Err(_) => return,
            Ok(_) => {}
        }
        let text = String::from_utf8_lossy(&line).trim_end().to_owned();
        told.said(&text);
        if let Ok(mut tail) = tail.lock() {
            if tail.len() == TAIL {
                tail.pop_front();
            }
            tail.push_back(text);
        }
    }
}

/// A process group of its own: an interruption from the terminal reaches us, and we end the workers in good order.
#[cfg(unix)]
fn own_group(command: &mut std::process::Command) {
    std::os::unix::process::CommandExt::process_group(command, 0);
}

#[cfg(not(unix))]
fn own_group(_: &mut std::process::Command) {}

#[cfg(unix)]
fn kill_group(child: &Child) {
    let _ = rustix::process::kill_process_group(rustix::process::Pid::from_child(child), rustix::process::Signal::KILL);
}

#[cfg(not(unix))]
fn kill_group(_: &Child) {}

#[cfg(unix)]
fn cause_of(status: ExitStatus) -> Cause {
    use std::os::unix::process::ExitStatusExt;
    match status.signal() {
        Some(signal) => Cause::Killed { signal },
        None => Cause::Exited { status: status.code().unwrap_or_default() },
    }
}

#[cfg(not(unix))]
fn cause_of(status: ExitStatus) -> Cause {
    Cause::Exited { status: status.code().unwrap_or_default() }
}
