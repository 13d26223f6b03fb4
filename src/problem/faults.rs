//! What is wrong with a problem file: where, what, and what to write instead.
//!
//! Reading goes on after a fault, so that one run shows all that can be told independently. A fault points into the
//! problem file, or into a line of a data file.

use std::fmt;
use std::ops::Range;

use annotate_snippets::AnnotationKind;
use annotate_snippets::Group;
use annotate_snippets::Level;
use annotate_snippets::Renderer;
use annotate_snippets::Snippet;

/// Columns of a rendered message, at most.
const WIDTH: usize = 140;

/// A text that a fault points into: the problem file, or one line of a data file.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Source {
    /// The file as it is named to the user.
    pub(crate) file: String,
    pub(crate) text: String,
    /// The number of the first line of `text`, from 1.
    pub(crate) first_line: usize,
}

/// One thing that is wrong.
#[derive(Debug, Clone, PartialEq)]
pub struct Fault {
    message: String,
    span: Range<usize>,
    label: String,
    also: Option<(Range<usize>, String)>,
    help: Vec<String>,
    elsewhere: Option<Source>,
}

impl Fault {
    /// A fault at `span` (bytes of the problem file).
    pub(crate) fn new(span: Range<usize>, message: impl Into<String>) -> Self {
        Self { message: message.into(), span, label: String::new(), also: None, help: Vec::new(), elsewhere: None }
    }

    /// A few words under the caret.
    pub(crate) fn label(mut self, label: impl Into<String>) -> Self {
        self.label = label.into();
        self
    }

    /// What to write instead.
    pub(crate) fn help(mut self, help: impl Into<String>) -> Self {
        self.help.push(help.into());
        self
    }

    /// Another place of the same file that has to do with it.
    pub(crate) fn also(mut self, span: Range<usize>, label: impl Into<String>) -> Self {
        self.also = Some((span, label.into()));
        self
    }

    /// The place is in another file: `span` counts in `source`.
    pub(crate) fn within(mut self, source: Source) -> Self {
        self.elsewhere = Some(source);
        self
    }

    /// Whether it points into another file than the problem file.
    pub(crate) fn is_elsewhere(&self) -> bool {
        self.elsewhere.is_some()
    }

    /// Where it begins.
    pub(crate) fn start(&self) -> usize {
        self.span.start
    }

    /// What is wrong, in a sentence.
    #[must_use]
    pub fn message(&self) -> &str {
        &self.message
    }

    /// What to write instead, where there is advice.
    #[must_use]
    pub fn advice(&self) -> &[String] {
        &self.help
    }
}

/// Faults met while one file is read.
#[derive(Debug, Default)]
pub(crate) struct Faults(Vec<Fault>);

impl Faults {
    pub(crate) fn push(&mut self, fault: Fault) {
        if !self.0.contains(&fault) {
            self.0.push(fault);
        }
    }

    pub(crate) fn len(&self) -> usize {
        self.0.len()
    }

    pub(crate) fn is_empty(&self) -> bool {
        self.0.is_empty()
    }

    /// The faults with their places in the problem file led through `place`.
    pub(crate) fn placed(self, place: impl Fn(&Range<usize>) -> Range<usize>) -> Vec<Fault> {
        let mut faults = self.0;
        for fault in faults.iter_mut().filter(|fault| fault.elsewhere.is_none()) {
            fault.span = place(&fault.span);
            fault.also = fault.also.take().map(|(span, label)| (place(&span), label));
        }
        faults
    }

    /// The faults as the error of `source`, in the order of their places.
    pub(crate) fn into_errors(mut self, source: Source) -> ProblemErrors {
        self.0.sort_by_key(|fault| (fault.elsewhere.is_some(), fault.span.start, fault.span.end));
        ProblemErrors { source, faults: self.0 }
    }
}

/// Everything that is wrong with a problem, each with its place and what to write instead.
///
/// `Display` gives the plain rendering.
///
/// ```
/// use evenpoise::problem::Problem;
/// let text = "title = \"A pond\"\n[variables]\ndepth = { rang = [0.0, 1.0] }\n[target]\naim = \"density\"\nlog_factor = \"0\"\n";
/// let errors = Problem::parse(text, "pond.toml", std::path::Path::new(".")).unwrap_err();
/// assert_eq!((errors.line(0), errors.column(0)), (3, 11));
/// assert!(errors.render(false).contains("did you mean `range`?"));
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct ProblemErrors {
    source: Source,
    faults: Vec<Fault>,
}

impl ProblemErrors {
    /// A fault of a problem that was built in code, where there is no file to point into.
    pub(crate) fn of_code(message: impl Into<String>) -> Self {
        let source = Source { file: String::new(), text: String::new(), first_line: 1 };
        Self { source, faults: vec![Fault::new(0..0, message)] }
    }

