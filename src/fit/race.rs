//! Starts that compete: all are followed for a few steps, the deeper ones further, and the deepest to
//! their minima. Both signs of the inward speed stay in.

use super::projected::Projected;
use super::{FitError, SEARCH};
use crate::numeric::least_squares::{Descent, Interval, Settings, Termination, Workspace};

/// Steps of each round, and how many stay in after it.
const ROUNDS: [Round; 3] = [
    Round { steps: 2, stay: 8 },
    Round { steps: 2, stay: 5 },
    Round { steps: 3, stay: 3 },
];

/// Most further steps of the last in the race: one that creeps that long is no match for the settled fit,
/// which goes on where it stopped.
const LAST: Round = Round { steps: 40, stay: 2 };

struct Round {
    steps: usize,
    stay: usize,
}

/// The first steps are short, so that a descent stays in the valley where it began.
const FIRST: Settings = Settings {
    initial_radius: 0.25,
    ..SEARCH
};

/// Relative differences below which two descents are in one place.
const SAME_CHI2: f64 = 1e-3;
const SAME_PARAMETER: f64 = 0.02;

/// Optical depth below which the two halves can nearly be exchanged: there is a minimum with the other
/// sign of the inward speed as deep to within little.
const EXCHANGEABLE: f64 = 4.0;

/// From there steps are shorter still: little parts the two.
const EXCHANGED: Settings = Settings {
    initial_radius: 0.05,
    ..SEARCH
};

/// Optical depths from which the exchanged minimum is searched, in that of the deepest one. Where the halves
/// have temperatures of their own and one is cold, the other makes the line alone, and has another depth
/// behind it than in front.
const EXCHANGED_TAU: [f64; 3] = [1.0, 0.3, 3.0];

/// chi2 and parameters.
type Place = (f64, Vec<f64>);

/// A descent under way.
struct Runner<'a> {
    /// Boxed, so that sorting moves little.
    descent: Box<Descent>,
    workspace: &'a mut Workspace,
    ended: Option<Termination>,
}

impl Runner<'_> {
    fn follow(&mut self, problem: &mut Projected<'_>, bounds: &[Interval], steps: usize) {
        for _ in 0..steps {
            if self.ended.is_some() {
                return;
            }
            self.ended = self.descent.step(problem, bounds, &SEARCH, self.workspace);
        }
    }

    fn value(&self, index: Option<usize>) -> Option<f64> {
        index.map(|index| self.descent.parameters()[index])
    }

    /// Whether it has run into another one.
    fn is_at(&self, other: &Self) -> bool {
        let (a, b) = (self.descent.chi2(), other.descent.chi2());
        let same =
            |(a, b): (&f64, &f64)| (a - b).abs() <= SAME_PARAMETER * (1e-3 + a.abs().max(b.abs()));
        (a - b).abs() <= SAME_CHI2 * a.min(b)
            && (self.descent.parameters().iter())
                .zip(other.descent.parameters())
                .all(same)
    }
}

/// Where the deepest descents ended, the deepest first (chi2 and the parameters of `problem`; of the inward
/// speed both signs if both are there), and the number of evaluations.
pub(super) fn finalists(
    problem: &mut Projected<'_>,
    starts: &[Vec<f64>],
    workspaces: &mut Vec<Workspace>,
) -> Result<(Vec<Place>, usize), FitError> {
    let v_in = problem.position_of("v_in_km_s");
    let tau = problem.position_of("tau");
    let bounds = problem.bounds();
    let most = starts.len() + EXCHANGED_TAU.len();
    if workspaces.len() < most {
        workspaces.resize_with(most, Workspace::new);
    }
    let mut workspaces = workspaces.iter_mut();
    let mut begin = |problem: &mut Projected<'_>,
                     start: &[f64],
                     first: &Settings|
     -> Result<Option<Runner<'_>>, FitError> {
        let Some(workspace) = workspaces.next() else {
            return Ok(None);
        };
        let descent = Descent::begin(problem, start, &bounds, first, workspace)?;
        Ok(Some(Runner {
            descent: Box::new(descent),
            workspace,
            ended: None,
        }))
    };
    let mut runners = Vec::with_capacity(starts.len());
    for start in starts {
        let start = problem.parameters_of(start);
        runners.extend(begin(problem, &start, &FIRST)?);
    }
    let mut evaluations = 0;
    for Round { steps, stay } in ROUNDS.into_iter().chain([LAST]) {
        for runner in &mut runners {
            runner.follow(problem, &bounds, steps);
        }
        evaluations += keep(&mut runners, stay, v_in);
    }
    if let (Some(v_in), Some(tau)) = (v_in, tau)
        && let Some(deepest) = runners.first()
        && deepest.descent.parameters()[tau] < EXCHANGEABLE
    {
        let deepest = deepest.descent.parameters().to_vec();
        let depths = if problem.has_two_temperatures() {
            &EXCHANGED_TAU[..]
        } else {
            &EXCHANGED_TAU[..1]
        };
        for factor in depths {
            let mut exchanged = deepest.clone();
            exchanged[v_in] = bounds[v_in].nearest(-exchanged[v_in]);
            exchanged[tau] = bounds[tau].nearest(factor * exchanged[tau]);
            if let Some(mut runner) = begin(problem, &exchanged, &EXCHANGED)? {
                runner.follow(problem, &bounds, LAST.steps);
                runners.push(runner);
            }
        }
        evaluations += keep(&mut runners, LAST.stay, Some(v_in));
    }
    evaluations += runners
        .iter()
        .map(|runner| runner.descent.evaluations())
        .sum::<usize>();
    let places = runners
        .iter()
        .map(|runner| (runner.descent.chi2(), runner.descent.parameters().to_vec()))
        .collect();
    Ok((places, evaluations))
}

/// Keeps the deepest that have not run into each other, one of each sign of the inward speed among them;
/// returns the evaluations that the others took.
fn keep(runners: &mut Vec<Runner<'_>>, stay: usize, v_in: Option<usize>) -> usize {
    runners.sort_by(|a, b| a.descent.chi2().total_cmp(&b.descent.chi2()));
    let inward = |runner: &Runner<'_>| runner.value(v_in).map(|speed| speed > 0.0);
    let mut evaluations = 0;
    let mut kept = Vec::with_capacity(runners.len());
    for runner in runners.drain(..) {
        let other_sign = kept.iter().all(|other| inward(other) != inward(&runner));
        if (kept.len() < stay || other_sign) && !kept.iter().any(|other| runner.is_at(other)) {
            kept.push(runner);
        } else {
            evaluations += runner.descent.evaluations();
        }
    }
    *runners = kept;
    evaluations
}
