//! Tile-compressed images, tile by tile, into a temporary file (FITS standard 4.0, section 10.1).
//!
//! Each tile goes to the decoder as an image of its own, so that memory is that of one tile. What the
//! decoder gets wrong is refused: `GZIP_2` of floating-point images, and smoothed `HCOMPRESS_1`.

use std::fs::File;
use std::io::{self, Read, Seek, SeekFrom, Write};
use std::path::Path;

use fitskit::tile_compress::CompressedImage;
use fitskit::{BinTable, Header, HeaderValue, PixelData};

use super::unpack::{no_scratch, temporary};
use super::unreadable;
use crate::read::error::ReadError;
use crate::read::fits::{DataPlace, Unit, whole};

/// Most pixels of a tile: a plane of 8192 x 8192.
const LIMIT_TILE_PIXELS: u64 = 1 << 26;

/// No method packs a tile's pixels into fewer bytes than this share (gzip's limit is 1032 bytes a byte).
const MOST_PIXELS_A_BYTE: u64 = 8192;

/// Most axes of a compressed image that is read.
const LIMIT_AXES: i64 = 9;

/// What the table says of the image and of its tiles.
struct Tiles<'u, 'a> {
    path: &'u Path,
    unit: &'u Unit<'a>,
    /// Lengths of the image's axes and of the tiles'.
    axes: Vec<usize>,
    tile: Vec<usize>,
    /// Bytes of a pixel.
    pixel_bytes: u64,
    /// Variable-length columns: where their descriptor stands in a row, its bytes, bytes of an element.
    arrays: Vec<(usize, usize, u64)>,
    heap: u64,
    heap_bytes: u64,
}

/// The image's header with the place of its pixels in the unpacked file.
pub(super) fn unpacked(
    path: &Path,
    unit: &Unit<'_>,
    file: &mut File,
    scratch: &Path,
) -> Result<(Unit<'static>, File), ReadError> {
    let tiles = Tiles::new(path, unit)?;
    let mut target = temporary(path, scratch)?;
    let counts: Vec<usize> = (tiles.axes.iter().zip(&tiles.tile))
        .map(|(axis, tile)| axis.div_ceil(*tile))
        .collect();
    for number in 0..unit.axes[1] {
        let mut rest = number;
        let place: Vec<usize> = counts
            .iter()
            .map(|count| {
                let index = rest % count;
                rest /= count;
                index
            })
            .collect();
        let origin: Vec<usize> = (place.iter().zip(&tiles.tile))
            .map(|(index, tile)| index * tile)
            .collect();
        let shape: Vec<usize> = (0..origin.len())
            .map(|axis| tiles.tile[axis].min(tiles.axes[axis] - origin[axis]))
            .collect();
        let pixels = tiles.decode(file, number, &shape)?;
        (tiles.write(&mut target, &pixels, &origin, &shape))
            .map_err(|error| no_scratch(path, scratch, &error))?;
    }
    target
        .rewind()
        .map_err(|error| no_scratch(path, scratch, &error))?;
    Ok((tiles.image()?, target))
}

impl<'u, 'a> Tiles<'u, 'a> {
    fn new(path: &'u Path, unit: &'u Unit<'a>) -> Result<Self, ReadError> {
        let number = unit.number;
        let limit = |keyword: &str, limits| whole(path, number, &unit.header, keyword, limits);
        let count = limit("ZNAXIS", (1, LIMIT_AXES))?;
        let mut axes = Vec::with_capacity(count);
        let mut tile = Vec::with_capacity(count);
        for axis in 1..=count {
            let length = limit(&format!("ZNAXIS{axis}"), (1, i64::MAX))?;
            let keyword = format!("ZTILE{axis}");
            tile.push(match unit.header.find(&keyword) {
                Some(_) => limit(&keyword, (1, i64::MAX))?.min(length),
                None if axis == 1 => length,
                None => 1,
            });
            axes.push(length);
        }
        let refused = |reason: String| ReadError::FitsTiles {
            path: path.to_path_buf(),
            unit: number,
            reason,
        };
        let count = (axes.iter().zip(&tile))
            .map(|(axis, tile)| axis.div_ceil(*tile) as u128)
            .fold(1, u128::saturating_mul);
        let rows = unit.axes.get(1).copied().unwrap_or(0);
        if count != rows as u128 {
            return Err(refused(format!(
                "{rows} rows, expected {count}, one a tile"
            )));
        }
        let pixels = tile.iter().fold(1_u64, |product, length| {
            product.saturating_mul(*length as u64)
        });
        if pixels > LIMIT_TILE_PIXELS {
            return Err(refused(format!(
                "tiles of {pixels} pixels, expected at most {LIMIT_TILE_PIXELS}"
            )));
        }
        let bitpix = unit.header.get_int("ZBITPIX").unwrap_or(0);
        let method = unit.text("ZCMPTYPE").unwrap_or_default();
        if bitpix < 0 && method == "GZIP_2" {
            return Err(refused(
                "floating-point pixels by the method GZIP_2, expected RICE_1 or GZIP_1".into(),
            ));
        }
        let width = unit.axes[0];
        let table = width as u64 * rows as u64;
        let heap = match unit.header.find("THEAP") {
            Some(_) => limit("THEAP", (0, i64::MAX))? as u64,
            None => table,
        };
        let heap_bytes = unit.place.length.checked_sub(heap).ok_or_else(|| {
            refused(format!(
                "THEAP = {heap}, expected at most the {} bytes of the table",
                unit.place.length
            ))
        })?;
        Ok(Self {
            arrays: arrays(path, unit, width)?,
            path,
            unit,
            axes,
            tile,
            pixel_bytes: bitpix.unsigned_abs() / 8,
            heap,
            heap_bytes,
        })
    }

