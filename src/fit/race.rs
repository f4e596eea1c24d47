//! Starts that compete: all are followed for a few steps, the deeper ones further, and the deepest to
//! their minima. Both signs of the inward speed stay in.

use super::projected::Projected;
use super::{FitError, SEARCH};
use crate::numeric::least_squares::{Descent, Workspace};

/// Steps of each round and how many stay in after it.
const ROUNDS: [(usize, usize); 3] = [(3, 5), (3, 3), (1000, 2)];

struct Runner {
    descent: Descent,
    workspace: Workspace,
    ended: bool,
}

impl Runner {
    fn inward(&self, v_in: Option<usize>) -> Option<bool> {
        v_in.map(|index| self.descent.parameters()[index] > 0.0)
    }

    /// Whether it has run into another one.
    fn is_at(&self, other: &Self) -> bool {
        let (a, b) = (self.descent.chi2(), other.descent.chi2());
        (a - b).abs() <= SAME_CHI2 * a.min(b)
            && (self.descent.parameters().iter())
                .zip(other.descent.parameters())
                .all(|(a, b)| (a - b).abs() <= SAME_PARAMETER * (1e-3 + a.abs().max(b.abs())))
    }
}

/// Relative differences below which two descents are in one place.
const SAME_CHI2: f64 = 1e-3;
const SAME_PARAMETER: f64 = 0.02;

/// Where the deepest descents ended, the deepest first (nonlinear parameters; of `v_in`, a joint position,
/// both signs if there are such), and the number of evaluations.
pub(super) fn finalists(
    problem: &mut Projected<'_>,
    starts: &[Vec<f64>],
    v_in: Option<usize>,
) -> Result<(Vec<Vec<f64>>, usize), FitError> {
    let v_in = v_in.and_then(|position| problem.position(position));
    let bounds = problem.bounds();
    let mut runners = Vec::with_capacity(starts.len());
    let mut evaluations = 0;
    let first = crate::numeric::least_squares::Settings { initial_radius: std::env::var("RADIUS").ok().map_or(1.0, |t| t.parse().unwrap()), ..SEARCH };
    for start in starts {
        let start = problem.parameters_of(start);
        let mut workspace = Workspace::new();
        let descent = Descent::begin(problem, &start, &bounds, &first, &mut workspace)?;
        runners.push(Runner {
            descent,
            workspace,
            ended: false,
        });
    }
    let rounds: Vec<(usize, usize)> = match std::env::var("ROUNDS") {
        Ok(text) => text
            .split(',')
            .map(|p| {
                let (a, b) = p.split_once(':').unwrap();
                (a.parse().unwrap(), b.parse().unwrap())
            })
            .collect(),
        Err(_) => ROUNDS.to_vec(),
    };
    let tau = None.or(problem.tau());
    let last = rounds.len() - 1;
    for (index, (steps, stay)) in rounds.into_iter().enumerate() {
        if index == last && std::env::var("MIRROR").is_ok() {
            if let (Some(v_in), Some(tau)) = (v_in, tau) {
                let mut start = runners[0].descent.parameters().to_vec();
                if start[tau] < 1.0 {
                    start[v_in] = -start[v_in];
                    let mut workspace = Workspace::new();
                    let descent = Descent::begin(problem, &start, &bounds, &first, &mut workspace)?;
                    runners.push(Runner { descent, workspace, ended: false });
                }
            }
        }
        for runner in &mut runners {
            for done in 0..steps {
                if runner.ended || done > 40 {
                    break;
                }
                let ended = runner
                    .descent
                    .step(problem, &bounds, &SEARCH, &mut runner.workspace);
                runner.ended = ended.is_some();
            }
        }
        runners.sort_by(|a, b| a.descent.chi2().total_cmp(&b.descent.chi2()));
        let mut kept: Vec<Runner> = Vec::with_capacity(runners.len());
        for runner in runners {
            let other_sign = kept
                .iter()
                .all(|other| other.inward(v_in) != runner.inward(v_in));
            if (kept.len() < stay || other_sign) && !kept.iter().any(|other| other.is_at(&runner)) {
                kept.push(runner);
            } else {
                evaluations += runner.descent.evaluations();
            }
        }
        runners = kept;
    }
    evaluations += runners
        .iter()
        .map(|runner| runner.descent.evaluations())
        .sum::<usize>();
    let places = runners
        .iter()
        .map(|runner| runner.descent.parameters().to_vec())
        .collect();
    Ok((places, evaluations))
}
