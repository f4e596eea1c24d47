//! Rates between levels into the shares that they keep.

/// Shares of levels that rates keep, by elimination without subtractions (Grassmann, Taksar &
/// Heyman 1985, Oper. Res. 33, 1107): every share keeps its digits, however small it is.
///
/// `rates` holds row by row what leaves each level for each other, s^-1, none negative; it is
/// overwritten. `Err` names a level (from 0) that has no way to those below it.
pub(super) fn shares(rates: &mut [f64], shares: &mut [f64]) -> Result<(), usize> {
    let levels = shares.len();
    for last in (1..levels).rev() {
        let (above, rest) = rates.split_at_mut(last * levels);
        let row = &rest[..last];
        let leaving: f64 = row.iter().sum();
        if leaving.is_nan() || leaving <= 0.0 {
            return Err(last);
        }
        let inverse = 1.0 / leaving;
        for from in above.chunks_mut(levels) {
            let through = from[last] * inverse;
            from[last] = through;
            for (rate, to) in from[..last].iter_mut().zip(row) {
                *rate += through * to;
            }
        }
    }
    shares[0] = 1.0;
    let mut sum = 1.0;
    for level in 1..levels {
        let share = (0..level)
            .map(|from| shares[from] * rates[from * levels + level])
            .sum();
        shares[level] = share;
        sum += share;
    }
    for share in shares {
        *share /= sum;
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn shares_balance_what_comes_and_goes() {
        let rates = [
            0.0, 3.0, 1e-9, 0.5, //
            2.0, 0.0, 4.0, 1e-7, //
            7.0, 0.3, 0.0, 1.0, //
            1.0, 1.0, 20.0, 0.0,
        ];
        let mut kept = [0.0; 4];
        shares(&mut rates.clone(), &mut kept).unwrap();
        assert!((kept.iter().sum::<f64>() - 1.0).abs() < 1e-15);
        for level in 0..4 {
            let leaves: f64 = (0..4).map(|to| kept[level] * rates[level * 4 + to]).sum();
            let comes: f64 = (0..4)
                .map(|from| kept[from] * rates[from * 4 + level])
                .sum();
            assert!((leaves / comes - 1.0).abs() < 1e-14, "{level}");
        }
    }

    #[test]
    fn tiny_shares_keep_their_digits() {
        // detailed balance with a ratio of 1e-30 a step
        let mut rates = [0.0, 1e-30, 0.0, 1.0, 0.0, 1e-30, 0.0, 1.0, 0.0];
        let mut kept = [0.0; 3];
        shares(&mut rates, &mut kept).unwrap();
        assert!((kept[2] / 1e-60 - 1.0).abs() < 1e-14);
    }

    #[test]
    fn a_level_without_a_way_down_is_named() {
        let mut rates = [0.0, 1.0, 1.0, 1.0, 0.0, 0.0, 0.0, 0.0, 0.0];
        assert_eq!(shares(&mut rates, &mut [0.0; 3]), Err(2));
    }
}
