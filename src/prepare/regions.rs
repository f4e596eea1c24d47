//! Runs of channels with significant signal: boxes of many widths, grown into the wings.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use crate::numeric::Autoregression;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};

/// A run of channels with signal, ends included.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Region {
    pub low: usize,
    pub high: usize,
    /// Significance of the best box in it, in standard deviations; negative for absorption.
    pub significance: f64,
}

impl Region {
    pub fn width(&self) -> usize {
        self.high - self.low + 1
    }

    /// Channels between two regions; 0 where they touch or overlap.
    pub fn gap(&self, other: &Region) -> usize {
        let between = |a: &Region, b: &Region| b.low.saturating_sub(a.high + 1);
        between(self, other).max(between(other, self))
    }

    pub fn join(&self, other: &Region) -> Region {
        let significance = if self.significance.abs() >= other.significance.abs() {
            self.significance
        } else {
            other.significance
        };
        Region {
            low: self.low.min(other.low),
            high: self.high.max(other.high),
            significance,
        }
    }
}

/// Most regions that are looked for in one spectrum.
const MOST_REGIONS: usize = 16;

/// A region grows while the next channels stand out by this many standard deviations.
const GROW_AT: f64 = 2.0;

/// A channel that stands out from both neighbours by more than this many standard deviations counts
/// only as much: interference in a single channel is no line.
const SPIKE_AT: f64 = 3.0;

/// Width of the widest box that is tried on a band: a third of it.
fn largest_box(count: usize) -> usize {
    (count / 3).max(1)
}

/// Widest box whose noise is ever asked for: the largest one tried, or the few channels beside a
/// region or a window.
fn widest(count: usize) -> usize {
    largest_box(count).max(BESIDE).min(count)
}

/// Widest look beside a region or a window, where half of the region is not more.
pub(super) const BESIDE: usize = 12;

/// Sums of residuals over boxes, in units of their noise.
pub(super) struct Boxes {
    sums: Vec<f64>,
    /// Variance of the noise's sum over 0, 1, 2, ... channels, K^2.
    variance_of_sum: Vec<f64>,
    /// Variance of the baseline in each channel, K^2.
    baseline_variance: Vec<f64>,
}

impl Boxes {
    /// Sums of `residuals` (K) whose noise has a scale (K) and a process, on a baseline of a known
    /// variance in each channel (K^2): far from where it was fitted, wide boxes prove little.
    pub fn new(
        residuals: &[f64],
        scale: f64,
        process: &Autoregression,
        baseline_variance: Vec<f64>,
    ) -> Self {
        let count = residuals.len();
        let limit = SPIKE_AT * scale;
        let mut sums = Vec::with_capacity(count + 1);
        let mut sum = 0.0;
        sums.push(0.0);
        for (i, &value) in residuals.iter().enumerate() {
            let before = if i > 0 { residuals[i - 1] } else { 0.0 };
            let after = if i + 1 < count { residuals[i + 1] } else { 0.0 };
            sum += value.clamp(before.min(after) - limit, before.max(after) + limit);
            sums.push(sum);
        }
        // Var(x_1 + ... + x_n) grows by 1 + 2 (rho_1 + ... + rho_(n-1)) with every value.
        let mut variance_of_sum = vec![0.0];
        let (mut variance, mut step) = (0.0, -1.0);
        for rho in process.autocorrelation(widest(count)) {
            step += 2.0 * rho;
            variance += step;
            variance_of_sum.push(scale * scale * variance);
        }
        Self {
            sums,
            variance_of_sum,
            baseline_variance,
        }
    }

    fn len(&self) -> usize {
        self.sums.len() - 1
    }

    /// Significance of the sum over `low..low + width`.
    pub fn significance(&self, low: usize, width: usize) -> f64 {
        let sum = self.sums[low + width] - self.sums[low];
        let channels = width as f64;
        let baseline = channels * channels * self.baseline_variance[low + width / 2];
        sum / (self.variance_of_sum[width] + baseline).sqrt()
    }

    /// Box widths that are tried: 1, 2, 3, 4, 6, 8, 12, ... up to a third of the band.
    fn widths(&self) -> Vec<usize> {
        let largest = largest_box(self.len());
        let mut widths = vec![1, 2, 3];
        let mut width = 4;
        while width <= largest {
            widths.push(width);
            if width + width / 2 <= largest {
                widths.push(width + width / 2);
            }
            width *= 2;
        }
        widths.retain(|&width| width <= largest);
        widths
    }

