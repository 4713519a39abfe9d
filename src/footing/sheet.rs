//! `values.csv`: published values in a table, one a row; checked, all faults at once.

use super::epoch::Epoch;
use super::limb::WIDTHS_ARCSEC;
use super::{Definition, Distance, Observable, Platform, Published, RadiusOf, Unit, Width};
use crate::constants::ASTRONOMICAL_UNIT;
use crate::session::nearest;
use crate::units::ARCSEC_RAD;
use std::fmt::{self, Write as _};

/// Most values of one table: every pair of them is compared.
pub const MOST_VALUES: usize = 300;

/// Most faults that are shown.
const MOST_FAULTS: usize = 100;

/// A column: its name, whether it must be there, and what it holds.
#[derive(Clone, Copy, Debug)]
pub struct Column {
    /// Name in the first line.
    pub name: &'static str,
    /// Whether it must be there.
    pub needed: bool,
    /// What it holds.
    pub holds: &'static str,
}

const fn needed(name: &'static str, holds: &'static str) -> Column {
    Column {
        name,
        needed: true,
        holds,
    }
}

const fn optional(name: &'static str, holds: &'static str) -> Column {
    Column {
        name,
        needed: false,
        holds,
    }
}

/// The columns, in the order of the empty table.
pub const COLUMNS: [Column; 17] = [
    needed(
        "label",
        "what the value is called; short, it stands in the figure",
    ),
    needed("platform", "ground, balloon or space"),
    needed(
        "epoch",
        "YYYY-MM-DD, with Thh:mm:ss or not; YYYY-MM; 2011.5; or two of them with / between",
    ),
    needed("wavelength_nm", "300 to 1100, continuum"),
    needed("quantity", "radius, or oblateness: equatorial minus polar"),
    needed("value", "in the unit of the next column"),
    needed("unit", "mas, arcsec or km"),
    needed(
        "sigma_random",
        "standard uncertainty, random part, same unit",
    ),
    needed(
        "sigma_systematic",
        "standard uncertainty, systematic part, same unit; 0 where none is stated",
    ),
    needed(
        "definition",
        "inflection, half-intensity (of the brightness 10 arcsec inside), fourier:WINDOW (arcsec), or model (fitted with its blur)",
    ),
    optional(
        "blur_fwhm_arcsec",
        "full width at half maximum of the whole point-spread function, pixel included, 0.4 to 10; needed for a radius that is not by model",
    ),
    needed(
        "of",
        "radius or diameter (an oblateness of diameters is twice that of radii)",
    ),
    needed(
        "distance",
        "1 AU where the value is brought to it, otherwise the distance in AU at which it was seen",
    ),
    optional(
        "b0_deg",
        "latitude of the disk's centre, -40 to 40; 0 where it is taken out; empty where not known",
    ),
    optional(
        "group",
        "any word: values with the same word share an instrument or a limb model, and their systematic error (of two, the smaller one)",
    ),
    optional(
        "note",
        "any text; in quotation marks where it holds a comma",
    ),
    optional("reference", "where the value is published"),
];

/// One fault of the table.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct SheetFault {
    /// Line, from 1; 0 for the file as a whole.
    pub line: u64,
    /// Column, empty for a whole line.
    pub column: String,
    /// What was found.
    pub found: String,
    /// What is allowed.
    pub allowed: String,
    /// What to do.
    pub cure: String,
}

/// Everything that is wrong with a table of values.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct SheetError {
    /// The file, as it was named.
    pub path: String,
    /// Its faults, in the order of the lines.
    pub faults: Vec<SheetFault>,
}

impl std::error::Error for SheetError {}

/// The text without characters that could command a terminal, cut where it is long.
fn printable(text: &str) -> String {
    const LONGEST: usize = 80;
    let safe = |c: char| if c.is_control() { '\u{fffd}' } else { c };
    let mut out: String = text.chars().take(LONGEST).map(safe).collect();
    if text.chars().count() > LONGEST {
        out.push_str("...");
    }
    out
}

