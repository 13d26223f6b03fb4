//! The page as HTML: one file, no script, nothing fetched.

use super::base64;
use super::blocks::{Block, Column, Span};
use super::content::{blocks, meaning};
use super::data::{PageData, PageFigure};
use crate::weights::verdict::Word;
use std::fmt::Write as _;

const STYLE: &str = include_str!("style.css");
/// Allows the page its own style and its own pictures, and nothing else.
const POLICY: &str = "default-src 'none'; img-src data:; style-src 'unsafe-inline'";

/// The report as one self-contained HTML page.
///
/// The same data give the same bytes.
///
/// ```
/// use evenpoise::adapt::{Settings, Silent, tune};
/// use evenpoise::model::Closure;
/// use evenpoise::problem::{Aim, Problem, Variable};
/// use evenpoise::report::page::{PageData, RunFacts, html};
/// let level = Variable::range("level", f64::NEG_INFINITY, f64::INFINITY, 0.0, 10.0);
/// let target = Closure::new(1, |x| -0.5 * x[0] * x[0]);
/// let problem = Problem::from_model("Level < 3 m & rising", vec![level], Aim::Density, Box::new(target)).unwrap();
/// let tuning = tune(&problem, &Settings::new(2000, 1), &mut Silent).unwrap();
/// let run = RunFacts {
///     program: "evenpoise".into(),
///     seed: 1,
///     digests: vec![],
///     evaluations: tuning.evaluations,
///     failed: tuning.failed,
///     report_draws: tuning.report.labels.len() as u64,
///     command: "evenpoise tune level.toml".into(),
///     statement: problem.text(),
/// };
/// let page = html(&PageData::of_density(&problem, &tuning, vec![], run));
/// assert!(page.starts_with("<!DOCTYPE html>") && page.contains("Level &lt; 3 m &amp; rising"));
/// ```
#[must_use]
pub fn html(data: &PageData) -> String {
    let lead = format!("Importance sampling report, aim {}, by {}", data.aim.word(), data.run.program);
    let mut opening = String::new();
    verdict(&mut opening, data);
    document(&data.title, &lead, &opening, &blocks(data), &data.figures)
}

/// A whole page: the title with a line below it, what opens it (as HTML), and its blocks.
pub(crate) fn document(title: &str, lead: &str, opening: &str, blocks: &[Block], figures: &[PageFigure]) -> String {
    let mut out = String::from("<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n");
    out.push_str("<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n");
    out.push_str("<meta name=\"color-scheme\" content=\"light dark\">\n");
    put(&mut out, format_args!("<meta http-equiv=\"Content-Security-Policy\" content=\"{POLICY}\">\n"));
    let title = escape(title);
    put(&mut out, format_args!("<title>{title}</title>\n<style>\n{STYLE}</style>\n</head>\n<body>\n<main>\n"));
    put(&mut out, format_args!("<header>\n<h1>{title}</h1>\n<p class=\"lead\">{}</p>\n</header>\n", escape(lead)));
    out.push_str(opening);
    let mut open = false;
    for block in blocks {
        if let Block::Heading(2, _) = block {
            out.push_str(if open { "</section>\n<section>\n" } else { "<section>\n" });
            open = true;
        }
        write_block(&mut out, block, figures);
    }
    out.push_str("</section>\n</main>\n</body>\n</html>\n");
    out
}

/// Writing to a string does not fail.
fn put(out: &mut String, text: std::fmt::Arguments<'_>) {
    let _ = out.write_fmt(text);
}

fn verdict(out: &mut String, data: &PageData) {
    let word = data.verdict.word;
    put(
        out,
        format_args!(
            "<section class=\"verdict {word}\">\n<h2>Verdict: <strong class=\"word {word}\">{word}</strong></h2>\n"
        ),
    );
    put(out, format_args!("<p>{}</p>\n", escape(meaning(word))));
    if !data.verdict.reasons.is_empty() {
        out.push_str("<ul>\n");
        for reason in &data.verdict.reasons {
            put(out, format_args!("<li>{}</li>\n", escape(reason)));
        }
        out.push_str("</ul>\n");
    }
    put(out, format_args!("<p>{}</p>\n</section>\n", escape(&data.verdict.caution)));
}

