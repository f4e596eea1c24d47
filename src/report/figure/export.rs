//! The SVG document as PNG and PDF, with the typeface from the program itself.

use std::sync::{Arc, OnceLock};

use resvg::tiny_skia::{Color, Pixmap, Transform};
use resvg::usvg::{Options, Tree, fontdb};

use super::text::{FAMILY, REGULAR, SEMIBOLD};
use crate::report::ReportError;

/// Resolution at which SVG lengths in millimetres become pixels.
const DPI: f32 = 96.0;

pub(super) fn png(svg: &str, width_px: u32) -> Result<Vec<u8>, ReportError> {
    let failed = |reason: String| ReportError::Drawing {
        format: "PNG",
        reason,
    };
    let tree = tree(svg).map_err(failed)?;
    let scale = f64::from(width_px) / f64::from(tree.size().width());
    let height = f64::from(tree.size().height()) * scale;
    #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
    let height_px = height.round() as u32;
    let mut image = Pixmap::new(width_px, height_px)
        .ok_or_else(|| failed(format!("{width_px} x {height_px} pixels are no image size")))?;
    image.fill(Color::WHITE);
    #[allow(clippy::cast_possible_truncation)]
    let scale = scale as f32;
    resvg::render(
        &tree,
        Transform::from_scale(scale, scale),
        &mut image.as_mut(),
    );
    image
        .encode_png()
        .map_err(|error| failed(error.to_string()))
}

pub(super) fn pdf(svg: &str) -> Result<Vec<u8>, ReportError> {
    let failed = |reason: String| ReportError::Drawing {
        format: "PDF",
        reason,
    };
    let tree = tree(svg).map_err(failed)?;
    let options = svg2pdf::ConversionOptions::default();
    let page = svg2pdf::PageOptions { dpi: DPI };
    for _ in 0..MOST_CONVERSIONS {
        let bytes =
            svg2pdf::to_pdf(&tree, options, page).map_err(|error| failed(error.to_string()))?;
        if fonts_are_in_order(&bytes) {
            return Ok(bytes);
        }
    }
    Err(failed(format!(
        "fonts are out of order in {MOST_CONVERSIONS} conversions"
    )))
}

/// The library writes fonts, and the dictionary that names them, in the order of randomly seeded
/// maps. With two faces a figure becomes one of four byte sequences; only the one in order is
/// returned, so that it is the same each time. The chance to miss it this often is (3/4)^200 = 1e-25.
const MOST_CONVERSIONS: usize = 200;

fn fonts_are_in_order(pdf: &[u8]) -> bool {
    let position = |name: &[u8]| pdf.windows(name.len()).position(|window| window == name);
    let ascend = |first: &[u8], second: &[u8]| match (position(first), position(second)) {
        (Some(first), Some(second)) => first < second,
        _ => true,
    };
    ascend(b"+IBMPlexSans\n", b"+IBMPlexSans-SmBld\n") && ascend(b"/fo0 ", b"/fo1 ")
}

fn tree(svg: &str) -> Result<Tree, String> {
    let options = Options {
        dpi: DPI,
        font_family: FAMILY.to_owned(),
        fontdb: fonts(),
        ..Options::default()
    };
    Tree::from_str(svg, &options).map_err(|error| error.to_string())
}

/// The typeface, read when the first figure needs it.
fn fonts() -> Arc<fontdb::Database> {
    static FONTS: OnceLock<Arc<fontdb::Database>> = OnceLock::new();
    let database = FONTS.get_or_init(|| {
        let mut database = fontdb::Database::new();
        for bytes in [REGULAR, SEMIBOLD] {
            database.load_font_source(fontdb::Source::Binary(Arc::new(bytes)));
        }
        // Whatever a viewer would fall back to is this typeface here.
        database.set_sans_serif_family(FAMILY);
        Arc::new(database)
    });
    Arc::clone(database)
}
