//! The state of a search and its step.
//!
//! A step solves (J^T J + lambda D^2) d = -J^T r inside the box: a parameter on a bound beyond which
//! chi2 falls is held; one that the step would carry past a bound is set to the bound and the others
//! are solved for again. D holds the largest column norms met so far. lambda is zero while the step
//! is no longer than the trusted radius, |D d| <= radius, else what makes it so (Moré 1978). The normal
//! equations are used while they keep eight digits, the Householder triangle of J after that.

use super::dense::{self, MAX_PARAMETERS, Matrix, Vector};
use super::minimum::Curvature;
use super::{
    Interval, LeastSquaresError, Linearise, Minimum, NormalEquations, Settings, Side, Structure,
    Termination,
};

/// Smallest relative pivot of the normal equations: rounding (2e-16) over this is below 1e-8.
const SMALLEST_PIVOT: f64 = 1e-7;
/// Damping of a step that counts as undamped; keeps parameters without influence at rest.
const UNDAMPED: f64 = 1e-15;
/// The first radius is at least this times the norm of the residuals, for starts near the origin.
const LEAST_RADIUS: f64 = 0.03;
/// How far from the radius, relative to it, a shortened step may end.
const RADIUS_TOLERANCE: f64 = 0.1;
/// Most dampings tried for one step; two or three are usual.
const MAX_DAMPINGS: usize = 20;
/// Smallest ratio of actual to predicted decrease for which a step is kept.
const LEAST_GAIN: f64 = 1e-4;
/// Predicted decrease relative to chi2 below which a failed step is not shortened further.
const RESOLUTION: f64 = 16.0 * f64::EPSILON;
/// Expected decrease relative to chi2 that rounding inside a model can hide.
const ROUNDING: f64 = 1e-9;

/// Buffers for residuals and Jacobians, kept from fit to fit; they grow and never shrink.
#[derive(Clone, Debug, Default)]
pub struct Workspace {
    residuals: Vec<f64>,
    jacobian: Vec<f64>,
    trial_residuals: Vec<f64>,
    trial_jacobian: Vec<f64>,
    triangle: Triangle,
}

impl Workspace {
    /// Empty buffers.
    #[must_use]
    pub fn new() -> Self {
        Self::default()
    }

    fn reserve(&mut self, rows: usize, columns: usize) {
        for buffer in [&mut self.residuals, &mut self.trial_residuals] {
            if buffer.len() < rows {
                buffer.resize(rows, 0.0);
            }
        }
        for buffer in [&mut self.jacobian, &mut self.trial_jacobian] {
            if buffer.len() < rows * columns {
                buffer.resize(rows * columns, 0.0);
            }
        }
    }

    /// Forms the triangle of the current Jacobian and residuals; works in the trial buffers.
    fn triangularise(&mut self, structure: &Structure, columns: usize) {
        let rows = structure.rows();
        let matrix = &mut self.trial_jacobian[..rows * columns];
        let rotated = &mut self.trial_residuals[..rows];
        structure.expand(&self.jacobian, columns, matrix);
        rotated.copy_from_slice(&self.residuals[..rows]);
        dense::triangularise(matrix, rows, columns, rotated);
        let Triangle { upper, right } = &mut self.triangle;
        for row in 0..columns.min(rows) {
            right[row] = rotated[row];
            for column in row..columns {
                upper[row][column] = matrix[column * rows + row];
            }
        }
        for row in rows..columns {
            right[row] = 0.0;
            upper[row] = [0.0; MAX_PARAMETERS];
        }
    }

    /// Makes the trial the current point.
    fn keep_trial(&mut self) {
        std::mem::swap(&mut self.residuals, &mut self.trial_residuals);
        std::mem::swap(&mut self.jacobian, &mut self.trial_jacobian);
    }
}

/// A search under way.
#[derive(Clone, Debug)]
pub struct Descent {
    structure: Structure,
    rows: usize,
    columns: usize,
    parameters: Vector,
    chi2: f64,
    degrees_of_freedom: f64,
    linear: Linearisation,
    /// Largest norm so far of each column of J, the diagonal of D; zero where a column was always zero.
    largest_norms: Vector,
    /// Longest step that is trusted, |D d|.
    radius: f64,
    damping: f64,
    gain: f64,
    evaluations: usize,
    iterations: usize,
}

