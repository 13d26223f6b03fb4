//! The page as Markdown, for those who paste it elsewhere. Figures stand as links into the run folder.

use super::blocks::{Block, Column, Span};
use super::content::{blocks, meaning};
use super::data::{PageData, PageFigure};

/// The report as Markdown: the same content as the page.
#[must_use]
pub fn markdown(data: &PageData) -> String {
    let word = data.verdict.word;
    let mut out = format!("# {}\n\n", escape(&data.title));
    out.push_str(&format!("Importance sampling report, aim {}, by {}\n\n", data.aim.word(), escape(&data.run.program)));
    out.push_str(&format!("## Verdict: {word}\n\n{}\n\n", escape(meaning(word))));
    for reason in &data.verdict.reasons {
        out.push_str(&format!("- {}\n", escape(reason)));
    }
    if !data.verdict.reasons.is_empty() {
        out.push('\n');
    }
    out.push_str(&format!("{}\n", escape(&data.verdict.caution)));
    write_all(&mut out, &blocks(data), &data.figures);
    out
}

/// A whole page: the title with a line below it, and its blocks.
pub(crate) fn document(title: &str, lead: &str, blocks: &[Block], figures: &[PageFigure]) -> String {
    let mut out = format!("# {}\n\n{}\n", escape(title), escape(lead));
    write_all(&mut out, blocks, figures);
    out
}

fn write_all(out: &mut String, blocks: &[Block], figures: &[PageFigure]) {
    for block in blocks {
        out.push('\n');
        out.push_str(&written(block, figures));
    }
}

fn written(block: &Block, figures: &[PageFigure]) -> String {
    match block {
        Block::Heading(level, text) => format!("{} {}\n", "#".repeat(usize::from(*level)), escape(text)),
        Block::Paragraph(spans) => format!("{}\n", inline(spans)),
        Block::Caution(spans) => format!("> **Caution.** {}\n", inline(spans)),
        Block::List(items) => items.iter().map(|item| format!("- {}\n", inline(item))).collect(),
        Block::Table { caption, columns, rows } => table(caption, columns, rows),
        Block::Figure(k) => {
            let figure = &figures[*k];
            format!("![{}](figures/{}.png)\n\n{}\n", escape(&figure.alternative), figure.name, escape(&figure.caption))
        }
        Block::Listing(text) => listing(text),
        Block::Sources(sources) => {
            sources.iter().enumerate().map(|(k, source)| format!("{}. {}\n", k + 1, escape(source))).collect()
        }
    }
}

fn table(caption: &str, columns: &[Column], rows: &[Vec<String>]) -> String {
    let mut out = format!("**{}**\n\n|", escape(caption));
    for column in columns {
        out.push_str(&format!(" {} |", escape(&column.title)));
    }
    out.push_str("\n|");
    for column in columns {
        out.push_str(if column.numeric { "---:|" } else { "---|" });
    }
    out.push('\n');
    for row in rows {
        out.push('|');
        for cell in row {
            out.push_str(&format!(" {} |", escape(cell)));
        }
        out.push('\n');
    }
    out
}

/// Text as it stands in a file, in a fence longer than any run of backticks in it.
fn listing(text: &str) -> String {
    let fence = "`".repeat(longest_run(text).max(2) + 1);
    format!("{fence}text\n{}\n{fence}\n", text.trim_end())
}

fn longest_run(text: &str) -> usize {
    text.split(|letter| letter != '`').map(str::len).max().unwrap_or(0)
}

fn inline(spans: &[Span]) -> String {
    let mut out = String::new();
    for span in spans {
        match span {
            Span::Text(text) => out.push_str(&escape(text)),
            Span::Strong(text) => {
                let inner = text.trim_end();
                out.push_str(&format!("**{}**{}", escape(inner), &text[inner.len()..]));
            }
            Span::Cite(numbers) => {
                let numbers: Vec<String> = numbers.iter().map(usize::to_string).collect();
                out.push_str(&format!(" \\[{}\\]", numbers.join(", ")));
            }
        }
    }
    out
}

/// Text that means nothing to Markdown but itself, also in a cell of a table: on one line, every letter with a meaning after a backslash.
fn escape(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for letter in text.chars() {
        match letter {
            '\\' | '`' | '*' | '_' | '[' | ']' | '|' | '#' | '~' | '$' => {
                out.push('\\');
                out.push(letter);
            }
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '&' => out.push_str("&amp;"),
            '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}' => out.push('\u{fffd}'),
            _ if letter.is_control() => out.push(' '),
            _ => out.push(letter),
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn nothing_from_outside_speaks_markdown() {
        for (text, want) in [
            ("a | b", "a \\| b"),
            ("*x* _y_ `z`", "\\*x\\* \\_y\\_ \\`z\\`"),
            ("[link](http)", "\\[link\\](http)"),
            ("<b>&", "&lt;b&gt;&amp;"),
            ("two\nlines", "two lines"),
            ("# no heading", "\\# no heading"),
        ] {
            assert_eq!(escape(text), want);
        }
    }

    #[test]
    fn listings_outlast_backticks() {
        assert_eq!(listing("a\n"), "```text\na\n```\n");
        assert_eq!(listing("a ```` b"), "`````text\na ```` b\n`````\n");
        assert_eq!(inline(&[Span::Strong("Weights. ".into()), Span::Cite(vec![1, 3])]), "**Weights.**  \\[1, 3\\]");
    }
}
