//! Analytic Jacobians against finite differences.

use super::LeastSquares;

/// Halvings of the step, and so the order of extrapolation.
const LEVELS: usize = 3;

/// The largest deviation of the analytic Jacobian at `parameters` from central differences with
/// steps `steps`, `steps` / 2, `steps` / 4, extrapolated to zero step (Richardson; error of sixth
/// order in the step). Each deviation is relative to the largest derivative by the same parameter, or
/// absolute where all of them are zero. For tests of models; allocates.
///
/// `NaN` where any number met is not finite, so that a comparison with a tolerance fails.
pub fn check_jacobian<P: LeastSquares + ?Sized>(
    problem: &mut P,
    parameters: &[f64],
    steps: &[f64],
) -> f64 {
    let rows = problem.residuals();
    let mut ahead = vec![0.0; rows];
    let mut behind = vec![0.0; rows];
    let structure = problem.structure();
    let mut stored = vec![0.0; structure.numbers()];
    problem.evaluate(parameters, &mut ahead, Some(&mut stored));
    let mut jacobian = vec![0.0; rows * parameters.len()];
    structure.expand(&stored, parameters.len(), &mut jacobian);
    let mut shifted = parameters.to_vec();
    let mut worst = 0.0_f64;
    for (parameter, column) in jacobian.chunks_exact(rows).enumerate() {
        let mut differences = [const { Vec::new() }; LEVELS];
        for (level, difference) in differences.iter_mut().enumerate() {
            let step = steps[parameter] / f64::from(1 << level);
            let (above, below) = (parameters[parameter] + step, parameters[parameter] - step);
            shifted[parameter] = above;
            problem.evaluate(&shifted, &mut ahead, None);
            shifted[parameter] = below;
            problem.evaluate(&shifted, &mut behind, None);
            *difference = (ahead.iter().zip(&behind))
                .map(|(ahead, behind)| (ahead - behind) / (above - below))
                .collect::<Vec<_>>();
        }
        shifted[parameter] = parameters[parameter];
        let largest = column
            .iter()
            .fold(0.0_f64, |largest, x| largest.max(x.abs()));
        let unit = if largest > 0.0 { largest } else { 1.0 };
        for (row, &analytic) in column.iter().enumerate() {
            let [coarse, middle, fine] = differences.each_ref().map(|difference| difference[row]);
            let first = [
                middle + (middle - coarse) / 3.0,
                fine + (fine - middle) / 3.0,
            ];
            let numeric = first[1] + (first[1] - first[0]) / 15.0;
            let deviation = (analytic - numeric).abs() / unit;
            if !deviation.is_finite() {
                return f64::NAN;
            }
            worst = worst.max(deviation);
        }
    }
    worst
}
