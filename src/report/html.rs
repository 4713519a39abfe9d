//! Pieces of HTML: escaping, number cells, tables.

use std::fmt::Write as _;

/// The text with the five characters escaped that mean something in HTML and XML.
pub(crate) fn escape(text: &str) -> String {
    let mut safe = String::with_capacity(text.len());
    for character in text.chars() {
        match character {
            '&' => safe.push_str("&amp;"),
            '<' => safe.push_str("&lt;"),
            '>' => safe.push_str("&gt;"),
            '"' => safe.push_str("&quot;"),
            '\'' => safe.push_str("&#39;"),
            // Not allowed in XML 1.0, so they would spoil the stand-alone figures.
            c if c.is_control() && !matches!(c, '\n' | '\t') => safe.push('\u{fffd}'),
            c => safe.push(c),
        }
    }
    safe
}

/// Units that stay on the line of their number.
const UNITS: [&str; 12] = [
    "mas", "arcsec", "percent", "deg", "degrees", "cm", "nm", "hPa", "ms", "m", "s", "h",
];

/// Text with numbers in it, escaped: minus signs for the hyphens of negative numbers, and no break
/// inside `value ± sigma unit`.
pub(crate) fn number(text: &str) -> String {
    let mut set = String::with_capacity(text.len());
    let mut before = ' ';
    let mut characters = text.chars().peekable();
    while let Some(character) = characters.next() {
        let negative = character == '-'
            && !before.is_alphanumeric()
            && characters.peek().is_some_and(char::is_ascii_digit);
        set.push(if negative { '\u{2212}' } else { character });
        before = character;
    }
    escape(&unbroken(&set))
}

/// The text with spaces that do not break around `±` and between a number and its unit.
fn unbroken(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    let mut words = text.split(' ').peekable();
    while let Some(word) = words.next() {
        out.push_str(word);
        let Some(next) = words.peek() else { break };
        let numeric = word.ends_with(|c: char| c.is_ascii_digit());
        let unit = next.trim_end_matches(|c: char| c.is_ascii_punctuation());
        let hold = word == "±" || *next == "±" || numeric && UNITS.contains(&unit);
        out.push(if hold { '\u{a0}' } else { ' ' });
    }
    out
}

/// A paragraph of escaped text.
pub(crate) fn paragraph(text: &str) -> String {
    format!("<p>{}</p>\n", number(text))
}

