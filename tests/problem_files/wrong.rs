//! A gallery of wrong problem files. Every message is kept word for word: it must let a reader mend the file at the
//! first try. `INSTA_UPDATE=always cargo test --test problem_files` writes them anew.

use std::fmt::Write as _;
use std::path::Path;

use evenpoise::problem::Problem;

/// A file around the lines of one table, the other tables being right.
pub(crate) fn file(constants: &str, variables: &str, rest: &str) -> String {
    let constants = if constants.is_empty() { String::new() } else { format!("\n[constants]\n{constants}\n") };
    format!("title = \"A weir of the Ellenmere feeder\"\n{constants}\n[variables]\n{variables}\n\n{rest}\n")
}

const TARGET: &str = "[target]\naim = \"density\"\nlog_factor = \"-depth^2\"";
const DEPTH: &str = "depth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }";

fn variables(text: &str) -> String {
    file("", text, TARGET)
}

fn constants(text: &str) -> String {
    file(text, DEPTH, TARGET)
}

pub(crate) fn rest(text: &str) -> String {
    file("", DEPTH, text)
}

pub(crate) fn with_target(text: &str) -> String {
    rest(&format!("{TARGET}\n\n{text}"))
}

fn data(text: &str, formula: &str) -> String {
    rest(&format!("[data]\n{text}\n\n[target]\naim = \"density\"\nlog_factor = \"{formula}\""))
}

/// The messages of several files, each under its name. Every file must be refused.
pub(crate) fn gallery(files: &[(&str, String)]) -> String {
    let mut out = String::new();
    for (name, text) in files {
        let folder = Path::new("tests/problem_files/data");
        match Problem::parse(text, "weir.toml", folder) {
            Ok(_) => panic!("{name}: this file was taken for a right one:\n{text}"),
            Err(errors) => {
                let _ = write!(out, "──── {name}\n{}\n\n", errors.render(false));
            }
        }
    }
    out
}

pub(crate) fn snapshot(name: &str, messages: &str) {
    let mut settings = insta::Settings::clone_current();
    settings.set_omit_expression(true);
    settings.set_prepend_module_to_snapshot(false);
    settings.bind(|| insta::assert_snapshot!(name, messages));
}

#[test]
fn files_that_are_no_problem() {
    snapshot(
        "files_that_are_no_problem",
        &gallery(&[
            ("no TOML", "title = \"A weir\n[variables]\n".into()),
            ("a key twice", "title = \"A weir\"\ntitle = \"A weir again\"\n".into()),
            ("an empty file", String::new()),
            ("no variables", format!("title = \"A weir\"\n\n{}", TARGET.replace("-depth^2", "1"))),
            ("no target", rest("")),
            ("an unknown table", with_target("[formulae]\na = \"1\"")),
            ("a table of another trade", with_target("[plots]\nwidth = 8")),
            ("a model program", with_target("[program]\nrun = [\"python3\", \"tank.py\"]")),
            ("a title that is no text", variables(DEPTH).replace("\"A weir of the Ellenmere feeder\"", "7")),
            ("variables in a list", "title = \"A weir\"\nvariables = [1, 2]\n".to_owned() + TARGET),
        ]),
    );
}

#[test]
fn several_at_once() {
    snapshot(
        "several_at_once",
        &gallery(&[
            ("slips in every table", {
                "title = 3\n\n[variables]\ndepth = { distribution = \"normal\", mean = 2.0, sd = 0.5, unti = \"m\" }\n\
                 flow = { range = [0.0, 1.0], near = 2.0, spread = 1.0 }\n\n[data]\nfile = \"typo.csv\"\n\n[formulas]\n\
                 head = \"depth*level\"\n\n[target]\naim = \"density\"\nlog_factor = \"-sum(head)\"\nfailed = \"in\"\n\n\
                 [tuning]\nrounds = 0\n"
                    .into()
            }),
            ("several formulas beside a slip in the tuning", {
                rest(
                    "[formulas]\nhead = \"dept + 1\"\nwidth = \"sqroot(depth)\"\n\n[target]\naim = \"density\"\n\
                     log_factor = \"-head^2 - width\"\n\n[estimates]\nanswer = \"head +\"\n\n[tuning]\nsede = 3",
                )
            }),
        ]),
    );
}

