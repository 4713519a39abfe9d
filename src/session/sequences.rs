//! The sequences of a session: their files, and what each overrides.

use std::collections::BTreeMap;
use std::path::PathBuf;

use super::build;
use super::document::{Branch, Value, overlaid};
use super::facts::{Calibration, Camera, Filter, Kind, Sequence};
use super::fault::{FaultKind, Finding};
use super::reader::{Reader, View};
use super::tables;

/// A sequence before the tables of the session are known.
#[derive(Debug)]
pub(super) struct Outline {
    view: View,
    kind: Option<Kind>,
    files: Option<Vec<PathBuf>>,
}

impl Outline {
    /// The first file of a sequence of frames.
    pub(super) fn frame(&self) -> Option<&PathBuf> {
        self.files.as_ref().filter(|_| self.has_frames())?.first()
    }

    /// Whether the files are frames; so it is taken where the kind is not known.
    pub(super) fn has_frames(&self) -> bool {
        self.kind != Some(Kind::Limbs)
    }
}

/// The sequences of the file with their files, and what contradicts their kinds.
pub(super) fn outlines(reader: &mut Reader<'_>, root: &View) -> Vec<Outline> {
    let Some(Value::List(items)) = root.branch.get("sequence").map(|it| &it.value) else {
        return Vec::new();
    };
    let spec = root.inner("sequence").spec;
    let mut outlines = Vec::new();
    for (index, item) in items.iter().enumerate() {
        let Value::Table(branch) = &item.value else {
            continue;
        };
        let view = View {
            spec,
            path: format!("sequence[{index}]"),
            branch: branch.clone(),
            place: Some(item.place.clone()),
        };
        let kinds = [
            Kind::Burst,
            Kind::Roll,
            Kind::Drift,
            Kind::Scan,
            Kind::Limbs,
        ];
        let kind = reader.choice(&view, "kind", tables::KINDS, &kinds);
        let files = reader.files(&view, "files").flatten();
        if let (Some([]), Some(node), true) = (
            files.as_deref(),
            view.branch.get("files"),
            reader.files_needed,
        ) {
            let finding = Finding::new(
                FaultKind::OutOfRange,
                "an empty list",
                "one path or pattern at least",
                "name the files, or take the sequence out",
            );
            reader.fault(&node.place.clone(), &view.path_of("files"), finding);
        }
        contradictions(reader, &view, kind);
        outlines.push(Outline { view, kind, files });
    }
    outlines
}

/// Keys that a kind has no use for, and one that a scan needs.
fn contradictions(reader: &mut Reader<'_>, view: &View, kind: Option<Kind>) {
    let Some(kind) = kind else { return };
    let word = tables::KINDS[kind as usize];
    let useless: &[&str] = match kind {
        Kind::Limbs => &["line_s", "roll_deg", "dark", "flat", "camera"],
        Kind::Scan => &[],
        Kind::Burst | Kind::Roll | Kind::Drift => &["line_s"],
    };
    for name in useless {
        if let Some(node) = view.branch.get(*name) {
            let finding = Finding::new(
                FaultKind::Contradictory,
                format!("`{name}` in a sequence of kind \"{word}\""),
                format!("no `{name}` with this kind"),
                if *name == "line_s" {
                    "take it out, or set kind = \"scan\""
                } else {
                    "take it out, or correct the kind"
                },
            );
            reader.fault(&node.key.clone(), &view.path_of(name), finding);
        }
    }
    if kind == Kind::Scan && !view.has("line_s") {
        reader.missing(
            view,
            &view.path_of("line_s"),
            "a number above 0 up to 60 s".to_owned(),
            "write `line_s`: a scan needs the seconds from line to line".to_owned(),
        );
    }
}

