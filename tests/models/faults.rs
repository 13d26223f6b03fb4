//! Everything that can go wrong with a program, provoked by a real one.

use crate::common::{Script, answers, assert_sums, looped, there};
use evenpoise::model::{Cause, ModelError, ProgramError, ProgramFormat, ProgramSpec};
use std::fs;
use std::path::Path;
use std::time::Duration;
use std::time::Instant;

fn refused(spec: ProgramSpec, n: usize) -> ProgramError {
    match answers(spec, n).0 {
        Err(ModelError::Program(error)) => *error,
        other => panic!("{other:?}"),
    }
}

#[test]
fn a_program_that_is_not_there() {
    let folder = tempfile::tempdir().unwrap();
    let spec = |program: &str| ProgramSpec::new(&[program], folder.path(), &["a", "b"], 1);
    for program in ["./tank", "ellenmere-tank"] {
        let error = refused(spec(program), 3);
        assert_eq!(error, ProgramError::NotFound { program: program.into(), hint: None });
    }
    fs::write(folder.path().join("ellenmere-tank"), "").unwrap();
    let error = refused(spec("ellenmere-tank"), 3);
    assert!(error.to_string().contains("write \"./ellenmere-tank\""), "{error}");
    let error = refused(ProgramSpec::new(&["sh"], Path::new("/nowhere/at/all"), &["a", "b"], 1), 3);
    assert!(error.to_string().contains("there is no folder /nowhere/at/all"), "{error}");
}

#[test]
fn a_program_that_may_not_be_run() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("tank"), "#!/bin/sh\n").unwrap();
    let error = refused(ProgramSpec::new(&["./tank"], folder.path(), &["a", "b"], 1), 3);
    assert_eq!(error, ProgramError::NotExecutable { program: "./tank".into() });
}

#[test]
fn a_program_that_ends_at_once() {
    if !there("python3") {
        return;
    }
    let script = Script::new("import sys\nprint('no licence', file=sys.stderr)\nsys.exit(7)\n");
    let ProgramError::NeverAnswered(mishap) = refused(script.spec(), 30) else { panic!("it cannot have answered") };
    assert_eq!((&mishap.cause, mishap.answered.0), (&Cause::Exited { status: 7 }, 0));
    assert_eq!(mishap.said, ["no licence"]);
    assert_eq!(mishap.point, "a = 0, b = 0");
    assert!(mishap.command.ends_with("&& echo \"0 0\" | python3 model.py)"), "{}", mishap.command);
    // The command does what it says.
    let output = std::process::Command::new("sh").args(["-c", &mishap.command]).output().unwrap();
    assert_eq!(output.status.code(), Some(7));
}

#[test]
fn a_program_that_ends_after_a_thousand_points() {
    if !there("python3") {
        return;
    }
    let script = Script::new(&looped("", "if n > 1000: sys.exit(3)"));
    let (answered, heard) = answers(script.spec(), 3500);
    assert_sums(&answered.unwrap(), &[]);
    assert!(heard.all_notices().contains("exit status 3"), "{}", heard.all_notices());
}

#[test]
fn a_point_that_kills_its_worker_counts_as_failed() {
    if !there("python3") {
        return;
    }
    for body in ["if a == 41: os.kill(os.getpid(), signal.SIGSEGV)", "if a == 41: sys.exit(1)"] {
        let script = Script::new(&looped("", body));
        for workers in [1, 2] {
            let (answered, heard) = answers(ProgramSpec { workers, ..script.spec() }, 200);
            assert_sums(&answered.unwrap(), &[41]);
            let told = heard.all_notices();
            assert!(
                told.contains("No answer after 3 tries: this point counts as failed.\n  a = 41, b = 5.857142857142857"),
                "{told}"
            );
            assert!(told.contains("echo \"41 5.857142857142857\" | python3 model.py"), "{told}");
            // Every answer was handed on once it was there, the failure as well.
            let answered = heard.answered.lock().unwrap();
            assert!((0..200).all(|i| answered.iter().any(|(a, y)| *a == f64::from(i) && (i == 41) == y.is_nan())));
        }
    }
}

