//! Header cards to be written.

/// Value of a card, or of an entry in a table's list of facts.
#[derive(Clone, Debug, PartialEq)]
pub enum Value {
    /// Text, of any length.
    Text(String),
    /// Real number; one that is not finite leaves the card out.
    Real(f64),
    /// Whole number.
    Integer(i64),
    /// True or false.
    Logical(bool),
}

/// One header card; a `COMMENT` or `HISTORY` card has its text as the value.
#[derive(Clone, Debug, PartialEq)]
pub struct Card {
    /// Keyword, at most 8 of `A-Z 0-9 - _`.
    pub name: String,
    /// Its value.
    pub value: Value,
    /// What it means; cut where the card ends.
    pub comment: String,
}

impl Card {
    /// A card with a text.
    pub fn text(name: &str, value: impl Into<String>, comment: &str) -> Self {
        Self::new(name, Value::Text(value.into()), comment)
    }

    /// A card with a real number.
    pub fn real(name: &str, value: f64, comment: &str) -> Self {
        Self::new(name, Value::Real(value), comment)
    }

    /// A card with a whole number.
    pub fn integer(name: &str, value: i64, comment: &str) -> Self {
        Self::new(name, Value::Integer(value), comment)
    }

    /// A card with true or false.
    pub fn logical(name: &str, value: bool, comment: &str) -> Self {
        Self::new(name, Value::Logical(value), comment)
    }

    fn new(name: &str, value: Value, comment: &str) -> Self {
        Self {
            name: name.to_owned(),
            value,
            comment: comment.to_owned(),
        }
    }

    /// The 80-column records of this card; none for a number that is not finite.
    ///
    /// Long texts go on in CONTINUE cards, and COMMENT and HISTORY in further cards of their kind.
    pub(super) fn records(&self) -> Result<Vec<String>, String> {
        let name = &self.name;
        let ok = |it: u8| it.is_ascii_uppercase() || it.is_ascii_digit() || b"-_".contains(&it);
        if name.is_empty() || name.len() > 8 || !name.bytes().all(ok) {
            return Err("a keyword has 1 to 8 of A-Z, 0-9, - and _".to_owned());
        }
        if is_structural(name) {
            return Err("this keyword is set by the writer itself".to_owned());
        }
        let printable = |it: &str| it.bytes().all(|b| (32..127).contains(&b));
        if !printable(&self.comment) {
            return Err("its comment has a character that is not printable ASCII".to_owned());
        }
        let value = match &self.value {
            Value::Text(text) if !printable(text) => {
                return Err("its value has a character that is not printable ASCII".to_owned());
            }
            Value::Text(text) if name == "COMMENT" || name == "HISTORY" => {
                return Ok(free_text(name, text));
            }
            _ if name == "COMMENT" || name == "HISTORY" => {
                return Err("this card holds text".to_owned());
            }
            Value::Text(text) => return Ok(quoted(name, text, &self.comment)),
            Value::Real(value) if !value.is_finite() => return Ok(Vec::new()),
            Value::Real(value) => real(*value),
            Value::Integer(value) => value.to_string(),
            Value::Logical(value) => if *value { "T" } else { "F" }.to_owned(),
        };
        Ok(vec![with_comment(
            format!("{name:<8}= {value:>20}"),
            &self.comment,
        )])
    }
}

/// The shortest text that reads back as the same number, with a decimal point.
fn real(value: f64) -> String {
    let text = format!("{value:?}").replace('e', "E");
    match text.split_once('E') {
        Some((digits, power)) if !digits.contains('.') => format!("{digits}.0E{power}"),
        _ => text,
    }
}

fn with_comment(mut record: String, comment: &str) -> String {
    if !comment.is_empty() && record.len() < 76 {
        record.push_str(" / ");
        record.push_str(comment);
        record.truncate(80);
    }
    record.trim_end().to_owned()
}

fn free_text(name: &str, text: &str) -> Vec<String> {
    let mut rest = text;
    let mut records = Vec::new();
    loop {
        let (line, next) = rest.split_at(rest.len().min(72));
        records.push(format!("{name:<8}{line}"));
        if next.is_empty() {
            return records;
        }
        rest = next;
    }
}

