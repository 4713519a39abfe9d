//! Where the disk is on an image of lines, roughly, and what its extent says against the session.
//!
//! A pixel belongs to the disk when it stands above a fifth of the way from sky to disk; lines and pixels
//! of the slit with only a few such pixels are particle hits. Good to a pixel or two.

use super::ScanError;
use crate::limb::{LimbError, locate};
use ndarray::ArrayView2;

/// The disk on the lines.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Passage {
    /// Middle of the disk: line, and place on the slit; 0-based.
    pub line: f64,
    /// See `line`.
    pub column: f64,
    /// Lines from first to last contact.
    pub lines: f64,
    /// Pixels of the slit that the disk covers in all.
    pub columns: f64,
    /// Level of the disk, ADU.
    pub level_adu: f64,
    /// Level of the sky, ADU.
    pub sky_adu: f64,
}

/// Share of the way from sky to disk at which the edge is.
const EDGE_SHARE: f64 = 0.2;

/// Pixels that a line or column must have in the disk.
const LEAST_PIXELS: usize = 4;

/// Finds the disk on dark-subtracted, flat-fielded lines.
///
/// # Errors
///
/// No disk, or one that is cut by the scan's ends or the slit's.
pub fn find(lines: ArrayView2<'_, f32>) -> Result<Passage, ScanError> {
    let (height, width) = lines.dim();
    let (sky, level) = locate::levels(lines).map_err(|it| match it {
        LimbError::NoDisk {
            bright_adu,
            dark_adu,
            ..
        } => ScanError::NoDisk {
            bright_adu,
            dark_adu,
        },
        _ => ScanError::NoDisk {
            bright_adu: f64::NAN,
            dark_adu: f64::NAN,
        },
    })?;
    let threshold = (sky + EDGE_SHARE * (level - sky)) as f32;
    let (mut rows, mut columns) = (vec![0_usize; height], vec![0_usize; width]);
    for ((y, x), value) in lines.indexed_iter() {
        if *value > threshold {
            rows[y] += 1;
            columns[x] += 1;
        }
    }
    let ends = |counts: &[usize]| -> Option<(usize, usize)> {
        let first = counts.iter().position(|it| *it >= LEAST_PIXELS)?;
        let last = counts.iter().rposition(|it| *it >= LEAST_PIXELS)?;
        Some((first, last))
    };
    let (Some((first, last)), Some((low, high))) = (ends(&rows), ends(&columns)) else {
        return Err(ScanError::NoDisk {
            bright_adu: level,
            dark_adu: sky,
        });
    };
    let across = (last - first + 1) as f64;
    if first == 0 {
        return Err(ScanError::NoFirstContact);
    }
    if last + 1 == height {
        // What is there is at most the half when the chord still grows.
        let widest = rows
            .iter()
            .enumerate()
            .max_by_key(|it| *it.1)
            .map_or(0, |it| it.0);
        return Err(ScanError::NoSecondContact {
            lines: height,
            needed: height.max(first + 2 * (widest - first)) + first,
        });
    }
    if low == 0 || high + 1 == width {
        return Err(ScanError::BeyondSlit { pixels: width });
    }
    Ok(Passage {
        line: 0.5 * (first + last) as f64,
        column: 0.5 * (low + high) as f64,
        lines: across,
        columns: (high - low + 1) as f64,
        level_adu: level,
        sky_adu: sky,
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use ndarray::Array2;

    fn disk(centre: (f64, f64), lines: usize) -> Array2<f32> {
        Array2::from_shape_fn((lines, 300), |(y, x)| {
            let r = ((y as f64 - centre.0) / 100.0).hypot((x as f64 - centre.1) / 110.0);
            // A little noise that is the same on every machine.
            let noise = ((x * 7919 + y * 104_729) % 17) as f32;
            noise + if r < 1.0 { 3000.0 } else { 20.0 }
        })
    }

    #[test]
    fn a_whole_disk_is_found() {
        let it = find(disk((150.2, 140.6), 300).view()).unwrap();
        assert!((it.line - 150.2).abs() < 1.0 && (it.column - 140.6).abs() < 1.0);
        assert!((it.lines - 200.0).abs() < 8.0 && (it.columns - 220.0).abs() < 8.0);
    }

    #[test]
    fn what_cuts_the_disk_is_named() {
        let cut = |centre, lines| find(disk(centre, lines).view()).unwrap_err();
        let text = cut((150.0, 140.0), 200).to_string();
        assert!(text.contains("cut before the second contact"), "{text}");
        assert_eq!(cut((60.0, 140.0), 300), ScanError::NoFirstContact);
        assert_eq!(
            cut((150.0, 90.0), 300),
            ScanError::BeyondSlit { pixels: 300 }
        );
        let dark = Array2::from_shape_fn((300, 300), |(y, x)| ((x * 31 + y * 17) % 13) as f32);
        assert!(matches!(find(dark.view()), Err(ScanError::NoDisk { .. })));
    }
}
