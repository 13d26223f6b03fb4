//! Wrong problem files with several independent slips: one look shows them all, whatever part of the file they are in.

use crate::wrong::file;
use crate::wrong::gallery;
use crate::wrong::rest;
use crate::wrong::snapshot;
use crate::wrong::with_target;

/// A file of several tables under a title.
fn whole(text: &str) -> String {
    format!("title = \"A weir of the Ellenmere feeder\"\n{text}\n")
}

#[test]
fn slips_against_toml() {
    let line = |text: &str| with_target(&format!("[estimates]\n{text}"));
    snapshot(
        "slips_against_toml",
        &gallery(&[
            (
                "a word without quotes",
                whole(
                    "[variables]\ndepth = { distribution = normal, mean = 2.0, sd = wide }\n[target]\naim = density\nlog_factor = -depth^2",
                ),
            ),
            ("a formula without quotes, and a slip in it", line("head = 2*dept + sqrt(depth)  # metres")),
            ("no closing quote in a line", line("head = \"2*depth")),
            (
                "no closing quote in a table",
                file(
                    "",
                    "depth = { distribution = \"normal, mean = 2.0, sd = 0.5 }",
                    "[target]\naim = \"density\"\nlog_factor = \"-depth^2\"",
                ),
            ),
            (
                "no closing bracket",
                file(
                    "",
                    "depth = { distribution = \"normal\", mean = 2.0, sd = 0.5\nflow = { range = [0.0, inf, near = 2.0, spread = 1.0 }",
                    "[target\naim = \"density\"\nlog_factor = \"-depth^2 - flow\"",
                ),
            ),
            ("two equal signs, a colon, none", with_target("[tuning]\nbudget == 5000\nrounds : 8\nseed 3")),
            (
                "a decimal comma",
                file(
                    "crest = 2,5",
                    "depth = { distribution = \"normal\", mean = 2,5, sd = 0,5 }",
                    "[target]\naim = \"density\"\nlog_factor = \"-(depth - crest)^2\"",
                ),
            ),
            (
                "numbers that are none",
                file(
                    "crest = .5\nwidth = 12 m\nslope = 30%\nangle = pi/6",
                    "depth = { distribution = \"normal\", mean = 2., sd = 0.5, between = [0 Inf] }",
                    "[target]\naim = \"density\"\nlog_factor = \"-(depth - crest)^2*width*slope*angle\"",
                ),
            ),
            (
                "a key twice",
                whole(
                    "[variables]\ndepth = { distribution = \"normal\", mean = 2.0, mean = 3.0, sd = 0.5 }\n[target]\naim = \"density\"\nlog_factor = \"-depth^2 + crest\"",
                ),
            ),
            (
                "a table twice",
                whole(
                    "[constants]\ncrest = 2.5\n[variables]\ndepth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }\n[constants]\nwidth = 3.0\n[target]\naim = \"density\"\nlog_factor = \"-(depth - crest)**2 * width\"",
                ),
            ),
            (
                "quotes inside quotes",
                whole(
                    "[variables]\ndepth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }\n[data]\nfile = \"floods.csv\"\n[target]\naim = \"density\"\nlog_factor = \"-sum(if(station == \"Alder\", depth, 0))\"",
                ),
            ),
            ("typographic quotes", line("head = “2*depth”")),
            (
                "a list in round brackets",
                file(
                    "",
                    "depth = { range = (0.0, 4.0), near = 2.0, spread = 1.0 }",
                    "[target]\naim = \"density\"\nlog_density = \"-depth^2\"",
                ),
            ),
            (
                "a key with a gap, a letter beyond ASCII, a value that is missing",
                whole(
                    "[constants]\nhöhe = 2.0\ncrest level = 1.0\nwidth =\n[variables]\ndepth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }\n[target]\naim = \"density\"\nlog_factor = \"-(depth - höhe - crest_level)^2*width\"",
                ),
            ),
            (
                "remarks of another kind and headers without brackets",
                whole(
                    "// invented\nvariables:\ndepth = { distribution = \"normal\", mean = 2.0, sd = 0.5 };\n[target]\naim = \"density\"\nlog_factor = \"-depth^2\"",
                ),
            ),
            (
                "a backslash",
                whole(
                    "[variables]\ndepth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }\n[data]\nfile = \"old\\data.csv\"\n[target]\naim = \"density\"\nlog_factor = \"-depth^2\"",
                ),
            ),
        ]),
    );
}

