//! Tables as FITS binary tables (FITS standard 4.0: sections 4.2, 7.3 and appendix J).
//!
//! Reals are `D` with NaN where there is no value, integers `K` with TNULL, text `A` padded with
//! blanks. FITS text is printable ASCII: any other character is written as `\u{HEX}`, and a COMMENT
//! card says so. Meta data are keywords where their names allow, else HISTORY cards.

use std::fmt::Write as _;
use std::io::{self, BufReader, BufWriter, Cursor, Read, Seek, Write};

use super::{Column, Kind, ReportError, Row, Schema, Table, Value};

pub(super) const BLOCK: usize = 2880;
const CARD: usize = 80;
/// Characters between the quotes of one card's text.
const TEXT_ROOM: usize = 67;
/// Marks an integer cell without a value.
const NO_INTEGER: i64 = i64::MIN;
/// Checksum cards as they stand while the sum is taken.
const NO_CHECKSUM: &str = "0000000000000000";

/// Bytes of rows that are summed or written at a time, whole blocks.
const CHUNK: usize = 100 * BLOCK;

/// Writes a table as a FITS file: an empty primary unit and one binary table named RESULTS, both
/// with CHECKSUM and DATASUM.
///
/// # Errors
///
/// [`ReportError::TooManyColumns`] beyond 999, [`ReportError::Stream`] where the writer fails.
pub fn write_fits(table: &Table, writer: impl Write) -> Result<(), ReportError> {
    let mut rows = FitsRows::begin(table.schema(), Cursor::new(Vec::new()))?;
    for row in table.rows() {
        rows.push(row)?;
    }
    rows.finish(&table.meta, writer)
}

/// Rows taken one at a time. The header of a FITS table holds their number, the width of its texts and
/// a sum over all bytes, so rows wait in `spool` (a temporary file, or memory) until the last is there.
#[derive(Debug)]
pub(super) struct FitsRows<S: Read + Write + Seek> {
    schema: Schema,
    layout: Layout,
    spool: BufWriter<S>,
}

impl<S: Read + Write + Seek> FitsRows<S> {
    /// Begins a table without rows; `spool` is empty.
    pub(super) fn begin(schema: &Schema, spool: S) -> Result<Self, ReportError> {
        let found = schema.columns().len();
        if found > 999 {
            return Err(ReportError::TooManyColumns { found });
        }
        Ok(Self {
            schema: schema.clone(),
            layout: Layout::new(schema.columns()),
            spool: BufWriter::new(spool),
        })
    }

    pub(super) fn push(&mut self, row: &Row) -> Result<(), ReportError> {
        self.schema.check(row)?;
        let cells = self.schema.columns().iter().zip(row.values());
        for ((column, value), width) in cells.zip(&mut self.layout.widths) {
            match column.kind {
                Kind::Text => {
                    let text = value.text().unwrap_or_default();
                    self.layout.escapes |= !text.bytes().all(is_printable);
                    let text = ascii(text);
                    *width = text.len().max(*width);
                    self.spool.write_all(&(text.len() as u64).to_be_bytes())?;
                    self.spool.write_all(text.as_bytes())?;
                }
                Kind::Real => {
                    let number = value.number().unwrap_or(f64::NAN);
                    self.spool.write_all(&number.to_be_bytes())?;
                }
                Kind::Integer => {
                    let number = match value {
                        Value::Integer(number) => *number,
                        _ => NO_INTEGER,
                    };
                    self.spool.write_all(&number.to_be_bytes())?;
                }
            }
        }
        self.layout.rows += 1;
        Ok(())
    }

    /// Writes the file.
    pub(super) fn finish(
        self,
        meta: &[(String, Value)],
        mut writer: impl Write,
    ) -> Result<(), ReportError> {
        let mut primary = Header::default();
        primary.logical("SIMPLE", true);
        primary.integer("BITPIX", 8);
        primary.integer("NAXIS", 0);
        primary.logical("EXTEND", true);
        writer.write_all(&primary.unit(0))?;

        let (columns, layout) = (self.schema.columns(), &self.layout);
        let spool = self
            .spool
            .into_inner()
            .map_err(io::IntoInnerError::into_error)?;
        let mut spool = BufReader::with_capacity(CHUNK, spool);
        let mut sum = 0;
        each_chunk(&mut spool, columns, layout, |bytes| {
            sum = ones_complement_sum(sum, bytes);
            Ok(())
        })?;
        writer.write_all(&table_header(columns, meta, layout).unit(sum))?;
        each_chunk(&mut spool, columns, layout, |bytes| writer.write_all(bytes))?;
        writer.flush()?;
        Ok(())
    }
}