impl Descent {
    /// Evaluates the start.
    ///
    /// # Errors
    /// [`LeastSquaresError`] for sizes, bounds, settings or a start that cannot be used.
    pub fn begin<P: Linearise + ?Sized>(
        problem: &mut P,
        start: &[f64],
        bounds: &[Interval],
        settings: &Settings,
        workspace: &mut Workspace,
    ) -> Result<Self, LeastSquaresError> {
        let (rows, columns) = problem.sizes();
        settings.validate()?;
        let free = check_start(rows, columns, start, bounds)?;
        let structure = problem.storage();
        let mut parameters = [0.0; MAX_PARAMETERS];
        parameters[..columns].copy_from_slice(start);
        workspace.reserve(structure.rows(), columns);
        let residuals = &mut workspace.residuals[..structure.rows()];
        let jacobian = &mut workspace.jacobian[..structure.numbers()];
        let linear = if let Some(sums) = problem.linearise(start, residuals, jacobian) {
            Linearisation::of_sums(sums, columns)
        } else {
            check_values(residuals, jacobian, &structure)?;
            Linearisation::new(jacobian, residuals, &structure, columns)
        };
        let mut descent = Self {
            structure,
            rows,
            columns,
            parameters,
            chi2: linear.sums.chi2,
            degrees_of_freedom: rows.saturating_sub(free).max(1) as f64,
            linear,
            largest_norms: [0.0; MAX_PARAMETERS],
            radius: f64::INFINITY,
            damping: UNDAMPED,
            gain: f64::NAN,
            evaluations: 1,
            iterations: 0,
        };
        descent.update_scale();
        let length = descent.scaled_norm(&descent.parameters);
        let least = LEAST_RADIUS * descent.chi2.sqrt();
        descent.radius = settings.initial_radius * length.max(least);
        Ok(descent)
    }

    /// The best parameters so far.
    #[must_use]
    pub fn parameters(&self) -> &[f64] {
        &self.parameters[..self.columns]
    }

    /// chi2 there.
    #[must_use]
    pub const fn chi2(&self) -> f64 {
        self.chi2
    }

    /// Damping lambda of the last step tried; 1e-15 for a full Gauss-Newton step.
    #[must_use]
    pub const fn damping(&self) -> f64 {
        self.damping
    }

    /// Actual over predicted decrease of chi2 in the last step tried; `NaN` before the first and where
    /// the model was not finite.
    #[must_use]
    pub const fn gain(&self) -> f64 {
        self.gain
    }

    /// Calls of the model so far.
    #[must_use]
    pub const fn evaluations(&self) -> usize {
        self.evaluations
    }

    /// Tries one step: one call of the model, or none when the search ends. Returns why it ended,
    /// `None` while it goes on. `problem`, `bounds`, `settings` and `workspace` are those of `begin`.
    pub fn step<P: Linearise + ?Sized>(
        &mut self,
        problem: &mut P,
        bounds: &[Interval],
        settings: &Settings,
        workspace: &mut Workspace,
    ) -> Option<Termination> {
        if self.gradient_vanishes(bounds, settings) {
            return Some(Termination::Gradient);
        }
        let full = self.solve(UNDAMPED, bounds, workspace);
        let ended = self.small_enough(&full, settings);
        if ended.is_some() {
            return ended;
        }
        if self.evaluations >= settings.max_evaluations {
            return Some(Termination::Evaluations);
        }
        let (promise, length) = (full.decrease, self.scaled_norm(&full.shift));
        let step = if length <= (1.0 + RADIUS_TOLERANCE) * self.radius {
            self.damping = UNDAMPED;
            full
        } else {
            self.shorten(length, bounds, workspace)
        };
        self.iterations += 1;
        self.evaluations += 1;
        let kept = self.try_step(problem, &step, bounds, workspace);
        self.update_radius(&step, kept);
        if kept {
            self.update_scale();
        } else if step.decrease <= RESOLUTION * self.chi2 {
            let hidden = promise <= ROUNDING * self.chi2;
            return Some(if hidden {
                Termination::Rounding
            } else {
                Termination::Stalled
            });
        }
        None
    }

