//! A text that was read, and the line of it that a fault shows.

use std::ops::Range;
use std::path::PathBuf;

/// Most characters of a line that are shown.
const SHOWN_CHARS: usize = 96;

/// Most characters of a value that are shown.
const FOUND_CHARS: usize = 60;

/// The line of the file and where the caret goes, in characters.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Excerpt {
    pub(super) text: String,
    pub(super) caret: usize,
    pub(super) width: usize,
}

/// A text that was read, with its path.
#[derive(Clone, Debug)]
pub(super) struct Source {
    /// Where it was read.
    pub(super) path: PathBuf,
    /// What was read.
    pub(super) text: String,
}

impl Source {
    /// Line and column of a span, and the line with room for a caret.
    pub(super) fn locate(&self, span: &Range<usize>) -> (usize, usize, Excerpt) {
        let text = self.text.as_str();
        let mut start = span.start.min(text.len());
        while !text.is_char_boundary(start) {
            start -= 1;
        }
        // An error at the very end belongs to the last line that has something on it.
        if start == text.len() && text.ends_with('\n') {
            start = text.trim_end_matches(['\n', '\r']).len();
        }
        let line_start = text[..start].rfind('\n').map_or(0, |at| at + 1);
        let line_end = text[start..].find('\n').map_or(text.len(), |at| start + at);
        let line = text[..line_start]
            .bytes()
            .filter(|&byte| byte == b'\n')
            .count()
            + 1;
        let before = text[line_start..start].chars().count();
        let mut end = span.end.clamp(start, line_end);
        while !text.is_char_boundary(end) {
            end -= 1;
        }
        let marked = text[start..end].chars().count().max(1);
        // A very long line is shown around the place only.
        let skipped = before.saturating_sub(SHOWN_CHARS / 2);
        let shown: String = text[line_start..line_end]
            .chars()
            .skip(skipped)
            .take(SHOWN_CHARS)
            .collect();
        let caret = before - skipped;
        let excerpt = Excerpt {
            text: one_column_each(&shown),
            caret,
            width: marked.min(SHOWN_CHARS.saturating_sub(caret)).max(1),
        };
        (line, before + 1, excerpt)
    }

    /// The text of a span, short enough to print.
    pub(super) fn snippet(&self, span: &Range<usize>) -> String {
        let text = self.text.get(span.clone()).unwrap_or_default();
        let line = text.lines().next().unwrap_or_default();
        shortened(line)
    }
}

/// A value short enough to print.
pub(super) fn shortened(text: &str) -> String {
    let mut short: String = text.chars().take(FOUND_CHARS).collect();
    if short.len() < text.len() {
        short.push_str("...");
    }
    printable(&short)
}

/// The text without characters that could command a terminal.
pub(super) fn printable(text: &str) -> String {
    text.chars()
        .map(|c| {
            if c.is_control() && c != '\n' {
                '\u{fffd}'
            } else {
                c
            }
        })
        .collect()
}

/// The line with every character in one column: tabs and control characters replaced.
fn one_column_each(line: &str) -> String {
    line.chars()
        .map(|c| match c {
            '\t' | '\r' => ' ',
            c if c.is_control() => '\u{fffd}',
            c => c,
        })
        .collect::<String>()
        .trim_end()
        .to_owned()
}