/// A program that works on whole batches and dies of one point takes its neighbours with it: each is asked by itself.
#[test]
fn a_whole_batch_is_not_lost_to_one_point() {
    if !there("python3") {
        return;
    }
    let script = Script::new(
        "import sys\nbatch = []\nfor line in sys.stdin:\n    if line.split():\n        batch.append(list(map(float, line.split())))\n        \
         continue\n    if any(a == 41 for a, b in batch):\n        sys.exit(9)\n    for a, b in batch:\n        print(a + b)\n    \
         sys.stdout.flush()\n    batch = []\n",
    );
    let (answered, _) = answers(ProgramSpec { batch: Some(64), ..script.spec() }, 200);
    assert_sums(&answered.unwrap(), &[41]);
    let (answered, _) = answers(ProgramSpec { batch: Some(64), tries: 2, ..script.spec() }, 200);
    assert_sums(&answered.unwrap(), &[41]);
}

#[test]
fn a_program_that_hangs() {
    if !there("python3") {
        return;
    }
    let patience = Some(Duration::from_millis(2500));
    let script = Script::new(&looped("", "if a == 17: time.sleep(100)"));
    let (answered, heard) = answers(ProgramSpec { timeout: patience, tries: 2, ..script.spec() }, 40);
    assert_sums(&answered.unwrap(), &[17]);
    assert!(heard.all_notices().contains("does it flush its output?"), "{}", heard.all_notices());
    let silent = Script::new("import sys\nfor line in sys.stdin:\n    pass\n");
    let began = Instant::now();
    let error = refused(ProgramSpec { timeout: patience, ..silent.spec() }, 40);
    assert!(
        matches!(&error, ProgramError::NeverAnswered(mishap) if matches!(mishap.cause, Cause::Hung { .. })),
        "{error}"
    );
    assert!(began.elapsed() < Duration::from_secs(20));
}

/// A program whose output stays in a buffer until its input closes looks like one that hangs.
#[test]
fn a_program_that_buffers_its_output() {
    if !there("python3") {
        return;
    }
    let script = Script::new(
        "import sys\nsys.stdout = open(1, 'w', buffering=65536, closefd=False)\nfor line in sys.stdin:\n    if line.split():\n        print(1.0)\n",
    );
    let error = refused(ProgramSpec { timeout: Some(Duration::from_millis(2500)), ..script.spec() }, 40);
    assert!(error.to_string().contains("does it flush its output?"), "{error}");
}

#[test]
fn a_slow_program_is_not_one_that_hangs() {
    if !there("python3") {
        return;
    }
    let script = Script::new(&looped("", "time.sleep(0.1)"));
    let spec = ProgramSpec { timeout: Some(Duration::from_secs(1)), batch: Some(30), ..script.spec() };
    let (answered, heard) = answers(spec, 30);
    assert_sums(&answered.unwrap(), &[]);
    assert_eq!(heard.all_notices(), "");
}

#[test]
fn too_few_answers_are_never_taken_for_others() {
    if !there("python3") {
        return;
    }
    let script = Script::new(&looped("", "if a == 3: continue"));
    let spec = ProgramSpec { timeout: Some(Duration::from_millis(2500)), batch: Some(10), ..script.spec() };
    let error = refused(spec, 40);
    let ProgramError::OutOfStep { point, before, now, .. } = &error else { panic!("{error}") };
    assert_eq!(point, "a = 6, b = 0.8571428571428571");
    assert_eq!((before.as_str(), now.as_str()), ("8", "6.857142857142857"));
}

#[test]
fn too_many_answers() {
    if !there("python3") {
        return;
    }
    for batch in [None, Some(1), Some(16)] {
        let script = Script::new(&looped("", "print(7.0, flush=True)"));
        let error = refused(ProgramSpec { batch, ..script.spec() }, 40);
        assert!(matches!(error, ProgramError::TooMany { .. } | ProgramError::Unasked { .. }), "{error}");
    }
    // One number for the empty line as well.
    let script = Script::new("import sys\nfor line in sys.stdin:\n    print(len(line), flush=True)\n");
    let error = refused(script.spec(), 40);
    assert!(matches!(error, ProgramError::TooMany { .. } | ProgramError::Unasked { .. }), "{error}");
}