    /// The result, with the curvature at the best parameters.
    #[must_use]
    pub fn finish(
        &self,
        termination: Termination,
        bounds: &[Interval],
        workspace: &mut Workspace,
    ) -> Minimum {
        let at_bound: Vec<Option<Side>> = (self.parameters().iter().zip(bounds))
            .map(|(&value, interval)| interval.side(value))
            .collect();
        let free: Vec<usize> = (0..self.columns)
            .filter(|&j| at_bound[j].is_none())
            .collect();
        let triangle = self.linear.free_triangle(&free, workspace, &self.structure);
        Minimum {
            parameters: self.parameters().to_vec(),
            chi2: self.chi2,
            evaluations: self.evaluations,
            iterations: self.iterations,
            termination,
            at_bound,
            residuals: self.rows,
            curvature: Curvature { free, triangle },
        }
    }

    /// Evaluates the trial and keeps it where chi2 falls as it should.
    fn try_step<P: Linearise + ?Sized>(
        &mut self,
        problem: &mut P,
        step: &Step,
        bounds: &[Interval],
        workspace: &mut Workspace,
    ) -> bool {
        let trial = self.moved(step, bounds);
        let parameters = &trial[..self.columns];
        let residuals = &mut workspace.trial_residuals[..self.structure.rows()];
        let jacobian = &mut workspace.trial_jacobian[..self.structure.numbers()];
        let sums = problem.linearise(parameters, residuals, jacobian);
        let chi2 = match sums {
            Some(sums) => sums.chi2,
            None => dense::sum_of_squares(residuals),
        };
        self.gain = if chi2.is_finite() {
            (self.chi2 - chi2) / step.decrease
        } else {
            f64::NAN
        };
        if self.gain.is_nan() || self.gain < LEAST_GAIN || step.decrease <= 0.0 {
            return false;
        }
        match sums {
            Some(sums) if is_finite(sums, self.columns) => self.linear.take(sums),
            Some(_) => return false,
            None => {
                let linear = Linearisation::new(jacobian, residuals, &self.structure, self.columns);
                if !is_finite(&linear.sums, self.columns) {
                    return false;
                }
                self.linear = linear;
            }
        }
        self.parameters = trial;
        self.chi2 = chi2;
        workspace.keep_trial();
        true
    }

    fn moved(&self, step: &Step, bounds: &[Interval]) -> Vector {
        let mut moved = self.parameters;
        for (j, interval) in bounds.iter().enumerate() {
            moved[j] = match step.held[j] {
                Some(side) => side,
                None => interval.nearest(moved[j] + step.shift[j]),
            };
        }
        moved
    }

    /// Trusts longer steps after a good one, shorter ones after a bad one.
    fn update_radius(&mut self, step: &Step, kept: bool) {
        let length = self.scaled_norm(&step.shift);
        if self.iterations == 1 {
            self.radius = self.radius.min(length);
        }
        if !kept {
            // The lowest point along the step, of the parabola through slope and both values.
            let shorter = 1.0 / (2.0 - self.gain);
            self.radius = if self.gain.is_finite() {
                length * shorter.clamp(0.1, 0.5)
            } else {
                length * 0.1
            };
        } else if self.gain < 0.25 {
            self.radius = 0.5 * length;
        } else if self.gain > 0.75 || self.damping == UNDAMPED {
            self.radius = 2.0 * length;
        }
    }

    /// |D v|.
    fn scaled_norm(&self, vector: &Vector) -> f64 {
        self.length(&self.largest_norms, vector)
    }

    fn length(&self, scale: &Vector, vector: &Vector) -> f64 {
        (0..self.columns)
            .map(|j| (scale[j] * vector[j]).powi(2))
            .sum::<f64>()
            .sqrt()
    }

