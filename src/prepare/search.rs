//! The line window, the baseline and the noise of one spectrum, found together in rounds.

use super::baseline::{Channels, Clipped, NOISE_CLIP, clipped_fit, robust_start};
use super::regions::{BESIDE, Boxes, Region};
use super::{Baseline, Expected, Outcome, PrepareError, PrepareSettings, Prepared, narrowed};
use crate::numeric::Autoregression;
use crate::numeric::robust::{clipped_scale, median};
use crate::spectrum::{Noise, Spectrum, Window};

/// Rounds of window, baseline and noise; they mostly settle in two or three.
const MOST_ROUNDS: usize = 12;

/// From this round on windows only grow, so that they settle.
const GROW_ONLY_FROM: usize = 5;

/// In the first round, which takes noise as white, regions beside the line must be this much more
/// significant: smoothed noise must not be sorted into line-free and not.
const FIRST_ROUND: f64 = 1.35;

/// Per cent of a line's width that are added to its window on either side.
const MARGIN_PERCENT: usize = 20;

/// Significance of signal just outside a window from which the window cuts the line.
const CUT_SIGMA: f64 = 4.0;

/// A line seen over a straight baseline is kept if it takes at most this share of the band.
const WIDEST_KEPT: f64 = 0.5;

/// What one round found.
struct Found {
    fit: Clipped,
    scale: f64,
    process: Autoregression,
    exclusion: Exclusion,
}

/// The channels that are not line-free, and why.
struct Exclusion {
    /// The line without margin; `None` where nothing stands out.
    line: Option<Region>,
    /// First and last channel of the window.
    window: Option<(usize, usize)>,
    channels: Vec<bool>,
    /// Channels of signal beyond the line.
    other: Vec<bool>,
    /// Systemic velocities of all lines in emission, the most significant first.
    lines: Vec<Window>,
    /// Significance of the strongest signal.
    significance: f64,
}

impl Exclusion {
    /// Excludes what another one excludes too.
    fn include(&mut self, other: &Exclusion) {
        let hull = |a: (usize, usize), b: (usize, usize)| (a.0.min(b.0), a.1.max(b.1));
        if let (Some(line), Some(before)) = (&mut self.line, &other.line) {
            *line = line.join(before);
        }
        if let (Some(window), Some(before)) = (&mut self.window, other.window) {
            *window = hull(*window, before);
        }
        for (mine, theirs) in self.channels.iter_mut().zip(&other.channels) {
            *mine |= theirs;
        }
        for (mine, theirs) in self.other.iter_mut().zip(&other.other) {
            *mine |= theirs;
        }
    }

    /// Channels that are line-free.
    fn free(&self) -> Vec<usize> {
        let mut free = Vec::with_capacity(self.channels.len());
        free.extend((0..self.channels.len()).filter(|&i| !self.channels[i]));
        free
    }
}

/// One spectrum and what is asked of it.
pub(super) struct Search<'a> {
    channels: &'a Channels,
    settings: &'a PrepareSettings,
    expected: &'a Expected,
    order: usize,
    needed: usize,
    step_km_s: f64,
    /// A line seen before, which the line contains if it overlaps it.
    at_least: Option<Region>,
    /// Systemic velocities to which the line is chosen among several; `None` for the brightest.
    toward: Option<Window>,
}

impl<'a> Search<'a> {
    pub fn new(
        spectrum: &Spectrum,
        channels: &'a Channels,
        settings: &'a PrepareSettings,
        expected: &'a Expected,
        needed: usize,
    ) -> Self {
        Self {
            channels,
            settings,
            expected,
            order: settings.baseline_order.unwrap_or(0),
            needed,
            step_km_s: spectrum.channel_width_km_s(),
            at_least: None,
            toward: None,
        }
    }

    /// Chooses among several lines the one at, or nearest to, these systemic velocities.
    pub fn toward(self, toward: Option<Window>) -> Self {
        Self { toward, ..self }
    }

