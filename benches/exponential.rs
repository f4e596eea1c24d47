//! What does an exponential cost, on each instruction set, and beside std's? Every answer is checked.
#![allow(
    missing_docs,
    clippy::unwrap_used,
    reason = "a bench stops where it cannot go on"
)]
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use criterion::{Criterion, Throughput, criterion_group, criterion_main};
use inrush::numeric::dispatch::{Arithmetic, InstructionSet, Kernel, dispatch_on};
use inrush::numeric::exponential::{ExpInPlace, escape_and_slope, exp_negative};
use std::hint::black_box;

/// Fits in the first-level cache together with the results.
const ELEMENTS: usize = 1024;

fn exponential(criterion: &mut Criterion) {
    let arguments: Vec<f64> = (0..ELEMENTS).map(|i| -0.04 * i as f64).collect();
    let exact: Vec<f64> = arguments.iter().map(|x| x.exp()).collect();
    let mut values = arguments.clone();
    let mut group = criterion.benchmark_group("exponential");
    group.throughput(Throughput::Elements(ELEMENTS as u64));
    for instructions in InstructionSet::ALL {
        if !instructions.is_available() {
            continue;
        }
        group.bench_function(format!("{instructions:?}"), |bencher| {
            bencher.iter(|| {
                values.copy_from_slice(black_box(&arguments));
                dispatch_on(instructions, ExpInPlace(&mut values)).unwrap();
                black_box(&mut values);
            });
        });
        for (y, exact) in values.iter().zip(&exact) {
            assert!((y / exact - 1.0).abs() < 5e-16);
        }
    }
    group.bench_function("std", |bencher| {
        bencher.iter(|| {
            values.copy_from_slice(black_box(&arguments));
            for value in &mut values {
                *value = value.exp();
            }
            black_box(&mut values);
        });
    });
    assert_eq!(values, exact);
    group.finish();
}

/// e^-x, (1 - e^-x)/x and its slope, as the hill model needs them.
struct Escape<'a> {
    depths: &'a [f64],
    factors: &'a mut [f64],
    slopes: &'a mut [f64],
}

impl Kernel for Escape<'_> {
    type Output = ();
    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let n = self.depths.len();
        let (factors, slopes) = (&mut self.factors[..n], &mut self.slopes[..n]);
        for i in 0..n {
            let x = self.depths[i];
            (factors[i], slopes[i]) = escape_and_slope::<A>(x, exp_negative::<A>(x));
        }
    }
}

fn escape(criterion: &mut Criterion) {
    let depths: Vec<f64> = (0..ELEMENTS).map(|i| 0.004 * i as f64 + 1e-9).collect();
    let (mut factors, mut slopes) = (vec![0.0; ELEMENTS], vec![0.0; ELEMENTS]);
    let mut group = criterion.benchmark_group("escape_and_slope");
    group.throughput(Throughput::Elements(ELEMENTS as u64));
    for instructions in InstructionSet::ALL {
        if !instructions.is_available() {
            continue;
        }
        group.bench_function(format!("{instructions:?}"), |bencher| {
            bencher.iter(|| {
                let kernel = Escape {
                    depths: black_box(&depths),
                    factors: &mut factors,
                    slopes: &mut slopes,
                };
                dispatch_on(instructions, kernel).unwrap();
                black_box((&mut factors, &mut slopes));
            });
        });
        for (x, factor) in depths.iter().zip(&factors) {
            assert!((factor + (-x).exp_m1() / x).abs() < 4e-16);
        }
    }
    group.finish();
}

criterion_group!(benches, exponential, escape);
criterion_main!(benches);
