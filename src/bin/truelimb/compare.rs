//! `truelimb compare`: results and published values on one footing.

use crate::Ending;
use crate::arguments::Compare;
use crate::commands::{Failure, json, print};
use std::fmt::Write as _;
use std::path::{Path, PathBuf};
use truelimb::compare::{Named, Settings, against};
use truelimb::footing::{Definition, Published, sheet};
use truelimb::frames::{sha256, write_whole};
use truelimb::report::{render_comparison, sentences_of_comparison};
use truelimb::result::comparison::{Comparison, QuantityComparison};
use truelimb::result::record::{Record, SourceFile};

/// Largest table of values that is read, bytes.
const LONGEST_TABLE: u64 = 4 << 20;

/// Largest result that is read, bytes.
const LONGEST_RESULT: u64 = 512 << 20;

/// `truelimb compare`.
pub(crate) fn compare(it: &Compare) -> Result<Ending, Failure> {
    if it.template {
        print(sheet::template().trim_end());
        return Ok(Ending::Done);
    }
    let settings = settings(it)?;
    let mut results: Vec<(String, Record)> = Vec::new();
    let mut published: Vec<Published> = Vec::new();
    let mut sources = Vec::new();
    let mut faults: Vec<String> = Vec::new();
    for path in &it.inputs {
        let read = match kind(path) {
            Kind::Result(file) => result(&file).map(|record| {
                results.push((path.display().to_string(), record));
                file
            }),
            Kind::Table => table(path).map(|values| {
                published.extend(values);
                path.clone()
            }),
        };
        match read.and_then(|file| source(&file)) {
            Ok(it) => sources.push(it),
            Err(it) => faults.push(it),
        }
    }
    if !faults.is_empty() {
        return Err(Failure::Usage(faults.join("\n\n")));
    }
    let named: Vec<Named<'_>> = results
        .iter()
        .map(|(name, record)| Named { name, record })
        .collect();
    let comparison = against(&named, &published, &settings, sources)
        .map_err(|it| Failure::Usage(it.to_string()))?;
    if let Some(folder) = &it.output {
        write(&comparison, folder)?;
    }
    if it.json {
        print(&json(&comparison)?);
    } else {
        print(&text(&comparison));
        if let Some(folder) = &it.output {
            print(&format!(
                "\npage: {}",
                folder.join("comparison.html").display()
            ));
        }
    }
    Ok(Ending::Done)
}

fn settings(it: &Compare) -> Result<Settings, Failure> {
    let definition = Definition::parse(&it.to).ok_or_else(|| {
        Failure::Usage(format!(
            "--to {}: allowed are {}",
            it.to,
            Definition::ALLOWED
        ))
    })?;
    Ok(Settings {
        definition,
        wavelength_nm: it.to_wavelength_nm,
        blur_fwhm_arcsec: it.to_blur_arcsec,
        window_days: it.window_days,
    })
}

/// What an argument names.
enum Kind {
    /// A result, by its file.
    Result(PathBuf),
    /// A table of values.
    Table,
}

/// A folder or a JSON file is a result, everything else a table.
fn kind(path: &Path) -> Kind {
    if path.is_dir() {
        Kind::Result(path.join("result.json"))
    } else if path
        .extension()
        .is_some_and(|it| it.eq_ignore_ascii_case("json"))
    {
        Kind::Result(path.to_owned())
    } else {
        Kind::Table
    }
}

fn read(path: &Path, longest: u64, cure: &str) -> Result<String, String> {
    let name = path.display();
    let length = std::fs::metadata(path)
        .map_err(|it| format!("{name}: could not be read: {it}; {cure}"))?
        .len();
    if length > longest {
        return Err(format!(
            "{name}: {length} bytes; at most {longest} are read: check that it is the file that was meant"
        ));
    }
    std::fs::read_to_string(path).map_err(|it| format!("{name}: could not be read: {it}; {cure}"))
}

fn result(path: &Path) -> Result<Record, String> {
    let text = read(
        path,
        LONGEST_RESULT,
        "name the folder that `truelimb reduce` wrote",
    )?;
    serde_json::from_str(&text).map_err(|it| {
        format!(
            "{}:{}:{}: not a result of this program: {it}; reduce the session again with this version",
            path.display(),
            it.line(),
            it.column()
        )
    })
}

fn table(path: &Path) -> Result<Vec<Published>, String> {
    let text = read(
        path,
        LONGEST_TABLE,
        "start one with `truelimb compare --template > values.csv`",
    )?;
    sheet::read(&path.display().to_string(), &text).map_err(|it| it.to_string())
}

fn source(path: &Path) -> Result<SourceFile, String> {
    let bytes = std::fs::metadata(path)
        .map_err(|it| format!("{}: could not be read: {it}", path.display()))?
        .len();
    Ok(SourceFile {
        path: path.display().to_string(),
        bytes,
        sha256: sha256(path).map_err(|it| it.to_string())?,
    })
}

/// Writes the figure, the page and, last, the record.
fn write(comparison: &Comparison, folder: &Path) -> Result<(), Failure> {
    let figures = folder.join("figures");
    std::fs::create_dir_all(&figures).map_err(|it| truelimb::Error::File {
        path: figures.clone(),
        what: "the folder could not be made",
        reason: it.to_string(),
    })?;
    let rendered = render_comparison(comparison);
    for (stem, svg) in &rendered.figures {
        write_whole(&figures.join(format!("{stem}.svg")), svg.as_bytes())?;
    }
    write_whole(&folder.join("comparison.html"), rendered.html.as_bytes())?;
    let text = json(comparison)?;
    write_whole(
        &folder.join("comparison.json"),
        format!("{text}\n").as_bytes(),
    )?;
    Ok(())
}