#[test]
fn constants_and_names() {
    snapshot(
        "constants_and_names",
        &gallery(&[
            ("a constant in quotes", constants("crest = \"2.5\"")),
            ("a constant that is nan", constants("crest = nan")),
            ("an unused constant", constants("crest = 2.5")),
            ("a name of the language", constants("exp = 2.5")),
            ("no name", constants("\"crest level\" = 2.5")),
            ("a constant called as a variable", constants("depth = 2.5")),
            (
                "a formula called as a variable",
                rest("[formulas]\ndepth = \"1\"\n\n[target]\naim = \"density\"\nlog_factor = \"-depth^2\""),
            ),
            ("a column called as a constant", {
                let target =
                    "[data]\nfile = \"clash.csv\"\n\n[target]\naim = \"density\"\nlog_factor = \"-mass*depth^2\"";
                file("mass = 2.0", DEPTH, target)
            }),
        ]),
    );
}

#[test]
fn variables_of_a_distribution() {
    snapshot(
        "variables_of_a_distribution",
        &gallery(&[
            ("neither distribution nor range", variables("depth = { mean = 2.0 }")),
            ("both", variables("depth = { distribution = \"normal\", mean = 2.0, sd = 0.5, range = [0.0, 4.0] }")),
            ("an unknown distribution", variables("depth = { distribution = \"log-normal\", mean = 2.0, sd = 0.5 }")),
            ("a distribution of another kind", variables("depth = { distribution = \"zipf\", s = 2.0 }")),
            ("an unknown parameter", variables("depth = { distribution = \"normal\", mean = 2.0, sdd = 0.5 }")),
            ("a parameter too few", variables("depth = { distribution = \"normal\", mean = 2.0 }")),
            ("two forms mixed", variables("depth = { distribution = \"gamma\", mean = 2.0, rate = 0.5 }")),
            ("sd and cv", variables("depth = { distribution = \"normal\", mean = 2.0, sd = 0.5, cv = 0.2 }")),
            ("no spread", variables("depth = { distribution = \"normal\", mean = 2.0, sd = 0.0 }")),
            (
                "a negative mean of a lognormal",
                variables("depth = { distribution = \"lognormal\", mean = -2.0, sd = 0.5 }"),
            ),
            (
                "a number in quotes that is no formula",
                variables("depth = { distribution = \"normal\", mean = \"2,0\", sd = 0.5 }"),
            ),
            ("a parameter that is a list", variables("depth = { distribution = \"normal\", mean = [2.0], sd = 0.5 }")),
            ("ends swapped", variables("depth = { distribution = \"uniform\", low = 3.0, high = 1.0 }")),
            ("nothing between", {
                variables("depth = { distribution = \"gamma\", shape = 2.0, rate = 1.0, between = [-2.0, -1.0] }")
            }),
            ("between swapped", {
                variables("depth = { distribution = \"normal\", mean = 2.0, sd = 0.5, between = [3.0, 1.0] }")
            }),
            ("a shift of a whole line", {
                variables("depth = { distribution = \"normal\", mean = 2.0, sd = 0.5, shift = 1.0 }")
            }),
            ("half a whole number", variables("depth = { distribution = \"binomial\", n = 2.5, p = 0.5 }")),
            ("near outside the support", {
                variables("depth = { distribution = \"gamma\", shape = 2.0, rate = 1.0, near = -1.0 }")
            }),
            ("a variable that is a number", variables("depth = 2.0")),
        ]),
    );
}