    /// The prepared spectrum, with or without a line in it.
    pub fn outcome(mut self, spectrum: &Spectrum) -> Result<Outcome, PrepareError> {
        let order = self.order;
        if order > 1 {
            // A parabola or cubic can follow the faint side of a line: what a straight baseline
            // shows as line stays in the window.
            self.order = 1;
            self.at_least = self
                .run()
                .ok()
                .and_then(|found| found.exclusion.line)
                .filter(|line| line.width() as f64 <= WIDEST_KEPT * self.channels.len() as f64);
            self.order = order;
        }
        let found = self.run()?;
        Ok(self.finish(spectrum, &found))
    }

    /// Rounds of window, baseline and noise until the excluded channels no longer change.
    fn run(&self) -> Result<Found, PrepareError> {
        let channels = self.channels;
        let count = channels.len();
        let mut fit = robust_start(channels, self.order).ok_or_else(|| self.too_few(count))?;
        self.check_scale(fit.scale)?;
        // The line is still in the residuals and would count as correlated noise: white at first.
        let boxes = self.boxes(&fit, fit.scale, &Autoregression::white());
        let mut exclusion = self.exclude(&boxes, FIRST_ROUND * self.settings.detection_sigma);
        for round in 1..=MOST_ROUNDS {
            let free = exclusion.free();
            if free.len() < self.needed {
                return Err(self.too_few(free.len()));
            }
            fit = clipped_fit(channels, self.order, &free, self.settings.clip_sigma)
                .ok_or_else(|| self.too_few(free.len()))?;
            self.check_scale(fit.scale)?;
            let (scale, process) = self.noise(&fit, &self.far(&exclusion));
            let boxes = self.boxes(&fit, scale, &process);
            let mut next = self.exclude(&boxes, self.settings.detection_sigma);
            if round >= GROW_ONLY_FROM {
                next.include(&exclusion);
            }
            if next.channels == exclusion.channels || round == MOST_ROUNDS {
                break;
            }
            exclusion = next;
        }
        let (scale, process) = self.noise(&fit, &exclusion.channels);
        Ok(Found {
            fit,
            scale,
            process,
            exclusion,
        })
    }

    fn too_few(&self, found: usize) -> PrepareError {
        PrepareError::TooFewLineFree {
            found,
            usable: self.channels.len(),
            needed: self.needed,
        }
    }

    /// The excluded channels and, where enough others are left, as many again beside the line: a
    /// faint part that is not seen yet must not count as correlated noise.
    fn far(&self, exclusion: &Exclusion) -> Vec<bool> {
        let excluded = &exclusion.channels;
        let mut far = excluded.clone();
        let Some(line) = exclusion.line else {
            return far;
        };
        let low = line.low.saturating_sub(line.width());
        let high = (line.high + line.width()).min(far.len() - 1);
        far[low..=high].fill(true);
        let left = |mask: &[bool]| mask.iter().filter(|&&is_excluded| !is_excluded).count();
        if left(&far) >= (left(excluded) * 2 / 5).max(2 * self.needed) {
            far
        } else {
            excluded.clone()
        }
    }

    /// Noise and its process on channels that are not excluded, corrected for what the baseline took.
    fn noise(&self, fit: &Clipped, excluded: &[bool]) -> (f64, Autoregression) {
        let residuals = self.channels.residuals(&fit.baseline);
        let mut free = Vec::with_capacity(residuals.len());
        let not_excluded = residuals.iter().zip(excluded).filter(|(_, out)| !**out);
        free.extend(not_excluded.map(|(residual, _)| *residual));
        let scale = clipped_scale(&free, NOISE_CLIP);
        let process = self.process(&residuals, scale, excluded);
        let terms = self.order + 1;
        let process = process.before_subtraction(terms, free.len());
        (corrected_scale(scale, terms, free.len(), &process), process)
    }

