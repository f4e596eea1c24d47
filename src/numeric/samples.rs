//! What is said of samples of numbers: shares and their intervals, medians, tests of two samples, rank
//! correlation. Distributions and tests are those of statrs; each function is checked against scipy.

use statrs::distribution::{Binomial, ContinuousCDF, DiscreteCDF, Normal, StudentsT};
use statrs::stats_tests::Alternative;
use statrs::stats_tests::fisher::fishers_exact;
use statrs::stats_tests::mannwhitneyu::{MannWhitneyUMethod, mannwhitneyu};

/// Probability of one standard deviation on either side, in percent 68.27.
pub const ONE_SIGMA: f64 = 0.682_689_492_137_085_9;
/// Probability of two standard deviations on either side, in percent 95.45.
pub const TWO_SIGMA: f64 = 0.954_499_736_103_641_6;

/// Probability that at least `hits` of `tries` even chances succeed.
#[must_use]
pub fn chance_of_at_least(hits: u64, tries: u64) -> f64 {
    match (hits.checked_sub(1), Binomial::new(0.5, tries)) {
        (Some(below), Ok(binomial)) => binomial.sf(below),
        _ => 1.0,
    }
}

/// Probability that even chances split as unevenly as `hits` of `tries`, to either side.
#[must_use]
pub fn chance_of_split(hits: u64, tries: u64) -> f64 {
    let more = hits.max(tries.saturating_sub(hits));
    (2.0 * chance_of_at_least(more, tries)).min(1.0)
}

/// Interval of the share behind `hits` of `tries`, after Wilson (1927, doi:10.1080/01621459.1927.10502953;
/// from memory); `None` without tries.
///
/// With p = hits/n and z normal deviates: (p + z^2/2n -+ z sqrt(p(1-p)/n + z^2/4n^2))/(1 + z^2/n).
#[must_use]
pub fn wilson_interval(hits: u64, tries: u64, probability: f64) -> Option<[f64; 2]> {
    if tries == 0 {
        return None;
    }
    let z = Normal::standard().inverse_cdf(f64::midpoint(1.0, probability));
    let n = tries as f64;
    let p = hits as f64 / n;
    let centre = p + z * z / (2.0 * n);
    let half = z * (p * (1.0 - p) / n + z * z / (4.0 * n * n)).sqrt();
    let scale = 1.0 + z * z / n;
    // rounding may step out
    Some([(centre - half) / scale, (centre + half) / scale].map(|end| end.clamp(0.0, 1.0)))
}

/// Mean and its standard error from the values' own scatter; the error is `None` for one value.
#[must_use]
pub fn mean(values: &[f64]) -> Option<(f64, Option<f64>)> {
    if values.is_empty() {
        return None;
    }
    let n = values.len() as f64;
    let mean = values.iter().sum::<f64>() / n;
    let squares: f64 = values.iter().map(|value| (value - mean).powi(2)).sum();
    let err = (values.len() > 1).then(|| (squares / (n - 1.0) / n).sqrt());
    Some((mean, err))
}

/// Median, and the two values between which the median of the population lies with at least this
/// probability, whatever its distribution: those of order statistics, by the binomial distribution of the
/// number of values below it. The ends are `None` where there are too few values.
#[must_use]
pub fn median(values: &[f64], probability: f64) -> Option<(f64, Option<[f64; 2]>)> {
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    let n = sorted.len();
    let upper = *sorted.get(n / 2)?;
    let median = if n.is_multiple_of(2) {
        f64::midpoint(sorted[n / 2 - 1], upper)
    } else {
        upper
    };
    let outside = f64::midpoint(1.0, -probability);
    let below = Binomial::new(0.5, n as u64)
        .ok()
        .map(|b| b.inverse_cdf(outside));
    // as many values as are below the lower end with a probability of at most `outside`
    let ends = below.and_then(|at| usize::try_from(at).ok()?.checked_sub(1));
    Some((median, ends.map(|k| [sorted[k], sorted[n - 1 - k]])))
}

/// Probability that two samples with `hits` of `tries` each differ as much or more by chance, by Fisher's
/// exact test, to either side.
#[must_use]
pub fn fisher_exact(first: (u64, u64), second: (u64, u64)) -> Option<f64> {
    let misses = |(hits, tries): (u64, u64)| tries.checked_sub(hits);
    let table = [first.0, misses(first)?, second.0, misses(second)?];
    fishers_exact(&table, Alternative::TwoSided).ok()
}

/// Most values of both samples together for the exact distribution, which takes all their orders.
const EXACT: usize = 20;