impl fmt::Display for SheetError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let path = printable(&self.path);
        let count = self.faults.len();
        let plural = if count == 1 { "" } else { "s" };
        write!(f, "{path}: {count} fault{plural}")?;
        for it in self.faults.iter().take(MOST_FAULTS) {
            write!(f, "\n\n{path}")?;
            if it.line > 0 {
                write!(f, ":{}", it.line)?;
            }
            if !it.column.is_empty() {
                write!(f, ": {}", it.column)?;
            }
            for (name, text) in [
                ("found", &it.found),
                ("allowed", &it.allowed),
                ("cure", &it.cure),
            ] {
                if !text.is_empty() {
                    write!(f, "\n  {name:<8} {text}")?;
                }
            }
        }
        if count > MOST_FAULTS {
            write!(f, "\n\nand {} more", count - MOST_FAULTS)?;
        }
        Ok(())
    }
}

/// An empty table with what each column holds in comments, and one invented row to overwrite.
pub fn template() -> String {
    let mut out = String::from(
        "# Published values of the Sun's radius and oblateness, one a row, for `truelimb compare`.\n\
         # Lines that begin with # are comments. Columns may stand in any order.\n#\n",
    );
    for it in COLUMNS {
        let when = if it.needed { "" } else { " (may be left out)" };
        let _ = writeln!(out, "# {}{when}: {}", it.name, it.holds);
    }
    out.push_str("#\n# An invented example; take the # off and overwrite it:\n# ");
    out.push_str(
        "Lanthorn 2,space,2011-03-01/2011-05-31,600,oblateness,8.1,mas,0.3,0.4,fourier:10,1.2,radius,1 AU,0,lanthorn,\"mean of 61 days, invented\",\n",
    );
    let names: Vec<&str> = COLUMNS.iter().map(|it| it.name).collect();
    out.push_str(&names.join(","));
    out.push('\n');
    out
}

/// Reads and checks the text of a table; `path` is for its faults.
///
/// # Errors
///
/// [`SheetError`] with every fault.
pub fn read(path: &str, text: &str) -> Result<Vec<Published>, SheetError> {
    let mut faults = Vec::new();
    let values = rows(text.trim_start_matches('\u{feff}'), &mut faults);
    if faults.is_empty() {
        Ok(values)
    } else {
        faults.sort_by_key(|it| it.line);
        Err(SheetError {
            path: path.to_owned(),
            faults,
        })
    }
}

fn rows(text: &str, faults: &mut Vec<SheetFault>) -> Vec<Published> {
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .flexible(true)
        .has_headers(false)
        .trim(csv::Trim::All)
        .from_reader(text.as_bytes());
    let mut records = reader.records().filter_map(|record| match record {
        Ok(it) => (!it.iter().all(str::is_empty)).then_some(it),
        Err(it) => {
            let line = it.position().map_or(0, csv::Position::line);
            faults.push(SheetFault {
                line,
                column: String::new(),
                found: printable(&it.to_string()),
                allowed: "comma-separated text in UTF-8".to_owned(),
                cure: "save the table as CSV in UTF-8".to_owned(),
            });
            None
        }
    });
    let Some(header) = records.next() else {
        drop(records);
        faults.push(SheetFault {
            line: 0,
            column: String::new(),
            found: "no line of column names".to_owned(),
            allowed: "a line of column names, then one value a line".to_owned(),
            cure: "start from `truelimb compare --template`".to_owned(),
        });
        return Vec::new();
    };
    let records: Vec<csv::StringRecord> = records.collect();
    if !check_header(&header, faults) {
        return Vec::new();
    }
    if records.is_empty() || records.len() > MOST_VALUES {
        faults.push(SheetFault {
            line: 0,
            column: String::new(),
            found: format!("{} values", records.len()),
            allowed: format!("1 to {MOST_VALUES} values"),
            cure: "one value a line below the column names; average what belongs to one epoch"
                .to_owned(),
        });
        return Vec::new();
    }
    let values: Vec<(u64, Published)> = records
        .iter()
        .filter_map(|record| {
            let mut row = Row {
                header: &header,
                record,
                line: record.position().map_or(0, csv::Position::line),
                faults,
            };
            let line = row.line;
            row.published().map(|it| (line, it))
        })
        .collect();
    for (place, (line, it)) in values.iter().enumerate() {
        let twin = values[..place].iter().find(|(_, other)| {
            (&other.label, other.observable, &other.epoch) == (&it.label, it.observable, &it.epoch)
        });
        if let Some((first, _)) = twin {
            faults.push(SheetFault {
                line: *line,
                column: "label".to_owned(),
                found: format!(
                    "{} with the same quantity and epoch as in line {first}",
                    printable(&it.label)
                ),
                allowed: "each value once".to_owned(),
                cure: "take one of the two out, or give them labels of their own".to_owned(),
            });
        }
    }
    values.into_iter().map(|it| it.1).collect()
}

