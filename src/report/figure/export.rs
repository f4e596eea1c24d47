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
    svg2pdf::to_pdf(
        &tree,
        svg2pdf::ConversionOptions::default(),
        svg2pdf::PageOptions { dpi: DPI },
    )
    .map_err(|error| failed(error.to_string()))
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