#[test]
fn slips_in_every_layer() {
    snapshot(
        "slips_in_every_layer",
        &gallery(&[
            (
                "words from elsewhere",
                whole(
                    "[constants]\nlimit = \"2.5\"\n\n[variables]\nvelocity = { dist = \"lognormal\", mu = 0.6, sd = 0.3 }\n\
                 dispersion = { range = [0, inf], start = 5, width = 5 }\nnoise = { distribution = \"half_normal\", sigma = 1.0 }\n\n\
                 [data]\nfile = \"reading.csv\"\n\n[formulas]\npeak = \"limit / sqrt(4*PI*dispersion*time)\"\n\
                 predicted = \"peak * exp(-(850 - velocity*time)**2 / (4*dispersion*time)\"\n\n[target]\naim = \"density\"\n\
                 log_factor = \"log_density_normal(concentration, predicted)\"\n\n[tuning]\nfamily = \"t\"",
                ),
            ),
            (
                "a group beside its rows, marks of missing cells, a misspelt parameter",
                whole(
                    "[variables]\nlevel_of = { distribution = \"normal\", mean = 3, sd = 2 }\ntau = { distribution = \"half-cauchy\", scale = 1 }\n\
                 effect = { for_each = \"station\", distribution = \"normal\", mean = 0, sd = \"taw\" }\n\n[data]\nfile = \"marks.csv\"\n\n\
                 [target]\naim = \"density\"\nlog_factor = \"sum(log_density_normal(flow, level_of + effect, 1))\"",
                ),
            ),
            (
                "correlation, event and tuning",
                whole(
                    "[variables]\nload = { distribution = \"gumbel\", mean = 100, stdev = 20 }\nyield = { distribution = \"lognormal\", mean = 300, sd = 30 }\n\
                 wear = { distribution = \"gamma\", mean = 1, sd = -0.3 }\n\n[[correlation]]\namong = [\"yield\", \"load\", \"war\"]\n\
                 linear = [[1.0, 0.3, 0.2], [0.3, 1.0, 0.1], [0.2, 0.1, 1.0]]\n\n[formulas]\ncapacity = \"yield (1 - wear/10)\"\nspare = \"7\"\n\n\
                 [target]\naim = \"probability\"\nevent = \"capacity - load && wear < 0.5\"\nrequire = \"load > 0\"\n\n[tuning]\nbudget = 10\ncoordinates = \"scores\"",
                ),
            ),
            (
                "semicolons, headers that are no names, empty cells",
                whole(
                    "[variables]\nscale_of = { distribution = \"lognormal\", mean = 20, sd = 10 }\n\n[data]\nfile = \"stages.csv\"\n\n\
                 [target]\naim = \"density\"\nlog_factor = \"sum(log_density_normal(log(flow), log(scale_of) + 1.5*log(stage), 0.2))\"",
                ),
            ),
            (
                "the line [target] is not there, keys in wrong tables",
                whole(
                    "seed = 4\n\n[variables]\ndepth = { distribution = \"normal\", mean = 2.0, sd = 0.5 }\n\n[formulas]\nhead = \"depth*9.81\"\n\
                 aim = \"density\"\nlog_factor = \"-head^2 - ln(0.5)\"\nbudget = 5000",
                ),
            ),
            (
                "several in one formula",
                rest(
                    "[target]\naim = \"density\"\nlog_factor = \"2 depth ** 2 + pow(depth, 2) - e^depth % 3 + log(depth, 10) * (1 + hed\"",
                ),
            ),
            (
                "a choice as elsewhere and an equality in an event",
                whole(
                    "[constants]\nlimit = 3\n\n[variables]\nhead = { distribution = \"uniform\", min = 0, max = 5 }\n\n[formulas]\n\
                 flow = \"sqrt(head) if head > 0 else 0\"\n\n[target]\naim = \"probability\"\nevent = \"flow < limit && head > 2 or head = 1\"",
                ),
            ),
            (
                "two files, one header misspelt, rows that do not go together",
                whole(
                    "[variables]\nk = { distribution = \"lognormal\", mean = 1, cv = 0.5 }\n\n[data.gauge]\nfile = \"readings.csv\"\n\n[data.floods]\n\
                 file = \"floods.csv\"\nnames = { flow = \"Peak flow\" }\n\n[target]\naim = \"density\"\n\
                 log_factor = \"sum(log_density_normal(gauge.concentration, k*floods.flow, 0.3))\"",
                ),
            ),
        ]),
    );
}