/// A text value; a quote inside is doubled, and never split between two records.
fn quoted(name: &str, text: &str, comment: &str) -> Vec<String> {
    /// Between the quotes of one record, the `&` that announces the next included.
    const ROOM: usize = 68;
    let mut pieces = vec![String::new()];
    let doubled: Vec<&str> = text
        .split("")
        .filter(|it| !it.is_empty())
        .map(|it| if it == "'" { "''" } else { it })
        .collect();
    let mut left: usize = doubled.iter().map(|it| it.len()).sum();
    let mut fits_whole = left <= ROOM;
    for unit in doubled {
        let last = pieces.len() - 1;
        if !fits_whole && pieces[last].len() + unit.len() > ROOM - 1 {
            pieces[last].push('&');
            fits_whole = left <= ROOM;
            pieces.push(String::new());
        }
        let last = pieces.len() - 1;
        pieces[last].push_str(unit);
        left -= unit.len();
    }
    let last = pieces.len() - 1;
    let mut records = Vec::with_capacity(pieces.len());
    for (index, piece) in pieces.iter().enumerate() {
        let mut record = if index == 0 {
            format!("{name:<8}= '{piece:<8}'")
        } else {
            format!("CONTINUE  '{piece}'")
        };
        if index == last {
            if index == 0 {
                record = format!("{record:<30}");
            }
            record = with_comment(record, comment);
        }
        records.push(record);
    }
    records
}

/// Keywords that the layout of the file fixes.
fn is_structural(name: &str) -> bool {
    const WHOLE: [&str; 19] = [
        "SIMPLE", "XTENSION", "BITPIX", "NAXIS", "EXTEND", "PCOUNT", "GCOUNT", "TFIELDS", "THEAP",
        "END", "BSCALE", "BZERO", "BLANK", "CHECKSUM", "DATASUM", "CONTINUE", "EXTNAME", "GROUPS",
        "BLOCKED",
    ];
    const NUMBERED: [&str; 9] = [
        "NAXIS", "TTYPE", "TFORM", "TUNIT", "TUCD", "TCOMM", "TSCAL", "TZERO", "TNULL",
    ];
    WHOLE.contains(&name)
        || NUMBERED.iter().any(|stem| {
            name.strip_prefix(stem)
                .is_some_and(|rest| !rest.is_empty() && rest.bytes().all(|it| it.is_ascii_digit()))
        })
}

#[cfg(test)]
mod tests {
    use super::*;

    // FITS Standard 4.0, section 4.2: fixed format, doubled quotes, CONTINUE.
    #[test]
    fn records_have_the_form_of_the_standard() {
        let one = |card: Card| card.records().unwrap().remove(0);
        assert_eq!(
            one(Card::integer("N", -3, "a")),
            "N       =                   -3 / a"
        );
        assert_eq!(
            one(Card::logical("L", true, "")),
            "L       =                    T"
        );
        assert_eq!(
            one(Card::real("R", 1e-7, "")),
            "R       =               1.0E-7"
        );
        assert_eq!(
            one(Card::text("T", "it's", "q")),
            "T       = 'it''s   '           / q"
        );
        assert!(Card::real("R", f64::NAN, "").records().unwrap().is_empty());
    }

    #[test]
    fn a_long_text_goes_on_in_continue_cards_of_80_columns() {
        for length in [67, 68, 69, 134, 135, 136, 300] {
            let text: String = "abcdefgh'".chars().cycle().take(length).collect();
            let records = Card::text("LONG", text.clone(), "of a length")
                .records()
                .unwrap();
            assert!(records.iter().all(|it| it.len() <= 80));
            let mut joined = String::new();
            for record in &records {
                let start = record.find('\'').unwrap() + 1;
                let body = &record[start..];
                let end = body.rfind('\'').unwrap();
                joined.push_str(body[..end].trim_end().trim_end_matches('&'));
            }
            assert_eq!(joined.replace("''", "'"), text, "{length}");
        }
    }

    #[test]
    fn malformed_cards_are_refused() {
        assert!(Card::integer("lower", 1, "").records().is_err());
        assert!(Card::integer("TOOLONGNAME", 1, "").records().is_err());
        assert!(Card::integer("NAXIS2", 1, "").records().is_err());
        assert!(Card::text("T", "\u{b5}m", "").records().is_err());
        assert!(Card::text("T", "line\nbreak", "").records().is_err());
    }
}