/// The comparison as text.
fn text(comparison: &Comparison) -> String {
    let footing = &comparison.footing;
    let mut out = format!(
        "footing: 1 AU, B0 = 0, {}, {} nm",
        footing.definition, footing.wavelength_nm
    );
    if let Some(it) = footing.blur_fwhm_arcsec {
        let _ = write!(out, ", blurred to {it} arcsec");
    }
    for (it, sentence) in comparison
        .quantities
        .iter()
        .zip(sentences_of_comparison(comparison))
    {
        let _ = write!(out, "\n\n{sentence}\n");
        quantity(&mut out, comparison, it);
    }
    for it in &comparison.warnings {
        let _ = write!(out, "\nwarning: {}", it.text);
    }
    out
}

fn quantity(out: &mut String, comparison: &Comparison, of: &QuantityComparison) {
    let digits = if of.unit == "arcsec" { 4 } else { 2 };
    let unit = &of.unit;
    let width = of
        .places
        .iter()
        .map(|&it| comparison.values[it].label.chars().count())
        .max()
        .unwrap_or(0)
        .max(24);
    let _ = writeln!(
        out,
        "  {:<width$}  {:<8} {:>26}  {:>24}  {:>12}",
        "value", "platform", "as published", "on the footing", "its part/mas"
    );
    for &place in &of.places {
        let it = &comparison.values[place];
        let published = &it.published;
        let stated = published.sigma_random.hypot(published.sigma_systematic);
        let mas = if unit == "arcsec" { 1000.0 } else { 1.0 };
        // A published value keeps its digits.
        let value = if it.kind == "result" {
            format!("{:.digits$}", published.value)
        } else {
            published.value.to_string()
        };
        let _ = writeln!(
            out,
            "  {:<width$}  {:<8} {:>26}  {:>24}  {:>12.2}",
            it.label,
            it.platform,
            format!("{value} +- {stated:.digits$} {}", published.unit),
            format!(
                "{:.digits$} +- {:.digits$} {unit}",
                it.common.value, it.common.sigma
            ),
            it.common.sigma_footing * mas
        );
        for step in it.steps.iter().skip(1) {
            let _ = writeln!(
                out,
                "    {:+9.2} +- {:.2} mas  {}: {}",
                step.change_mas, step.sigma_mas, step.step, step.how
            );
        }
    }
    for it in &of.consensus {
        mean(out, &format!("all, {}", it.method), it, digits);
    }
    for it in of.platforms.iter().filter(|it| it.places.len() > 1) {
        mean(out, &it.platform, &it.consensus, digits);
    }
    let mut rows = vec![&of.ground_minus_space];
    rows.extend(of.this_result.iter().map(|it| &it.against_space));
    for it in rows {
        if let (Some(value), Some(sigma), Some([low, high]), Some(shown), Some(found)) = (
            it.difference.value,
            it.difference.sigma,
            it.interval_95_mas,
            it.smallest_shown_mas,
            it.found_in_95_mas,
        ) {
            let _ = writeln!(
                out,
                "  {}: {value:.2} +- {sigma:.2} mas, 95 %: {low:.2} to {high:.2}; could have shown {shown:.2} mas, would have in 95 of 100 cases {found:.2} mas",
                it.what
            );
        } else if let Some(reason) = &it.difference.reason {
            let _ = writeln!(out, "  {}: none, {reason}", it.what);
        }
    }
    if let Some(it) = &of.this_result {
        let it = &it.reverse;
        let (middle, sigma) = (
            it.predicted.value.unwrap_or(f64::NAN),
            it.predicted.sigma.unwrap_or(f64::NAN),
        );
        let _ = writeln!(
            out,
            "  had space been the truth, the session would have reported {middle:.digits$} +- {sigma:.digits$} {unit}; {:.1} percent of that lies below its {:.digits$}",
            100.0 * it.share_below,
            it.reported
        );
    }
    let pairs = &of.pairs;
    match (&pairs.by_scatter.value, &pairs.by_scatter.sigma) {
        (Some(value), Some(sigma)) => {
            let _ = writeln!(
                out,
                "  pairs within {} days: {}, ground minus space {value:.2} +- {sigma:.2} mas",
                pairs.window_days,
                pairs.pairs.len()
            );
        }
        _ => {
            let _ = writeln!(
                out,
                "  pairs: {}",
                pairs.by_scatter.reason.as_deref().unwrap_or("none")
            );
        }
    }
    for it in of
        .equivalence
        .iter()
        .filter(|it| it.normalised.is_some_and(|it| it.abs() > 1.0))
    {
        let _ = writeln!(
            out,
            "  not compatible with the mean: {}, {:.2} mas from it with an expanded uncertainty of {:.2}",
            comparison.values[it.place].label, it.difference_mas, it.expanded_mas
        );
    }
}

fn mean(
    out: &mut String,
    name: &str,
    it: &truelimb::result::comparison::ConsensusRecord,
    digits: usize,
) {
    let (Some(value), Some(sigma), Some([low, high])) =
        (it.mean.value, it.mean.sigma, it.interval_95)
    else {
        return;
    };
    let dark = it
        .dark_mas
        .map_or(String::new(), |it| format!(", dark {it:.2} mas"));
    let birge = it
        .birge
        .map_or(String::new(), |it| format!(", Birge {it:.2}"));
    let _ = writeln!(
        out,
        "  mean of {name}: {value:.digits$} +- {sigma:.digits$} {}, 95 %: {low:.digits$} to {high:.digits$}{dark}{birge}",
        it.mean.unit
    );
}