    fn update_scale(&mut self) {
        for (largest, norm) in self
            .largest_norms
            .iter_mut()
            .zip(self.linear.column_norms())
        {
            *largest = largest.max(norm);
        }
    }

    /// Which criterion the step meets, if any.
    fn small_enough(&self, step: &Step, settings: &Settings) -> Option<Termination> {
        if step.decrease <= settings.chi2_tolerance * self.chi2 / self.degrees_of_freedom {
            return Some(Termination::Chi2);
        }
        let norms = self.linear.column_norms();
        let length = |vector: &Vector| self.length(&norms, vector);
        let limit = settings.step_tolerance * length(&self.parameters);
        (length(&step.shift) <= limit).then_some(Termination::Step)
    }

    fn gradient_vanishes(&self, bounds: &[Interval], settings: &Settings) -> bool {
        let limit = settings.gradient_tolerance * self.chi2.sqrt();
        (0..self.columns)
            .filter(|&j| !self.is_pressed(j, bounds))
            .all(|j| {
                self.linear.sums.gradient[j].abs() <= limit * self.linear.sums.gram[j][j].sqrt()
            })
    }

    /// Whether the parameter is fixed, or on a bound with chi2 falling beyond it.
    fn is_pressed(&self, parameter: usize, bounds: &[Interval]) -> bool {
        let slope = self.linear.sums.gradient[parameter];
        match bounds[parameter].side(self.parameters[parameter]) {
            Some(Side::Fixed) => true,
            Some(Side::Lower) => slope >= 0.0,
            Some(Side::Upper) => slope <= 0.0,
            None => false,
        }
    }

    /// The step damped until it is about as long as the radius; an undamped one has the length `full`.
    ///
    /// 1 / |D d| is nearly linear in lambda, and |D d| <= |D^-1 g| / lambda.
    fn shorten(&mut self, full: f64, bounds: &[Interval], workspace: &mut Workspace) -> Step {
        let scale = without_zeros(self.largest_norms);
        let steepness = (0..self.columns)
            .filter(|&j| !self.is_pressed(j, bounds))
            .map(|j| (self.linear.sums.gradient[j] / scale[j]).powi(2))
            .sum::<f64>()
            .sqrt();
        let (mut low, mut high) = (UNDAMPED, steepness / self.radius);
        let mut before = (UNDAMPED, 1.0 / full);
        let mut damping = self.damping.clamp(1e-3 * high, high);
        for _ in 0..MAX_DAMPINGS {
            let step = self.solve(damping, bounds, workspace);
            let length = self.scaled_norm(&step.shift);
            if (length - self.radius).abs() <= RADIUS_TOLERANCE * self.radius {
                self.damping = damping;
                return step;
            }
            if length > self.radius {
                low = damping;
            } else {
                high = damping;
            }
            let here = (damping, 1.0 / length);
            let slope = (here.1 - before.1) / (here.0 - before.0);
            let secant = here.0 + (1.0 / self.radius - here.1) / slope;
            before = here;
            damping = if low < secant && secant < high {
                secant
            } else {
                (low.max(1e-6 * high) * high).sqrt()
            };
        }
        self.damping = high;
        self.solve(high, bounds, workspace)
    }

    /// The damped Gauss-Newton step inside the box: from the present point toward the minimum over the
    /// free parameters, up to the first bound on the way, which is then held; again from there. Every
    /// leg lowers the damped quadratic, so that the promised decrease is never negative.
    fn solve(&mut self, damping: f64, bounds: &[Interval], workspace: &mut Workspace) -> Step {
        let mut step = Step {
            shift: [0.0; MAX_PARAMETERS],
            held: [None; MAX_PARAMETERS],
            decrease: 0.0,
        };
        for j in 0..self.columns {
            if self.is_pressed(j, bounds) {
                step.held[j] = Some(self.parameters[j]);
            }
        }
        let scale = without_zeros(if damping == UNDAMPED {
            self.linear.column_norms()
        } else {
            self.largest_norms
        });
        loop {
            let (linear, structure) = (&mut self.linear, &self.structure);
            let target = linear.solve(damping, &scale, &step, workspace, structure);
            let Some((fraction, blocking, side)) = self.first_bound(&step, &target, bounds) else {
                step.shift = target;
                step.decrease = self.linear.decrease(&step.shift, &workspace.triangle);
                return step;
            };
            for (shift, target) in step.shift.iter_mut().zip(target) {
                *shift += fraction * (target - *shift);
            }
            step.shift[blocking] = side - self.parameters[blocking];
            step.held[blocking] = Some(side);
        }
    }

