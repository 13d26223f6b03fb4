//! Slips whose nearest known name would be another model: the help says what was meant, not what is spelled alike.

use evenpoise::problem::Problem;
use std::path::Path;

fn told(text: &str) -> String {
    Problem::parse(text, "slip.toml", Path::new(".")).unwrap_err().render(false)
}

#[test]
fn a_scale_is_not_renamed_to_a_rate() {
    let text = "title = \"t\"\n[variables]\na = { distribution = \"gamma\", shape = 2.0, scale = 3.0 }\n\
                b = { distribution = \"normal\", mean = 0.0, stdev = 1.0 }\n[target]\naim = \"density\"\nlog_factor = \"a + b\"\n";
    let message = told(text);
    assert!(message.contains("give `rate`, which is one over the scale"), "{message}");
    assert!(message.contains("write `sd`"), "{message}");
}

#[test]
fn foreign_densities_and_choices_are_translated() {
    let with = |factor: &str| {
        told(&format!(
            "title = \"t\"\n[variables]\na = {{ distribution = \"normal\", mean = 0.0, sd = 1.0 }}\n[target]\naim = \"density\"\n\
             log_factor = \"{factor}\"\n"
        ))
    };
    assert!(with("lognormal_pdf(a, 0, 1)").contains("log_density_lognormal(x, log_mean, log_sd)"));
    assert!(with("a if a > 0 else 0").contains("if(condition, a, b)"));
}
