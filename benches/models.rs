//! How much of a model's own speed reaches a tuning: programs at the end of our protocol against the same programs at the
//! end of a bare pipe, and the share of a run that a slow model works.
//!
//! `cargo bench --bench models`; needs `cc`. Prints figures, best of several turns, and checks nothing.

#![allow(clippy::unwrap_used, clippy::print_stdout, reason = "a bench that cannot go on has failed, and prints")]

use evenpoise::adapt::{Answers, Batch, Observer, Settings, tune};
use evenpoise::model::{Model, ProgramFormat, ProgramModel, ProgramSpec};
use evenpoise::numeric::Points;
use evenpoise::problem::Problem;
use std::fmt::Write as _;
use std::fs;
use std::io::{Read, Write};
use std::path::Path;
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

const TEXT: &str = r#"
#include <stdio.h>
#include <stdlib.h>
int main(void) {
    static char line[4096];
    while (fgets(line, sizeof line, stdin)) {
        char *at = line;
        double sum = 0.0;
        int n = 0;
        for (;;) { char *end; double x = strtod(at, &end); if (end == at) break; sum += x; at = end; n++; }
        if (n) printf("%.17g\n", sum); else fflush(stdout);
    }
    return 0;
}
"#;

const DOUBLES: &str = r#"
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#define D 10
int main(void) {
    uint64_t n;
    while (fread(&n, 8, 1, stdin) == 1) {
        double *x = malloc(n * D * 8), *y = malloc(n * 8);
        if (fread(x, 8, n * D, stdin) != n * D) return 1;
        for (uint64_t i = 0; i < n; i++) { y[i] = 0.0; for (int j = 0; j < D; j++) y[i] += x[i * D + j]; }
        fwrite(y, 8, n, stdout);
        fflush(stdout);
        free(x); free(y);
    }
    return 0;
}
"#;

const PYTHON: &str = "import sys\nfor line in sys.stdin:\n    if line.split():\n        print(sum(map(float, line.split())))\n    else:\n        \
    sys.stdout.flush()\n";

const SLOW: &str = "import sys, time\nfor line in sys.stdin:\n    if line.split():\n        a, b = map(float, line.split())\n        \
    time.sleep(0.02)\n        print(-(a - 1) ** 2 - (b + a) ** 2, flush=True)\n";

/// Values of a point, and the turns of which the best counts.
const D: usize = 10;
const TURNS: usize = 5;

fn main() {
    let folder = tempfile::tempdir().unwrap();
    let folder = folder.path();
    for (name, text) in [("text", TEXT), ("doubles", DOUBLES)] {
        fs::write(folder.join(format!("{name}.c")), text).unwrap();
        let made =
            Command::new("cc").current_dir(folder).args(["-O2", "-o", name, &format!("{name}.c")]).status().unwrap();
        assert!(made.success());
    }
    fs::write(folder.join("sum.py"), PYTHON).unwrap();
    fs::write(folder.join("slow.py"), SLOW).unwrap();
    println!(
        "| model, {D} values a point | bare pipe, points/s | through evenpoise, points/s | share |\n|---|---|---|---|"
    );
    throughput(folder, "C, text", &["./text"], ProgramFormat::Text, 400_000);
    throughput(folder, "Python, text", &["python3", "sum.py"], ProgramFormat::Text, 100_000);
    throughput(folder, "C, f64", &["./doubles"], ProgramFormat::F64, 2_000_000);
    slow_model(folder);
}

fn points(n: usize) -> Points {
    let mut points = Points::zeros(D, n);
    for i in 0..n {
        (0..D).for_each(|j| points.set(i, j, ((i * 7919 + j * 104_729) % 1_000_003) as f64 / 1_000_003.0 - 0.5));
    }
    points
}