/// What the header says of the rows.
#[derive(Debug)]
struct Layout {
    /// Bytes of each column's field.
    widths: Vec<usize>,
    rows: u64,
    /// Whether a text has characters that are written as their code points.
    escapes: bool,
}

impl Layout {
    fn new(columns: &[Column]) -> Self {
        let width = |column: &Column| if column.kind == Kind::Text { 1 } else { 8 };
        Self {
            widths: columns.iter().map(width).collect(),
            rows: 0,
            escapes: false,
        }
    }
}

/// The data of the table from the spool's start, whole blocks at a time, padded to whole blocks.
fn each_chunk(
    spool: &mut (impl Read + Seek),
    columns: &[Column],
    layout: &Layout,
    mut take: impl FnMut(&[u8]) -> io::Result<()>,
) -> io::Result<()> {
    spool.rewind()?;
    let mut bytes = Vec::with_capacity(CHUNK);
    for _ in 0..layout.rows {
        for (column, &width) in columns.iter().zip(&layout.widths) {
            let mut eight = [0; 8];
            spool.read_exact(&mut eight)?;
            if column.kind == Kind::Text {
                let start = bytes.len();
                let length = usize::try_from(u64::from_be_bytes(eight)).unwrap_or(usize::MAX);
                bytes.resize(start + width, b' ');
                spool.read_exact(&mut bytes[start..start + length])?;
            } else {
                bytes.extend_from_slice(&eight);
            }
        }
        if bytes.len() >= CHUNK {
            let whole = bytes.len() / BLOCK * BLOCK;
            take(&bytes[..whole])?;
            bytes.drain(..whole);
        }
    }
    bytes.resize(bytes.len().next_multiple_of(BLOCK), 0);
    take(&bytes)
}

fn table_header(columns: &[Column], meta: &[(String, Value)], layout: &Layout) -> Header {
    let mut header = Header::default();
    header.text("XTENSION", "BINTABLE");
    header.integer("BITPIX", 8);
    header.integer("NAXIS", 2);
    header.integer("NAXIS1", layout.widths.iter().sum::<usize>() as u64);
    header.integer("NAXIS2", layout.rows);
    header.integer("PCOUNT", 0);
    header.integer("GCOUNT", 1);
    header.integer("TFIELDS", columns.len() as u64);
    header.text("EXTNAME", "RESULTS");
    for (index, (column, &width)) in columns.iter().zip(&layout.widths).enumerate() {
        column_cards(&mut header, index + 1, column, width);
    }
    let mut history = Vec::new();
    for (key, value) in meta {
        match keyword(key) {
            Some(keyword) if !header.has(&keyword) => header.value(&keyword, value),
            _ => history.push(format!("{key} = {}", super::csv::cell(value))),
        }
    }
    for line in history {
        header.commentary("HISTORY", &line);
    }
    if layout.escapes || has_escapes(meta) {
        header.commentary(
            "COMMENT",
            "Characters other than printable ASCII are written as \\u{HEX}, their code points.",
        );
    }
    header
}

fn column_cards(header: &mut Header, number: usize, column: &Column, width: usize) {
    header.text(&format!("TTYPE{number}"), &column.name);
    let form = match column.kind {
        Kind::Text => format!("{width}A"),
        Kind::Real => "D".to_owned(),
        Kind::Integer => "K".to_owned(),
    };
    header.text(&format!("TFORM{number}"), &form);
    if let Some(unit) = &column.unit {
        header.text(&format!("TUNIT{number}"), unit);
    }
    match (column.kind, column.unit.as_deref()) {
        (Kind::Real, Some("yr" | "solMass/yr" | "solMass" | "cm-2" | "cm-3")) => {
            header.text(&format!("TDISP{number}"), "E12.4");
        }
        (Kind::Real, _) => header.text(&format!("TDISP{number}"), "F12.4"),
        (Kind::Integer, _) => header.card(&format!(
            "{:<8}= {NO_INTEGER:>20}",
            format!("TNULL{number}")
        )),
        (Kind::Text, _) => {}
    }
    header.text(&format!("TCOMM{number}"), &column.description);
}

