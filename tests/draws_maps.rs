//! Figures of maps: what is on them, for rasters and for lone pointings.
#![cfg(feature = "figures")]
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

use inrush::read::cube::SkyBeam;
use inrush::report::figure::{
    ColourScale, MapCells, MapFigure, ScaleBar, SpectraSheet, SpectrumPanel,
};

fn raster() -> MapCells {
    let (width, height) = (7, 5);
    let value = |index: usize| ((index % width) as f64 - 3.0) * 0.1;
    let mut values: Vec<f64> = (0..width * height).map(value).collect();
    values[3] = f64::NAN;
    MapCells::Raster {
        width,
        height,
        first_arcsec: [30.0, -20.0],
        column_arcsec: [-10.0, 0.0],
        row_arcsec: [0.0, 10.0],
        contoured: (0..width * height)
            .map(|index| (index % width) as f64)
            .collect(),
        levels: vec![2.5],
        values,
    }
}

fn figure(cells: MapCells) -> MapFigure {
    MapFigure {
        title: "Lantern 7, 17:30:00.0".to_owned(),
        label: "inward speed, v_{in} (km/s)".to_owned(),
        note: "blue: as infall makes it".to_owned(),
        axes: ["offset east".to_owned(), "offset north".to_owned()],
        cells,
        colours: ColourScale::CentredBlueAbove,
        beam: Some(SkyBeam {
            major_arcsec: 15.0,
            minor_arcsec: 12.0,
            angle_deg: 30.0,
        }),
        scale_bar: Some(ScaleBar {
            arcsec: 20.0,
            label: "0.2 pc".to_owned(),
        }),
    }
}

/// Fills of all polygons, in order.
fn fills(svg: &str) -> Vec<&str> {
    svg.split("<polygon")
        .skip(1)
        .filter_map(|rest| rest.split("fill=\"").nth(1)?.split('"').next())
        .collect()
}

#[test]
fn maps_have_axes_beam_bar_and_colours_about_zero() {
    let svg = figure(raster()).svg().unwrap();
    for text in [
        "Lantern 7, 17:30:00.0",
        "offset east",
        "offset north",
        "0.2 pc",
        "\n0.0\n",
    ] {
        assert!(svg.contains(text), "{text}");
    }
    let fills = fills(&svg);
    // Seven columns in five rows, less one blank cell, and the beam.
    assert_eq!(fills.len(), 7 * 5 - 1 + 1);
    let red_and_blue = |fill: &str| {
        let byte = |at: usize| i32::from_str_radix(&fill[at..at + 2], 16).unwrap();
        (byte(1), byte(5))
    };
    // East, the first column, is negative: red here; west is blue; both equally far from white.
    let (east, west) = (red_and_blue(fills[0]), red_and_blue(fills[5]));
    assert!(east.0 > east.1 + 50 && west.1 > west.0 + 50, "{fills:?}");
    assert_eq!(svg, figure(raster()).svg().unwrap());
    let png = figure(raster()).png(400).unwrap();
    assert!(png.starts_with(b"\x89PNG"));
}

#[test]
fn lone_pointings_are_dots() {
    let points = vec![
        ([0.0, 0.0], 0.3),
        ([12.0, 5.0], -0.2),
        ([-3.0, 14.0], f64::NAN),
    ];
    let svg = figure(MapCells::Points {
        step_arcsec: 10.0,
        points,
    })
    .svg()
    .unwrap();
    assert_eq!(svg.matches("<circle").count(), 2);
}

#[test]
fn arrays_that_do_not_belong_together_are_refused() {
    let MapCells::Raster { mut values, .. } = raster() else {
        unreachable!()
    };
    values.pop();
    let mut cells = raster();
    if let MapCells::Raster { values: all, .. } = &mut cells {
        *all = values;
    }
    let message = figure(cells).svg().unwrap_err().to_string();
    assert_eq!(message, "map: 34 values, expected 35");
}

#[test]
fn spectra_stand_at_their_places() {
    let line = |peak: f64| -> Vec<(f64, f64)> {
        (-20..=20)
            .map(|step| {
                let v = f64::from(step) * 0.2;
                (
                    v,
                    if step == 3 {
                        f64::NAN
                    } else {
                        peak * (-v * v).exp()
                    },
                )
            })
            .collect()
    };
    let panel = |place, peak| SpectrumPanel {
        place,
        thick: line(peak),
        thin: line(0.2 * peak),
        models: [vec![(-1.0, 0.5), (0.0, peak), (1.0, 0.5)], Vec::new()],
    };
    let sheet = SpectraSheet {
        title: "Lantern 7".to_owned(),
        note: "both lines".to_owned(),
        size: (3, 2),
        velocity_km_s: (-3.0, 3.0),
        panels: vec![panel((0, 0), 1.0), panel((2, 1), 4.0)],
    };
    let svg = sheet.svg().unwrap();
    assert!(svg.contains("Lantern 7") && svg.contains("both lines"));
    // One curve of the thick line's model a panel; the blank channel parts each spectrum in two.
    assert_eq!(svg.matches("#C83E12").count(), 2);
    assert_eq!(svg.matches("#464C54").count(), 2 * 2);
}
