//! Small symmetric matrices: Cholesky factors, their inverses, products.

/// Most coordinates of a density.
pub const MOST_DIMENSIONS: usize = 12;

/// Coordinates; those beyond a density's own are zero.
pub type Point = [f64; MOST_DIMENSIONS];

/// A square matrix by rows; rows and columns beyond a density's own are zero.
pub type Matrix = [[f64; MOST_DIMENSIONS]; MOST_DIMENSIONS];

/// Lower triangle L with L L^T = `matrix`; `None` where it is not positive definite.
pub(super) fn cholesky(matrix: &Matrix, dimensions: usize) -> Option<Matrix> {
    let mut lower = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
    for i in 0..dimensions {
        for j in 0..=i {
            let inner: f64 = (0..j).map(|k| lower[i][k] * lower[j][k]).sum();
            let rest = matrix[i][j] - inner;
            if i == j {
                if !(rest > 0.0 && rest.is_finite()) {
                    return None;
                }
                lower[i][i] = rest.sqrt();
            } else {
                lower[i][j] = rest / lower[j][j];
            }
        }
    }
    Some(lower)
}

/// Inverse of a lower triangle.
pub(super) fn inverse_lower(lower: &Matrix, dimensions: usize) -> Matrix {
    let mut inverse = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
    for column in 0..dimensions {
        inverse[column][column] = 1.0 / lower[column][column];
        for row in column + 1..dimensions {
            let sum: f64 = (column..row)
                .map(|k| lower[row][k] * inverse[k][column])
                .sum();
            inverse[row][column] = -sum / lower[row][row];
        }
    }
    inverse
}

/// Inverse of a positive definite matrix; `None` where it is not one.
pub(super) fn inverse(matrix: &Matrix, dimensions: usize) -> Option<Matrix> {
    let inverse = inverse_lower(&cholesky(matrix, dimensions)?, dimensions);
    let mut product = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
    for i in 0..dimensions {
        for j in 0..dimensions {
            product[i][j] = (i.max(j)..dimensions)
                .map(|k| inverse[k][i] * inverse[k][j])
                .sum();
        }
    }
    Some(product)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn inverse_times_matrix_is_the_identity() {
        let mut matrix = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
        for (i, row) in [[4.0, 1.0, -0.5], [1.0, 3.0, 0.2], [-0.5, 0.2, 0.7]]
            .iter()
            .enumerate()
        {
            matrix[i][..3].copy_from_slice(row);
        }
        let inverse = inverse(&matrix, 3).unwrap();
        for i in 0..3 {
            for j in 0..3 {
                let product: f64 = (0..3).map(|k| matrix[i][k] * inverse[k][j]).sum();
                let expected = if i == j { 1.0 } else { 0.0 };
                assert!((product - expected).abs() < 1e-14);
            }
        }
    }

    #[test]
    fn a_matrix_with_a_negative_direction_has_no_factor() {
        let mut matrix = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
        matrix[0][..2].copy_from_slice(&[1.0, 2.0]);
        matrix[1][..2].copy_from_slice(&[2.0, 1.0]);
        assert!(cholesky(&matrix, 2).is_none());
    }
}