/// A name of meta data as a FITS keyword, where it can be one that means nothing else.
fn keyword(name: &str) -> Option<String> {
    const TAKEN: [&str; 9] = [
        "COMMENT", "HISTORY", "CONTINUE", "END", "SIMPLE", "EXTEND", "CHECKSUM", "DATASUM", "THEAP",
    ];
    let keyword = name.to_ascii_uppercase();
    let allowed = !keyword.is_empty()
        && keyword.len() <= 8
        && keyword.bytes().all(|byte| {
            byte.is_ascii_uppercase() || byte.is_ascii_digit() || byte == b'_' || byte == b'-'
        });
    // Keywords of a table's columns end in digits, those of its axes too.
    let indexed = keyword.ends_with(|character: char| character.is_ascii_digit());
    (allowed && !indexed && !TAKEN.contains(&keyword.as_str())).then_some(keyword)
}

fn has_escapes(meta: &[(String, Value)]) -> bool {
    let values = meta.iter().filter_map(|(_, value)| value.text());
    let mut texts = values.chain(meta.iter().map(|(key, _)| key.as_str()));
    texts.any(|text| !text.bytes().all(is_printable))
}

fn is_printable(byte: u8) -> bool {
    (b' '..=b'~').contains(&byte)
}

/// Printable ASCII; anything else as `\u{HEX}`.
fn ascii(text: &str) -> String {
    let mut result = String::with_capacity(text.len());
    for character in text.chars() {
        if u8::try_from(character).is_ok_and(is_printable) {
            result.push(character);
        } else {
            result.extend(character.escape_unicode());
        }
    }
    result
}

/// The cards of one header and data unit.
#[derive(Default)]
pub(super) struct Header {
    cards: String,
}

impl Header {
    /// One card, padded with blanks.
    fn card(&mut self, text: &str) {
        let _ = write!(self.cards, "{text:<CARD$}");
    }

    fn has(&self, keyword: &str) -> bool {
        let name = format!("{keyword:<8}");
        (0..self.cards.len())
            .step_by(CARD)
            .any(|start| self.cards[start..].starts_with(&name))
    }

    pub(super) fn logical(&mut self, keyword: &str, value: bool) {
        let value = if value { "T" } else { "F" };
        self.card(&format!("{keyword:<8}= {value:>20}"));
    }

    pub(super) fn integer(&mut self, keyword: &str, value: u64) {
        self.card(&format!("{keyword:<8}= {value:>20}"));
    }

    pub(super) fn value(&mut self, keyword: &str, value: &Value) {
        match value {
            Value::Text(text) => self.text(keyword, text),
            Value::Real(number) => {
                let text = format!("{number:?}").replace('e', "E");
                self.card(&format!("{keyword:<8}= {text:>20}"));
            }
            Value::Integer(number) => self.card(&format!("{keyword:<8}= {number:>20}")),
            Value::Empty => self.card(&format!("{keyword:<8}=")),
        }
    }

    /// A text value, over CONTINUE cards where it is long (standard 4.0, section 4.2.1.2).
    pub(super) fn text(&mut self, keyword: &str, text: &str) {
        let quoted = ascii(text).replace('\'', "''");
        let pieces = pieces(&quoted);
        let last = pieces.len() - 1;
        for (index, piece) in pieces.iter().enumerate() {
            let start = if index == 0 {
                format!("{keyword:<8}= ")
            } else {
                "CONTINUE  ".to_owned()
            };
            let more = if index < last { "&" } else { "" };
            self.card(&format!("{start}'{:<8}'", format!("{piece}{more}")));
        }
    }

    pub(super) fn commentary(&mut self, keyword: &str, text: &str) {
        let text = ascii(text);
        for start in (0..text.len()).step_by(CARD - 8) {
            let end = text.len().min(start + CARD - 8);
            self.card(&format!("{keyword:<8}{}", &text[start..end]));
        }
    }