#[test]
fn variables_with_a_range() {
    snapshot(
        "variables_with_a_range",
        &gallery(&[
            ("no start", variables("depth = { range = [0.0, inf] }")),
            ("near on an end", variables("depth = { range = [0.0, inf], near = 0.0, spread = 1.0 }")),
            ("near outside", variables("depth = { range = [0.0, 4.0], near = 5.0, spread = 1.0 }")),
            ("no spread", variables("depth = { range = [0.0, 4.0], near = 2.0, spread = 0.0 }")),
            ("one end", variables("depth = { range = [0.0], near = 2.0, spread = 1.0 }")),
            ("ends swapped", variables("depth = { range = [4.0, 0.0], near = 2.0, spread = 1.0 }")),
            ("ends in quotes", variables("depth = { range = [\"0\", \"inf\"], near = 2.0, spread = 1.0 }")),
            ("a misspelt key", variables("depth = { range = [0.0, 4.0], near = 2.0, sprad = 1.0 }")),
            ("between", variables("depth = { range = [0.0, 4.0], near = 2.0, spread = 1.0, between = [1.0, 2.0] }")),
            ("in a table of its own", variables("[variables.depth]\nrange = [0.0, 4.0]\nnaer = 2.0\nspread = 1.0")),
        ]),
    );
}

#[test]
fn dependent_parameters_and_members() {
    let pair = "spread_of = { distribution = \"half-normal\", scale = 1.0 }";
    snapshot(
        "dependent_parameters_and_members",
        &gallery(&[
            ("an unknown name in a parameter", {
                variables(&format!("{pair}\ndepth = {{ distribution = \"normal\", mean = 2.0, sd = \"spred_of\" }}"))
            }),
            ("a circle", {
                variables(
                    "low_one = { distribution = \"normal\", mean = \"depth\", sd = 1.0 }\n\
                 depth = { distribution = \"normal\", mean = \"low_one\", sd = 0.5 }",
                )
            }),
            (
                "a variable that depends on itself",
                variables("depth = { distribution = \"normal\", mean = \"depth\", sd = 0.5 }"),
            ),
            ("no distribution at the start", {
                variables(
                    "other = { distribution = \"normal\", mean = -3.0, sd = 1.0 }\n\
                 depth = { distribution = \"normal\", mean = 0.0, sd = \"other\" }",
                )
            }),
            ("a start for a dependent variable", {
                variables(&format!(
                    "{pair}\ndepth = {{ distribution = \"normal\", mean = 2.0, sd = \"spread_of\", near = 1.0 }}"
                ))
            }),
            (
                "each without data",
                variables("depth = { each = \"station\", distribution = \"normal\", mean = 2.0, sd = 0.5 }"),
            ),
            ("each of an unknown column", {
                let each = "depth = { each = \"staton\", distribution = \"normal\", mean = 2.0, sd = 0.5 }";
                let target =
                    "[data]\nfile = \"floods.csv\"\n\n[target]\naim = \"density\"\nlog_factor = \"-sum(depth^2)\"";
                file("", each, target)
            }),
            (
                "each of half a variable",
                variables("depth = { each = 2.5, distribution = \"normal\", mean = 2.0, sd = 0.5 }"),
            ),
            ("a row without a label", {
                let each = "depth = { each = \"station\", distribution = \"normal\", mean = 2.0, sd = 0.5 }";
                let target = "[data]\nfile = \"no_label.csv\"\nmissing = [\"\"]\nrows = \"all\"\n\n[target]\naim = \"density\"\nlog_factor = \"-sum(depth^2)\"";
                file("", each, target)
            }),
        ]),
    );
}

#[test]
fn data_files() {
    snapshot(
        "data_files",
        &gallery(&[
            ("no file", data("names = { flow = \"Flow\" }", "-depth^2")),
            ("not found", data("file = \"nowhere.csv\"", "-depth^2")),
            ("a misspelt key", data("file = \"floods.csv\"\nmising = [\"NA\"]", "-depth^2")),
            ("an unknown header", data("file = \"floods.csv\"\nnames = { flow = \"Peak flow\" }", "-depth^2")),
            ("a cell that is no number", data("file = \"typo.csv\"", "-sum((depth*level - flow)^2)")),
            ("a decimal comma", data("file = \"decimal_comma.csv\"", "-sum((depth - flow)^2)")),
            (
                "an empty cell",
                data("file = \"floods.csv\"\nnames = { flow = \"Peak flow (m3/s)\" }", "-sum((depth - flow)^2)"),
            ),
            ("a row that is too short", data("file = \"short_row.csv\"", "-sum((depth - flow)^2)")),
            ("semicolons", data("file = \"semicolons.csv\"", "-depth^2")),
            ("no rows", data("file = \"no_rows.csv\"", "-depth^2")),
            ("a header twice", data("file = \"twice.csv\"", "-sum((depth - flow)^2)")),
            ("not UTF-8", data("file = \"latin.csv\"", "-depth^2")),
            ("no complete row", data("file = \"all_missing.csv\"\nmissing = [\"NA\"]", "-sum((depth*level - flow)^2)")),
            ("an unknown word for rows", data("file = \"floods.csv\"\nrows = \"some\"", "-depth^2")),
            ("labels as numbers", data("file = \"floods.csv\"", "-sum((depth - station)^2)")),
            ("a target that is a column", data("file = \"readings.csv\"", "-(depth - time)^2")),
        ]),
    );
}

