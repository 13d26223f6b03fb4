//! The report of real runs: well formed, self-contained, the same bytes twice, and nothing from outside speaks HTML.

// Helpers of tests.
#![allow(clippy::unwrap_used)]

use evenpoise::adapt::rare::tune_rare;
use evenpoise::adapt::{Settings, Silent, Tuning, tune};
use evenpoise::problem::{Aim, Problem};
use evenpoise::report::page::{PageData, PageFigure, RunFacts, html, markdown};
use evenpoise::weights::verdict::{Check, Verdict, Word};
use std::path::Path;
use std::sync::OnceLock;

const TEXT: &str = r#"
title = "Seepage <script>alert('x')</script> & \"more\""
[constants]
gauge = 2.0
[variables]
depth = { distribution = "lognormal", mean = 2.0, cv = 0.4, unit = "m <b>", label = "Depth | of `water`" }
slope = { range = [-1.0, 1.0], near = 0.1, spread = 0.5, note = "*not* _marked_" }
[formulas]
misfit = "(depth + slope - gauge) / 0.3"
[target]
aim = "density"
log_factor = "-misfit^2 / 2"
[estimates]
flow = "depth * 2"
"#;

fn run() -> &'static (Problem, Tuning) {
    static RUN: OnceLock<(Problem, Tuning)> = OnceLock::new();
    RUN.get_or_init(|| {
        let problem = Problem::parse(TEXT, "seepage.toml", Path::new(".")).unwrap();
        let tuning = tune(&problem, &Settings::new(3000, 5), &mut Silent).unwrap();
        (problem, tuning)
    })
}

fn page() -> PageData {
    let (problem, tuning) = run();
    let figure = PageFigure {
        name: "progress".into(),
        caption: "Scores <i>".into(),
        alternative: "A \"chart\"".into(),
        png: vec![137, 80, 78, 71],
    };
    let facts = RunFacts {
        program: "evenpoise 0.1.0".into(),
        seed: 5,
        digests: vec![("problem".into(), problem.digest())],
        evaluations: tuning.evaluations,
        failed: tuning.failed,
        report_draws: tuning.report.labels.len() as u64,
        command: "evenpoise tune seepage.toml --seed 5 && true".into(),
        statement: problem.text(),
    };
    PageData::of_density(problem, tuning, vec![figure], facts)
}

/// Every tag that is opened is closed, in order; attributes are quoted. Gives the tags back in the order of opening.
fn tags(page: &str) -> Vec<String> {
    const VOID: [&str; 3] = ["meta", "img", "!DOCTYPE"];
    let (mut open, mut all) = (Vec::new(), Vec::new());
    let style = page.find("<style>").unwrap()..page.find("</style>").unwrap();
    let mut rest = page.to_owned();
    rest.replace_range(style.start + 7..style.end, "");
    let mut pieces = rest.split('<');
    assert!(pieces.next().unwrap().is_empty(), "text before the first tag");
    for piece in pieces {
        let (tag, text) = piece.split_once('>').unwrap_or_else(|| panic!("a bare < before {piece:?}"));
        assert!(!text.contains('>'), "a bare > in {text:?}");
        assert!(tag.matches('"').count().is_multiple_of(2), "quotes of {tag:?}");
        let name = tag.split([' ', '\n']).next().unwrap();
        if let Some(closed) = name.strip_prefix('/') {
            assert_eq!(open.pop().as_deref(), Some(closed), "wrong end");
            continue;
        }
        all.push(name.to_owned());
        if !VOID.contains(&name) {
            open.push(name.to_owned());
        }
    }
    assert!(open.is_empty(), "left open: {open:?}");
    all
}

#[test]
fn the_page_is_well_formed_and_its_headings_are_in_order() {
    let page = html(&page());
    let tags = tags(&page);
    let levels: Vec<u32> =
        tags.iter().filter_map(|tag| tag.strip_prefix('h').and_then(|level| level.parse().ok())).collect();
    assert_eq!(levels[0], 1);
    assert_eq!(levels.iter().filter(|&&level| level == 1).count(), 1);
    assert!(levels.windows(2).all(|pair| pair[1] <= pair[0] + 1), "{levels:?}");
    for name in ["main", "header", "section", "table", "caption", "figure", "figcaption", "ol"] {
        assert!(tags.iter().any(|tag| tag == name), "no <{name}>");
    }
}

#[test]
fn the_page_needs_nothing_but_itself() {
    let page = html(&page());
    for word in ["<script", "<link", "<iframe", "http://", "https://", "@import", "url(", "javascript:", " onload"] {
        assert!(!page.contains(word), "{word}");
    }
    assert!(page.contains("default-src 'none'"));
    // Python: base64.b64encode(bytes([137, 80, 78, 71]))
    assert!(page.contains("src=\"data:image/png;base64,iVBORw==\""));
}

#[test]
fn texts_from_outside_are_only_texts() {
    let page_data = page();
    let page = html(&page_data);
    assert!(page.contains("Seepage &lt;script&gt;alert(&#39;x&#39;)&lt;/script&gt; &amp; &quot;more&quot;"));
    assert!(
        page.contains("m &lt;b&gt;")
            && page.contains("Scores &lt;i&gt;")
            && page.contains("alt=\"A &quot;chart&quot;\"")
    );
    let markdown = markdown(&page_data);
    assert!(markdown.contains("Depth \\| of \\`water\\`") && markdown.contains("\\*not\\* \\_marked\\_"));
    for line in markdown.lines().filter(|line| line.starts_with("| depth ")) {
        let bars = line.match_indices('|').filter(|(at, _)| *at == 0 || line.as_bytes()[at - 1] != b'\\').count();
        assert_eq!(bars, 7, "{line}");
    }
}