/// Heading of a column, and how its cells are set.
#[derive(Clone, Copy, Debug)]
pub(crate) enum Column {
    /// Words, to the left.
    Text(&'static str),
    /// Numbers, to the right.
    Number(&'static str),
    /// Numbers, to the right, headed by the number of the row that they belong to.
    OfRow(usize),
}

/// Columns up to which a table is set like the text; with more, paper needs smaller type.
const NARROW_COLUMNS: usize = 7;

/// Columns up to which a table fits on paper.
const PRINTED_COLUMNS: usize = 14;

/// A table with a caption; the first cell of each row heads it.
#[derive(Clone, Debug)]
pub(crate) struct Table {
    caption: String,
    columns: Vec<Column>,
    rows: Vec<Vec<String>>,
}

impl Table {
    /// An empty table.
    pub(crate) fn new(caption: &str, columns: &[Column]) -> Self {
        Self {
            caption: caption.to_owned(),
            columns: columns.to_vec(),
            rows: Vec::new(),
        }
    }

    /// Adds a row of plain text cells.
    pub(crate) fn row(&mut self, cells: impl Into<Vec<String>>) {
        self.rows.push(cells.into());
    }

    /// Whether nothing was added.
    pub(crate) fn is_empty(&self) -> bool {
        self.rows.is_empty()
    }

    /// The table as HTML, scrolling in its own box where it is too wide.
    pub(crate) fn html(&self) -> String {
        let mut out = String::new();
        let caption = escape(&self.caption);
        let shown: Vec<usize> = (0..self.columns.len())
            .filter(|&at| self.is_shown(at))
            .collect();
        let _ = writeln!(
            out,
            "<div class=\"{}\" role=\"region\" tabindex=\"0\" aria-label=\"{caption}\"><table>\
             <caption>{caption}</caption>\n<thead><tr>",
            if shown.len() > NARROW_COLUMNS {
                "scroll wide-table"
            } else {
                "scroll"
            }
        );
        for &at in &shown {
            let (class, name) = match self.columns[at] {
                Column::Text(name) => ("", escape(name)),
                Column::Number(name) => (" class=\"n\"", escape(name)),
                Column::OfRow(row) => (" class=\"n\"", row.to_string()),
            };
            let _ = write!(out, "<th scope=\"col\"{class}>{name}</th>");
        }
        out.push_str("</tr></thead>\n<tbody>\n");
        for row in &self.rows {
            out.push_str("<tr>");
            for &place in &shown {
                let cell = row.get(place).map_or("", String::as_str);
                let numeric = !matches!(self.columns[place], Column::Text(_));
                let class = if numeric { " class=\"n\"" } else { "" };
                let text = number(cell);
                let _ = if place == 0 {
                    write!(out, "<th scope=\"row\"{class}>{text}</th>")
                } else {
                    write!(out, "<td{class}>{text}</td>")
                };
            }
            out.push_str("</tr>\n");
        }
        out.push_str("</tbody></table></div>\n");
        out
    }

    /// Whether any row has something to say in a column; reasons mostly have not.
    fn is_shown(&self, column: usize) -> bool {
        self.rows
            .iter()
            .any(|row| row.get(column).is_some_and(|cell| !cell.is_empty()))
    }

    /// The table behind a summary line; `small` tables are opened in print.
    pub(crate) fn folded(&self, summary: &str) -> String {
        if self.is_empty() {
            return String::new();
        }
        let class = if self.rows.len() <= 40 && self.columns.len() <= PRINTED_COLUMNS {
            "data small"
        } else {
            "data"
        };
        format!(
            "<details class=\"{class}\"><summary>{}</summary>\n{}</details>\n",
            escape(summary),
            self.html()
        )
    }
}

/// A data URI of binary data.
pub(crate) fn data_uri(media_type: &str, bytes: &[u8]) -> String {
    let mut uri = format!("data:{media_type};base64,");
    base64(bytes, &mut uri);
    uri
}

/// Base 64 as in RFC 4648, section 4.
fn base64(bytes: &[u8], out: &mut String) {
    const ALPHABET: &[u8; 64] = b"ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    for chunk in bytes.chunks(3) {
        let mut group = 0u32;
        for place in 0..3 {
            group = group << 8 | u32::from(chunk.get(place).copied().unwrap_or(0));
        }
        for place in 0..4 {
            let sextet = (group >> (18 - 6 * place) & 63) as usize;
            out.push(if place <= chunk.len() {
                ALPHABET[sextet] as char
            } else {
                '='
            });
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    // Source: RFC 4648, section 10, test vectors.
    #[test]
    fn base64_gives_the_published_vectors() {
        let vectors = [
            ("", ""),
            ("f", "Zg=="),
            ("fo", "Zm8="),
            ("foo", "Zm9v"),
            ("foob", "Zm9vYg=="),
            ("fooba", "Zm9vYmE="),
            ("foobar", "Zm9vYmFy"),
        ];
        for (plain, coded) in vectors {
            let mut out = String::new();
            base64(plain.as_bytes(), &mut out);
            assert_eq!(out, coded);
        }
    }

    #[test]
    fn minus_signs_and_escapes() {
        assert_eq!(
            number("-3.1 to -2 <x-1>"),
            "\u{2212}3.1 to \u{2212}2 &lt;x-1&gt;"
        );
        assert_eq!(number("2026-12-01"), "2026-12-01");
        assert_eq!(
            number("9 ± 12 mas, so 3 more"),
            "9\u{a0}±\u{a0}12\u{a0}mas, so 3 more"
        );
        assert_eq!(escape("\u{0}a\"'"), "\u{fffd}a&quot;&#39;");
    }
}