/// Faults of the line of names; whether the rows can be read at all.
fn check_header(header: &csv::StringRecord, faults: &mut Vec<SheetFault>) -> bool {
    let line = header.position().map_or(0, csv::Position::line);
    let before = faults.len();
    let names = || COLUMNS.iter().map(|it| it.name);
    for (place, name) in header.iter().enumerate() {
        if header.iter().take(place).any(|it| it == name) {
            faults.push(SheetFault {
                line,
                column: printable(name),
                found: "the column twice".to_owned(),
                allowed: "each column once".to_owned(),
                cure: "take one of the two out".to_owned(),
            });
        } else if !names().any(|it| it == name) {
            let missing = names().filter(|it| !header.iter().any(|found| found == *it));
            let cure = match nearest::of(name, missing) {
                Some(known) => format!("did you mean `{known}`?"),
                None => "take it out, or put it into `note`".to_owned(),
            };
            faults.push(SheetFault {
                line,
                column: printable(name),
                found: "an unknown column".to_owned(),
                allowed: names().collect::<Vec<_>>().join(", "),
                cure,
            });
        }
    }
    for it in COLUMNS.iter().filter(|it| it.needed) {
        if !header.iter().any(|name| name == it.name) {
            faults.push(SheetFault {
                line,
                column: it.name.to_owned(),
                found: "no such column".to_owned(),
                allowed: it.holds.to_owned(),
                cure: "add the column; `truelimb compare --template` has all of them".to_owned(),
            });
        }
    }
    faults.len() == before
}

/// One row on its way to a value.
struct Row<'a> {
    header: &'a csv::StringRecord,
    record: &'a csv::StringRecord,
    line: u64,
    faults: &'a mut Vec<SheetFault>,
}