/// U of the first sample, and the probability of as extreme a one by chance, to either side, by the test of
/// Mann and Whitney; exact up to 20 values without ties, else normal with corrections for continuity and
/// ties. `None` where a sample is empty or all values are one.
#[must_use]
pub fn mann_whitney(first: &[f64], second: &[f64]) -> Option<(f64, f64)> {
    use MannWhitneyUMethod::{AsymptoticInclContinuityCorrection, Automatic};
    let all = || first.iter().chain(second);
    let one = all().next()?;
    if all().all(|value| value == one) {
        return None;
    }
    let method = if first.len() + second.len() <= EXACT {
        Automatic
    } else {
        AsymptoticInclContinuityCorrection
    };
    let (u, p) = mannwhitneyu(first, second, method, Alternative::TwoSided).ok()?;
    p.is_finite().then_some((u, p))
}

/// Ranks from 1; equal values share the mean of theirs.
#[must_use]
pub fn ranks(values: &[f64]) -> Vec<f64> {
    let mut order: Vec<usize> = (0..values.len()).collect();
    order.sort_by(|a, b| values[*a].total_cmp(&values[*b]));
    let mut ranks = vec![0.0; values.len()];
    let mut place = 0;
    for run in order.chunk_by(|a, b| values[*a] == values[*b]) {
        let shared = place as f64 + f64::midpoint(1.0, run.len() as f64);
        for index in run {
            ranks[*index] = shared;
        }
        place += run.len();
    }
    ranks
}

/// Spearman's rank correlation; `None` for fewer than three pairs, or where one side does not vary.
#[must_use]
pub fn spearman(first: &[f64], second: &[f64]) -> Option<f64> {
    let n = first.len();
    if n < 3 || n != second.len() {
        return None;
    }
    let (a, b) = (ranks(first), ranks(second));
    let middle = f64::midpoint(1.0, n as f64);
    let sum = |x: &[f64], y: &[f64]| -> f64 {
        let pairs = x.iter().zip(y);
        pairs.map(|(x, y)| (x - middle) * (y - middle)).sum()
    };
    let rho = sum(&a, &b) / (sum(&a, &a) * sum(&b, &b)).sqrt();
    rho.is_finite().then_some(rho)
}

