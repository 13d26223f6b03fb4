//! The gallery of wrong files, continued: `[tuning]` and `[[correlation]]`.

use crate::wrong::file;
use crate::wrong::gallery;
use crate::wrong::snapshot;
use crate::wrong::with_target;

#[test]
fn tuning_and_correlation() {
    let two = "depth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }\n\
               flow = { distribution = \"exponential\", rate = 1.0 }\n\
               other = { range = [0.0, inf], near = 1.0, spread = 1.0 }";
    let correlation = |text: &str| {
        file(
            "",
            two,
            &format!("[[correlation]]\n{text}\n\n[target]\naim = \"density\"\nlog_factor = \"-depth*flow*other\""),
        )
    };
    snapshot(
        "tuning_and_correlation",
        &gallery(&[
            ("a misspelt key", with_target("[tuning]\nbudgett = 5000")),
            ("half a budget", with_target("[tuning]\nbudget = 5000.5")),
            ("an unknown family", with_target("[tuning]\nfamily = \"normal\"")),
            ("a share above one", with_target("[tuning]\nreport_share = 1.5")),
            ("degrees of freedom of a Gaussian", with_target("[tuning]\nfamily = \"gaussian\"\ndf = 5")),
            ("natural coordinates on a half-line", {
                file(
                    "",
                    two,
                    "[target]\naim = \"density\"\nlog_factor = \"-depth*flow*other\"\n\n[tuning]\ncoordinates = \"natural\"",
                )
            }),
            (
                "several at once",
                with_target("[tuning]\nbudget = \"much\"\nrounds = 0\nseed = -1\ncomponents = \"some\""),
            ),
            ("no kind", correlation("among = [\"depth\", \"flow\"]")),
            ("two kinds", correlation("among = [\"depth\", \"flow\"]\nlinear = 0.5\nrank = 0.5")),
            ("one variable", correlation("among = [\"depth\"]\nlinear = 0.5")),
            ("an unknown variable", correlation("among = [\"depth\", \"flwo\"]\nlinear = 0.5")),
            ("a variable twice", correlation("among = [\"depth\", \"depth\"]\nlinear = 0.5")),
            ("a range", correlation("among = [\"depth\", \"other\"]\nlinear = 0.5")),
            ("a correlation of one", correlation("among = [\"depth\", \"flow\"]\nscore = 1.0")),
            ("out of reach", correlation("among = [\"depth\", \"flow\"]\nlinear = 0.95")),
            ("a ragged triangle", correlation("among = [\"depth\", \"flow\"]\nlinear = [[1.0], [0.5]]")),
            ("not positive definite", {
                let three = "a = { distribution = \"normal\", mean = 0.0, sd = 1.0 }\n\
                         b = { distribution = \"normal\", mean = 0.0, sd = 1.0 }\n\
                         c = { distribution = \"normal\", mean = 0.0, sd = 1.0 }";
                let rest = "[[correlation]]\namong = [\"a\", \"b\", \"c\"]\nscore = [[1.0], [0.9, 1.0], [-0.9, 0.9, 1.0]]\n\n\
                        [target]\naim = \"probability\"\nevent = \"a + b + c > 9\"";
                file("", three, rest)
            }),
            ("single brackets", {
                file(
                    "",
                    two,
                    "[correlation]\namong = [\"depth\", \"flow\"]\nlinear = 0.5\n\n[target]\naim = \"density\"\nlog_factor = \"-depth*flow*other\"",
                )
            }),
        ]),
    );
}