    fn boxes(&self, fit: &Clipped, scale: f64, process: &Autoregression) -> Boxes {
        let power = scale * scale * process.power_at_zero();
        let variance = self
            .channels
            .leverage(self.order, &fit.kept)
            .iter()
            .map(|leverage| leverage * power)
            .collect();
        let residuals = self.channels.residuals(&fit.baseline);
        Boxes::new(&residuals, scale, process, variance)
    }

    fn check_scale(&self, scale: f64) -> Result<(), PrepareError> {
        let largest = self
            .channels
            .value
            .iter()
            .fold(0.0_f64, |largest, value| largest.max(value.abs()));
        // Below this is the rounding of the values themselves.
        if scale > 1e-12 * largest {
            return Ok(());
        }
        Err(PrepareError::ZeroNoise {
            value_k: median(&self.channels.value),
        })
    }

    fn process(&self, residuals: &[f64], scale: f64, excluded: &[bool]) -> Autoregression {
        if self.settings.noise_order == 0 {
            return Autoregression::white();
        }
        let limit = 4.0 * scale;
        let segments = self
            .channels
            .segments(|i| !excluded[i] && residuals[i].abs() < limit);
        let slices: Vec<&[f64]> = segments
            .iter()
            .map(|segment| &residuals[segment.clone()])
            .collect();
        Autoregression::fit(&slices, self.settings.noise_order, scale)
    }

    /// First and last channel within a window; `None` where it holds none.
    fn channel_range(&self, window: Window) -> Option<(usize, usize)> {
        let velocity = &self.channels.velocity;
        let low = velocity.partition_point(|&v| v < window.low_km_s);
        let high = velocity.partition_point(|&v| v <= window.high_km_s);
        (low < high).then(|| (low, high - 1))
    }

    /// The line, its window and the channels that are not line-free.
    ///
    /// Regions beyond the line are left out from `other_sigma` standard deviations.
    fn exclude(&self, boxes: &Boxes, other_sigma: f64) -> Exclusion {
        let given = self.settings.window.and_then(|w| self.channel_range(w));
        let favoured = given.or_else(|| self.expected.window.and_then(|w| self.channel_range(w)));
        let (regions, significance) = boxes.regions(self.settings.detection_sigma, favoured);
        let found = self.line(&regions, favoured, other_sigma);
        let line = found.map(|(line, _)| line);
        let mut channels = vec![false; self.channels.len()];
        let mut other = channels.clone();
        for region in &regions {
            let of_line = line.is_some_and(|line| line.gap(region) == 0);
            if of_line || region.significance.abs() >= other_sigma {
                let low = region.low.saturating_sub(1);
                let high = (region.high + 1).min(self.channels.len() - 1);
                channels[low..=high].fill(true);
                if !of_line {
                    other[low..=high].fill(true);
                }
            }
        }
        let window = given
            .or_else(|| found.map(|(line, width)| self.with_margin(line, width, &channels)))
            .or(favoured);
        if let Some((low, high)) = window {
            channels[low..=high].fill(true);
        }
        Exclusion {
            line,
            window,
            channels,
            other,
            lines: self.lines(&regions, other_sigma),
            significance,
        }
    }

    /// Systemic velocities of every line in emission, the most significant first.
    fn lines(&self, regions: &[Region], other_sigma: f64) -> Vec<Window> {
        let mut lines: Vec<Window> = Vec::new();
        for main in regions {
            if main.significance >= self.settings.detection_sigma {
                let line = self.systemic(&self.whole(main, regions, other_sigma));
                if !lines.contains(&line) {
                    lines.push(line);
                }
            }
        }
        lines
    }

    /// A line's velocities without the room for its components.
    fn systemic(&self, line: &Region) -> Window {
        let velocity = &self.channels.velocity;
        let half = 0.5 * self.step_km_s;
        let window = Window {
            low_km_s: velocity[line.low] - half,
            high_km_s: velocity[line.high] + half,
        };
        narrowed(window, &self.expected.components)
    }