    /// The boxes whose significance is at least `threshold` either way, in order of their last
    /// channel, and the significance of the strongest of all boxes.
    fn standing_out(&self, threshold: f64) -> (Vec<Region>, f64) {
        // Without the baseline's share the noise is least: most boxes are settled by that alone.
        let widths: Vec<(usize, f64)> = self
            .widths()
            .into_iter()
            .map(|width| (width, self.variance_of_sum[width].sqrt()))
            .collect();
        let mut may_stand_out = vec![0_u64; self.len()];
        dispatch(MayStandOut {
            sums: &self.sums,
            widths: &widths,
            threshold,
            marks: &mut may_stand_out,
        });
        let mut found = Vec::new();
        let mut strongest = 0.0_f64;
        for (high, &marks) in may_stand_out.iter().enumerate() {
            let mut left = marks;
            while left != 0 {
                let width = widths[left.trailing_zeros() as usize].0;
                left &= left - 1;
                let low = high + 1 - width;
                let significance = self.significance(low, width);
                strongest = strongest.max(significance.abs());
                if significance.abs() >= threshold {
                    found.push(Region {
                        low,
                        high,
                        significance,
                    });
                }
            }
        }
        if strongest < threshold {
            strongest = self.strongest(&widths);
        }
        (found, strongest)
    }

    /// The significance of the strongest box, either way.
    fn strongest(&self, widths: &[(usize, f64)]) -> f64 {
        let mut strongest = 0.0_f64;
        for &(width, least_noise) in widths {
            for low in 0..=self.len() - width {
                let sum = (self.sums[low + width] - self.sums[low]).abs();
                if sum >= strongest * least_noise {
                    strongest = strongest.max(self.significance(low, width).abs());
                }
            }
        }
        strongest
    }

    /// Extends a box into its wings, on either side by at most its own width.
    fn grow(&self, mut region: Region, taken: &[bool]) -> Region {
        let sign = region.significance.signum();
        let half = region.width() / 2;
        let looks = [2, 5, half];
        let reach = region.width().max(4);
        let lowest = region.low.saturating_sub(reach);
        let highest = (region.high + reach).min(self.len() - 1);
        let goes_on = |low: usize, width: usize| sign * self.significance(low, width) > GROW_AT;
        while region.low > lowest
            && !taken[region.low - 1]
            && looks.iter().any(|&width| {
                width >= 2 && width <= region.low && goes_on(region.low - width, width)
            })
        {
            region.low -= 1;
        }
        while region.high < highest
            && !taken[region.high + 1]
            && looks.iter().any(|&width| {
                width >= 2
                    && region.high + 1 + width <= self.len()
                    && goes_on(region.high + 1, width)
            })
        {
            region.high += 1;
        }
        region
    }

    /// All regions whose best box reaches `threshold` standard deviations, most significant first.
    ///
    /// `favoured` channels need one standard deviation less: a line is expected there. The significance
    /// of the strongest box comes with them, found or not.
    pub fn regions(&self, threshold: f64, favoured: Option<(usize, usize)>) -> (Vec<Region>, f64) {
        let (mut boxes, strongest) = self.standing_out(threshold - 1.0);
        let mut taken = vec![false; self.len()];
        let mut regions = Vec::new();
        while regions.len() < MOST_REGIONS {
            // The first of equals, as narrow as there is.
            let best = boxes.iter().copied().reduce(|best, next| {
                if next.significance.abs() > best.significance.abs() {
                    next
                } else {
                    best
                }
            });
            let Some(found) = best else {
                break;
            };
            let expected =
                favoured.is_some_and(|(low, high)| found.low <= high && found.high >= low);
            let needed = if expected { threshold - 1.0 } else { threshold };
            let grown = self.grow(found, &taken);
            taken[grown.low..=grown.high].fill(true);
            boxes.retain(|one| one.high < grown.low || one.low > grown.high);
            if found.significance.abs() >= needed {
                regions.push(grown);
            }
        }
        (regions, strongest)
    }
}

/// Marks the boxes that reach a threshold in units of their least noise: bit k of a channel's marks
/// for the box of the k-th width (at most 64 of them) that ends there.
struct MayStandOut<'a> {
    /// Sums before each channel, and of all.
    sums: &'a [f64],
    /// Widths, and the least noise of a sum over each.
    widths: &'a [(usize, f64)],
    threshold: f64,
    marks: &'a mut [u64],
}

impl Kernel for MayStandOut<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (k, &(width, least_noise)) in self.widths.iter().enumerate() {
            let limit = self.threshold * least_noise;
            let ends = self.marks[width - 1..].iter_mut();
            for (marks, (before, until)) in ends.zip(self.sums.iter().zip(&self.sums[width..])) {
                let mark = u64::from((until - before).abs() >= limit);
                *marks |= mark << k;
            }
        }
    }
}