/// A file that is used twice would count twice, or calibrate itself.
pub(super) fn overlaps(
    reader: &mut Reader<'_>,
    outlines: &[Outline],
    session: Option<&Calibration>,
) {
    let mut used: BTreeMap<PathBuf, String> = BTreeMap::new();
    if let Some(session) = session {
        for (name, paths) in [("dark", &session.dark), ("flat", &session.flat)] {
            for path in paths {
                used.insert(build::identity(path), format!("calibration.{name}"));
            }
        }
    }
    for outline in outlines {
        let (Some(files), Some(node)) = (&outline.files, outline.view.branch.get("files")) else {
            continue;
        };
        let key = outline.view.path_of("files");
        let mut twice: BTreeMap<String, Vec<&PathBuf>> = BTreeMap::new();
        for path in files {
            match used.get(&build::identity(path)) {
                Some(other) => twice.entry(other.clone()).or_default().push(path),
                None => {
                    used.insert(build::identity(path), key.clone());
                }
            }
        }
        for (other, paths) in twice {
            let first = paths[0].display();
            let more = match paths.len() {
                1 => String::new(),
                count => format!(" and {} more", count - 1),
            };
            let finding = Finding::new(
                FaultKind::Contradictory,
                format!("{first}{more}, also in {other}"),
                "each file in one place",
                "narrow the pattern, or take the file out of one of the two",
            );
            reader.fault(&node.place.clone(), &key, finding);
        }
    }
}

/// What the session gives to every sequence.
#[derive(Debug)]
pub(super) struct Common<'a> {
    root: &'a View,
    calibration: Option<&'a Calibration>,
    camera: Option<(Option<PathBuf>, Option<Camera>)>,
    filter: Option<(Option<PathBuf>, Option<Filter>)>,
}

impl<'a> Common<'a> {
    /// The session's tables.
    pub(super) fn new(root: &'a View, calibration: Option<&'a Calibration>) -> Self {
        Self {
            root,
            calibration,
            camera: None,
            filter: None,
        }
    }

    /// The session's camera with what a sequence says of its own.
    pub(super) fn camera(
        &mut self,
        reader: &mut Reader<'_>,
        own: Option<&View>,
        frames: bool,
    ) -> Option<Camera> {
        if let Some(view) = self.laid_over("camera", own) {
            return build::camera(reader, &view, frames);
        }
        if !frames {
            return build::camera(reader, &self.root.inner("camera"), false);
        }
        // Headers may answer otherwise for another sequence.
        match &self.camera {
            Some((frame, camera)) if *frame == reader.frame => camera.clone(),
            _ => {
                let camera = build::camera(reader, &self.root.inner("camera"), true);
                self.camera = Some((reader.frame.clone(), camera.clone()));
                camera
            }
        }
    }

    /// The session's band with what a sequence says of its own.
    pub(super) fn filter(
        &mut self,
        reader: &mut Reader<'_>,
        own: Option<&View>,
        read: &mut Vec<PathBuf>,
    ) -> Option<Filter> {
        if let Some(view) = self.laid_over("filter", own) {
            return build::filter(reader, &view, read);
        }
        match &self.filter {
            Some((frame, filter)) if *frame == reader.frame => filter.clone(),
            _ => {
                let filter = build::filter(reader, &self.root.inner("filter"), read);
                self.filter = Some((reader.frame.clone(), filter.clone()));
                filter
            }
        }
    }

    /// The session's table under a sequence's own, if it has one.
    fn laid_over(&self, name: &str, own: Option<&View>) -> Option<View> {
        let own = own.filter(|it| it.has(name))?.inner(name);
        let session = self.root.inner(name);
        let branch: Branch = overlaid(own.branch, session.branch, own.spec);
        Some(View { branch, ..own })
    }
}

/// A checked sequence.
pub(super) fn sequence(
    reader: &mut Reader<'_>,
    outline: &Outline,
    common: &mut Common<'_>,
    read: &mut Vec<PathBuf>,
) -> Option<Sequence> {
    let view = &outline.view;
    let frames = outline.has_frames();
    if frames {
        reader.frame = outline.frame().cloned();
    }
    let none = Calibration::default();
    let calibration = if frames {
        build::calibration(reader, view, common.calibration.unwrap_or(&none))
    } else {
        Some(none)
    };
    let camera = common.camera(reader, Some(view), frames);
    let filter = common.filter(reader, Some(view), read);
    let roll_deg = reader.number(view, "roll_deg");
    let line_s = reader.open_number(view, "line_s");
    let name = reader.text(view, "name");
    Some(Sequence {
        name,
        kind: outline.kind?,
        files: outline.files.clone()?,
        roll_deg: roll_deg?,
        line_s: line_s?,
        calibration: calibration?,
        camera: camera?,
        filter: filter?,
    })
}