    /// The bound met first between the step and its target: after what fraction of the way, by which
    /// parameter, and its value.
    fn first_bound(
        &self,
        step: &Step,
        target: &Vector,
        bounds: &[Interval],
    ) -> Option<(f64, usize, f64)> {
        let mut first: Option<(f64, usize, f64)> = None;
        for (j, interval) in bounds.iter().enumerate() {
            let end = self.parameters[j] + target[j];
            if step.held[j].is_some() || interval.contains(end) {
                continue;
            }
            let side = interval.nearest(end);
            let room = side - self.parameters[j] - step.shift[j];
            let fraction = (room / (target[j] - step.shift[j])).clamp(0.0, 1.0);
            if first.is_none_or(|(smallest, ..)| fraction < smallest) {
                first = Some((fraction, j, side));
            }
        }
        first
    }
}

/// A step and what the linearised residuals promise of it.
struct Step {
    shift: Vector,
    /// Values of the parameters that are not solved for, each on a bound.
    held: [Option<f64>; MAX_PARAMETERS],
    /// Predicted decrease of chi2.
    decrease: f64,
}

/// The residuals near a point: r + J d.
#[derive(Clone, Debug)]
struct Linearisation {
    columns: usize,
    sums: NormalEquations,
    known: Known,
}

/// What is known of a Jacobian besides its sums.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Known {
    /// Nothing: where the normal equations lose too many digits, they are damped.
    Sums,
    /// The workspace holds it.
    Jacobian,
    /// The workspace's triangle is its: it is formed when the normal equations lose too many digits.
    Triangle,
}

/// J = Q R.
#[derive(Clone, Debug, Default)]
struct Triangle {
    /// R, `upper[row][column]`.
    upper: Matrix,
    /// The leading part of Q^T r.
    right: Vector,
}

impl Linearisation {
    fn new(jacobian: &[f64], residuals: &[f64], structure: &Structure, columns: usize) -> Self {
        Self {
            columns,
            sums: dense::normal_equations(jacobian, residuals, structure),
            known: Known::Jacobian,
        }
    }

    /// Of sums that are given without a Jacobian.
    fn of_sums(sums: &NormalEquations, columns: usize) -> Self {
        Self {
            columns,
            sums: *sums,
            known: Known::Sums,
        }
    }

    /// Takes over sums that are given without a Jacobian.
    fn take(&mut self, sums: &NormalEquations) {
        self.sums.take(sums, self.columns);
        self.known = Known::Sums;
    }

    /// 2 g.d + d.J^T J d with its sign turned.
    fn decrease(&self, shift: &Vector, triangle: &Triangle) -> f64 {
        let n = self.columns;
        if self.known == Known::Triangle {
            return -(0..n)
                .map(|row| {
                    let change = dense::dot(&triangle.upper[row][row..n], &shift[row..n]);
                    change * (2.0 * triangle.right[row] + change)
                })
                .sum::<f64>();
        }
        -(0..n)
            .map(|row| {
                let change = dense::dot(&self.sums.gram[row][..n], &shift[..n]);
                shift[row] * (2.0 * self.sums.gradient[row] + change)
            })
            .sum::<f64>()
    }

    /// The norm of each column of J.
    fn column_norms(&self) -> Vector {
        std::array::from_fn(|j| self.sums.gram[j][j].sqrt())
    }

