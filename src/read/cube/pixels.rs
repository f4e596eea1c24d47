//! Pixels of a cube, block by block from the file: what is not asked for stays there.

use std::fs::File;
use std::io::{self, Read, Seek, SeekFrom};
use std::ops::Range;
use std::sync::{Mutex, PoisonError};

/// Bytes that one read takes at most, unless the pixels wanted lie together.
const SPAN_BYTES: u64 = 4 << 20;

/// A read takes what lies between wanted pixels too where that is no more than so many times as much.
const SPAN_WASTE: u64 = 16;

/// How numbers are stored (BITPIX), big-endian.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Stored {
    U8,
    I16,
    I32,
    I64,
    F32,
    F64,
}

impl Stored {
    pub(super) fn from_bitpix(bitpix: i64) -> Option<Self> {
        Some(match bitpix {
            8 => Self::U8,
            16 => Self::I16,
            32 => Self::I32,
            64 => Self::I64,
            -32 => Self::F32,
            -64 => Self::F64,
            _ => return None,
        })
    }

    fn bytes(self) -> u64 {
        match self {
            Self::U8 => 1,
            Self::I16 => 2,
            Self::I32 | Self::F32 => 4,
            Self::I64 | Self::F64 => 8,
        }
    }
}

/// How a stored number becomes a value.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Scaling {
    pub(super) scale: f64,
    pub(super) zero: f64,
    /// The integer that stands for no value.
    pub(super) blank: Option<i64>,
}

/// The pixels of a cube in its file.
#[derive(Debug)]
pub(super) struct Pixels {
    file: Mutex<File>,
    start: u64,
    stored: Stored,
    scaling: Scaling,
    /// Columns, rows, channels.
    counts: [usize; 3],
    /// Pixels from one column, row and channel to the next.
    strides: [u64; 3],
}

/// Which axis runs fastest in a block.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Order {
    /// `[row][column][channel]`.
    Spectra,
    /// `[channel][row][column]`.
    Planes,
}

impl Pixels {
    /// `counts` and `strides` are those of columns, rows and channels, all checked against the file.
    pub(super) fn new(
        file: File,
        start: u64,
        (stored, scaling): (Stored, Scaling),
        counts: [usize; 3],
        strides: [u64; 3],
    ) -> Self {
        Self {
            file: Mutex::new(file),
            start,
            stored,
            scaling,
            counts,
            strides,
        }
    }

    /// Reads a block of columns, rows and channels; `into` is resized. Blank pixels become `NaN`.
    pub(super) fn read(
        &self,
        ranges: [Range<usize>; 3],
        order: Order,
        into: &mut Vec<f32>,
    ) -> io::Result<()> {
        let lengths: [usize; 3] = std::array::from_fn(|axis| ranges[axis].len());
        debug_assert!((0..3).all(|axis| ranges[axis].end <= self.counts[axis]));
        into.clear();
        into.resize(lengths.iter().product(), f32::NAN);
        if into.is_empty() {
            return Ok(());
        }
        let places: [usize; 3] = match order {
            Order::Spectra => [lengths[2], lengths[0] * lengths[2], 1],
            Order::Planes => [1, lengths[0], lengths[0] * lengths[1]],
        };
        // From the fastest axis of the file to the slowest.
        let mut axes = [0, 1, 2];
        axes.sort_by_key(|axis| (self.strides[*axis], usize::MAX - self.counts[*axis]));
        let [inner, middle, outer] = axes;
        let reach = |axis: usize| (lengths[axis] as u64 - 1) * self.strides[axis];
        let wanted = |count: usize| count as u64 * self.stored.bytes();
        let span = |pixels: u64| (pixels + 1) * self.stored.bytes();
        let mut bytes = Vec::new();
        let file = &mut *self.file.lock().unwrap_or_else(PoisonError::into_inner);
        let plane = span(reach(inner) + reach(middle));
        let whole_plane =
            plane <= SPAN_BYTES && plane <= SPAN_WASTE * wanted(lengths[inner] * lengths[middle]);
        for k in 0..lengths[outer] {
            let at = (ranges[outer].start + k) as u64 * self.strides[outer]
                + ranges[middle].start as u64 * self.strides[middle]
                + ranges[inner].start as u64 * self.strides[inner];
            let to = k * places[outer];
            if whole_plane {
                self.fetch(file, at, plane, &mut bytes)?;
            }
            for j in 0..lengths[middle] {
                let row = j as u64 * self.strides[middle];
                let to = to + j * places[middle];
                let within = if whole_plane {
                    row
                } else {
                    self.fetch(file, at + row, span(reach(inner)), &mut bytes)?;
                    0
                };
                for i in 0..lengths[inner] {
                    let pixel = within + i as u64 * self.strides[inner];
                    into[to + i * places[inner]] = self.value(&bytes, pixel);
                }
            }
        }
        Ok(())
    }

    fn fetch(
        &self,
        file: &mut File,
        pixel: u64,
        length: u64,
        bytes: &mut Vec<u8>,
    ) -> io::Result<()> {
        file.seek(SeekFrom::Start(self.start + pixel * self.stored.bytes()))?;
        bytes.resize(usize::try_from(length).map_err(io::Error::other)?, 0);
        file.read_exact(bytes)
    }

    /// The value of a pixel of `bytes`.
    // Single precision holds a spectrum's values to a ten-millionth; noise is far above.
    #[allow(clippy::cast_possible_truncation)]
    fn value(&self, bytes: &[u8], pixel: u64) -> f32 {
        // Within `bytes`, which are in memory.
        let at = usize::try_from(pixel * self.stored.bytes()).unwrap_or(usize::MAX);
        let Scaling { scale, zero, blank } = self.scaling;
        let integer = |number: i64| {
            if Some(number) == blank {
                f32::NAN
            } else {
                (zero + scale * number as f64) as f32
            }
        };
        let float = |number: f64| {
            let value = (zero + scale * number) as f32;
            if value.is_finite() { value } else { f32::NAN }
        };
        match self.stored {
            Stored::U8 => integer(bytes[at].into()),
            Stored::I16 => integer(i16::from_be_bytes(array(bytes, at)).into()),
            Stored::I32 => integer(i32::from_be_bytes(array(bytes, at)).into()),
            Stored::I64 => integer(i64::from_be_bytes(array(bytes, at))),
            Stored::F32 => float(f32::from_be_bytes(array(bytes, at)).into()),
            Stored::F64 => float(f64::from_be_bytes(array(bytes, at))),
        }
    }
}

fn array<const N: usize>(bytes: &[u8], at: usize) -> [u8; N] {
    std::array::from_fn(|index| bytes[at + index])
}
