//! Noise of a map: spectra whose noise is independent from pointing to pointing, or goes together over
//! the width of a kernel.

use super::GridTruth;
use crate::simulate::PairLine;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use std::collections::BTreeMap;

/// First stream of pointings; those below are of pairs and of what is bad.
const FIRST_STREAM: u64 = 16;

/// Nodes of independent noise a kernel's full width: sums over them follow the kernel's own
/// correlation within 0.002.
const NODES_PER_FWHM: f64 = 2.0;

/// Reach of the kernel, in full widths: it is down to 2e-5 there.
const KERNEL_REACH: f64 = 2.0;

/// Noise of unit rms in the channels of every pointing, for one line.
pub(super) fn unit_noise(truth: &GridTruth, line: PairLine, channels: usize) -> Vec<Vec<f64>> {
    let stream = |number: u64| {
        let mut generator = ChaCha8Rng::seed_from_u64(truth.seed);
        generator.set_stream(FIRST_STREAM + 2 * number + line.stream() - 1);
        truth.correlation.unit_noise(&mut generator, channels)
    };
    let positions = truth.positions();
    if truth.noise_fwhm_arcsec == 0.0 {
        return (0..positions.len() as u64).map(stream).collect();
    }
    let spacing = truth.noise_fwhm_arcsec / NODES_PER_FWHM;
    let mut nodes: BTreeMap<u64, Vec<f64>> = BTreeMap::new();
    positions
        .into_iter()
        .map(|at| {
            let weights = node_weights(at.map(|offset| offset / spacing));
            let norm: f64 = weights.iter().map(|(_, weight)| weight * weight).sum();
            let mut noise = vec![0.0; channels];
            for (node, weight) in weights {
                let values = nodes.entry(node).or_insert_with(|| stream(node));
                for (sum, value) in noise.iter_mut().zip(values) {
                    *sum += weight / norm.sqrt() * *value;
                }
            }
            noise
        })
        .collect()
}

/// Nodes about a place and their weights; place and nodes in units of the nodes' spacing.
fn node_weights([x, y]: [f64; 2]) -> Vec<(u64, f64)> {
    const HALF: f64 = KERNEL_REACH * NODES_PER_FWHM;
    let near = |centre: f64| {
        let first = (centre - HALF).ceil();
        (0..9)
            .map(move |step| first + f64::from(step))
            .filter(move |node| (node - centre).abs() <= HALF)
    };
    let mut weights = Vec::new();
    for row in near(y) {
        for column in near(x) {
            let square = ((column - x).powi(2) + (row - y).powi(2)) / NODES_PER_FWHM.powi(2);
            let weight = (-4.0 * std::f64::consts::LN_2 * square).exp();
            weights.push((number(column) << 24 | number(row), weight));
        }
    }
    weights
}

/// A node's row or column as a number from 0: maps are less than 8 million nodes wide.
#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "a whole number between 0 and 2^24 of a checked map"
)]
fn number(node: f64) -> u64 {
    (node + 8_388_608.0).clamp(0.0, 16_777_215.0) as u64
}