    /// The header's bytes with its checksums, padded to whole blocks; `data_sum` is that of its data.
    pub(super) fn unit(&self, data_sum: u32) -> Vec<u8> {
        let bytes = |checksum: &str| {
            let mut header = Self {
                cards: self.cards.clone(),
            };
            header.card(&format!("CHECKSUM= '{checksum}'"));
            header.card(&format!("DATASUM = '{data_sum:<8}'"));
            header.card("END");
            let mut bytes = header.cards.into_bytes();
            bytes.resize(bytes.len().next_multiple_of(BLOCK), b' ');
            bytes
        };
        let sum = ones_complement_sum(data_sum, &bytes(NO_CHECKSUM));
        bytes(&encoded(!sum))
    }
}

/// Cuts a text with doubled quotes into the parts of a long value, never between two quotes.
fn pieces(text: &str) -> Vec<&str> {
    let mut pieces = Vec::new();
    let mut rest = text;
    while rest.len() > TEXT_ROOM + 1 {
        let mut cut = TEXT_ROOM;
        let quotes = rest[..cut].bytes().rev().take_while(|&byte| byte == b'\'');
        if quotes.count() % 2 == 1 {
            cut -= 1;
        }
        pieces.push(&rest[..cut]);
        rest = &rest[cut..];
    }
    pieces.push(rest);
    pieces
}

/// The 32-bit ones' complement sum of appendix J, continued from `sum`; whole 4-byte words.
pub(super) fn ones_complement_sum(sum: u32, bytes: &[u8]) -> u32 {
    let mut total = u64::from(sum);
    for word in bytes.chunks_exact(4) {
        total += u64::from(u32::from_be_bytes([word[0], word[1], word[2], word[3]]));
        total = (total & 0xffff_ffff) + (total >> 32);
    }
    u32::try_from(total & 0xffff_ffff).unwrap_or(u32::MAX)
}

/// A checksum's 16 characters (appendix J): each byte spread over four letters or digits.
fn encoded(value: u32) -> String {
    const OFFSET: u8 = b'0';
    let mut ascii = [0u8; 16];
    for (index, byte) in value.to_be_bytes().into_iter().enumerate() {
        let quarter = byte / 4 + OFFSET;
        let mut four = [quarter + byte % 4, quarter, quarter, quarter];
        while four.iter().any(|byte| !byte.is_ascii_alphanumeric()) {
            for pair in four.chunks_exact_mut(2) {
                if pair.iter().any(|byte| !byte.is_ascii_alphanumeric()) {
                    pair[0] += 1;
                    pair[1] -= 1;
                }
            }
        }
        for (column, byte) in four.into_iter().enumerate() {
            ascii[4 * column + index] = byte;
        }
    }
    ascii.rotate_right(1);
    ascii.iter().map(|&byte| char::from(byte)).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn long_texts_are_cut_outside_of_doubled_quotes() {
        let text = format!("{}''{}", "a".repeat(TEXT_ROOM - 1), "b".repeat(100));
        let pieces = pieces(&text);
        assert_eq!(pieces.concat(), text);
        assert!(
            pieces
                .iter()
                .all(|piece| piece.matches('\'').count() % 2 == 0)
        );
        assert!(pieces.iter().all(|piece| piece.len() <= TEXT_ROOM + 1));
    }

    /// A format's width ends at 65535, a header need not.
    #[test]
    fn headers_of_more_than_64_kilobytes_are_padded_with_blanks() {
        let mut header = Header::default();
        for number in 0..900 {
            header.integer(&format!("KEY{number}"), number);
        }
        let unit = header.unit(0);
        assert!(unit.len() > 65_536 && unit.len() % BLOCK == 0);
        let blanks = unit.iter().rev().take_while(|byte| **byte == b' ').count();
        assert_eq!(&unit[unit.len() - blanks - 3..unit.len() - blanks], b"END");
    }

    #[test]
    fn sums_of_whole_units_vanish() {
        // Appendix J: with its CHECKSUM in place, a unit's sum is all ones (minus zero).
        let mut header = Header::default();
        header.text("XTENSION", "BINTABLE");
        let data = vec![7u8; BLOCK];
        let data_sum = ones_complement_sum(0, &data);
        assert_eq!(
            ones_complement_sum(data_sum, &header.unit(data_sum)),
            u32::MAX
        );
    }
}
