//! Whether the tiles of a compressed image are what its header says.

use std::io::{self, Read, Seek, SeekFrom};

use super::header;
use super::survey::Layout;

/// Axes of a compressed image that the library has room for.
const MAX_AXES: i64 = 6;
/// Pixels of one compressed image.
const MAX_PIXELS: i64 = 1 << 50;
/// Pixels of one tile.
const MAX_TILE_PIXELS: i64 = 1_000_000_000;
/// Rows of the table read at a time.
const ROWS_AT_ONCE: u64 = 4096;

/// Where the tiles are.
struct Table {
    row_bytes: u64,
    rows: u64,
    /// Start of the heap, from the start of the file.
    heap: u64,
    heap_bytes: u64,
    /// Whether descriptors are two 64-bit numbers.
    is_wide: bool,
}

/// Checks a tile-compressed image; the inner error says what is wrong.
pub(super) fn check<F: Read + Seek>(
    file: &mut F,
    layout: &Layout,
    file_bytes: u64,
) -> io::Result<Result<(), String>> {
    let (axes, tiles) = match shape(layout) {
        Ok(found) => found,
        Err(reason) => return Ok(Err(reason)),
    };
    let table = match parameters(layout).and_then(|()| table(layout, &axes, &tiles)) {
        Ok(table) => table,
        Err(reason) => return Ok(Err(reason)),
    };
    if table.heap.saturating_add(table.heap_bytes) > file_bytes {
        // The image says so with the figures; nothing of it is read.
        return Ok(Ok(()));
    }
    descriptors(file, layout, &table, &axes, &tiles)
}

/// Lengths of the axes and of the tiles along them.
fn shape(layout: &Layout) -> Result<(Vec<i64>, Vec<i64>), String> {
    let bitpix = layout.whole("ZBITPIX", None, -64..=64)?;
    if ![8, 16, 32, 64, -32, -64].contains(&bitpix) {
        return Err(format!(
            "keyword ZBITPIX is {bitpix}, allowed are 8, 16, 32, 64, -32, -64"
        ));
    }
    let count = layout.whole("ZNAXIS", None, 1..=MAX_AXES)?;
    let (mut axes, mut tiles) = (Vec::new(), Vec::new());
    for axis in 1..=count {
        let length = layout.whole(&format!("ZNAXIS{axis}"), None, 1..=MAX_PIXELS)?;
        let row = if axis == 1 { length } else { 1 };
        tiles.push(layout.whole(&format!("ZTILE{axis}"), Some(row), 1..=length)?);
        axes.push(length);
    }
    let product = |it: &[i64]| it.iter().fold(1i64, |all, one| all.saturating_mul(*one));
    if product(&axes) > MAX_PIXELS || product(&tiles) > MAX_TILE_PIXELS {
        return Err(format!(
            "the compressed image announces {} pixels",
            product(&axes)
        ));
    }
    Ok((axes, tiles))
}

/// The method and its parameters.
fn parameters(layout: &Layout) -> Result<(), String> {
    const METHODS: [&str; 7] = [
        "RICE_1",
        "RICE_ONE",
        "GZIP_1",
        "GZIP_2",
        "PLIO_1",
        "HCOMPRESS_1",
        "NOCOMPRESS",
    ];
    let method = layout.text("ZCMPTYPE").unwrap_or("");
    if !METHODS.contains(&method) {
        return Err(format!(
            "keyword ZCMPTYPE is {method:?}, allowed are {}",
            METHODS.join(", ")
        ));
    }
    // The library goes by the number of a parameter, whatever its name.
    if method.starts_with("RICE") {
        layout.whole("ZVAL1", None, 1..=1024)?;
        let bytes = layout.whole("ZVAL2", Some(4), 0..=8)?;
        let is_size = layout
            .text("ZNAME2")
            .is_none_or(|it| it.starts_with("BYTEPIX"));
        if is_size && ![1, 2, 4, 8].contains(&bytes) {
            return Err(format!(
                "keyword ZVAL2 is {bytes}, allowed are 1, 2, 4 and 8"
            ));
        }
    }
    if method == "HCOMPRESS_1" {
        let scale = layout.text("ZVAL1").unwrap_or("");
        if !header::real(scale).is_some_and(|it| (0.0..1e9).contains(&it)) {
            return Err(format!(
                "keyword ZVAL1 is {scale:?}, a number from 0 is needed"
            ));
        }
        layout.whole("ZVAL2", Some(0), 0..=1)?;
    }
    Ok(())
}