    /// The line among the regions, its satellites and companions joined, and the width in channels of
    /// its main part.
    fn line(
        &self,
        regions: &[Region],
        favoured: Option<(usize, usize)>,
        other_sigma: f64,
    ) -> Option<(Region, usize)> {
        let inside = |region: &&Region| {
            favoured.is_none_or(|(low, high)| region.low <= high && region.high >= low)
        };
        let away = |main: &Region| {
            self.toward.map_or(0.0, |toward| {
                let line = self.whole(main, regions, other_sigma);
                self.systemic(&line).apart_km_s(&toward)
            })
        };
        let emission = regions
            .iter()
            .filter(inside)
            .filter(|region| region.significance > 0.0)
            .max_by(|a, b| {
                let nearer = away(b).total_cmp(&away(a));
                nearer.then(a.significance.total_cmp(&b.significance))
            });
        let main = emission.or_else(|| {
            regions
                .iter()
                .filter(inside)
                .min_by(|a, b| a.significance.total_cmp(&b.significance))
        })?;
        Some((self.whole(main, regions, other_sigma), main.width()))
    }

    /// The line of a main region, with its satellites and companions.
    fn whole(&self, main: &Region, regions: &[Region], other_sigma: f64) -> Region {
        let mut line = *main;
        if let Some(seen) = self.at_least
            && seen.gap(main) == 0
        {
            line = line.join(&seen);
        }
        if self.expected.components.len() > 1 {
            line = self.with_satellites(line, regions);
        }
        // What lies nearer than the line is wide belongs to it: the other side of a
        // self-absorbed line, a second cloud.
        loop {
            let reach = main.width().max(2);
            let joined = regions
                .iter()
                .filter(|region| region.significance.abs() >= other_sigma)
                .filter(|region| region.gap(&line) <= reach)
                .fold(line, |line, region| line.join(region));
            if joined.low == line.low && joined.high == line.high {
                return line;
            }
            line = joined;
        }
    }

    /// The main region's line with room for every component of the multiplet.
    ///
    /// The systemic velocity is where the regions' significance, summed over the components'
    /// positions with their weights, is largest.
    fn with_satellites(&self, main: Region, regions: &[Region]) -> Region {
        let velocity = &self.channels.velocity;
        let components = &self.expected.components;
        let signal = |v: f64| {
            let at = velocity.partition_point(|&x| x < v);
            regions
                .iter()
                .filter(|region| region.low <= at && at <= region.high)
                .map(|region| region.significance)
                .fold(0.0, f64::max)
        };
        let score = |v: f64| -> f64 {
            components
                .iter()
                .map(|component| component.weight * signal(v + component.offset_km_s))
                .sum()
        };
        let expected = |v: f64| self.toward.is_some_and(|toward| toward.contains(v));
        let main_centre = 0.5 * (velocity[main.low] + velocity[main.high]);
        let Some(best) = components
            .iter()
            .map(|component| (component.weight, main_centre - component.offset_km_s))
            .max_by(|a, b| {
                let there = expected(a.1).cmp(&expected(b.1));
                there
                    .then(score(a.1).total_cmp(&score(b.1)))
                    .then(a.0.total_cmp(&b.0))
            })
        else {
            return main;
        };
        let half = 0.5 * (velocity[main.high] - velocity[main.low]).max(self.step_km_s);
        let last = velocity.len() - 1;
        components.iter().fold(main, |line, component| {
            let centre = best.1 + component.offset_km_s;
            let low = velocity.partition_point(|&v| v < centre - half).min(last);
            let high = velocity
                .partition_point(|&v| v <= centre + half)
                .clamp(1, last + 1)
                - 1;
            line.join(&Region {
                low,
                high: high.max(low),
                significance: 0.0,
            })
        })
    }

