//! The page before it has a form: headings, paragraphs, tables.

/// A piece of a sentence.
#[derive(Debug, Clone, PartialEq)]
pub(crate) enum Span {
    Text(String),
    Strong(String),
    /// Numbers of sources.
    Cite(Vec<usize>),
}

/// A column of a table.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Column {
    pub(crate) title: String,
    /// Whether it holds numbers, which are set to the right.
    pub(crate) numeric: bool,
}

/// A part of the page.
#[derive(Debug, Clone, PartialEq)]
pub(crate) enum Block {
    /// A heading below the title, from 2.
    Heading(u8, String),
    Paragraph(Vec<Span>),
    /// A paragraph that must not be overlooked.
    Caution(Vec<Span>),
    List(Vec<Vec<Span>>),
    /// A table; the first column names its rows.
    Table {
        caption: String,
        columns: Vec<Column>,
        rows: Vec<Vec<String>>,
    },
    /// A figure by its place among those of the page.
    Figure(usize),
    /// Text as it stands in a file.
    Listing(String),
    /// Sources, numbered from 1.
    Sources(Vec<&'static str>),
}

impl Block {
    /// A table; titles that end in `#` stand over numbers.
    pub(crate) fn table(caption: &str, titles: &[&str], rows: Vec<Vec<String>>) -> Self {
        let columns = titles
            .iter()
            .map(|title| Column { title: title.trim_end_matches('#').to_owned(), numeric: title.ends_with('#') });
        Self::Table { caption: caption.to_owned(), columns: columns.collect(), rows }
    }

    /// A paragraph of plain text.
    pub(crate) fn text(text: impl Into<String>) -> Self {
        Self::Paragraph(vec![Span::Text(text.into())])
    }
}

/// A piece of plain text.
pub(crate) fn plain(text: impl Into<String>) -> Span {
    Span::Text(text.into())
}
