//! The picture of the stacked disk as a small PNG with a tint, transparent outside the limb.

use super::ReportError;
use super::html::data_uri;
use super::svg::coordinate;
use crate::result::record::Traces;

/// Share of the disk's radius to which the picture is shown.
const SHOWN: f64 = 1.012;

/// Brightness, relative to the disk's centre, that gets the lightest tint.
const WHITE: f64 = 1.08;

/// Tints from dark to light that the palette runs through, equally spaced.
const TINTS: [[f64; 3]; 4] = [
    [38.0, 16.0, 6.0],
    [150.0, 66.0, 14.0],
    [238.0, 160.0, 52.0],
    [255.0, 246.0, 222.0],
];

/// The encoded picture and its measures.
#[derive(Clone, Debug)]
pub(crate) struct Preview {
    uri: String,
    width_px: usize,
    height_px: usize,
    radius_px: f64,
}

/// Encodes the preview. The array is indexed `[y, x]` with y upwards, as in `stack.fits`: row 0 is
/// the southern edge.
pub(crate) fn encode(traces: &Traces) -> Result<Option<Preview>, ReportError> {
    let Some(image) = &traces.preview else {
        return Ok(None);
    };
    let (height_px, width_px) = image.dim();
    let radius_px = traces.preview_radius_px;
    let allowed_px = 0.5 * width_px.max(height_px) as f64;
    if !(radius_px > 0.0 && radius_px <= allowed_px) {
        return Err(ReportError::PreviewRadius {
            found_px: radius_px,
            allowed_px,
        });
    }
    let (x0, y0) = (
        0.5 * (width_px as f64 - 1.0),
        0.5 * (height_px as f64 - 1.0),
    );
    let mut indices = Vec::with_capacity(width_px * height_px);
    for y in (0..height_px).rev() {
        for x in 0..width_px {
            let distance = (x as f64 - x0).hypot(y as f64 - y0);
            let value = f64::from(image[[y, x]]);
            indices.push(if distance > SHOWN * radius_px || !value.is_finite() {
                0
            } else {
                1 + ((value / WHITE).clamp(0.0, 1.0) * 254.0).round() as u8
            });
        }
    }
    let mut bytes = Vec::new();
    let mut encoder = png::Encoder::new(&mut bytes, width_px as u32, height_px as u32);
    encoder.set_color(png::ColorType::Indexed);
    encoder.set_depth(png::BitDepth::Eight);
    encoder.set_palette(palette());
    encoder.set_trns(vec![0u8]);
    encoder.set_compression(png::Compression::High);
    let mut writer = encoder.write_header()?;
    writer.write_image_data(&indices)?;
    writer.finish()?;
    Ok(Some(Preview {
        uri: data_uri("image/png", &bytes),
        width_px,
        height_px,
        radius_px,
    }))
}

/// 256 colours; the first is transparent.
fn palette() -> Vec<u8> {
    let mut colours = vec![0, 0, 0];
    for index in 0..255u32 {
        let place = f64::from(index) / 254.0 * (TINTS.len() - 1) as f64;
        let low = (place.floor() as usize).min(TINTS.len() - 2);
        let share = place - low as f64;
        for (dark, light) in TINTS[low].into_iter().zip(TINTS[low + 1]) {
            let value = dark * (1.0 - share) + light * share;
            colours.push(value.round() as u8);
        }
    }
    colours
}

impl Preview {
    /// The definition that figures refer to.
    pub(crate) fn definition(&self) -> String {
        format!(
            "<defs><image id=\"stacked-disk\" width=\"{}\" height=\"{}\" href=\"{}\"/></defs>\n",
            self.width_px, self.height_px, self.uri
        )
    }

    /// The picture placed so that its disk has the given centre and radius.
    pub(crate) fn placed(&self, centre: (f64, f64), radius_px: f64) -> String {
        let scale = radius_px / self.radius_px;
        let left = centre.0 - 0.5 * scale * self.width_px as f64;
        let top = centre.1 - 0.5 * scale * self.height_px as f64;
        format!(
            "<use href=\"#stacked-disk\" transform=\"translate({} {}) scale({scale:.5})\"/>\n",
            coordinate(left),
            coordinate(top)
        )
    }
}
