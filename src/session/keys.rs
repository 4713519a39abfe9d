//! What a key of the session file may hold: the form of the one table that the reader, the schema
//! and every fault message are made from.

/// What a key holds.
#[derive(Clone, Copy, Debug)]
pub(super) enum Form {
    /// A finite number, both ends allowed unless `above_low`.
    Number {
        /// Unit, as it is printed.
        unit: &'static str,
        /// Least value.
        low: f64,
        /// Greatest value.
        high: f64,
        /// Whether the least value itself is not allowed.
        above_low: bool,
    },
    /// A whole number, both ends allowed.
    Whole {
        /// Least value.
        low: i64,
        /// Greatest value.
        high: i64,
    },
    /// `true` or `false`.
    Flag,
    /// Any text that is not empty.
    Text,
    /// One of these words.
    Choice(&'static [&'static str]),
    /// A keyword of a FITS header.
    Keyword,
    /// The path of one file.
    File,
    /// A list of paths or patterns of files.
    Files,
    /// A list of texts.
    Texts,
    /// A table of its own.
    Table(&'static Table),
    /// Any number of tables of the same form.
    Tables(&'static Table),
}

/// What holds when a key is not written.
#[derive(Clone, Copy, Debug)]
pub(super) enum Absent {
    /// It is a fault.
    Required,
    /// It stays unknown, or another key stands for it.
    Open,
    /// This number is taken.
    Number(f64),
    /// This whole number is taken.
    Whole(i64),
    /// This word is taken.
    Word(&'static str),
}

/// One key.
#[derive(Clone, Copy, Debug)]
pub(super) struct Key {
    /// As it is written.
    pub(super) name: &'static str,
    /// What it holds.
    pub(super) form: Form,
    /// What holds without it.
    pub(super) absent: Absent,
    /// Keywords of the FITS standard that say the same.
    pub(super) keywords: &'static [&'static str],
    /// What it means, one sentence.
    pub(super) doc: &'static str,
}

/// One table.
#[derive(Debug)]
pub(super) struct Table {
    /// Its keys.
    pub(super) keys: &'static [Key],
    /// Pairs of groups: a key of the first and one of the second contradict each other.
    pub(super) excludes: &'static [(&'static [&'static str], &'static [&'static str])],
    /// Keys of which one at least is needed.
    pub(super) one_of: &'static [&'static str],
    /// Keys that are only of use all together.
    pub(super) together: &'static [&'static [&'static str]],
    /// What it is for, one sentence.
    pub(super) doc: &'static str,
}

impl Table {
    /// A table without rules between its keys.
    pub(super) const fn plain(doc: &'static str, keys: &'static [Key]) -> Self {
        Self {
            keys,
            excludes: &[],
            one_of: &[],
            together: &[],
            doc,
        }
    }

    /// The key of that name.
    pub(super) fn key(&self, name: &str) -> Option<&'static Key> {
        self.keys.iter().find(|key| key.name == name)
    }
}

impl Key {
    /// A key of any form.
    pub(super) const fn new(
        name: &'static str,
        form: Form,
        absent: Absent,
        doc: &'static str,
    ) -> Self {
        Self {
            name,
            form,
            absent,
            keywords: &[],
            doc,
        }
    }

    /// A number between two ends, both allowed.
    pub(super) const fn number(
        name: &'static str,
        (unit, low, high): (&'static str, f64, f64),
        absent: Absent,
        doc: &'static str,
    ) -> Self {
        Self::new(
            name,
            Form::Number {
                unit,
                low,
                high,
                above_low: false,
            },
            absent,
            doc,
        )
    }

    /// A number above the lower end.
    pub(super) const fn above(
        name: &'static str,
        (unit, low, high): (&'static str, f64, f64),
        absent: Absent,
        doc: &'static str,
    ) -> Self {
        Self::new(
            name,
            Form::Number {
                unit,
                low,
                high,
                above_low: true,
            },
            absent,
            doc,
        )
    }

    /// The same key, which the header of a frame may answer.
    pub(super) const fn or_header(mut self, keywords: &'static [&'static str]) -> Self {
        self.keywords = keywords;
        self
    }
}

impl Form {
    /// What is allowed, in words, with the unit.
    pub(super) fn allowed(&self) -> String {
        match self {
            Self::Number {
                unit,
                low,
                high,
                above_low,
            } => {
                let space = if unit.is_empty() { "" } else { " " };
                if *above_low {
                    format!("a number above {low} up to {high}{space}{unit}")
                } else {
                    format!("a number from {low} to {high}{space}{unit}")
                }
            }
            Self::Whole { low, high } => format!("a whole number from {low} to {high}"),
            Self::Flag => "true or false".to_owned(),
            Self::Text => "text in quotes, not empty".to_owned(),
            Self::Choice(words) => words
                .iter()
                .map(|word| format!("\"{word}\""))
                .collect::<Vec<_>>()
                .join(", "),
            Self::Keyword => {
                "a FITS keyword: 1 to 8 of A-Z, 0-9, - and _, or HIERARCH and a name".to_owned()
            }
            Self::File => "the path of a file, in quotes".to_owned(),
            Self::Files => "a list of paths or patterns, each in quotes".to_owned(),
            Self::Texts => "a list of texts, each in quotes".to_owned(),
            Self::Table(_) => "a table".to_owned(),
            Self::Tables(_) => "tables, each under a line in double brackets".to_owned(),
        }
    }
}