/// Probability of as strong a rank correlation of `n` pairs by chance, to either side, from Student's
/// distribution of rho sqrt((n - 2)/(1 - rho^2)).
#[must_use]
pub fn chance_of_spearman(rho: f64, n: usize) -> Option<f64> {
    let freedom = (n.checked_sub(2)?) as f64;
    let student = StudentsT::new(0.0, 1.0, freedom).ok()?;
    let t = rho.abs() * (freedom / ((1.0 - rho) * (1.0 + rho))).sqrt();
    let chance = if t.is_finite() {
        2.0 * student.sf(t)
    } else {
        0.0
    };
    Some(chance.clamp(0.0, 1.0))
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    //! Expected numbers: scipy 1.17.1, as each comment says, unless another source is named.
    use super::*;

    /// Agreement with scipy to rounding; its asymptotic distributions are evaluated otherwise.
    const CLOSE: f64 = 1e-10;

    fn close(found: f64, expected: f64) {
        assert!(
            (found - expected).abs() <= CLOSE * expected.abs().max(1e-3),
            "{found} {expected}"
        );
    }

    #[test]
    fn uneven_splits_are_as_probable_as_binomtest_says() {
        for (hits, tries, at_least, split) in [
            (12, 18, 0.118_942_260_742_187_5, 0.237_884_521_484_375),
            (11, 14, 0.028_686_523_437_5, 0.057_373_046_875),
            (3, 14, 0.993_530_273_437_5, 0.057_373_046_875),
            (0, 5, 1.0, 0.0625),
            (7, 7, 0.007_812_5, 0.015_625),
            (
                5200,
                10_000,
                3.296_757_799_336_171_4e-5,
                6.593_515_598_672_343e-5,
            ),
            (0, 0, 1.0, 1.0),
        ] {
            close(chance_of_at_least(hits, tries), at_least);
            close(chance_of_split(hits, tries), split);
        }
    }

    #[test]
    fn wilsons_intervals_are_those_of_proportion_ci() {
        for (hits, tries, one, two) in [
            (
                12,
                28,
                [0.339_106_120_164_918_6, 0.522_962_845_352_322_7],
                [0.262_308_777_943_316_2, 0.612_691_222_056_683_8],
            ),
            (0, 9, [0.0, 0.1], [0.0, 0.307_692_307_692_307_76]),
            (9, 9, [0.9, 1.0], [0.692_307_692_307_692_2, 1.0]),
            (
                663,
                1093,
                [0.591_720_247_052_379_8, 0.621_259_643_258_406_2],
                [0.576_697_828_026_043_1, 0.635_699_619_558_277_8],
            ),
        ] {
            for (probability, expected) in [(ONE_SIGMA, one), (TWO_SIGMA, two)] {
                let found = wilson_interval(hits, tries, probability).unwrap();
                close(found[0], expected[0]);
                close(found[1], expected[1]);
            }
        }
        assert_eq!(wilson_interval(0, 0, ONE_SIGMA), None);
    }

    #[test]
    fn shares_of_two_samples_differ_as_fisher_exact_says() {
        for (first, second, expected) in [
            ((8, 11), (3, 14), 0.017_183_784_268_856_285),
            ((0, 5), (4, 9), 0.220_779_220_779_220_8),
            ((40, 90), (61, 80), 2.490_488_219_129_470_4e-5),
            ((0, 3), (0, 4), 1.0),
        ] {
            close(fisher_exact(first, second).unwrap(), expected);
        }
        assert_eq!(fisher_exact((3, 2), (1, 2)), None);
    }

    /// 40 and 35 numbers without an order.
    fn many() -> (Vec<f64>, Vec<f64>) {
        let first = (0..40).map(|i| f64::from(i * 37 % 101) / 50.0 - 1.0);
        let second = (0..35).map(|i| f64::from(i * 53 % 97) / 60.0 - 0.5);
        (first.collect(), second.collect())
    }

    #[test]
    fn samples_differ_as_mannwhitneyu_says() {
        let few = (
            vec![-0.62, -0.31, 0.05, -0.44, 0.12, -0.7, -0.28],
            vec![0.21, -0.1, 0.33, -0.05, 0.4, -0.35],
        );
        let ties = (vec![1.0, 2.0, 2.0, 3.0, 4.0], vec![2.0, 3.0, 5.0, 6.0]);
        for ((first, second), u, p) in [
            (few, 8.0, 0.073_426_573_426_573_42),
            (ties, 4.5, 0.210_902_926_056_610_43),
            (many(), 530.5, 0.072_689_824_852_815_01),
        ] {
            let found = mann_whitney(&first, &second).unwrap();
            close(found.0, u);
            close(found.1, p);
        }
        assert_eq!(mann_whitney(&[], &[1.0]), None);
        assert_eq!(mann_whitney(&[1.0], &[1.0, 1.0]), None);
    }

    #[test]
    fn ranks_correlate_as_spearmanr_says() {
        assert_eq!(
            ranks(&[3.0, 1.0, 2.0, 2.0, 5.0, 2.0]),
            [5.0, 1.0, 3.0, 3.0, 6.0, 3.0]
        );
        let first = [1.0, 2.5, 2.5, 4.0, 5.5, 7.0, 0.3, 9.0];
        let second = [2.0, 1.0, 3.0, 3.0, 6.0, 5.0, 0.5, 4.0];
        let rho = spearman(&first, &second).unwrap();
        close(rho, 0.849_397_590_361_445_7);
        close(
            chance_of_spearman(rho, 8).unwrap(),
            0.007_604_059_076_449_164_5,
        );
        let (first, second) = many();
        let rho = spearman(&first[..35], &second).unwrap();
        close(rho, 0.165_546_218_487_394_98);
        close(
            chance_of_spearman(rho, 35).unwrap(),
            0.341_911_268_684_642_5,
        );
        assert_eq!(spearman(&[1.0, 2.0, 3.0], &[4.0, 4.0, 4.0]), None);
        assert_eq!(chance_of_spearman(1.0, 5), Some(0.0));
    }

    #[test]
    fn medians_have_the_intervals_of_quantile_test() {
        let values = [3.1, 0.2, 5.5, 1.7, 2.2, 8.0, 4.4, 0.9, 6.1, 2.8, 3.3];
        for (count, probability, expected, ends) in [
            (11, ONE_SIGMA, 3.1, [2.2, 4.4]),
            (11, TWO_SIGMA, 3.1, [0.9, 6.1]),
            (6, ONE_SIGMA, 2.65, [1.7, 5.5]),
            (6, TWO_SIGMA, 2.65, [0.2, 8.0]),
        ] {
            let (found, interval) = median(&values[..count], probability).unwrap();
            close(found, expected);
            assert_eq!(interval, Some(ends), "{count} {probability}");
        }
        // no interval of two values holds the median with 95 %
        assert_eq!(median(&values[..2], TWO_SIGMA).unwrap().1, None);
        assert_eq!(median(&[], ONE_SIGMA), None);
    }

    #[test]
    fn means_have_the_error_of_sem() {
        let values = [3.1, 0.2, 5.5, 1.7, 2.2, 8.0, 4.4, 0.9, 6.1, 2.8, 3.3];
        let (found, err) = mean(&values).unwrap();
        close(found, 3.472_727_272_727_272);
        close(err.unwrap(), 0.707_632_532_924_322_6);
        assert_eq!(mean(&[2.0]), Some((2.0, None)));
        assert_eq!(mean(&[]), None);
    }
}
