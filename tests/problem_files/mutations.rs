//! Right files with random slips: they are read or refused, and the refusal can be shown. Nothing panics.

use std::path::Path;

use evenpoise::numeric::Points;
use evenpoise::numeric::Purpose;
use evenpoise::numeric::stream;
use evenpoise::numeric::uniform;
use evenpoise::problem::Problem;

use crate::right::EFFECTS;
use crate::right::TRACER;
use crate::whole::CHAIN;
use crate::whole::SCORES;
use crate::whole::SUPPORTS;

const PIECES: [&str; 24] = [
    "\"", "'", "'''", "[", "]", "[[", "{", "}", "=", ",", "\\", "\n", "\u{e9}", "inf", "-", "1e400", "nan", "(", ")",
    "0", ".", "#", "each", "sum(",
];

#[test]
fn slips_never_panic() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/problem_files/data");
    let mut rng = stream(3, Purpose::Trial, 1, 0);
    let mut below = |n: usize| ((uniform(&mut rng) * n as f64) as usize).min(n.max(1) - 1);
    let (mut right, mut wrong) = (0, 0);
    // Linear correlations are searched for at some length; ranks are read by the same code.
    let scores = SCORES.replace("linear", "rank");
    for text in [TRACER, EFFECTS, SUPPORTS, CHAIN, scores.as_str()] {
        for _ in 0..400 {
            let mut characters: Vec<char> = text.chars().collect();
            for _ in 0..=below(2) {
                let at = below(characters.len());
                match below(4) {
                    0 => {
                        characters.remove(at);
                    }
                    1 => {
                        let piece = PIECES[below(PIECES.len())];
                        characters.splice(at..at, piece.chars());
                    }
                    2 => {
                        let end = (at + below(12)).min(characters.len());
                        characters.drain(at..end);
                    }
                    _ => {
                        let other = below(characters.len());
                        characters.swap(at, other);
                    }
                }
            }
            let slipped: String = characters.into_iter().collect();
            match Problem::parse(&slipped, "slipped.toml", &folder) {
                Ok(problem) => {
                    right += 1;
                    let start = Points::from_rows(problem.dim(), &problem.start().near);
                    let answer = problem.evaluate(&start).unwrap();
                    assert!(answer.log_density[0] < f64::INFINITY, "{slipped}");
                    assert!(Problem::parse(&problem.text(), "again.toml", &folder).is_ok(), "{slipped}");
                }
                Err(errors) => {
                    wrong += 1;
                    assert!(!errors.faults().is_empty(), "{slipped}");
                    assert!(!errors.render(false).is_empty() && !errors.render(true).is_empty());
                    for k in 0..errors.faults().len() {
                        assert!(errors.line(k) >= 1 && errors.column(k) >= 1);
                    }
                }
            }
        }
    }
    // Slips in notes, numbers and blanks leave a right file: both ways have been taken often.
    assert!(right > 100 && wrong > 500, "{right} right, {wrong} wrong");
}