#[test]
fn the_same_run_gives_the_same_bytes() {
    let (problem, first) = run();
    let again = tune(problem, &Settings::new(3000, 5), &mut Silent).unwrap();
    let facts = page().run;
    let pages = [first, &again].map(|tuning| {
        let data = PageData::of_density(problem, tuning, Vec::new(), facts.clone());
        (html(&data), markdown(&data))
    });
    assert_eq!(pages[0], pages[1]);
}

#[test]
fn both_forms_say_the_same_numbers() {
    let data = page();
    let (page, text) = (html(&data), markdown(&data));
    for needed in
        ["Answers", "Problem", "Method", "Survey", "Tuning", "Checks", "Figures", "Cautions", "Provenance", "Sources"]
    {
        assert!(page.contains(&format!("<h2>{needed}</h2>")), "{needed}");
        assert!(text.contains(&format!("\n## {needed}\n")), "{needed}");
    }
    let evaluations = "3,000, of which 0 failed";
    let largest = format!("{:.1} %", 100.0 * data.rounds[0].largest_share);
    for needed in [evaluations, largest.as_str(), data.verdict.caution.as_str(), "misfit = "] {
        assert!(page.contains(&needed.replace('\'', "&#39;")) && text.contains(needed), "{needed}");
    }
    // Every number of a source that is cited leads to one.
    for k in 1..=11 {
        assert!(page.contains(&format!("href=\"#source-{k}\"")) && page.contains(&format!("id=\"source-{k}\"")), "{k}");
    }
}

#[test]
fn numbers_of_an_unfit_run_are_marked_and_others_are_not() {
    let mut data = page();
    let marks = |data: &PageData| {
        let (page, text) = (html(data), markdown(data));
        (page.matches("not to be reported").count(), text.matches("not to be reported").count())
    };
    assert!(data.verdict.word < Word::Unfit, "{:?}", data.verdict.reasons);
    assert_eq!(marks(&data), (0, 0));
    let check = Check {
        name: "a check",
        value: f64::NAN,
        limit: "none".into(),
        word: Word::Unfit,
        detail: "It failed.".into(),
    };
    data.verdict = Verdict::of(vec![check], "Unseen.".into());
    // The caption and each of the two answers.
    assert_eq!(marks(&data), (3, 3));
    assert!(html(&data).contains("<section class=\"verdict unfit\">") && html(&data).contains("<li>It failed.</li>"));
    data.answers.clear();
    data.score = None;
    data.rounds.clear();
    let bare = html(&data);
    tags(&bare);
    assert!(bare.contains("no number to report") && bare.contains("No round was made"));
}

#[test]
fn a_probability_carries_its_caution() {
    let mut data = page();
    let caution = "must not be the only ground for a decision that can hurt people";
    assert!(!html(&data).contains(caution) && !markdown(&data).contains(caution));
    for (aim, says) in [(Aim::Probability, true), (Aim::Expectation, false)] {
        data.aim = aim;
        assert_eq!(html(&data).contains(caution), says);
        assert_eq!(markdown(&data).contains(caution), says);
        tags(&html(&data));
    }
}

/// An event with two branches.
#[test]
fn a_probability_shows_its_design_points_and_rounds() {
    let text = r#"
title = "Over the crest"
[variables]
inflow = { distribution = "normal", mean = 0.0, sd = 1.0 }
level = { distribution = "normal", mean = 0.0, sd = 1.0 }
[target]
aim = "probability"
event = "inflow + level >= 5 or inflow - level >= 5"
"#;
    let problem = Problem::parse(text, "crest.toml", Path::new(".")).unwrap();
    let tuning = tune_rare(&problem, &Settings::new(4000, 3), &mut Silent).unwrap();
    let facts = RunFacts { report_draws: tuning.draws.points.len() as u64, evaluations: 4000, ..page().run };
    let data = PageData::of_rare(&problem, &tuning, Vec::new(), facts);
    let (page, text) = (html(&data), markdown(&data));
    tags(&page);
    let levels: Vec<&str> = text.lines().filter(|line| line.starts_with('#')).collect();
    assert!(levels.contains(&"## Answers") && levels.contains(&"## Cautions"));
    assert_eq!(tuning.survey.points.len(), 2, "both ways");
    for needed in [
        "Every design point found",
        "first-order probability",
        "smoothing",
        "only ground for a decision",
        "Plain sampling",
    ] {
        assert!(page.contains(needed) && text.contains(needed), "{needed}");
    }
    // Nothing is known of degrees of freedom or tails of single rounds here: no empty columns.
    let column = |title: &str| page.contains(&format!("<th scope=\"col\" class=\"n\">{title}</th>"));
    assert!(column("ESS fresh") && !column("degrees of freedom") && !column("tail shape"));
    let value = tuning.answer.value().unwrap();
    assert_eq!((data.answers[0].value, data.answers[0].se), (value.value, value.se));
}
