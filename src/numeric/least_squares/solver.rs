//! The search as an argmin `Solver`.

use super::{Descent, Interval, LeastSquares, Minimum, Settings, Termination, Workspace};
use argmin::core::{ArgminError, Error, IterState, KV, Problem, Solver};

/// Bounded Levenberg-Marquardt, run by argmin's `Executor`: one iteration is one step tried, the cost
/// is chi2, and every step reports `damping`, `gain` and `evaluations` to observers. Gives the same
/// numbers as [`minimize`](super::minimize). A problem need not be given away: `&mut` problems are
/// problems too.
///
/// # Examples
/// ```
/// use argmin::core::{Executor, State};
/// use inrush::numeric::least_squares::{unbounded, LeastSquares, LevenbergMarquardt, Settings};
///
/// struct Root;
/// impl LeastSquares for Root {
///     fn parameters(&self) -> usize { 1 }
///     fn residuals(&self) -> usize { 1 }
///     fn evaluate(&mut self, p: &[f64], residuals: &mut [f64], jacobian: Option<&mut [f64]>) {
///         residuals[0] = p[0] * p[0] - 2.0;
///         if let Some(jacobian) = jacobian {
///             jacobian[0] = 2.0 * p[0];
///         }
///     }
/// }
///
/// let solver = LevenbergMarquardt::new(unbounded(1), Settings::default());
/// let result = Executor::new(Root, solver)
///     .configure(|state| state.param(vec![1.0]))
///     .run()?;
/// assert!((result.state.get_best_param().unwrap()[0] - 2.0_f64.sqrt()).abs() < 1e-12);
/// assert!(result.solver.minimum().unwrap().termination.converged());
/// # Ok::<(), argmin::core::Error>(())
/// ```
#[derive(Clone, Debug)]
pub struct LevenbergMarquardt {
    bounds: Vec<Interval>,
    settings: Settings,
    workspace: Workspace,
    descent: Option<Descent>,
    minimum: Option<Minimum>,
}

impl LevenbergMarquardt {
    /// A search inside `bounds`, one interval a parameter.
    #[must_use]
    pub fn new(bounds: Vec<Interval>, settings: Settings) -> Self {
        Self::with_workspace(bounds, settings, Workspace::new())
    }

    /// The same, with buffers from an earlier search.
    #[must_use]
    pub fn with_workspace(bounds: Vec<Interval>, settings: Settings, workspace: Workspace) -> Self {
        Self {
            bounds,
            settings,
            workspace,
            descent: None,
            minimum: None,
        }
    }

    /// The result, once the search has ended by itself; `None` where the executor stopped it first.
    #[must_use]
    pub fn minimum(&self) -> Option<&Minimum> {
        self.minimum.as_ref()
    }

    /// The buffers, for the next search.
    #[must_use]
    pub fn into_workspace(self) -> Workspace {
        self.workspace
    }
}

type SearchState = IterState<Vec<f64>, (), (), (), (), f64>;

impl<P: LeastSquares> Solver<P, SearchState> for LevenbergMarquardt {
    fn name(&self) -> &'static str {
        "bounded Levenberg-Marquardt"
    }

    fn init(
        &mut self,
        problem: &mut Problem<P>,
        mut state: SearchState,
    ) -> Result<(SearchState, Option<KV>), Error> {
        let start = state
            .take_param()
            .ok_or_else(|| ArgminError::NotInitialized {
                text: "no start, expected one set with `configure(|state| state.param(start))`"
                    .to_owned(),
            })?;
        let model = counted(problem)?;
        let descent = Descent::begin(
            model,
            &start,
            &self.bounds,
            &self.settings,
            &mut self.workspace,
        )?;
        let chi2 = descent.chi2();
        self.minimum = None;
        self.descent = Some(descent);
        Ok((state.param(start).cost(chi2), None))
    }

    fn next_iter(
        &mut self,
        problem: &mut Problem<P>,
        state: SearchState,
    ) -> Result<(SearchState, Option<KV>), Error> {
        let descent = self
            .descent
            .as_mut()
            .ok_or_else(|| ArgminError::NotInitialized {
                text: "no search under way, expected `init` first".to_owned(),
            })?;
        let before = descent.evaluations();
        let model = problem.problem.as_mut().ok_or_else(no_problem)?;
        let ended = descent.step(model, &self.bounds, &self.settings, &mut self.workspace);
        *problem.counts.entry(COUNT).or_insert(0) += (descent.evaluations() - before) as u64;
        let log = argmin::kv!(
            "damping" => descent.damping();
            "gain" => descent.gain();
            "evaluations" => descent.evaluations() as u64;
        );
        let state = state
            .param(descent.parameters().to_vec())
            .cost(descent.chi2());
        let Some(termination) = ended else {
            return Ok((state, Some(log)));
        };
        self.minimum = Some(descent.finish(termination, &self.bounds, &mut self.workspace));
        Ok((terminated(state, termination), Some(log)))
    }
}

const COUNT: &str = "evaluation_count";

fn terminated(state: SearchState, termination: Termination) -> SearchState {
    use argmin::core::State;
    state.terminate_with(termination.into())
}

fn no_problem() -> ArgminError {
    ArgminError::NotInitialized {
        text: "no problem, expected one given to `Executor::new`".to_owned(),
    }
}

/// The model inside, one evaluation counted.
fn counted<P>(problem: &mut Problem<P>) -> Result<&mut P, ArgminError> {
    *problem.counts.entry(COUNT).or_insert(0) += 1;
    problem.problem.as_mut().ok_or_else(no_problem)
}