#[test]
fn targets_and_formulas() {
    let target = |text: &str| rest(&format!("[target]\n{text}"));
    snapshot(
        "targets_and_formulas",
        &gallery(&[
            ("no aim", target("log_factor = \"-depth^2\"")),
            ("an unknown aim", target("aim = \"probabilty\"\nevent = \"depth > 3\"")),
            ("no formula", target("aim = \"density\"")),
            ("the formula of another aim", target("aim = \"probability\"\nlog_factor = \"-depth^2\"")),
            ("both formulas", target("aim = \"density\"\nlog_factor = \"-depth^2\"\nlog_density = \"-depth^2\"")),
            ("the whole density beside a distribution", target("aim = \"density\"\nlog_density = \"-depth^2\"")),
            ("a formula without quotes", target("aim = \"density\"\nlog_factor = 3")),
            ("an unknown name", target("aim = \"density\"\nlog_factor = \"-(dept - 2)^2\"")),
            ("an unknown name after an escape", target("aim = \"density\"\nlog_factor = \"\\u002D(dept - 2)^2\"")),
            (
                "an unknown function in quotes of three",
                target("aim = \"density\"\nlog_factor = '''\n  -depth^2\n  + sqr(depth)'''"),
            ),
            ("brackets", target("aim = \"density\"\nlog_factor = \"-(depth^2\"")),
            ("an event that is no inequality", target("aim = \"probability\"\nevent = \"depth - 3\"")),
            ("a requirement that is no inequality", {
                target("aim = \"density\"\nlog_factor = \"-depth^2\"\nrequire = [\"depth\"]")
            }),
            ("requirements outside a list", {
                target("aim = \"density\"\nlog_factor = \"-depth^2\"\nrequire = \"depth > 1\"")
            }),
            ("failed for a density", target("aim = \"density\"\nlog_factor = \"-depth^2\"\nfailed = \"inside\"")),
            ("a range in a probability", {
                file(
                    "",
                    "depth = { range = [0.0, inf], near = 2.0, spread = 1.0 }",
                    "[target]\naim = \"probability\"\nevent = \"depth > 3\"",
                )
            }),
            ("a circle of formulas", {
                rest("[formulas]\na = \"b + depth\"\nb = \"2*a\"\n\n[target]\naim = \"density\"\nlog_factor = \"-a^2\"")
            }),
            ("an unused formula", {
                rest("[formulas]\nhead = \"depth - 1\"\n\n[target]\naim = \"density\"\nlog_factor = \"-depth^2\"")
            }),
            ("a formula that is a number", {
                rest("[formulas]\nhead = 1.5\n\n[target]\naim = \"density\"\nlog_factor = \"-head*depth^2\"")
            }),
            ("an estimate that is no formula", with_target("[estimates]\nhead = 1.5")),
            ("an estimate with an unknown name", with_target("[estimates]\nhead = \"depth - crest\"")),
            ("an estimate without a name", with_target("[estimates]\n\"head (m)\" = \"depth\"")),
        ]),
    );
}

#[test]
fn a_problem_file_that_is_not_there() {
    let error = Problem::read(Path::new("nowhere/weir.toml")).unwrap_err();
    snapshot("a_problem_file_that_is_not_there", &error.render(false));
}
