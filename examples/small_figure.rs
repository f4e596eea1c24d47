//! Draws a figure that `inrush fit` wrote as SVG as a PNG of few bytes, for pages like the README.
//!
//!     cargo run --release --example small_figure -- results/pair.svg docs/images/lantern7.png

use flate2::{Compression, Crc, write::ZlibEncoder};
use inrush::report::figure::svg_to_png;
use inrush::report::files::write_atomically;
use resvg::tiny_skia::Pixmap;
use std::io::Write;

const WIDTH_PX: u32 = 1200;

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let [svg, png] = &arguments[..] else {
        return Err("expected FILE.svg FILE.png".into());
    };
    let drawn = svg_to_png(&std::fs::read_to_string(svg)?, WIDTH_PX)?;
    let bytes = unfiltered(&Pixmap::decode_png(&drawn)?)?;
    write_atomically(png.as_ref(), |writer| Ok(writer.write_all(&bytes)?))?;
    Ok(())
}

/// An opaque image as PNG (ISO/IEC 15948) without row filters: flat areas and repeated rows, which
/// figures are made of, pack best so.
fn unfiltered(image: &Pixmap) -> std::io::Result<Vec<u8>> {
    let mut rows = ZlibEncoder::new(Vec::new(), Compression::best());
    for row in image.pixels().chunks(image.width() as usize) {
        rows.write_all(&[0])?;
        for pixel in row {
            rows.write_all(&[pixel.red(), pixel.green(), pixel.blue()])?;
        }
    }
    // eight bits a channel, three channels
    let mut header = [image.width().to_be_bytes(), image.height().to_be_bytes()].concat();
    header.extend([8, 2, 0, 0, 0]);
    let mut png = b"\x89PNG\r\n\x1a\n".to_vec();
    for (kind, data) in [
        (b"IHDR", header),
        (b"IDAT", rows.finish()?),
        (b"IEND", Vec::new()),
    ] {
        let mut sum = Crc::new();
        sum.update(kind);
        sum.update(&data);
        png.extend(u32::try_from(data.len()).unwrap_or(u32::MAX).to_be_bytes());
        png.extend(kind);
        png.extend(&data);
        png.extend(sum.sum().to_be_bytes());
    }
    Ok(png)
}