    fn refused(&self, row: usize, reason: &str) -> ReadError {
        ReadError::FitsTiles {
            path: self.path.to_path_buf(),
            unit: self.unit.number,
            reason: format!("row {}: {reason}", row + 1),
        }
    }

    /// A tile's pixels.
    fn decode(&self, file: &mut File, row: usize, shape: &[usize]) -> Result<PixelData, ReadError> {
        let failed = |error: io::Error| unreadable(self.path, &error);
        let start = self.unit.place.start;
        let width = self.unit.axes[0];
        let mut bytes = vec![0; width];
        (file.seek(SeekFrom::Start(start + (row * width) as u64))).map_err(failed)?;
        file.read_exact(&mut bytes).map_err(failed)?;
        let mut heap = Vec::new();
        for &(at, long, element) in &self.arrays {
            let half = long / 2;
            let word = |from: usize| {
                bytes[from..from + half]
                    .iter()
                    .fold(0_u64, |word, byte| (word << 8) | u64::from(*byte))
            };
            let (count, offset) = (word(at), word(at + half));
            let length = count
                .checked_mul(element)
                .filter(|length| {
                    offset
                        .checked_add(*length)
                        .is_some_and(|end| end <= self.heap_bytes)
                })
                .ok_or_else(|| self.refused(row, "an array beyond the end of the file"))?;
            let new = (heap.len() as u64).to_be_bytes();
            bytes[at + half..at + long].copy_from_slice(&new[8 - half..]);
            let from = heap.len();
            heap.resize(from + usize::try_from(length).unwrap_or(usize::MAX), 0);
            (file.seek(SeekFrom::Start(start + self.heap + offset))).map_err(failed)?;
            file.read_exact(&mut heap[from..]).map_err(failed)?;
        }
        let pixels: u64 = shape.iter().map(|length| *length as u64).product();
        if pixels > MOST_PIXELS_A_BYTE * (heap.len() as u64 + 1) {
            let reason = format!("{pixels} pixels out of {} bytes", heap.len());
            return Err(self.refused(row, &reason));
        }
        let header = self.header_of_tile(row, shape, heap.len());
        bytes.extend(heap);
        let decoded = BinTable::from_header_and_vec(&header, bytes)
            .and_then(|table| CompressedImage::from_bintable(&header, &table)?.decompress())
            .map_err(|error| self.refused(row, &error.to_string()))?;
        Ok(decoded.pixels)
    }

    /// The table's header as that of an image of this tile alone.
    fn header_of_tile(&self, row: usize, shape: &[usize], heap_bytes: usize) -> Header {
        let mut header = self.unit.header.clone();
        let mut set = |keyword: &str, value: usize| {
            let value = i64::try_from(value).unwrap_or(i64::MAX);
            header.set(keyword, HeaderValue::Integer(value), None);
        };
        set("NAXIS2", 1);
        set("PCOUNT", heap_bytes);
        set("THEAP", self.unit.axes[0]);
        for (axis, length) in shape.iter().enumerate() {
            set(&format!("ZNAXIS{}", axis + 1), *length);
            set(&format!("ZTILE{}", axis + 1), *length);
        }
        // The dithering of a tile is seeded by its row.
        let seed = self.unit.header.get_int("ZDITHER0").unwrap_or(1);
        let seed = seed.saturating_add(i64::try_from(row).unwrap_or(0));
        header.set("ZDITHER0", HeaderValue::Integer(seed), None);
        header
    }

