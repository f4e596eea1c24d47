//! Lines of equal value through cells, straight from edge to edge (marching squares).

/// Column and row, between cells.
type Place = (f64, f64);

/// The pieces of a contour through a raster of values, row by row; squares with a blank corner have none.
pub(super) fn contours(
    values: &[f64],
    (width, height): (usize, usize),
    level: f64,
) -> Vec<[Place; 2]> {
    let mut pieces = Vec::new();
    for y in 0..height.saturating_sub(1) {
        for x in 0..width.saturating_sub(1) {
            let corners = [(x, y), (x + 1, y), (x + 1, y + 1), (x, y + 1)];
            let heights = corners.map(|(x, y)| values[y * width + x] - level);
            if heights.iter().any(|height| !height.is_finite()) {
                continue;
            }
            let mut crossings = Vec::with_capacity(4);
            for side in 0..4 {
                let next = (side + 1) % 4;
                let (a, b) = (heights[side], heights[next]);
                if (a > 0.0) != (b > 0.0) {
                    let share = a / (a - b);
                    let ((ax, ay), (bx, by)) = (corners[side], corners[next]);
                    let between = |a: usize, b: usize| a as f64 + share * (b as f64 - a as f64);
                    crossings.push((between(ax, bx), between(ay, by)));
                }
            }
            match crossings[..] {
                [from, to] => pieces.push([from, to]),
                // A saddle: which corners belong together, the middle says.
                [a, b, c, d] => {
                    let middle = heights.iter().sum::<f64>() > 0.0;
                    if middle == (heights[0] > 0.0) {
                        pieces.extend([[a, b], [c, d]]);
                    } else {
                        pieces.extend([[d, a], [b, c]]);
                    }
                }
                _ => {}
            }
        }
    }
    pieces
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_cone_has_round_contours_and_blank_cells_none() {
        let (width, height) = (21, 21);
        let mut values: Vec<f64> = (0..width * height)
            .map(|index| {
                let (x, y) = ((index % width) as f64 - 10.0, (index / width) as f64 - 10.0);
                10.0 - x.hypot(y)
            })
            .collect();
        let pieces = contours(&values, (width, height), 4.0);
        let length: f64 = pieces
            .iter()
            .map(|[a, b]| (a.0 - b.0).hypot(a.1 - b.1))
            .sum();
        // The circumference of a circle of 6 cells, less what straight pieces cut off.
        assert!(
            (length / (12.0 * std::f64::consts::PI) - 1.0).abs() < 0.02,
            "{length}"
        );
        for [a, b] in &pieces {
            for (x, y) in [a, b] {
                assert!(((x - 10.0).hypot(y - 10.0) - 6.0).abs() < 0.05);
            }
        }
        values.fill(f64::NAN);
        assert!(contours(&values, (width, height), 4.0).is_empty());
    }

    #[test]
    fn a_saddle_has_two_pieces_that_do_not_cross() {
        let pieces = contours(&[1.0, -1.0, -1.0, 1.2], (2, 2), 0.0);
        assert_eq!(pieces.len(), 2);
        for [a, b] in pieces {
            // Each cuts off one low corner.
            assert!((a.0 - b.0).hypot(a.1 - b.1) < 0.9);
        }
    }
}
