//! Text in 80 columns: wrapping, columns, and the few styles there are. Everything reads the same without colour.

use anstyle::AnsiColor;
use anstyle::Style;
use evenpoise::weights::verdict::Word;

/// Columns of a line.
pub(crate) const WIDTH: usize = 80;

/// Headings.
pub(crate) const HEADING: Style = Style::new().bold();
/// What explains and is read once.
pub(crate) const QUIET: Style = Style::new().dimmed();

/// `text` in a style.
pub(crate) fn styled(text: &str, style: Style) -> String {
    format!("{style}{text}{style:#}")
}

/// The style of a verdict's word.
pub(crate) fn of_word(word: Word) -> Style {
    let colour = match word {
        Word::Sound => AnsiColor::Green,
        Word::Strained => AnsiColor::Yellow,
        Word::Unfit => AnsiColor::Red,
    };
    Style::new().bold().fg_color(Some(colour.into()))
}

/// Breaks `text` into lines of at most `width` characters; a word that is longer has a line of its own.
pub(crate) fn wrapped(text: &str, width: usize) -> Vec<String> {
    let mut lines = vec![String::new()];
    // A number stays with its per cent sign.
    let words = text.replace(" %", "\u{a0}%");
    for word in words.split([' ', '\n']).filter(|word| !word.is_empty()) {
        let line = &mut lines[0];
        if !line.is_empty() && line.chars().count() + 1 + word.chars().count() > width {
            lines.insert(0, word.to_owned());
        } else {
            if !line.is_empty() {
                line.push(' ');
            }
            line.push_str(word);
        }
    }
    lines.reverse();
    lines.into_iter().map(|line| line.replace('\u{a0}', " ")).collect()
}

/// `text` wrapped with `first` before its first line and as many spaces before the others.
pub(crate) fn hanging(first: &str, text: &str) -> String {
    let indent = first.chars().count();
    let lines = wrapped(text, WIDTH - indent);
    let each = lines
        .iter()
        .enumerate()
        .map(|(i, line)| if i == 0 { format!("{first}{line}\n") } else { format!("{}{line}\n", " ".repeat(indent)) });
    each.collect()
}

/// `text` cut to `width` characters, with a mark where letters are missing.
pub(crate) fn cut(text: &str, width: usize) -> String {
    if text.chars().count() <= width {
        return text.to_owned();
    }
    let kept: String = text.chars().take(width.saturating_sub(1)).collect();
    format!("{kept}…")
}

/// A share as a bar of `width` characters, in eighths, on a light ground.
pub(crate) fn bar(share: f64, width: usize) -> String {
    const EIGHTHS: [char; 8] = [' ', '▏', '▎', '▍', '▌', '▋', '▊', '▉'];
    let filled = if share.is_finite() { (share.clamp(0.0, 1.0) * 8.0 * width as f64).round() as usize } else { 0 };
    let mut bar = "█".repeat(filled / 8);
    if filled % 8 > 0 {
        bar.push(EIGHTHS[filled % 8]);
    }
    format!("{bar:░<width$}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_stay_within_their_width_and_lose_nothing() {
        let text = "Only 34.2 effective draws stand behind the estimate: a weak answer, 12 % of which is one draw.";
        for width in 12..90 {
            let lines = wrapped(text, width);
            assert!(lines.iter().all(|line| line.chars().count() <= width), "{lines:?}");
            assert_eq!(lines.join(" "), text);
            assert!(!lines.iter().any(|line| line.starts_with('%')));
        }
        assert_eq!(hanging("- ", "a b"), "- a b\n");
        assert_eq!(wrapped("", 10), [""]);
    }

    #[test]
    fn bars_have_one_width() {
        for (share, want) in
            [(0.0, "░░░░"), (1.0, "████"), (0.5, "██░░"), (0.53, "██▏░"), (f64::NAN, "░░░░"), (7.0, "████")]
        {
            assert_eq!(bar(share, 4), want);
        }
        assert_eq!((cut("velocity", 8), cut("velocity", 5)), ("velocity".to_owned(), "velo…".to_owned()));
    }
}