    /// Writes a tile's pixels, big-endian, where they stand in the image.
    fn write(
        &self,
        target: &mut File,
        pixels: &PixelData,
        origin: &[usize],
        shape: &[usize],
    ) -> io::Result<()> {
        let run = shape[0];
        let runs: usize = shape[1..].iter().product();
        let mut bytes = Vec::new();
        let mut next = None;
        for number in 0..runs {
            let (mut rest, mut stride, mut at) = (number, 1, 0);
            for axis in 0..shape.len() {
                let index = if axis == 0 {
                    0
                } else {
                    let index = rest % shape[axis];
                    rest /= shape[axis];
                    index
                };
                at += (origin[axis] + index) as u64 * stride;
                stride *= self.axes[axis] as u64;
            }
            let at = at * self.pixel_bytes;
            if next != Some(at) {
                target.seek(SeekFrom::Start(at))?;
            }
            bytes.clear();
            big_endian(pixels, number * run..(number + 1) * run, &mut bytes);
            target.write_all(&bytes)?;
            next = Some(at + bytes.len() as u64);
        }
        Ok(())
    }

    /// The header of the image that the table stands for.
    fn image(&self) -> Result<Unit<'static>, ReadError> {
        let mut header = self.unit.header.clone();
        let integer = |value: usize| HeaderValue::Integer(i64::try_from(value).unwrap_or(i64::MAX));
        header.set("NAXIS", integer(self.axes.len()), None);
        for (axis, length) in self.axes.iter().enumerate() {
            header.set(&format!("NAXIS{}", axis + 1), integer(*length), None);
        }
        let bitpix = self.unit.header.get_int("ZBITPIX").unwrap_or(0);
        header.set("BITPIX", HeaderValue::Integer(bitpix), None);
        if let (Some(blank), None) = (header.get_int("ZBLANK"), header.get_int("BLANK")) {
            header.set("BLANK", HeaderValue::Integer(blank), None);
        }
        let length = self.axes.iter().fold(self.pixel_bytes, |bytes, length| {
            bytes.saturating_mul(*length as u64)
        });
        Ok(Unit {
            number: self.unit.number,
            header,
            axes: self.axes.clone(),
            data: &[],
            place: DataPlace { start: 0, length },
        })
    }
}

/// The variable-length columns of the table, whose columns fill its rows.
fn arrays(
    path: &Path,
    unit: &Unit<'_>,
    width: usize,
) -> Result<Vec<(usize, usize, u64)>, ReadError> {
    let fields = whole(path, unit.number, &unit.header, "TFIELDS", (1, 999))?;
    let mut arrays = Vec::new();
    let mut at = 0_usize;
    for field in 1..=fields {
        let keyword = format!("TFORM{field}");
        let form = unit.text(&keyword).unwrap_or_default();
        let bytes = crate::read::fits_table::format_bytes(&form).ok_or_else(|| {
            let expected = "a binary-table format such as 1PB(100)";
            unit.wrong_card(path, &keyword, format!("`{form}`"), expected)
        })?;
        let letters = form.trim_start_matches(|letter: char| letter.is_ascii_digit());
        let element = match letters.as_bytes() {
            [b'P' | b'Q', element, ..] => Some(match element {
                b'I' => 2,
                b'J' | b'E' => 4,
                b'K' | b'D' => 8,
                _ => 1,
            }),
            _ => None,
        };
        if let Some(element) = element {
            arrays.push((at, bytes, element));
        }
        at = at.saturating_add(bytes);
    }
    if at != width {
        let expected = format!("{at}, the bytes that the {fields} columns take");
        return Err(unit.wrong_card(path, "NAXIS1", width.to_string(), &expected));
    }
    Ok(arrays)
}

fn big_endian(pixels: &PixelData, range: std::ops::Range<usize>, bytes: &mut Vec<u8>) {
    match pixels {
        PixelData::U8(pixels) => bytes.extend_from_slice(&pixels[range]),
        PixelData::I16(pixels) => bytes.extend(pixels[range].iter().flat_map(|p| p.to_be_bytes())),
        PixelData::I32(pixels) => bytes.extend(pixels[range].iter().flat_map(|p| p.to_be_bytes())),
        PixelData::I64(pixels) => bytes.extend(pixels[range].iter().flat_map(|p| p.to_be_bytes())),
        PixelData::F32(pixels) => bytes.extend(pixels[range].iter().flat_map(|p| p.to_be_bytes())),
        PixelData::F64(pixels) => bytes.extend(pixels[range].iter().flat_map(|p| p.to_be_bytes())),
    }
}
