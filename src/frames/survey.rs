//! A walk over the headers of a FITS file before the library sees them.
//!
//! The library trusts a header: a block size of zero, or a tile larger than the image, ends the
//! process or writes past a buffer. So the layout of every HDU is checked here first, and HDUs
//! from the first doubtful one on are never handed over.

use std::collections::HashMap;
use std::io::{self, Read, Seek, SeekFrom};

use super::header;
use super::tiles;

/// Bytes of a FITS block.
const BLOCK: u64 = 2880;
/// A header longer than this is taken for damage.
const MAX_HEADER_BYTES: usize = 4 << 20;
/// HDUs looked at.
pub(super) const MAX_HDUS: usize = 1000;
/// Axes that the standard allows.
const MAX_AXES: i64 = 999;

/// What the walk found.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Survey {
    /// HDUs that are safe to open, from the first on.
    pub(super) hdus: usize,
    /// Why the walk ended before the end of the file, if it did.
    pub(super) stopped: Option<String>,
}

/// One header, by keyword.
#[derive(Debug)]
pub(super) struct Layout {
    first_keyword: String,
    values: HashMap<String, String>,
    /// Where the data start, in bytes from the start of the file.
    pub(super) data_start: u64,
}

/// Walks over the HDUs of `file`, which is `file_bytes` long.
pub(super) fn survey<F: Read + Seek>(file: &mut F, file_bytes: u64) -> io::Result<Survey> {
    let mut start = 0;
    for hdus in 0..MAX_HDUS {
        if start >= file_bytes {
            return Ok(Survey {
                hdus,
                stopped: None,
            });
        }
        let checked = match read_layout(file, start, file_bytes)? {
            Ok(layout) if hdus > 0 && layout.first_keyword != "XTENSION" => {
                // Bytes after the last HDU are allowed and mean nothing.
                return Ok(Survey {
                    hdus,
                    stopped: None,
                });
            }
            Ok(layout) => match layout.data_bytes() {
                Ok(bytes) if layout.has("ZIMAGE") => {
                    tiles::check(file, &layout, file_bytes)?.map(|()| layout.data_start + bytes)
                }
                Ok(bytes) => Ok(layout.data_start.saturating_add(bytes)),
                Err(reason) => Err(reason),
            },
            Err(reason) => Err(reason),
        };
        match checked {
            Ok(end) => start = end.div_ceil(BLOCK).saturating_mul(BLOCK),
            Err(reason) => {
                return Ok(Survey {
                    hdus,
                    stopped: Some(format!("HDU {hdus}: {reason}")),
                });
            }
        }
    }
    Ok(Survey {
        hdus: MAX_HDUS,
        stopped: None,
    })
}

fn read_layout<F: Read + Seek>(
    file: &mut F,
    start: u64,
    file_bytes: u64,
) -> io::Result<Result<Layout, String>> {
    file.seek(SeekFrom::Start(start))?;
    let mut layout = Layout {
        first_keyword: String::new(),
        values: HashMap::new(),
        data_start: 0,
    };
    let mut block = [0u8; BLOCK as usize];
    let mut read = 0;
    while read < MAX_HEADER_BYTES {
        if start + read as u64 + BLOCK > file_bytes {
            return Ok(Err("its header has no END".to_owned()));
        }
        file.read_exact(&mut block)?;
        read += block.len();
        for card in block.chunks_exact(80) {
            let name = String::from_utf8_lossy(&card[..8]).trim_end().to_owned();
            if layout.first_keyword.is_empty() {
                layout.first_keyword.clone_from(&name);
            }
            if name == "END" {
                layout.data_start = start + read as u64;
                return Ok(Ok(layout));
            }
            if !is_layout(&name) {
                continue;
            }
            let value = value_of(card);
            let before = layout.values.insert(name.clone(), value.clone());
            if before.is_some_and(|it| it != value) {
                return Ok(Err(format!(
                    "keyword {name} is there twice, with two values"
                )));
            }
        }
    }
    Ok(Err(format!(
        "its header is longer than {MAX_HEADER_BYTES} bytes"
    )))
}