    /// The shifts that minimise |r + J d|^2 + damping |D d|^2, those of held parameters given.
    fn solve(
        &mut self,
        damping: f64,
        scale: &Vector,
        step: &Step,
        workspace: &mut Workspace,
        structure: &Structure,
    ) -> Vector {
        let mut shift = step.shift;
        let mut free = [0; MAX_PARAMETERS];
        let mut count = 0;
        for (j, held) in step.held.iter().enumerate().take(self.columns) {
            if held.is_none() {
                free[count] = j;
                count += 1;
                shift[j] = 0.0;
            }
        }
        let free = &free[..count];
        if self.known != Known::Triangle && self.solve_normal(damping, scale, free, &mut shift) {
            return shift;
        }
        if self.known == Known::Sums {
            let mut damping = damping.max(SMALLEST_PIVOT);
            while damping < 1.0 && !self.solve_normal(damping, scale, free, &mut shift) {
                damping *= 10.0;
            }
            return shift;
        }
        if self.known == Known::Jacobian {
            workspace.triangularise(structure, self.columns);
            self.known = Known::Triangle;
        }
        let triangle = &workspace.triangle;
        triangle.solve(self.columns, damping, scale, free, &mut shift);
        shift
    }

    /// By Cholesky; `false`, with the shifts untouched, where that loses too many digits.
    fn solve_normal(
        &self,
        damping: f64,
        scale: &Vector,
        free: &[usize],
        shift: &mut Vector,
    ) -> bool {
        match free.len() {
            ..=4 => self.solve_small::<4>(damping, scale, free, shift),
            5..=8 => self.solve_small::<8>(damping, scale, free, shift),
            _ => self.solve_small::<MAX_PARAMETERS>(damping, scale, free, shift),
        }
    }

    /// The same of at most `N` free parameters.
    fn solve_small<const N: usize>(
        &self,
        damping: f64,
        scale: &Vector,
        free: &[usize],
        shift: &mut Vector,
    ) -> bool {
        let mut matrix = [[0.0; N]; N];
        let mut x = [0.0; N];
        let mut inverse = [0.0; N];
        for (inverse, &i) in inverse.iter_mut().zip(free) {
            *inverse = 1.0 / scale[i];
        }
        for (row, &i) in free.iter().enumerate() {
            for (column, &j) in free[..=row].iter().enumerate() {
                matrix[row][column] = self.sums.gram[i][j] * inverse[row] * inverse[column];
            }
            matrix[row][row] += damping;
            let moved = dense::dot(&self.sums.gram[i][..self.columns], &shift[..self.columns]);
            x[row] = -(self.sums.gradient[i] + moved) * inverse[row];
        }
        if dense::cholesky(&mut matrix, free.len()) < SMALLEST_PIVOT {
            return false;
        }
        dense::cholesky_solve(&matrix, free.len(), &mut x);
        for (row, &i) in free.iter().enumerate() {
            shift[i] = x[row] * inverse[row];
        }
        true
    }

    /// R of the `free` columns alone, column by column.
    fn free_triangle(
        &self,
        free: &[usize],
        workspace: &mut Workspace,
        structure: &Structure,
    ) -> Vec<f64> {
        let size = free.len();
        let mut triangle = vec![0.0; size * size];
        let mut matrix = [[0.0; MAX_PARAMETERS]; MAX_PARAMETERS];
        for (row, &i) in free.iter().enumerate() {
            for (column, &j) in free.iter().enumerate() {
                matrix[row][column] = self.sums.gram[i][j];
            }
        }
        if dense::cholesky(&mut matrix, size) >= SMALLEST_PIVOT {
            for column in 0..size {
                for row in 0..=column {
                    triangle[column * size + row] = matrix[column][row];
                }
            }
            return triangle;
        }
        match self.known {
            Known::Sums => return triangle,
            Known::Jacobian => workspace.triangularise(structure, self.columns),
            Known::Triangle => {}
        }
        let full = &workspace.triangle;
        let n = self.columns;
        let mut reduced = [0.0; MAX_PARAMETERS * MAX_PARAMETERS];
        for (column, &j) in free.iter().enumerate() {
            for row in 0..=j {
                reduced[column * n + row] = full.upper[row][j];
            }
        }
        dense::triangularise(&mut reduced, n, size, &mut [0.0; MAX_PARAMETERS]);
        for column in 0..size {
            for row in 0..=column {
                triangle[column * size + row] = reduced[column * n + row];
            }
        }
        triangle
    }
}