fn table(layout: &Layout, axes: &[i64], tiles: &[i64]) -> Result<Table, String> {
    let rows = layout.whole("NAXIS2", None, 0..=MAX_PIXELS)?;
    let row_bytes = layout.whole("NAXIS1", None, 8..=1 << 30)?;
    let heap_bytes = layout.whole("PCOUNT", None, 0..=MAX_PIXELS)?;
    let table_bytes = row_bytes.saturating_mul(rows);
    let gap = layout.whole("THEAP", Some(table_bytes), table_bytes..=i64::MAX >> 2)? - table_bytes;
    let needed = axes.iter().zip(tiles).fold(1i64, |all, (axis, tile)| {
        all.saturating_mul(axis.div_euclid(*tile) + i64::from(axis % tile != 0))
    });
    if rows < needed {
        return Err(format!(
            "the compressed image has {rows} tiles, its header announces {needed}"
        ));
    }
    let form = layout.text("TFORM1").unwrap_or("").trim_start_matches('1');
    if layout.text("TTYPE1") != Some("COMPRESSED_DATA") || !form.starts_with(['P', 'Q']) {
        return Err("the first column is not COMPRESSED_DATA of variable length".to_owned());
    }
    let is_wide = form.starts_with('Q');
    if is_wide && row_bytes < 16 {
        return Err(format!(
            "keyword NAXIS1 is {row_bytes}, too short for a descriptor"
        ));
    }
    let unsigned = i64::unsigned_abs;
    Ok(Table {
        row_bytes: unsigned(row_bytes),
        rows: unsigned(rows),
        heap: layout
            .data_start
            .saturating_add(unsigned(table_bytes.saturating_add(gap))),
        heap_bytes: unsigned((heap_bytes - gap).max(0)),
        is_wide,
    })
}

/// Each tile lies inside the heap, and one of `HCOMPRESS_1` has the size it should have.
fn descriptors<F: Read + Seek>(
    file: &mut F,
    layout: &Layout,
    table: &Table,
    axes: &[i64],
    tiles: &[i64],
) -> io::Result<Result<(), String>> {
    let is_hcompress = layout.text("ZCMPTYPE") == Some("HCOMPRESS_1");
    let element = match layout
        .text("TFORM1")
        .and_then(|it| it.trim_start_matches('1').chars().nth(1))
    {
        Some('I') => 2,
        Some('J') => 4,
        _ => 1,
    };
    let mut rows = Vec::new();
    let mut row = 0;
    while row < table.rows {
        let count = ROWS_AT_ONCE.min(table.rows - row);
        rows.resize((count * table.row_bytes) as usize, 0u8);
        file.seek(SeekFrom::Start(layout.data_start + row * table.row_bytes))?;
        file.read_exact(&mut rows)?;
        for (index, bytes) in rows.chunks_exact(table.row_bytes as usize).enumerate() {
            let (length, offset) = if table.is_wide {
                (big_endian(&bytes[..8]), big_endian(&bytes[8..16]))
            } else {
                (big_endian(&bytes[..4]), big_endian(&bytes[4..8]))
            };
            let tile = row + index as u64;
            let end = length.saturating_mul(element).saturating_add(offset);
            if end > table.heap_bytes {
                let reason = format!(
                    "tile {tile} ends at byte {end} of {} compressed ones",
                    table.heap_bytes
                );
                return Ok(Err(reason));
            }
            if is_hcompress && length > 0 {
                let mut head = [0u8; 14];
                if length < 14 {
                    return Ok(Err(format!("tile {tile} has {length} bytes")));
                }
                file.seek(SeekFrom::Start(table.heap + offset))?;
                file.read_exact(&mut head)?;
                let found = big_endian(&head[2..6]).saturating_mul(big_endian(&head[6..10]));
                let needed = pixels_of(tile, axes, tiles);
                if found != needed {
                    let reason = format!("tile {tile} holds {found} pixels, {needed} are due");
                    return Ok(Err(reason));
                }
            }
        }
        row += count;
    }
    Ok(Ok(()))
}

/// Pixels of tile number `tile`: those at the far edges may be smaller.
fn pixels_of(tile: u64, axes: &[i64], tiles: &[i64]) -> u64 {
    let mut rest = tile;
    let mut pixels = 1u64;
    for (axis, length) in axes.iter().zip(tiles) {
        let (axis, length) = (axis.unsigned_abs(), length.unsigned_abs());
        let along = axis.div_ceil(length);
        let start = (rest % along) * length;
        rest /= along;
        pixels = pixels.saturating_mul(length.min(axis - start));
    }
    pixels
}

fn big_endian(bytes: &[u8]) -> u64 {
    bytes.iter().fold(0, |all, one| all << 8 | u64::from(*one))
}

#[cfg(test)]
mod tests {
    use super::pixels_of;

    #[test]
    fn tiles_at_the_far_edge_are_smaller() {
        // 7 x 5 pixels in tiles of 4 x 2: 2 columns and 3 rows of tiles.
        let sizes: Vec<u64> = (0..6).map(|it| pixels_of(it, &[7, 5], &[4, 2])).collect();
        assert_eq!(sizes, [8, 6, 8, 6, 4, 3]);
    }
}
