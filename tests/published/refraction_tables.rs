//! Source: none; reads the tables of reference values that the tests of the air compare with.

/// A table: names of the columns, and rows of text.
pub(crate) struct Table {
    header: Vec<String>,
    rows: Vec<Vec<String>>,
}

/// One row of a table.
pub(crate) struct Row<'a> {
    header: &'a [String],
    fields: &'a [String],
}

/// Reads `tests/data/<name>`: one `#` line with the source, one header, rows.
pub(crate) fn table(name: &str) -> Table {
    let path = format!("{}/tests/data/{name}", env!("CARGO_MANIFEST_DIR"));
    let text = std::fs::read_to_string(&path).unwrap_or_else(|e| panic!("{path}: {e}"));
    let mut lines = text
        .lines()
        .filter(|it| !it.starts_with('#') && !it.is_empty());
    let header = fields(lines.next().expect("a header"));
    let rows: Vec<_> = lines.map(fields).collect();
    assert!(!rows.is_empty(), "{path} has no rows");
    Table { header, rows }
}

/// Splits at commas outside quotation marks.
fn fields(line: &str) -> Vec<String> {
    let mut quoted = false;
    let mut all = vec![String::new()];
    for c in line.chars() {
        match c {
            '"' => quoted = !quoted,
            ',' if !quoted => all.push(String::new()),
            _ => all.last_mut().expect("a field").push(c),
        }
    }
    all
}

impl Table {
    /// The rows in order.
    pub(crate) fn rows(&self) -> impl Iterator<Item = Row<'_>> {
        self.rows.iter().map(|fields| Row {
            header: &self.header,
            fields,
        })
    }
}

impl Row<'_> {
    /// The text in the column whose name starts so.
    pub(crate) fn text(&self, column: &str) -> &str {
        let index = self.header.iter().position(|it| it.starts_with(column));
        &self.fields[index.unwrap_or_else(|| panic!("no column {column}"))]
    }

    /// The number in the column whose name starts so.
    pub(crate) fn number(&self, column: &str) -> f64 {
        let text = self.text(column);
        text.parse()
            .unwrap_or_else(|_| panic!("{column}: {text} is no number"))
    }
}

/// Keeps the largest of many deviations and says where it was.
#[derive(Default)]
pub(crate) struct Worst {
    value: f64,
    place: String,
}

impl Worst {
    /// Takes one deviation into account; NaN counts as infinite.
    pub(crate) fn meet(&mut self, deviation: f64, place: impl FnOnce() -> String) {
        let size = if deviation.is_nan() {
            f64::INFINITY
        } else {
            deviation.abs()
        };
        if size > self.value {
            self.value = size;
            self.place = place();
        }
    }

    /// Fails unless every deviation stayed within the tolerance.
    pub(crate) fn assert_within(&self, tolerance: f64, what: &str) {
        println!(
            "{what}: worst {:.3e}, allowed {tolerance:.1e} ({})",
            self.value, self.place
        );
        assert!(
            self.value <= tolerance,
            "{what}: {} > {tolerance} at {}",
            self.value,
            self.place
        );
    }
}
