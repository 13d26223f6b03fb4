//! Every example of the documentation that says it is complete is read and evaluated.

use std::fs;
use std::path::Path;

use evenpoise::numeric::Points;
use evenpoise::problem::Aim;

use crate::right::read;

#[test]
fn complete_examples_run() {
    let page = Path::new(env!("CARGO_MANIFEST_DIR")).join("docs/problem-file.md");
    let page = fs::read_to_string(page).unwrap();
    let examples: Vec<&str> =
        page.split("```toml complete\n").skip(1).map(|part| part.split("```").next().unwrap()).collect();
    assert_eq!(examples.len(), 5);
    let mut aims = Vec::new();
    for example in examples {
        let problem = read(example);
        let start = Points::from_rows(problem.dim(), &problem.start().near);
        let (answer, gradient) = problem.evaluate_with_gradient(&start).unwrap();
        assert!(answer.log_density[0].is_finite(), "{}", problem.title());
        assert!(gradient.point(0).iter().all(|slope| slope.is_finite()), "{}", problem.title());
        assert!(problem.estimates(&start).iter().all(|column| column[0].is_finite()), "{}", problem.title());
        assert!(problem.unused_variables().is_empty(), "{}", problem.title());
        aims.push(problem.aim());
    }
    assert!([Aim::Density, Aim::Expectation, Aim::Probability].iter().all(|aim| aims.contains(aim)));
}