fn write_block(out: &mut String, block: &Block, figures: &[PageFigure]) {
    match block {
        Block::Heading(level, text) => put(out, format_args!("<h{level}>{}</h{level}>\n", escape(text))),
        Block::Paragraph(spans) => put(out, format_args!("<p>{}</p>\n", inline(spans))),
        Block::Caution(spans) => put(out, format_args!("<p class=\"caution\" role=\"note\">{}</p>\n", inline(spans))),
        Block::List(items) => {
            out.push_str("<ul>\n");
            for item in items {
                put(out, format_args!("<li>{}</li>\n", inline(item)));
            }
            out.push_str("</ul>\n");
        }
        Block::Table { caption, columns, rows } => table(out, caption, columns, rows),
        Block::Figure(k) => figure(out, &figures[*k]),
        Block::Listing(text) => put(out, format_args!("<pre>{}</pre>\n", escape(text.trim_end()))),
        Block::Sources(sources) => {
            out.push_str("<ol class=\"sources\">\n");
            for (k, source) in sources.iter().enumerate() {
                put(out, format_args!("<li id=\"source-{}\">{}</li>\n", k + 1, escape(source)));
            }
            out.push_str("</ol>\n");
        }
    }
}

fn table(out: &mut String, caption: &str, columns: &[Column], rows: &[Vec<String>]) {
    put(out, format_args!("<table>\n<caption>{}</caption>\n<thead>\n<tr>", escape(caption)));
    for column in columns {
        put(out, format_args!("<th scope=\"col\"{}>{}</th>", class(column), escape(&column.title)));
    }
    out.push_str("</tr>\n</thead>\n<tbody>\n");
    for row in rows {
        out.push_str("<tr>");
        for (k, (column, cell)) in columns.iter().zip(row).enumerate() {
            let title = escape(&column.title);
            if k == 0 {
                // A bare number needs its title on a narrow screen, a name does not.
                let tagged = if cell.bytes().all(|b| b.is_ascii_digit()) { " class=\"tagged\"" } else { "" };
                put(out, format_args!("<th scope=\"row\"{tagged} data-title=\"{title}\">{}</th>", escape(cell)));
            } else {
                put(out, format_args!("<td{} data-title=\"{title}\">{}</td>", class(column), marked(cell)));
            }
        }
        out.push_str("</tr>\n");
    }
    out.push_str("</tbody>\n</table>\n");
}

/// A cell; the word of a verdict has its own look.
fn marked(cell: &str) -> String {
    for word in [Word::Sound, Word::Strained, Word::Unfit] {
        if cell == word.to_string() {
            return format!("<span class=\"word {word}\">{word}</span>");
        }
    }
    escape(cell)
}

fn class(column: &Column) -> &'static str {
    if column.numeric { " class=\"n\"" } else { "" }
}

fn figure(out: &mut String, figure: &PageFigure) {
    let (alternative, pixels) = (escape(&figure.alternative), base64::encode(&figure.png));
    put(out, format_args!("<figure>\n<img alt=\"{alternative}\" src=\"data:image/png;base64,{pixels}\">\n"));
    put(out, format_args!("<figcaption>{}</figcaption>\n</figure>\n", escape(&figure.caption)));
}

fn inline(spans: &[Span]) -> String {
    let mut out = String::new();
    for span in spans {
        match span {
            Span::Text(text) => out.push_str(&escape(text)),
            Span::Strong(text) => put(&mut out, format_args!("<strong>{}</strong>", escape(text))),
            Span::Cite(numbers) => {
                let links: Vec<String> = numbers.iter().map(|n| format!("<a href=\"#source-{n}\">{n}</a>")).collect();
                put(&mut out, format_args!("<sup>[{}]</sup>", links.join(", ")));
            }
        }
    }
    out
}

/// Text that means nothing to a browser but itself, in elements and in quoted attributes. Control characters that HTML forbids, and
/// marks that turn the direction of writing, become the replacement character.
pub(crate) fn escape(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for letter in text.chars() {
        match letter {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            '\'' => out.push_str("&#39;"),
            '\n' | '\t' => out.push(letter),
            '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}' => out.push('\u{fffd}'),
            _ if letter.is_control() => out.push('\u{fffd}'),
            _ => out.push(letter),
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn nothing_from_outside_speaks_html() {
        for (text, want) in [
            ("a < b & c > d", "a &lt; b &amp; c &gt; d"),
            ("\" onload='x'", "&quot; onload=&#39;x&#39;"),
            ("<script>alert(1)</script>", "&lt;script&gt;alert(1)&lt;/script&gt;"),
            ("&amp;", "&amp;amp;"),
            ("bell\u{7} nul\0 line\nend\r", "bell\u{fffd} nul\u{fffd} line\nend\u{fffd}"),
            ("right\u{202e}left", "right\u{fffd}left"),
            ("größe ≤ 3 m²", "größe ≤ 3 m²"),
        ] {
            assert_eq!(escape(text), want);
        }
    }

    #[test]
    fn words_of_verdicts_are_marked_and_nothing_else() {
        assert_eq!(marked("sound"), "<span class=\"word sound\">sound</span>");
        assert_eq!(marked("sound <b>"), "sound &lt;b&gt;");
    }
}
