//! The header of an open image: keywords, compression, checksums.
//!
//! A keyword that is missing in the image's own header is looked up in the primary one.

use super::error::FitsError;
use super::header::{self, Key};
use super::image::ImageFile;

impl ImageFile {
    pub(super) fn own_key(&self, name: &str) -> Result<Option<String>, FitsError> {
        self.source.handle.key_as_written(name)
    }

    pub(super) fn scaling_key(&self, name: &str, absent: f64) -> Result<f64, FitsError> {
        let Some(written) = self.own_key(name)? else {
            return Ok(absent);
        };
        match header::real(&written) {
            Some(value) if value.is_finite() => Ok(value),
            _ => Err(self.bad_key(name, &written, "a finite number")),
        }
    }

    pub(super) fn bad_key(&self, name: &str, found: &str, needed: &'static str) -> FitsError {
        FitsError::Keyword {
            path: self.path().to_owned(),
            hdu: self.hdu(),
            name: name.into(),
            found: found.to_owned(),
            needed,
        }
    }

    /// A keyword as text, CONTINUE cards joined; numbers as they are written.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the name or the card is malformed.
    pub fn key_text(&self, name: &str) -> Result<Option<String>, FitsError> {
        Ok(self.key(name)?.map(|it| match it {
            Key::Text(value) | Key::Other(value) => value,
        }))
    }

    /// A keyword as a number.
    ///
    /// # Errors
    ///
    /// [`FitsError::Keyword`] when it is no number.
    pub fn key_f64(&self, name: &str) -> Result<Option<f64>, FitsError> {
        match self.key(name)? {
            None => Ok(None),
            Some(Key::Other(written)) => match header::real(&written) {
                Some(value) => Ok(Some(value)),
                None => Err(self.bad_key(name, &written, "a number")),
            },
            Some(Key::Text(found)) => {
                Err(self.bad_key(name, &format!("the text '{found}'"), "a number"))
            }
        }
    }

    /// A keyword as a whole number; 12.75 is an error, 12.0 is not.
    ///
    /// # Errors
    ///
    /// [`FitsError::Keyword`] when it is no whole number.
    pub fn key_i64(&self, name: &str) -> Result<Option<i64>, FitsError> {
        match self.key(name)? {
            None => Ok(None),
            Some(Key::Other(written)) => match header::integer(&written) {
                Some(value) => Ok(Some(value)),
                None => Err(self.bad_key(name, &written, "a whole number")),
            },
            Some(Key::Text(found)) => {
                Err(self.bad_key(name, &format!("the text '{found}'"), "a whole number"))
            }
        }
    }

    fn key(&self, name: &str) -> Result<Option<Key>, FitsError> {
        if !header::is_name(name) {
            return Err(self.bad_key(name, "no keyword", "a name of A-Z, 0-9, - and _"));
        }
        let handle = &self.source.handle;
        let found = header::read(handle, name)?;
        if found.is_some() || self.hdu == 1 {
            return Ok(found);
        }
        handle.move_to(1)?;
        let inherited = header::read(handle, name);
        handle.move_to(self.hdu)?;
        inherited
    }

    /// Every card of the image's header, as written.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the header cannot be read.
    pub fn cards(&self) -> Result<Vec<String>, FitsError> {
        let mut cards = Vec::new();
        while let Some(card) = self.source.handle.record(cards.len() + 1)? {
            cards.push(card);
        }
        Ok(cards)
    }

    /// Whether (data, whole HDU) agree with CHECKSUM and DATASUM; `None` where there are none.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the file cannot be read to the end of the HDU.
    pub fn verify_checksums(&self) -> Result<(Option<bool>, Option<bool>), FitsError> {
        self.source.handle.verify_checksums()
    }

    /// Names the compression if it changed the values: quantised floats, scaled HCOMPRESS.
    pub fn lossy(&self) -> Option<String> {
        if !self.compressed {
            return None;
        }
        let word = |name: &str| match header::read(&self.source.handle, name) {
            Ok(Some(Key::Text(it) | Key::Other(it))) => Some(it),
            _ => None,
        };
        let method = word("ZCMPTYPE").unwrap_or_else(|| "unknown".to_owned());
        let quantised = word("ZQUANTIZ");
        let has_scale =
            word("ZSCALE").is_some() || matches!(self.source.handle.column("ZSCALE"), Ok(Some(_)));
        let off = quantised
            .as_deref()
            .is_some_and(|it| it.eq_ignore_ascii_case("NONE"));
        if self.bitpix < 0 && !off && (quantised.is_some() || has_scale) {
            let how = quantised.unwrap_or_else(|| "NO_DITHER".to_owned());
            return Some(format!("floats quantised ({how}) and packed by {method}"));
        }
        if method.starts_with("HCOMPRESS") {
            let scale = (1..=9).find_map(|n| {
                let is_scale = word(&format!("ZNAME{n}"))?.eq_ignore_ascii_case("SCALE");
                header::real(&word(&format!("ZVAL{n}"))?).filter(|_| is_scale)
            });
            if let Some(scale) = scale.filter(|it| *it > 0.0) {
                return Some(format!("{method} with scale {scale}"));
            }
        }
        None
    }
}