    /// The line's channels with a margin of a share of its main part's width, or of its own if that is
    /// not much more, which leaves enough line-free channels.
    fn with_margin(&self, line: Region, main_width: usize, excluded: &[bool]) -> (usize, usize) {
        let last = self.channels.len() - 1;
        let free = excluded.iter().filter(|&&is_excluded| !is_excluded).count();
        let spare = free.saturating_sub(self.needed.max(self.channels.len() / 5)) / 2;
        let wanted = (line.width().min(2 * main_width) * MARGIN_PERCENT / 100).max(2);
        let margin = wanted.min(spare);
        (
            line.low.saturating_sub(margin),
            (line.high + margin).min(last),
        )
    }

    /// Whether signal goes on beyond the window or the band.
    fn cuts(&self, found: &Found, boxes: &Boxes, window: (usize, usize)) -> bool {
        let last = self.channels.len() - 1;
        let at_band_edge = found
            .exclusion
            .line
            .is_some_and(|line| line.low <= 1 || line.high + 1 >= last);
        let outside = [3, 6, BESIDE].iter().any(|&width| {
            let below =
                window.0 >= width && boxes.significance(window.0 - width, width) > CUT_SIGMA;
            let above =
                window.1 + width <= last && boxes.significance(window.1 + 1, width) > CUT_SIGMA;
            below || above
        });
        at_band_edge || outside
    }

    fn finish(&self, spectrum: &Spectrum, found: &Found) -> Outcome {
        let channels = self.channels;
        let boxes = self.boxes(&found.fit, found.scale, &found.process);
        let last = channels.len() - 1;
        let range = found.exclusion.window.unwrap_or((0, last));
        let edge = |i: usize, side: f64| {
            channels.velocity[i] + side * 0.5 * spectrum.width_km_s()[channels.index[i]]
        };
        let window = self.settings.window.unwrap_or(Window {
            low_km_s: edge(range.0, -1.0),
            high_km_s: edge(range.1, 1.0),
        });
        let values_k: Vec<f64> = if self.settings.baseline_order.is_some() {
            spectrum
                .velocity_km_s()
                .iter()
                .map(|&v| found.fit.baseline.evaluate(v))
                .collect()
        } else {
            vec![0.0; spectrum.len()]
        };
        let subtracted = spectrum.map_temperature_k(|channel, t| t - values_k[channel]);
        let is_other = |i: usize| found.exclusion.other[i] && !(range.0..=range.1).contains(&i);
        let other_signal = channels
            .segments(is_other)
            .into_iter()
            .map(|run| Window {
                low_km_s: edge(run.start, -1.0),
                high_km_s: edge(run.end - 1, 1.0),
            })
            .collect();
        let free = found.exclusion.free().len();
        let kept = found.fit.kept.len();
        Outcome {
            detected: found.exclusion.line.is_some(),
            lines: found.exclusion.lines.clone(),
            has_window: found.exclusion.window.is_some(),
            significance: found.exclusion.significance,
            needed: self.settings.detection_sigma,
            prepared: Prepared {
                window_cuts_line: self.cuts(found, &boxes, range),
                other_signal,
                spectrum: subtracted,
                window,
                window_automatic: self.settings.window.is_none(),
                baseline: Baseline {
                    order: self.settings.baseline_order,
                    values_k,
                    channels: kept,
                    clipped: free - kept,
                },
                noise: Noise {
                    rms_k: found.scale,
                    channels: free,
                    process: found.process.clone(),
                },
            },
        }
    }
}

/// The noise before `terms` of a baseline were fitted to `count` channels of it.
///
/// A smooth component takes the noise's power at frequency zero, S(0) sigma^2, with it: the expected
/// sum of squares is (n - p S(0)) sigma^2.
fn corrected_scale(scale: f64, terms: usize, count: usize, process: &Autoregression) -> f64 {
    let n = count as f64;
    let lost = (terms as f64 * process.power_at_zero()).min(0.5 * n);
    scale * (n / (n - lost)).sqrt()
}