/// Whether the layout of an HDU depends on this keyword.
fn is_layout(name: &str) -> bool {
    const WHOLE: [&str; 12] = [
        "BITPIX", "NAXIS", "PCOUNT", "GCOUNT", "GROUPS", "THEAP", "TFIELDS", "ZIMAGE", "ZBITPIX",
        "ZNAXIS", "ZCMPTYPE", "ZQUANTIZ",
    ];
    const NUMBERED: [&str; 7] = [
        "NAXIS", "ZNAXIS", "ZTILE", "ZNAME", "ZVAL", "TTYPE", "TFORM",
    ];
    WHOLE.contains(&name)
        || NUMBERED.iter().any(|stem| {
            name.strip_prefix(stem)
                .is_some_and(|it| !it.is_empty() && it.bytes().all(|b| b.is_ascii_digit()))
        })
}

/// The value part of a card: quotes kept, comment cut.
fn value_of(card: &[u8]) -> String {
    if card.get(8..10) != Some(b"= ") {
        return String::new();
    }
    let text = String::from_utf8_lossy(&card[10..]);
    let text = text.trim();
    if let Some(inside) = text.strip_prefix('\'') {
        let end = inside.find('\'').unwrap_or(inside.len());
        return format!("'{}'", inside[..end].trim_end());
    }
    text.split('/').next().unwrap_or("").trim().to_owned()
}

impl Layout {
    /// Whether the keyword is there, with whatever value.
    pub(super) fn has(&self, name: &str) -> bool {
        self.values.contains_key(name)
    }

    /// The text of a keyword.
    pub(super) fn text(&self, name: &str) -> Option<&str> {
        Some(self.values.get(name)?.trim_matches('\'').trim_end())
    }

    /// A whole number within `range`, `absent` if there is no such keyword.
    pub(super) fn whole(
        &self,
        name: &str,
        absent: Option<i64>,
        range: std::ops::RangeInclusive<i64>,
    ) -> Result<i64, String> {
        let found = match self.values.get(name) {
            None => absent.ok_or_else(|| format!("keyword {name} is missing"))?,
            Some(written) => written
                .parse()
                .ok()
                .or_else(|| header::integer(written))
                .ok_or_else(|| format!("keyword {name} is {written:?}, no whole number"))?,
        };
        if range.contains(&found) {
            return Ok(found);
        }
        Err(format!(
            "keyword {name} is {found}, allowed are {} to {}",
            range.start(),
            range.end()
        ))
    }

    /// Length of the data as announced, without fill.
    ///
    /// ```text
    /// bytes = |BITPIX| / 8 * GCOUNT (PCOUNT + NAXIS1 * NAXIS2 * ...)     FITS Standard 4.0, eq. 2
    /// ```
    fn data_bytes(&self) -> Result<u64, String> {
        let bitpix = self.whole("BITPIX", None, -64..=64)?;
        if ![8, 16, 32, 64, -32, -64].contains(&bitpix) {
            return Err(format!(
                "keyword BITPIX is {bitpix}, allowed are 8, 16, 32, 64, -32, -64"
            ));
        }
        let naxis = self.whole("NAXIS", None, 0..=MAX_AXES)?;
        let mut pixels = i128::from(naxis > 0);
        for axis in 1..=naxis {
            let length = self.whole(&format!("NAXIS{axis}"), None, 0..=i64::MAX)?;
            let is_groups = axis == 1 && length == 0 && self.text("GROUPS") == Some("T");
            if !is_groups {
                pixels = pixels.saturating_mul(i128::from(length));
            }
        }
        let before = i128::from(self.whole("PCOUNT", Some(0), 0..=i64::MAX)?);
        let groups = i128::from(self.whole("GCOUNT", Some(1), 1..=i64::MAX)?);
        let elements = pixels.saturating_add(before).saturating_mul(groups);
        let bytes = elements.saturating_mul(i128::from(bitpix.abs() / 8));
        u64::try_from(bytes)
            .ok()
            .filter(|it| *it < 1 << 62)
            .ok_or_else(|| format!("the header announces {bytes} bytes of data"))
    }
}
