//! What can be wrong with a file, one variant a case, with the evidence.

use std::fmt;
use std::path::PathBuf;

/// Where in a file something stands; `Display` continues the file's name, as in `:12` and
/// `: HDU 1, row 3`.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Place {
    /// A line of text, from 1.
    Line(usize),
    /// A row of a FITS table, from 1.
    Row {
        /// Header-data unit, from 0 (the primary one).
        unit: usize,
        /// Row, from 1.
        row: usize,
    },
    /// A channel of a FITS image or vector, from 1.
    Channel {
        /// Header-data unit, from 0.
        unit: usize,
        /// Channel, from 1.
        channel: usize,
    },
    /// A card of a FITS header, or a table column that stands for one.
    Card {
        /// Header-data unit, from 0.
        unit: usize,
        /// Keyword.
        keyword: String,
    },
}

impl fmt::Display for Place {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Place::Line(line) => write!(formatter, ":{line}"),
            Place::Row { unit, row } => write!(formatter, ": HDU {unit}, row {row}"),
            Place::Channel { unit, channel } => {
                write!(formatter, ": HDU {unit}, channel {channel}")
            }
            Place::Card { unit, keyword } => write!(formatter, ": HDU {unit}, card {keyword}"),
        }
    }
}

/// Why a file does not give a spectrum. `Display` says where, what was found and what was
/// expected; [`ReadError::hint`] says what to do.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum ReadError {
    /// There is no such file.
    #[error("{}: no such file", path.display())]
    Missing {
        /// The file.
        path: PathBuf,
    },
    /// The file cannot be read.
    #[error("{}: cannot be read: {reason}", path.display())]
    Unreadable {
        /// The file.
        path: PathBuf,
        /// What the operating system says.
        reason: String,
    },
    /// The file has no content.
    #[error("{}: the file is empty, expected a spectrum", path.display())]
    Empty {
        /// The file.
        path: PathBuf,
    },
    /// The file is larger than a file with a spectrum can be.
    #[error("{}: more than {limit_bytes} bytes (unpacked), expected at most that", path.display())]
    TooLarge {
        /// The file.
        path: PathBuf,
        /// The limit.
        limit_bytes: u64,
    },
    /// The gzip stream is damaged.
    #[error("{}: damaged gzip stream ({reason}), expected a whole .gz file", path.display())]
    DamagedGzip {
        /// The file.
        path: PathBuf,
        /// What the decoder says.
        reason: String,
    },
    /// The content is neither FITS nor text.
    #[error("{}: starts with {found}, expected FITS (`SIMPLE  =`) or text", path.display())]
    Unrecognised {
        /// The file.
        path: PathBuf,
        /// The first bytes, in words.
        found: String,
    },
    /// A file with the name of a FITS file that is none.
    #[error("{}: starts with `{found}`, expected FITS (`SIMPLE  =`) by its name", path.display())]
    NotFits {
        /// The file.
        path: PathBuf,
        /// The beginning of its first line.
        found: String,
    },
    /// Text in another encoding than UTF-8.
    #[error("{}:{line}: byte {found:#04x}, expected text in UTF-8", path.display())]
    NotUtf8 {
        /// The file.
        path: PathBuf,
        /// The line.
        line: usize,
        /// The first byte that is no UTF-8.
        found: u8,
    },
    /// The text holds no rows of data.
    #[error("{}: no rows of data, expected at least two channels", path.display())]
    NoRows {
        /// The file.
        path: PathBuf,
    },
    /// A text with a single column.
    #[error("{}:{line}: one column (`{found}`), expected two: velocity or frequency, and temperature", path.display())]
    OneColumn {
        /// The file.
        path: PathBuf,
        /// The line.
        line: usize,
        /// What stands there.
        found: String,
    },
    /// A row with another number of fields than the first.
    #[error("{}:{line}: {found} fields, expected {expected}", path.display())]
    FieldCount {
        /// The file.
        path: PathBuf,
        /// The line.
        line: usize,
        /// Fields in this line.
        found: usize,
        /// Fields in the header or first row.
        expected: usize,
    },
    /// Text in a number's place.
    #[error("{}{place}: `{found}` in column `{column}`, expected a number", path.display())]
    NotANumber {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The column.
        column: String,
        /// What stands there.
        found: String,
    },
    /// A decimal comma.
    #[error("{}:{line}: `{found}` has a decimal comma, expected a decimal point", path.display())]
    DecimalComma {
        /// The file.
        path: PathBuf,
        /// The line.
        line: usize,
        /// What stands there.
        found: String,
    },
    /// Semicolons and another separator in one line of column names or data.
    #[error("{}:{line}: both `;` and `,` in `{found}`, expected one separator", path.display())]
    MixedSeparators {
        /// The file.
        path: PathBuf,
        /// The line.
        line: usize,
        /// The line's text.
        found: String,
    },
    /// Numbers without column names, and no choice of columns.
    #[error("{}:{line}: {columns} columns without names, expected column names with units", path.display())]
    UnnamedColumns {
        /// The file.
        path: PathBuf,
        /// The first line of numbers.
        line: usize,
        /// Number of columns.
        columns: usize,
    },
    /// A chosen column does not exist.
    #[error("{}: no column {wanted}, expected one of {columns}", path.display())]
    NoSuchColumn {
        /// The file.
        path: PathBuf,
        /// The wanted column.
        wanted: String,
        /// The columns there are.
        columns: String,
        /// The nearest one.
        nearest: Option<String>,
    },
    /// No column plays a needed part.
    #[error("{}{place}: no {role} column among {columns}, expected one such as {expected}", path.display())]
    NoColumnFor {
        /// The file.
        path: PathBuf,
        /// Where the columns are named.
        place: Place,
        /// The part, in words.
        role: &'static str,
        /// The columns there are.
        columns: String,
        /// Names that would do.
        expected: &'static str,
        /// The nearest name that would do.
        nearest: Option<String>,
    },
    /// More than one column could play a part.
    #[error("{}{place}: several {role} columns ({columns}), expected one", path.display())]
    SeveralColumnsFor {
        /// The file.
        path: PathBuf,
        /// Where the columns are named.
        place: Place,
        /// The part, in words.
        role: &'static str,
        /// The candidates.
        columns: String,
    },
    /// A unit that is not known.
    #[error("{}{place}: unknown unit `{found}`, expected one of {expected}", path.display())]
    UnknownUnit {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The unit.
        found: String,
        /// The known ones.
        expected: String,
        /// The nearest known one.
        nearest: Option<String>,
    },
    /// A unit that is not stated.
    #[error("{}{place}: no unit for the {role}, expected one of {expected}", path.display())]
    NoUnit {
        /// The file.
        path: PathBuf,
        /// Where it should be.
        place: Place,
        /// What it is the unit of.
        role: &'static str,
        /// The known ones.
        expected: &'static str,
    },
    /// A column's name and its unit disagree.
    #[error("{}{place}: column `{column}` has the unit `{unit}`, expected the one in its name", path.display())]
    UnitContradictsName {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The column.
        column: String,
        /// Its stated unit.
        unit: String,
    },
    /// An ECSV header that cannot be understood.
    #[error("{}:{line}: {found} in the ECSV header, expected {expected}", path.display())]
    EcsvHeader {
        /// The file.
        path: PathBuf,
        /// The line.
        line: usize,
        /// What stands there.
        found: String,
        /// What should.
        expected: &'static str,
    },
    /// A velocity or frequency that is blank or not finite.
    #[error("{}{place}: blank velocity or frequency, expected a number in every channel", path.display())]
    BlankAxis {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
    },
    /// A velocity or frequency twice in a row.
    #[error("{}{place}: {value} repeats the channel before, expected strictly ascending or descending velocities or frequencies", path.display())]
    RepeatedAxis {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The value in the file's unit.
        value: f64,
    },
    /// Velocities or frequencies out of order.
    #[error("{}{place}: {value} after {previous}, expected strictly ascending or descending velocities or frequencies", path.display())]
    UnsortedAxis {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The value in the file's unit.
        value: f64,
        /// The one before it.
        previous: f64,
    },
    /// Too few channels to have widths.
    #[error("{}: {channels} channel(s), expected at least two", path.display())]
    TooFewChannels {
        /// The file.
        path: PathBuf,
        /// Number of channels.
        channels: usize,
    },
    /// Axis and values differ in length.
    #[error("{}{place}: {axis} axis values for {values} channels, expected as many", path.display())]
    LengthMismatch {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// Number of axis values.
        axis: usize,
        /// Number of channels.
        values: usize,
    },
    /// No channel holds a number.
    #[error("{}: all {channels} channels are blank, expected numbers", path.display())]
    AllBlank {
        /// The file.
        path: PathBuf,
        /// Number of channels.
        channels: usize,
    },
    /// Every channel holds the same number.
    #[error("{}: all {channels} channels hold {value}, expected a spectrum with noise", path.display())]
    Constant {
        /// The file.
        path: PathBuf,
        /// Number of channels that hold a number.
        channels: usize,
        /// The number, in the file's unit.
        value: f64,
    },
    /// A FITS header without END.
    #[error("{}: HDU {unit}: {cards} cards and no END, expected an END card", path.display())]
    FitsNoEnd {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// Cards seen.
        cards: usize,
    },
    /// A FITS header with bytes that are not printable ASCII.
    #[error("{}: HDU {unit}: byte {found:#04x} in card {card}, expected printable ASCII up to an END card", path.display())]
    FitsHeaderByte {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// Number of the card, from 1.
        card: usize,
        /// The byte.
        found: u8,
    },
    /// A FITS card with an impossible value.
    #[error("{}: HDU {unit}, card {keyword}: {found}, expected {expected}", path.display())]
    FitsCard {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// Keyword.
        keyword: String,
        /// Its value, or `nothing`.
        found: String,
        /// What it should be.
        expected: String,
    },
    /// Less data than the FITS header promises.
    #[error("{}: HDU {unit}: {shape} need {needed_bytes} bytes of data, but the file holds {found_bytes}; expected a whole file", path.display())]
    FitsTruncated {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// The cards that say how much.
        shape: String,
        /// Bytes promised.
        needed_bytes: u128,
        /// Bytes there.
        found_bytes: u64,
    },
    /// No header-data unit holds a spectrum.
    #[error("{}: no spectrum among {units}, expected an image with one spectral axis or a binary table", path.display())]
    FitsNoSpectrum {
        /// The file.
        path: PathBuf,
        /// The units, in words.
        units: String,
    },
    /// Several header-data units hold data.
    #[error("{}: several HDUs with data ({units}), expected one", path.display())]
    FitsSeveralUnits {
        /// The file.
        path: PathBuf,
        /// The units, in words.
        units: String,
    },
    /// An image with more than one axis longer than 1.
    #[error("{}: HDU {unit}: an image of {shape}, expected one axis longer than 1", path.display())]
    FitsManyAxes {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// The axes, in words.
        shape: String,
    },
    /// A vector column whose cells have more than one axis longer than 1, or a first axis of 1.
    #[error(
        "{}: HDU {unit}, card {keyword}: cells of {shape}, expected one axis longer than 1, the first",
        path.display()
    )]
    FitsCellAxes {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// Keyword.
        keyword: String,
        /// Its value.
        shape: String,
    },
    /// A spectral axis of a kind that is not read.
    #[error("{}: HDU {unit}, card {keyword}: axis type `{found}`, expected FREQ, VRAD, VOPT or VELO", path.display())]
    FitsAxisType {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// Keyword.
        keyword: String,
        /// Its value.
        found: String,
    },
    /// A compressed image.
    #[error("{}: HDU {unit}: a tile-compressed image (ZIMAGE = T), expected an uncompressed one", path.display())]
    FitsTileCompressed {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
    },
    /// A pointing twice in a table.
    #[error("{}:{line}: {what} stands in line {before} already, expected each once", path.display())]
    RepeatedPointing {
        /// The table.
        path: PathBuf,
        /// The line.
        line: usize,
        /// The name or the position.
        what: String,
        /// The line that has it too.
        before: usize,
    },
    /// An image whose axes are none of a cube.
    #[error("{}: HDU {unit}: axes {found}, expected RA and DEC or GLON and GLAT, a spectral one, and others of length 1", path.display())]
    FitsCubeAxes {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// Types and lengths of the axes, in words.
        found: String,
    },
    /// A compressed image that cannot be decoded right.
    #[error("{}: HDU {unit}: a tile-compressed image: {reason}", path.display())]
    FitsTiles {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// What is wrong, found and expected.
        reason: String,
    },
    /// No room to unpack a file.
    #[error("{}: cannot be unpacked in {}: {reason}", path.display(), scratch.display())]
    NoScratch {
        /// The file.
        path: PathBuf,
        /// The folder for temporary files.
        scratch: PathBuf,
        /// What the operating system says.
        reason: String,
    },
    /// A variable-length column.
    #[error("{}: HDU {unit}, column `{column}`: variable-length arrays ({format}), expected fixed-length ones", path.display())]
    FitsVariableLength {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// The column.
        column: String,
        /// Its TFORM.
        format: String,
    },
    /// A table of several spectra, and no choice of a row.
    #[error("{}: HDU {unit}: {rows} spectra, one a row, expected a choice of one", path.display())]
    FitsManyRows {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// Number of rows.
        rows: usize,
        /// Columns that could choose.
        columns: String,
    },
    /// No row, or more than one, fits the choice.
    #[error("{}: HDU {unit}: {found} fit `{wanted}`, expected exactly one of {rows}", path.display())]
    FitsRowChoice {
        /// The file.
        path: PathBuf,
        /// Header-data unit, from 0.
        unit: usize,
        /// The choice.
        wanted: String,
        /// The rows that fit, in words.
        found: String,
        /// Number of rows.
        rows: usize,
        /// The nearest value that there is.
        nearest: Option<String>,
    },
    /// A choice of a row for a file that has a single spectrum.
    #[error("{}: a choice of a row (`{wanted}`), but the file is no table of one spectrum a row", path.display())]
    RowChoiceUnused {
        /// The file.
        path: PathBuf,
        /// The choice.
        wanted: String,
    },
}