impl Row<'_> {
    fn cell(&self, column: &str) -> &str {
        self.header
            .iter()
            .position(|it| it == column)
            .and_then(|at| self.record.get(at))
            .unwrap_or_default()
    }

    fn fault(&mut self, column: &str, allowed: impl Into<String>, cure: impl Into<String>) {
        let cell = self.cell(column);
        let found = if cell.is_empty() {
            "nothing".to_owned()
        } else {
            format!("\"{}\"", printable(cell))
        };
        self.faults.push(SheetFault {
            line: self.line,
            column: column.to_owned(),
            found,
            allowed: allowed.into(),
            cure: cure.into(),
        });
    }

    /// A cell that is one of some words.
    fn word<T: Copy>(&mut self, column: &str, words: &[(&'static str, T)]) -> Option<T> {
        let cell = self.cell(column);
        let found = words.iter().find(|it| it.0 == cell).map(|it| it.1);
        if found.is_none() {
            let names = || words.iter().map(|it| it.0);
            let cure = nearest::of(cell, names()).map_or_else(
                || "write one of them".to_owned(),
                |it| format!("did you mean `{it}`?"),
            );
            self.fault(column, names().collect::<Vec<_>>().join(", "), cure);
        }
        found
    }

    /// A number in a range.
    fn number(&mut self, column: &str, (lowest, highest): (f64, f64), unit: &str) -> Option<f64> {
        let found = self.cell(column).parse::<f64>().ok();
        let found = found.filter(|it| (lowest..=highest).contains(it));
        if found.is_none() {
            let allowed = if lowest <= f64::MIN {
                "a number".to_owned()
            } else if highest >= f64::MAX {
                format!("a number of {lowest} or more{unit}")
            } else {
                format!("{lowest} to {highest}{unit}")
            };
            self.fault(column, allowed, "");
        }
        found
    }

    fn published(&mut self) -> Option<Published> {
        let extra = self.record.iter().skip(self.header.len());
        if extra.clone().any(|it| !it.is_empty()) || self.record.len() < self.header.len() {
            let (found, wanted) = (self.record.len(), self.header.len());
            self.faults.push(SheetFault {
                line: self.line,
                column: String::new(),
                found: format!("{found} cells"),
                allowed: format!("{wanted} cells, as many as columns"),
                cure: "put text that holds a comma into quotation marks".to_owned(),
            });
            return None;
        }
        let label = self.cell("label").to_owned();
        if label.is_empty() {
            self.fault("label", "a short name", "");
        }
        let platform = self.word("platform", &Platform::ALL.map(|it| (it.word(), it)));
        let epoch = Epoch::parse(self.cell("epoch"));
        if epoch.is_none() {
            self.fault("epoch", Epoch::ALLOWED, "");
        }
        let wavelength_nm = self.number("wavelength_nm", (300.0, 1100.0), " nm");
        let observable = self.word("quantity", &Observable::ALL.map(|it| (it.word(), it)));
        let value = self.number("value", (f64::MIN, f64::MAX), "");
        let unit = self.word(
            "unit",
            &[Unit::Mas, Unit::Arcsec, Unit::Km].map(|it| (it.word(), it)),
        );
        let sigma_random = self.number("sigma_random", (0.0, f64::MAX), "");
        let sigma_systematic = self.number("sigma_systematic", (0.0, f64::MAX), "");
        if (sigma_random, sigma_systematic) == (Some(0.0), Some(0.0)) {
            self.fault(
                "sigma_random",
                "an uncertainty above 0, random or systematic",
                "a value without an uncertainty cannot be compared; give the one that is believed",
            );
        }
        let definition = Definition::parse(self.cell("definition"));
        if definition.is_none() {
            self.fault("definition", Definition::ALLOWED, "");
        }
        let diameter = self.word("of", &[("radius", false), ("diameter", true)]);
        let distance = self.distance();
        let b0_deg = match self.cell("b0_deg") {
            "" => Some(None),
            _ => self.number("b0_deg", (-40.0, 40.0), " degrees").map(Some),
        };
        let blur = self.blur(observable, definition);
        if let (Some(Unit::Km), Some(Distance::Seen(_))) = (unit, distance) {
            self.fault(
                "distance",
                "1 AU for a value in km",
                "a length on the Sun does not depend on where it was seen from",
            );
        }
        if let (Some(observable), Some(value), Some(unit), Some(diameter)) =
            (observable, value, unit, diameter)
        {
            self.plausible(observable, value, unit, diameter, distance);
        }
        let text = |it: &str| (!it.is_empty()).then(|| it.to_owned());
        let mut note = self.cell("note").to_owned();
        if let Some(reference) = text(self.cell("reference")) {
            let between = if note.is_empty() { "" } else { "; " };
            note.push_str(between);
            note.push_str(&reference);
        }
        let group = text(self.cell("group"));
        Some(Published {
            label: Some(label).filter(|it| !it.is_empty())?,
            platform: platform?,
            epoch: epoch?,
            wavelength_nm: wavelength_nm?,
            observable: observable?,
            value: value?,
            unit: unit?,
            sigma_random: sigma_random?,
            sigma_systematic: sigma_systematic?,
            definition: definition?,
            blur,
            diameter: diameter?,
            radius_of: RadiusOf::Limb,
            distance: distance?,
            b0_deg: b0_deg?,
            group,
            note,
        })
    }

    fn distance(&mut self) -> Option<Distance> {
        const RANGE_AU: (f64, f64) = (0.2, 2.0);
        let cell = self.cell("distance");
        if cell == "1 AU" {
            return Some(Distance::OneAu);
        }
        let number = cell.strip_suffix("AU").unwrap_or(cell).trim();
        let found = number
            .parse()
            .ok()
            .filter(|it| (RANGE_AU.0..=RANGE_AU.1).contains(it));
        if found.is_none() {
            self.fault(
                "distance",
                format!(
                    "1 AU, or a distance as seen of {} to {} AU",
                    RANGE_AU.0, RANGE_AU.1
                ),
                "",
            );
        }
        found.map(Distance::Seen)
    }

    /// The blur, none where the cell is empty; the fault is noted where it is needed or no width.
    fn blur(
        &mut self,
        observable: Option<Observable>,
        definition: Option<Definition>,
    ) -> Option<Width> {
        let felt = observable == Some(Observable::Radius)
            && definition.is_some_and(Definition::feels_blur);
        let cell = self.cell("blur_fwhm_arcsec").to_owned();
        if cell.is_empty() {
            if felt {
                self.fault(
                    "blur_fwhm_arcsec",
                    format!("{} to {} arcsec", WIDTHS_ARCSEC.0, WIDTHS_ARCSEC.1),
                    "a radius by this definition moves with the blur: give the width of the whole point-spread function, pixel included",
                );
            }
            return None;
        }
        let range = if felt { WIDTHS_ARCSEC } else { (0.0, f64::MAX) };
        let fwhm_arcsec = self.number("blur_fwhm_arcsec", range, " arcsec")?;
        let decimals = cell.split_once('.').map_or(0, |it| it.1.len()) as i32;
        // Rectangular over half of the last printed digit.
        let sigma_arcsec = 0.5 * 10f64.powi(-decimals) / 3.0_f64.sqrt();
        Some(Width {
            fwhm_arcsec,
            sigma_arcsec,
        })
    }

    /// Refuses what is not the Sun, which mostly is a wrong unit or a diameter.
    fn plausible(
        &mut self,
        observable: Observable,
        value: f64,
        unit: Unit,
        diameter: bool,
        distance: Option<Distance>,
    ) {
        let half = if diameter { 0.5 } else { 1.0 };
        let arcsec = half
            * match unit {
                Unit::Mas => value / 1000.0,
                Unit::Arcsec => value,
                Unit::Km => value * 1000.0 / ASTRONOMICAL_UNIT.value / ARCSEC_RAD,
            };
        match observable {
            Observable::Radius => {
                let au = match distance {
                    Some(Distance::Seen(au)) => au,
                    _ => 1.0,
                };
                if !(950.0..=970.0).contains(&(arcsec * au)) {
                    self.fault(
                        "value",
                        "a radius of 950 to 970 arcsec at 1 AU",
                        format!(
                            "it makes {:.2} arcsec: check unit, distance and whether it is of a radius or a diameter",
                            arcsec * au
                        ),
                    );
                }
            }
            Observable::Oblateness => {
                if !(arcsec.abs() <= 1.0) {
                    self.fault(
                        "value",
                        "an oblateness within 1000 mas of zero",
                        format!("it makes {:.1} mas: check the unit", 1000.0 * arcsec),
                    );
                }
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const HEADER: &str = "label,platform,epoch,wavelength_nm,quantity,value,unit,sigma_random,sigma_systematic,definition,blur_fwhm_arcsec,of,distance,b0_deg,group,note";

    fn table(rows: &str) -> String {
        format!("# invented\n{HEADER}\n{rows}\n")
    }

    #[test]
    fn a_row_of_each_kind() {
        let found = read(
            "values.csv",
            &table(
                "A,space,2011.5,600,radius,1919.0,arcsec,0.02,0.1,fourier:10,1.20,diameter,1 AU,,a,\"with, comma\"\n\
                 B,ground,2012-06-21,550,oblateness,6.0,km,1,0,model,,radius,1 AU,0,,",
            ),
        )
        .unwrap();
        assert_eq!(found.len(), 2);
        assert_eq!(found[0].note, "with, comma");
        assert_eq!(
            found[0].definition,
            Definition::Fourier {
                window_arcsec: 10.0
            }
        );
        let sigma = found[0].blur.unwrap().sigma_arcsec;
        assert!((sigma - 0.005 / 3.0_f64.sqrt()).abs() < 1e-12);
        assert_eq!((found[0].b0_deg, found[1].b0_deg), (None, Some(0.0)));
        assert_eq!(found[1].group, None);
    }

    #[test]
    fn the_template_is_a_table_without_values() {
        let text = template();
        let error = read("t.csv", &text).unwrap_err();
        assert_eq!(error.faults.len(), 1);
        assert!(error.faults[0].found.contains("0 values"));
        // Its example is a valid row.
        let example: String = text
            .lines()
            .filter(|it| !it.starts_with('#') || it.contains("Lanthorn"))
            .map(|it| it.trim_start_matches("# "))
            .rev()
            .collect::<Vec<_>>()
            .join("\n");
        assert_eq!(read("t.csv", &example).unwrap().len(), 1);
    }

    #[test]
    fn all_faults_at_once_with_their_lines() {
        let error = read(
            "values.csv",
            &table(
                "A,spcae,2011-13-01,200,radius,959.6,arcsec,0.02,x,inflection,,radius,1 AU,0,,\n\
                 B,ground,2012,550,oblateness,8,mas,0,0,fourier:100,,radius,1 parsec,90,,\n\
                 C,ground,2012,550,radius,1919,arcsec,1,0,model,,radius,1 AU,0,,\n\
                 D,ground,2012",
            ),
        )
        .unwrap_err();
        let at: Vec<(u64, &str)> = error
            .faults
            .iter()
            .map(|it| (it.line, it.column.as_str()))
            .collect();
        assert_eq!(
            at,
            [
                (3, "platform"),
                (3, "epoch"),
                (3, "wavelength_nm"),
                (3, "sigma_systematic"),
                (3, "blur_fwhm_arcsec"),
                (4, "sigma_random"),
                (4, "definition"),
                (4, "distance"),
                (4, "b0_deg"),
                (5, "value"),
                (6, ""),
            ]
        );
        let text = error.to_string();
        assert!(text.contains("values.csv:3: platform"), "{text}");
        assert!(text.contains("did you mean `space`?"), "{text}");
        assert!(text.contains("1919.00 arcsec"), "{text}");
    }

    #[test]
    fn unknown_missing_and_doubled_columns() {
        let header = HEADER
            .replace("wavelength_nm", "wavelenght_nm")
            .replace("unit", "label");
        let error = read("v.csv", &format!("{header}\n")).unwrap_err();
        let text = error.to_string();
        assert!(text.contains("did you mean `wavelength_nm`?"), "{text}");
        assert!(text.contains("the column twice"), "{text}");
        assert!(text.contains("v.csv:1: unit"), "{text}");
        assert!(
            read("v.csv", "")
                .unwrap_err()
                .to_string()
                .contains("--template")
        );
        let twice = "A,space,2011,600,oblateness,8,mas,1,0,model,,radius,1 AU,0,,\n";
        let error = read("v.csv", &table(&twice.repeat(2))).unwrap_err();
        assert!(error.to_string().contains("line 3"), "{error}");
    }
}