fn is_finite(sums: &NormalEquations, columns: usize) -> bool {
    (0..columns).all(|j| sums.gram[j][j].is_finite() && sums.gradient[j].is_finite())
}

impl Triangle {
    /// Least squares of R d + Q^T r stacked on sqrt(damping) D d.
    fn solve(
        &self,
        columns: usize,
        damping: f64,
        scale: &Vector,
        free: &[usize],
        shift: &mut Vector,
    ) {
        let size = free.len();
        let rows = columns + size;
        let mut matrix = [0.0; 2 * MAX_PARAMETERS * MAX_PARAMETERS];
        let mut right = [0.0; 2 * MAX_PARAMETERS];
        for row in 0..columns {
            let moved = dense::dot(&self.upper[row][row..columns], &shift[row..columns]);
            right[row] = -(self.right[row] + moved);
        }
        for (column, &j) in free.iter().enumerate() {
            for row in 0..=j {
                matrix[column * rows + row] = self.upper[row][j] / scale[j];
            }
            matrix[column * rows + columns + column] = damping.sqrt();
        }
        dense::triangularise(&mut matrix, rows, size, &mut right);
        for k in (0..size).rev() {
            let sum: f64 = (k + 1..size).map(|i| matrix[i * rows + k] * right[i]).sum();
            right[k] = (right[k] - sum) / matrix[k * rows + k];
            shift[free[k]] = right[k] / scale[free[k]];
        }
    }
}

/// The scale with one for zero: a column of zeros gives a gradient of zero, and so a shift of zero.
fn without_zeros(scale: Vector) -> Vector {
    scale.map(|norm| if norm > 0.0 { norm } else { 1.0 })
}

/// Checks sizes, bounds and start; returns the number of parameters to fit.
fn check_start(
    rows: usize,
    columns: usize,
    start: &[f64],
    bounds: &[Interval],
) -> Result<usize, LeastSquaresError> {
    if columns == 0 || columns > MAX_PARAMETERS {
        return Err(LeastSquaresError::ParameterCount { found: columns });
    }
    for (name, found) in [("start", start.len()), ("bounds", bounds.len())] {
        if found != columns {
            return Err(LeastSquaresError::Length {
                name,
                found,
                expected: columns,
            });
        }
    }
    for (parameter, (&found, &Interval { lower, upper })) in start.iter().zip(bounds).enumerate() {
        if lower.is_nan() || upper.is_nan() || lower > upper {
            return Err(LeastSquaresError::Bounds {
                parameter,
                lower,
                upper,
            });
        }
        if !(found.is_finite() && lower <= found && found <= upper) {
            return Err(LeastSquaresError::Start {
                parameter,
                found,
                lower,
                upper,
            });
        }
    }
    let free = bounds
        .iter()
        .filter(|interval| !interval.is_fixed())
        .count();
    if rows < free || rows == 0 {
        return Err(LeastSquaresError::TooFewResiduals {
            residuals: rows,
            parameters: free,
        });
    }
    Ok(free)
}

/// Checks that the values at the start can be squared.
fn check_values(
    residuals: &[f64],
    jacobian: &[f64],
    structure: &Structure,
) -> Result<(), LeastSquaresError> {
    let rows = residuals.len();
    let sum = dense::sum_of_squares(residuals) + dense::sum_of_squares(jacobian);
    if (sum * rows as f64).is_finite() {
        return Ok(());
    }
    let unusable = |value: &f64| !(value * value * rows as f64).is_finite();
    if let Some(residual) = residuals.iter().position(unusable) {
        return Err(LeastSquaresError::StartResidual {
            residual,
            found: residuals[residual],
        });
    }
    if let Some(index) = jacobian.iter().position(unusable) {
        let (residual, parameter) = structure.place(index);
        return Err(LeastSquaresError::StartJacobian {
            residual,
            parameter,
            found: jacobian[index],
        });
    }
    Ok(())
}
