//! Columns of a table, the same for FITS and ECSV.

/// The values of a column.
#[derive(Clone, Debug, PartialEq)]
pub enum Values {
    /// Double precision; NaN means not a number.
    F64(Vec<f64>),
    /// Double precision with gaps: an empty field in ECSV, NaN in FITS.
    Gaps(Vec<Option<f64>>),
    /// Single precision.
    F32(Vec<f32>),
    /// Whole numbers.
    I32(Vec<i32>),
    /// Long whole numbers.
    I64(Vec<i64>),
    /// Bytes, such as flags.
    U8(Vec<u8>),
    /// Texts.
    Text(Vec<String>),
}

impl Values {
    /// Number of rows.
    pub fn len(&self) -> usize {
        match self {
            Self::F64(it) => it.len(),
            Self::Gaps(it) => it.len(),
            Self::F32(it) => it.len(),
            Self::I32(it) => it.len(),
            Self::I64(it) => it.len(),
            Self::U8(it) => it.len(),
            Self::Text(it) => it.len(),
        }
    }

    /// Whether there is no row.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// Whether one text has another character than printable ASCII.
    fn is_unprintable(&self) -> bool {
        matches!(self, Self::Text(it)
            if it.iter().any(|text| !text.bytes().all(|b| (32..127).contains(&b))))
    }
}

/// A column with what a reader must know of it.
#[derive(Clone, Debug, PartialEq)]
pub struct Column {
    /// Name: a letter, then letters, digits and underscores.
    pub name: String,
    /// The values.
    pub values: Values,
    /// Unit in the notation of the FITS standard; `None` for pure numbers.
    pub unit: Option<String>,
    /// What the column holds.
    pub description: Option<String>,
    /// Its word in the controlled vocabulary of the IVOA.
    pub ucd: Option<String>,
}

impl Column {
    /// A column without unit and description.
    pub fn new(name: &str, values: Values) -> Self {
        Self {
            name: name.to_owned(),
            values,
            unit: None,
            description: None,
            ucd: None,
        }
    }

    /// The same with a unit.
    #[must_use]
    pub fn unit(mut self, unit: &str) -> Self {
        self.unit = Some(unit.to_owned());
        self
    }

    /// The same with a description.
    #[must_use]
    pub fn describe(mut self, description: &str) -> Self {
        self.description = Some(description.to_owned());
        self
    }

    /// The same with a word of the controlled vocabulary.
    #[must_use]
    pub fn ucd(mut self, ucd: &str) -> Self {
        self.ucd = Some(ucd.to_owned());
        self
    }
}

/// What is wrong with a set of columns, as (column, reason); `ascii` for formats that know no
/// other characters.
pub(super) fn fault(columns: &[Column], ascii: bool) -> Option<(String, String)> {
    let rows = columns.first().map_or(0, |it| it.values.len());
    for (index, column) in columns.iter().enumerate() {
        let mut letters = column.name.bytes();
        let named = letters.next().is_some_and(|it| it.is_ascii_alphabetic())
            && letters.all(|it| it.is_ascii_alphanumeric() || it == b'_')
            && column.name.len() <= 60;
        let is_same = |it: &Column| it.name.eq_ignore_ascii_case(&column.name);
        let reason = if !named {
            "a name is a letter, then letters, digits and underscores, 60 at most".to_owned()
        } else if columns[..index].iter().any(is_same) {
            "there is a column of this name already".to_owned()
        } else if column.values.len() != rows {
            format!(
                "it has {} rows, the first column has {rows}",
                column.values.len()
            )
        } else if ascii && column.values.is_unprintable() {
            "it has a character that is not printable ASCII".to_owned()
        } else {
            continue;
        };
        return Some((format!("column {}", column.name), reason));
    }
    None
}