#[test]
fn cells_and_rows() {
    let data = |file: &str, formula: &str| {
        rest(&format!("[data]\nfile = \"{file}\"\n\n[target]\naim = \"density\"\nlog_factor = \"{formula}\""))
    };
    snapshot(
        "cells_and_rows",
        &gallery(&[
            ("no header", data("no_header.csv", "-sum((depth - y)^2)")),
            ("a line of units", data("units_row.csv", "-sum((depth*time - flow)^2)")),
            ("decimal commas between commas", data("split_decimals.csv", "-sum((depth*time - flow)^2)")),
            ("rows of different length and a header twice", data("ragged.csv", "-sum((depth*time - flow)^2)")),
            ("marks of missing cells", data("marks.csv", "-sum((depth*level - flow)^2)")),
            ("a file in a folder that is not there", data("july/readings.csv", "-sum((depth*time - flow)^2)")),
        ]),
    );
}

#[test]
fn numbers_units_and_labels() {
    let event = |variables: &str, event: &str| {
        whole(&format!("[variables]\n{variables}\n\n[target]\naim = \"probability\"\nevent = {event}"))
    };
    snapshot(
        "numbers_units_and_labels",
        &gallery(&[
            (
                "large numbers and foreign signs",
                event(
                    "inflow = { distribution = \"lognormal\", mean = 1,200, cv = 0.3 }\nwidth = { distribution = \"triangular\", low = 10, mode = 9, high = 12 }",
                    "\"inflow / width >> 150\"\n\n[tuning]\nbudget = 50k",
                ),
            ),
            (
                "units in numbers and formulas",
                event(
                    "flow_rate = { distribution = \"lognormal\", mean = 2.0 m3/s, cv = 0.1 }\narea = { distribution = \"uniform\", low = 3.0, high = 3.5 }",
                    "\"flow_rate / area > 0.8 m/s\"",
                ),
            ),
            (
                "an event without quotes, a correlation in quotes",
                event(
                    "height = { distribution = \"weibull\", shape = 1.5, scale = 2.0, }\nperiod = { distribution = \"lognormal\", mean = 8, cv = 20% }\n\n\
                 [[correlation]]\namong = [\"height\", \"period\"]\nrank = \"0.6\"",
                    "height > 6 and period > 12",
                ),
            ),
            (
                "a label without quotes, items without a comma",
                whole(
                    "[variables]\nfirst = { distribution = \"normal\", mean = 1, sd = 1 }\n\n[data]\nfile = \"marks.cvs\"\nmissing = [\"-\" \"\"]\n\n\
                 [target]\naim = \"density\"\nlog_factor = \"sum(if(station == Alder, (flow - first)^2, 0))\"",
                ),
            ),
            (
                "semicolons in a list, a letter for a product",
                whole(
                    "[variables]\nslope = { range = [-inf; inf], near = 0, spread = \"wide\" }\n\n[data]\nfile = \"readings.csv\"\n\n\
                 [target]\naim = \"density\"\nlog_density = \"sum(log_density_normal(concentration, slope x time, 1))\"",
                ),
            ),
            (
                "tails by other names, rows without quotes",
                whole(
                    "[variables]\nlevel_of = { distribution = \"normal\", mean = 1, sd = 1 }\n\n[data]\nfile = \"marks.csv\"\nmissing = [\"-\"]\nrows = all\n\n\
                 [target]\naim = \"density\"\nlog_factor = \"sum(if(flow > 0, normal_lpdf(flow, level_of, 1), log_normal_cdf(0.1 - level_of)))\"",
                ),
            ),
            (
                "distributions as calls",
                whole(
                    "[variables]\nfirst = normal(0, 1)\nsecond ~ gamma(2, 1)\nthird = { distribution = \"student-t\", mean = 0, df = 3 }\n\n\
                 [target]\naim = \"density\"\nlog_factor = \"-(first + second + third)^2\"",
                ),
            ),
        ]),
    );
}