#[test]
fn a_banner_and_other_lines_that_are_no_answers() {
    if !there("python3") {
        return;
    }
    let script = Script::new(&looped("print('Tank model 1.2', flush=True)", ""));
    let error = refused(script.spec(), 40);
    assert!(error.to_string().contains("\"Tank\" is no number: \"Tank model 1.2\""), "{error}");
    let script = Script::new(&looped("", "print(1, 2, flush=True)\ncontinue"));
    let error = refused(script.spec(), 40);
    assert!(error.to_string().contains("it has 2 numbers, and 1 is expected: \"1 2\""), "{error}");
    let script = Script::new(&looped("", "if a == 5:\n    print('diverged', flush=True)\n    continue"));
    let (answered, heard) = answers(script.spec(), 40);
    assert_sums(&answered.unwrap(), &[5]);
    assert!(heard.all_notices().contains("\"diverged\""), "{}", heard.all_notices());
}

#[test]
fn megabytes_on_standard_error() {
    if !there("python3") {
        return;
    }
    let script = Script::new(&looped("", "print('w' * 50000, file=sys.stderr)"));
    let (answered, heard) = answers(script.spec(), 100);
    assert_sums(&answered.unwrap(), &[]);
    let said: usize = heard.said.lock().unwrap().iter().map(String::len).sum();
    assert!(said > 4_000_000, "{said}");
}

#[test]
fn nan_is_a_failed_point_and_no_fault() {
    if !there("python3") {
        return;
    }
    let script = Script::new(&looped("", "if a % 20 == 7: y = float('nan')"));
    let (answered, heard) = answers(script.spec(), 400);
    let failed: Vec<usize> = (0..400).filter(|i| i % 20 == 7).collect();
    assert_sums(&answered.unwrap(), &failed);
    assert_eq!(heard.all_notices(), "");
}

#[test]
fn a_program_that_fails_everywhere_is_stopped() {
    if !there("python3") {
        return;
    }
    let script = Script::new(&looped("", "if a > 10: sys.exit(1)"));
    let error = refused(ProgramSpec { tries: 1, batch: Some(1), ..script.spec() }, 400);
    assert!(matches!(error, ProgramError::GivenUp { times: 20, .. }), "{error}");
}

/// Lines of 4 KiB in a batch of 3,000 fill both pipes many times over, whether the program answers at once or at the end.
#[test]
fn full_pipes_block_nobody() {
    if !there("python3") {
        return;
    }
    let names: Vec<String> = (0..200).map(|k| format!("x{k}")).collect();
    let names: Vec<&str> = names.iter().map(String::as_str).collect();
    let echo = "import sys\nfor line in sys.stdin:\n    if line.split(): print(line.strip(), flush=True)\n";
    let at_end = "import sys\nkept = []\nfor line in sys.stdin:\n    if line.split():\n        kept.append(line)\n    else:\n        \
                  sys.stdout.write(''.join(kept)); sys.stdout.flush(); kept = []\n";
    for text in [echo, at_end] {
        let script = Script::new(text);
        let spec = ProgramSpec::new(&["python3", "model.py"], script.folder.path(), &names, 200);
        let model = evenpoise::model::ProgramModel::new(ProgramSpec { batch: Some(3000), workers: 2, ..spec });
        let mut inputs = evenpoise::numeric::Points::zeros(200, 3000);
        (0..3000).for_each(|i| (0..200).for_each(|j| inputs.set(i, j, (i * 200 + j) as f64 / 3.0)));
        let mut outputs = evenpoise::numeric::Points::zeros(200, 3000);
        evenpoise::model::Model::evaluate(&model, &inputs, &mut outputs).unwrap();
        assert!(inputs == outputs);
    }
}

#[test]
fn doubles_travel_as_they_are() {
    if !there("python3") {
        return;
    }
    let script = Script::new(
        "import struct, sys\nwhile True:\n    head = sys.stdin.buffer.read(8)\n    if len(head) < 8: break\n    n, = struct.unpack('<Q', head)\n    \
         x = struct.unpack(f'<{2 * n}d', sys.stdin.buffer.read(16 * n))\n    sys.stdout.buffer.write(struct.pack(f'<{n}d', *(x[2 * i] + x[2 * i \
         + 1] for i in range(n))))\n    sys.stdout.buffer.flush()\n",
    );
    for workers in [1, 2] {
        let (answered, _) = answers(ProgramSpec { format: ProgramFormat::F64, workers, ..script.spec() }, 3000);
        assert_sums(&answered.unwrap(), &[]);
    }
}