fn throughput(folder: &Path, name: &str, run: &[&str], format: ProgramFormat, n: usize) {
    let points = points(n);
    let bytes = written(&points, format);
    let names: Vec<String> = (0..D).map(|j| format!("x{j}")).collect();
    let names: Vec<&str> = names.iter().map(String::as_str).collect();
    let spec = ProgramSpec { workers: 1, format, ..ProgramSpec::new(run, folder, &names, 1) };
    let model = ProgramModel::new(spec);
    let mut answers = Points::zeros(1, n);
    model.evaluate(&points, &mut answers).unwrap();
    let (mut bare, mut ours) = (f64::INFINITY, f64::INFINITY);
    for _ in 0..TURNS {
        bare = bare.min(bare_pipe(folder, run, &bytes));
        let began = Instant::now();
        model.evaluate(&points, &mut answers).unwrap();
        ours = ours.min(began.elapsed().as_secs_f64());
    }
    let rate = |seconds: f64| n as f64 / seconds;
    println!("| {name} | {:.0} | {:.0} | {:.0} % |", rate(bare), rate(ours), 100.0 * bare / ours);
}

/// All points as the protocol writes them, in batches of 8192.
fn written(points: &Points, format: ProgramFormat) -> Vec<u8> {
    let mut bytes = Vec::new();
    for first in (0..points.len()).step_by(8192) {
        let batch = first..(first + 8192).min(points.len());
        match format {
            ProgramFormat::F64 => {
                bytes.extend((batch.len() as u64).to_le_bytes());
                batch.for_each(|i| (0..D).for_each(|j| bytes.extend(points.get(i, j).to_le_bytes())));
            }
            ProgramFormat::Text => {
                let mut text = String::new();
                for i in batch {
                    (0..D)
                        .for_each(|j| write!(text, "{}{:?}", if j > 0 { " " } else { "" }, points.get(i, j)).unwrap());
                    text.push('\n');
                }
                text.push('\n');
                bytes.extend(text.into_bytes());
            }
        }
    }
    bytes
}

/// Seconds from the first byte in to the last byte out, of bytes that lie ready; nothing is read but counted.
fn bare_pipe(folder: &Path, run: &[&str], bytes: &[u8]) -> f64 {
    let program = if run[0].starts_with('.') { folder.join(run[0]) } else { run[0].into() };
    let mut child = Command::new(program)
        .current_dir(folder)
        .args(&run[1..])
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .spawn()
        .unwrap();
    let (mut input, mut output) = (child.stdin.take().unwrap(), child.stdout.take().unwrap());
    // The process is there before the clock is.
    std::thread::sleep(Duration::from_millis(200));
    let began = Instant::now();
    std::thread::scope(|scope| {
        scope.spawn(move || input.write_all(bytes).unwrap());
        let mut piece = vec![0; 1 << 16];
        while output.read(&mut piece).unwrap() > 0 {}
    });
    let took = began.elapsed().as_secs_f64();
    child.wait().unwrap();
    took
}

/// Times the model alone.
struct Clock {
    asked: Instant,
    model: Duration,
}

impl Observer for Clock {
    fn recorded(&mut self, _: &Batch) -> Option<Answers> {
        self.asked = Instant::now();
        None
    }

    fn evaluated(&mut self, _: &Batch, _: &Answers) -> Result<(), evenpoise::BoxError> {
        self.model += self.asked.elapsed();
        Ok(())
    }
}

/// A whole tuning of 4,000 points with a model that takes 20 ms a point, two workers.
fn slow_model(folder: &Path) {
    let text = "title = \"A slow model\"\n[variables]\na = { range = [-inf, inf], near = 0.0, spread = 2.0 }\n\
                b = { range = [-inf, inf], near = 0.0, spread = 2.0 }\n[program]\nrun = [\"python3\", \"slow.py\"]\nreturns = [\"height\"]\n\
                workers = 2\n[target]\naim = \"density\"\nlog_factor = \"height\"\n[tuning]\nbudget = 4000\n";
    let problem = Problem::parse(text, "slow.toml", folder).unwrap_or_else(|errors| panic!("{}", errors.render(false)));
    let mut clock = Clock { asked: Instant::now(), model: Duration::ZERO };
    let began = Instant::now();
    let tuning = tune(&problem, &Settings::from_keys(problem.tuning()), &mut clock).unwrap();
    let wall = began.elapsed().as_secs_f64();
    let model = clock.model.as_secs_f64();
    let least = 0.02 * tuning.evaluations as f64 / 2.0;
    println!(
        "\n20 ms a point, 2 workers, {} points: {wall:.1} s in all, the model asked for {model:.1} s of them ({:.1} %); both workers busy \
         from first to last would have been {least:.1} s ({:.1} %).",
        tuning.evaluations,
        100.0 * model / wall,
        100.0 * least / wall
    );
}