    /// The faults, in the order of their places.
    #[must_use]
    pub fn faults(&self) -> &[Fault] {
        &self.faults
    }

    /// The file that fault `k` points into.
    #[must_use]
    pub fn file(&self, k: usize) -> &str {
        &self.source_of(k).file
    }

    /// The line of fault `k`, from 1.
    #[must_use]
    pub fn line(&self, k: usize) -> usize {
        let before = self.text_before(k);
        self.source_of(k).first_line + before.matches('\n').count()
    }

    /// The column of fault `k` in characters, from 1.
    #[must_use]
    pub fn column(&self, k: usize) -> usize {
        let before = self.text_before(k);
        before.rsplit('\n').next().map_or(0, |line| line.chars().count()) + 1
    }

    /// All faults as a text for people, with the lines they are in; `styled` adds terminal colours.
    #[must_use]
    pub fn render(&self, styled: bool) -> String {
        let renderer = if styled { Renderer::styled() } else { Renderer::plain() }.term_width(WIDTH);
        let parts: Vec<String> = (0..self.faults.len()).map(|k| self.render_one(k, &renderer)).collect();
        parts.join("\n\n")
    }

    fn source_of(&self, k: usize) -> &Source {
        self.faults[k].elsewhere.as_ref().unwrap_or(&self.source)
    }

    fn text_before(&self, k: usize) -> &str {
        let text = &self.source_of(k).text;
        &text[..floor_boundary(text, self.faults[k].span.start)]
    }

    fn render_one(&self, k: usize, renderer: &Renderer) -> String {
        let fault = &self.faults[k];
        let source = self.source_of(k);
        let mut group = Group::with_title(Level::ERROR.primary_title(fault.message.as_str()));
        if !source.file.is_empty() {
            let primary = AnnotationKind::Primary.span(within(&source.text, &fault.span));
            let primary = if fault.label.is_empty() { primary } else { primary.label(fault.label.as_str()) };
            let mut snippet = Snippet::source(source.text.as_str())
                .path(source.file.as_str())
                .line_start(source.first_line)
                .annotation(primary);
            if let Some((span, label)) = &fault.also {
                snippet =
                    snippet.annotation(AnnotationKind::Context.span(within(&source.text, span)).label(label.as_str()));
            }
            group = group.element(snippet);
        }
        for help in &fault.help {
            group = group.element(Level::HELP.message(help.as_str()));
        }
        renderer.render(&[group])
    }
}

impl fmt::Display for ProblemErrors {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.write_str(&self.render(false))
    }
}

impl std::error::Error for ProblemErrors {}

/// `span` kept inside `text`, on borders of characters, and on one line where it is longer.
fn within(text: &str, span: &Range<usize>) -> Range<usize> {
    let start = floor_boundary(text, span.start);
    let mut end = span.end.min(text.len()).max(start);
    while !text.is_char_boundary(end) {
        end += 1;
    }
    // A place that runs over several lines (a table, a long formula) is shown by its first line.
    let first_line = text[start..end].find(['\n', '\r']).map_or(end, |at| start + at);
    start..first_line
}

fn floor_boundary(text: &str, at: usize) -> usize {
    let mut at = at.min(text.len());
    while !text.is_char_boundary(at) {
        at -= 1;
    }
    at
}

#[cfg(test)]
mod tests {
    use super::*;

    fn source() -> Source {
        Source { file: "pond.toml".into(), text: "a = 1\nünder = 2\nb = 3\n".into(), first_line: 1 }
    }

    #[test]
    fn places_are_lines_and_characters() {
        let mut faults = Faults::default();
        faults.push(Fault::new(15..16, "second"));
        faults.push(Fault::new(4..5, "first").label("here").help("write 2"));
        let errors = faults.into_errors(source());
        assert_eq!((errors.line(0), errors.column(0)), (1, 5));
        assert_eq!((errors.line(1), errors.column(1)), (2, 9));
        let text = errors.render(false);
        assert!(text.contains("pond.toml:1:5") && text.contains("^ here") && text.contains("write 2"), "{text}");
    }

    #[test]
    fn a_line_of_another_file_keeps_its_number() {
        let mut faults = Faults::default();
        let row = Source { file: "rain.csv".into(), text: "3.0,x".into(), first_line: 7 };
        faults.push(Fault::new(4..5, "no number").within(row));
        let errors = faults.into_errors(source());
        assert_eq!((errors.file(0), errors.line(0), errors.column(0)), ("rain.csv", 7, 5));
        assert!(errors.render(false).contains("rain.csv:7:5"));
    }

    #[test]
    fn errors_may_cross_threads() {
        fn crosses<T: std::error::Error + Send + Sync + 'static>() {}
        crosses::<ProblemErrors>();
    }
}
