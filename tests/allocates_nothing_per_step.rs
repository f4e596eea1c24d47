//! A search allocates nothing from step to step, whatever the model, the line and the noise.
//!
//! The allocator of this program counts what each thread asks of it.
#![allow(
    unsafe_code,
    reason = "an allocator is unsafe by its trait; this one hands every call on to the system's"
)]

use inrush::fit::{self, Averaging, Channels, FitSettings, JointProblem, Layout};
use inrush::line::{Line, find};
use inrush::model::{LineShape, Model, Sampling};
use inrush::numeric::least_squares::{Descent, Interval, Settings, Workspace};
use inrush::numeric::{Autoregression, Estimate};
use inrush::prepare::Prepared;
use inrush::spectrum::{Noise, Spectrum, Window};
use std::alloc::{GlobalAlloc, Layout as MemoryLayout, System};
use std::cell::Cell;

thread_local! {
    static CALLS: Cell<usize> = const { Cell::new(0) };
}

struct Counting;

// SAFETY: every call goes to the system's allocator as it came. The counter is a `Cell` that is
// initialised at compile time and has no destructor: reaching it allocates nothing.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: MemoryLayout) -> *mut u8 {
        CALLS.set(CALLS.get() + 1);
        // SAFETY: the caller's promise, passed on.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: MemoryLayout) {
        // SAFETY: the caller's promise, passed on.
        unsafe { System.dealloc(pointer, layout) }
    }

    unsafe fn realloc(&self, pointer: *mut u8, layout: MemoryLayout, size: usize) -> *mut u8 {
        CALLS.set(CALLS.get() + 1);
        // SAFETY: the caller's promise, passed on.
        unsafe { System.realloc(pointer, layout, size) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

/// Calls of the allocator while `work` runs in this thread, and what it returns.
fn allocations<T>(work: impl FnOnce() -> T) -> (usize, T) {
    let before = CALLS.get();
    let result = work();
    (CALLS.get() - before, result)
}

#[test]
fn the_counter_counts() {
    assert_eq!(allocations(|| 1 + 1).0, 0);
    assert_eq!(allocations(|| vec![0u8; 100]).0, 1);
    let mut vector = Vec::with_capacity(1);
    assert_eq!(allocations(|| vector.extend_from_slice(&[1, 2])).0, 1);
}

/// A line of 0.15 km/s channels with a ripple in place of noise, so that no model fits exactly.
fn prepared(model: Model, line: &Line, parameters: &[f64], process: Autoregression) -> Prepared {
    let width_km_s = 0.15;
    let velocity_km_s: Vec<f64> = (0..200).map(|i| f64::from(i - 100) * width_km_s).collect();
    let width_km_s = vec![width_km_s; velocity_km_s.len()];
    let sampling = Sampling::new(velocity_km_s.clone(), width_km_s.clone(), 3);
    let mut value_k = vec![0.0; sampling.len()];
    model.evaluate(&shape(line), &sampling, parameters, &mut value_k, None);
    for (value, channel) in value_k.iter_mut().zip(0u32..) {
        *value += 0.05 * (f64::from(channel * channel) * 0.7).sin();
    }
    let channels = value_k.len();
    Prepared::as_given(
        Spectrum::new(velocity_km_s, width_km_s, value_k).expect("a spectrum"),
        Window {
            low_km_s: -4.0,
            high_km_s: 4.0,
        },
        Noise {
            rms_k: 0.05,
            channels,
            process,
        },
    )
}

fn shape(line: &Line) -> LineShape {
    LineShape::new(line.rest_frequency_ghz, line.components.clone())
}

/// Where the search begins: not far from any of the models, at none of their minima.
fn start(layout: &Layout) -> Vec<f64> {
    let value = |name: &str| match name {
        "v_lsr_km_s" | "v_thin_km_s" => 0.05,
        "v_in_km_s" => 0.15,
        "v_second_km_s" | "v_second_thin_km_s" => 0.9,
        "filling" => 0.2,
        "tau" => 3.0,
        "tau_total" | "tau_thin" => 0.5,
        "isotope_ratio" => 50.0,
        name if name.starts_with("sigma") => 0.6,
        _ => 9.0,
    };
    let parameters = layout.parameters().iter();
    parameters.map(|parameter| value(parameter.name)).collect()
}

/// Steps of a search, and the most calls of the allocator in one of them.
fn search(layout: &Layout, thick: &Channels, thin: &Channels) -> (usize, usize) {
    let bounds: Vec<Interval> = (layout.parameters().iter())
        .map(|parameter| parameter.interval)
        .collect();
    let mut problem = JointProblem::new(layout, Some(thick), thin);
    let (settings, mut workspace) = (Settings::default(), Workspace::new());
    let mut descent = Descent::begin(
        &mut problem,
        &start(layout),
        &bounds,
        &settings,
        &mut workspace,
    )
    .expect("a start");
    let (mut steps, mut most) = (0, 0);
    loop {
        let (calls, ended) =
            allocations(|| descent.step(&mut problem, &bounds, &settings, &mut workspace));
        steps += 1;
        most = calls.max(most);
        if ended.is_some() {
            return (steps, most);
        }
    }
}

#[test]
fn no_step_of_any_model_allocates() {
    let line = |name| find(name).expect("a built-in line");
    let multiplet = line("N2H+ 1-0");
    let linked = FitSettings {
        isotope_ratio: Some(Estimate {
            value: 60.0,
            err: 15.0,
        }),
        ..FitSettings::default()
    };
    let free = FitSettings {
        free_thin_velocity: true,
        free_thin_sigma: true,
        ..FitSettings::default()
    };
    let shared = FitSettings::default();
    let white = Autoregression::white;
    let correlated = || Autoregression::from_reflections(&[0.6, -0.3]);
    let thick_parameters = [0.1, 0.5, 0.2, 4.0, 15.0];
    let mut longest = 0;
    for (thick_line, thin_line, process) in [
        (line("HCO+ 1-0"), line("H13CO+ 1-0"), white()),
        (line("HCO+ 1-0"), line("H13CO+ 1-0"), correlated()),
        (line("HCN 1-0"), multiplet, correlated()),
    ] {
        let thick = prepared(Model::Hill, &thick_line, &thick_parameters, process.clone());
        let thin_truth = [0.1, 0.5, 0.4, 9.0];
        let thin = prepared(Model::Layer, &thin_line, &thin_truth, process);
        for averaging in [Averaging::Centre, Averaging::Channel] {
            let channels = |prepared: &Prepared, line: &Line| {
                Channels::new(prepared, shape(line), None, averaging, 0.15)
            };
            let (thick, thin) = (channels(&thick, &thick_line), channels(&thin, &thin_line));
            for model in Model::ALL {
                let beside = if model == Model::TwoGaussians {
                    Model::TwoGaussians
                } else {
                    Model::Gaussian
                };
                for (thin_model, settings) in [
                    (beside, &shared),
                    (beside, &free),
                    (Model::Layer, &shared),
                    (Model::Layer, &linked),
                ] {
                    let reach = Interval::new(-8.0, 8.0);
                    let Ok(layout) = Layout::new(model, thin_model, settings, reach) else {
                        assert!(settings.isotope_ratio.is_some() && !model.has_infall());
                        continue;
                    };
                    let (steps, most) = search(&layout, &thick, &thin);
                    longest = steps.max(longest);
                    assert_eq!(
                        most,
                        0,
                        "{} with {} and {averaging:?}: calls of the allocator in one of {steps} steps",
                        model.name(),
                        thin_model.name(),
                    );
                }
            }
        }
    }
    assert!(longest >= 10, "{longest} steps are no search");
}

/// The whole search of a pair, with a workspace that has served before: what it allocates is for the pair and its
/// starts. The 200 candidates of each model alone are more than its calls, and more evaluations make no more of them.
#[test]
fn a_search_allocates_neither_by_candidate_nor_by_evaluation() {
    let line = |name| find(name).expect("a built-in line");
    let lines = (line("HCO+ 1-0"), line("H13CO+ 1-0"));
    let settings = FitSettings::default();
    let mut workspace = fit::Workspace::new();
    let mut found = Vec::new();
    for v_in in [0.02, 0.05, 0.1, 0.2, 0.3, 0.4, 0.6] {
        for tau in [0.5, 1.0, 2.0, 4.0, 8.0] {
            let thick = [0.1, 0.5, v_in, tau, 15.0];
            let thick = prepared(Model::Hill, &lines.0, &thick, Autoregression::white());
            let thin = [0.1, 0.5, 2.0];
            let thin = prepared(Model::Gaussian, &lines.1, &thin, Autoregression::white());
            let lines = (&lines.0, &lines.1);
            let mut search = || {
                fit::fit_pair(&thick, &thin, lines, None, &settings, &mut workspace).expect("a fit")
            };
            search();
            let (calls, pair) = allocations(search);
            assert!(calls < 2 * 200, "{calls}");
            let evaluations = pair
                .models
                .iter()
                .map(|model| model.evaluations)
                .sum::<usize>();
            found.push((evaluations as f64, calls as f64));
        }
    }
    let count = found.len() as f64;
    let mean = |of: fn(&(f64, f64)) -> f64| found.iter().map(of).sum::<f64>() / count;
    let (evaluations, calls) = (mean(|pair| pair.0), mean(|pair| pair.1));
    let moment = |of: fn(f64, f64) -> f64| -> f64 {
        (found.iter())
            .map(|pair| of(pair.0 - evaluations, pair.1 - calls))
            .sum()
    };
    let scatter = (moment(|x, _| x * x) / count).sqrt();
    assert!(scatter > 10.0, "{scatter} evaluations tell nothing");
    // one call an evaluation would make it 1; with scatter / sqrt(35) that is many errors away
    let slope = moment(|x, y| x * y) / moment(|x, _| x * x);
    assert!(slope < 0.5, "{slope} calls an evaluation");
}