impl ReadError {
    /// What to do about it, where there is something to say.
    pub fn hint(&self) -> Option<String> {
        let nearest_or = |nearest: &Option<String>, other: &str| match nearest {
            Some(name) => format!("did you mean `{name}`?"),
            None => other.to_string(),
        };
        Some(match self {
            ReadError::Missing { .. } => "check the name and the folder".into(),
            ReadError::Unreadable { .. } => "check that it is a file and that you may read it".into(),
            ReadError::Empty { .. } => "write or download it again".into(),
            ReadError::TooLarge { .. } => "cut the spectrum out of the file".into(),
            ReadError::DamagedGzip { .. } | ReadError::FitsTruncated { .. } => {
                "the file is damaged or incomplete: copy or download it again".into()
            }
            ReadError::Unrecognised { .. } => {
                "give CSV, ECSV, plain columns or FITS, or one of these as .gz".into()
            }
            ReadError::NotFits { .. } => {
                "call a text file .csv or .txt; a FITS file that begins like this is damaged".into()
            }
            ReadError::NotUtf8 { .. } => {
                "save the file as UTF-8, or use plain ASCII in names and comments".into()
            }
            ReadError::NoRows { .. } => "check that the data are not all behind `#`".into(),
            ReadError::OneColumn { .. } => {
                "separate columns by commas, `;`, tabs or blanks, and name the units".into()
            }
            ReadError::FieldCount { .. } => "leave a blank value empty, but keep its comma".into(),
            ReadError::NotANumber { .. } => {
                "leave blank channels empty or write nan; start comments with #".into()
            }
            ReadError::DecimalComma { .. } => "write 1.5, not 1,5".into(),
            ReadError::MixedSeparators { .. } => "use commas between columns".into(),
            ReadError::UnnamedColumns { .. } => {
                "say which columns they are with --columns \"1:km/s,2:K\", or put a line such as `velocity_km_s,tmb_k` on top".into()
            }
            ReadError::NoSuchColumn { nearest, .. } => {
                nearest_or(nearest, "choose columns by name or by number from 1")
            }
            ReadError::NoColumnFor { nearest, .. } => {
                nearest_or(nearest, "rename the column or choose it with --columns")
            }
            ReadError::SeveralColumnsFor { .. } => {
                "choose with --columns \"NAME:UNIT,NAME:UNIT\"".into()
            }
            ReadError::UnknownUnit { nearest, .. } => {
                nearest_or(nearest, "convert the data to a known unit")
            }
            ReadError::NoUnit { .. } => "state it in the file, or give it as an option".into(),
            ReadError::UnitContradictsName { .. } => "rename the column or correct its unit".into(),
            ReadError::EcsvHeader { .. } => "write it with a table library, or as plain CSV".into(),
            ReadError::BlankAxis { .. } => "every channel needs its velocity or frequency, blank values too".into(),
            ReadError::RepeatedAxis { .. } | ReadError::UnsortedAxis { .. } => {
                "sort the channels, and give each velocity once".into()
            }
            ReadError::TooFewChannels { .. } | ReadError::AllBlank { .. } => {
                "check that this is the spectrum that you meant".into()
            }
            ReadError::LengthMismatch { .. } => "axis and values must be of one spectrum".into(),
            ReadError::Constant { .. } => "check the column: real data have noise".into(),
            ReadError::FitsNoEnd { .. } | ReadError::FitsHeaderByte { .. } => {
                "the header is damaged: copy or download the file again".into()
            }
            ReadError::FitsCard { .. } => "correct the card".into(),
            ReadError::FitsNoSpectrum { .. } => "check that this is the file that you meant".into(),
            ReadError::FitsSeveralUnits { .. } => "choose one by its number (0 is the primary HDU)".into(),
            ReadError::FitsCellAxes { .. } => "write one spectrum a cell".into(),
            ReadError::FitsManyAxes { .. } => "cut out the spectrum of one position".into(),
            ReadError::FitsAxisType { .. } => "convert the axis to frequency or velocity".into(),
            ReadError::FitsTileCompressed { .. } => "uncompress the image first".into(),
            ReadError::RepeatedPointing { .. } => {
                "average spectra of one position, or leave one out".into()
            }
            ReadError::FitsCubeAxes { .. } => "check that this is the cube that you meant".into(),
            ReadError::FitsTiles { .. } => "uncompress the image first".into(),
            ReadError::NoScratch { .. } => "make room, or uncompress the file elsewhere".into(),
            ReadError::FitsVariableLength { .. } => "write the column with a fixed length".into(),
            ReadError::FitsManyRows { columns, .. } => {
                format!("choose a row by number, or by COLUMN=VALUE with one of {columns}")
            }
            ReadError::FitsRowChoice { nearest, .. } => {
                nearest_or(nearest, "choose by a column whose values differ, or by row number")
            }
            ReadError::RowChoiceUnused { .. } => "leave the choice out".into(),
        })
    }
}
