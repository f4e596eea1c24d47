//! Whether every pair of a sample can be made, before the first is.

use super::{Kind, Range, SampleSettings, Spacing};
use crate::constants::BACKGROUND_TEMPERATURE;
use crate::simulate::SimulateError;
use crate::simulate::truth::{HIGHEST, MOST_CHANNELS, NARROWEST_KM_S};

/// Fewest channels: the thin line's Gaussian and a slab have up to seven parameters.
const FEWEST_CHANNELS: usize = 10;

/// What a range may hold.
struct Allowed {
    low: f64,
    high: f64,
    /// The lower end in words.
    words: &'static str,
}

const POSITIVE: Allowed = Allowed {
    low: f64::MIN_POSITIVE,
    high: HIGHEST,
    words: "above 0",
};
const NOT_NEGATIVE: Allowed = Allowed {
    low: 0.0,
    high: HIGHEST,
    words: "from 0",
};
const ANY: Allowed = Allowed {
    low: -HIGHEST,
    high: HIGHEST,
    words: "from -100000",
};
const DISPERSION: Allowed = Allowed {
    low: NARROWEST_KM_S,
    high: HIGHEST,
    words: "from 0.001",
};
const TEMPERATURE: Allowed = Allowed {
    // at the background's temperature a line has no height
    low: BACKGROUND_TEMPERATURE.value.next_up(),
    high: HIGHEST,
    words: "above the background's 2.72548",
};
const SHARE: Allowed = Allowed {
    low: 0.0,
    high: 1.0,
    words: "from 0",
};

impl SampleSettings {
    /// Whether every pair can be made.
    ///
    /// # Errors
    ///
    /// [`SimulateError::Sample`] with the setting that stands against it, [`SimulateError::Seed`].
    pub fn check(&self) -> Result<(), SimulateError> {
        if self.pairs == 0 {
            return refuse("pairs", "0", "at least 1");
        }
        if i64::try_from(self.seed).is_err() {
            return Err(SimulateError::Seed { found: self.seed });
        }
        if !(FEWEST_CHANNELS..=MOST_CHANNELS).contains(&self.channels) {
            let expected = format!("{FEWEST_CHANNELS} to {MOST_CHANNELS}");
            return refuse("channels", &self.channels.to_string(), &expected);
        }
        for (name, range, allowed) in self.ranges() {
            check_range(name, range, allowed)?;
        }
        check_weights("kinds", self.kinds.values())?;
        check_weights("models", self.models.values())?;
        self.check_directions()?;
        self.check_band()
    }

    fn ranges(&self) -> Vec<(&'static str, &Range, &'static Allowed)> {
        let mut ranges = vec![
            ("signal_to_noise", &self.signal_to_noise, &POSITIVE),
            (
                "signal_to_noise_thin",
                &self.signal_to_noise_thin,
                &POSITIVE,
            ),
            ("v_in_sigmas", &self.v_in_sigmas, &ANY),
            ("tau", &self.tau, &POSITIVE),
            ("temperature_k", &self.temperature_k, &TEMPERATURE),
            ("sigma_km_s", &self.sigma_km_s, &DISPERSION),
            ("v_lsr_km_s", &self.v_lsr_km_s, &ANY),
            ("peak_thin_k", &self.peak_thin_k, &POSITIVE),
            ("separation_sigmas", &self.separation_sigmas, &NOT_NEGATIVE),
            ("second_over_first", &self.second_over_first, &SHARE),
            ("band_offset_sigmas", &self.band_offset_sigmas, &ANY),
            ("channel_sigmas", &self.channel_sigmas, &POSITIVE),
        ];
        if let Some(range) = &self.channel_km_s {
            ranges.push(("channel_km_s", range, &POSITIVE));
        }
        ranges
    }

    /// Kinds that move have speeds of their sign to be drawn from.
    fn check_directions(&self) -> Result<(), SimulateError> {
        for (kind, sign) in [(Kind::Infall, "above 0"), (Kind::Expansion, "below 0")] {
            let drawn = self.kinds.get(&kind).is_some_and(|weight| *weight > 0.0);
            let range = self.v_in_sigmas_of(kind);
            if drawn && range.low == 0.0 && range.high == 0.0 {
                return refuse(
                    "v_in_sigmas",
                    &text(&self.v_in_sigmas),
                    &format!("some of it {sign}, since {} is drawn", kind.name()),
                );
            }
        }
        Ok(())
    }

    /// The narrowest band holds both clouds and the farthest offset.
    fn check_band(&self) -> Result<(), SimulateError> {
        let narrowest_sigmas = match self.channel_km_s {
            Some(range) => range.low / self.sigma_km_s.high,
            None => self.channel_sigmas.low,
        };
        let half_sigmas = 0.5 * (self.channels as f64 - 1.0) * narrowest_sigmas;
        let offset = &self.band_offset_sigmas;
        let two = self.kinds.get(&Kind::TwoClouds).is_some_and(|w| *w > 0.0);
        let reach = offset.low.abs().max(offset.high.abs())
            + if two {
                self.separation_sigmas.high
            } else {
                0.0
            };
        if half_sigmas > reach {
            return Ok(());
        }
        refuse(
            "channels",
            &format!(
                "{} of at least {narrowest_sigmas:.4} dispersions, a band of {half_sigmas:.4} on either side",
                self.channels
            ),
            &format!("a band that reaches the line, up to {reach} from its middle"),
        )
    }
}

fn refuse(quantity: &'static str, found: &str, expected: &str) -> Result<(), SimulateError> {
    Err(SimulateError::Sample {
        quantity,
        found: found.to_owned(),
        expected: expected.to_owned(),
    })
}

fn text(range: &Range) -> String {
    format!("{} to {}", range.low, range.high)
}

fn check_range(name: &'static str, range: &Range, allowed: &Allowed) -> Result<(), SimulateError> {
    let found = text(range);
    if !(range.low.is_finite() && range.high.is_finite()) {
        return refuse(name, &found, "finite numbers");
    }
    if range.low > range.high {
        return refuse(name, &found, "the lower end first");
    }
    if range.low < allowed.low || range.high > allowed.high {
        let expected = format!("values {} to {}", allowed.words, allowed.high);
        return refuse(name, &found, &expected);
    }
    if range.spacing == Spacing::Log && range.low <= 0.0 {
        return refuse(
            name,
            &format!("{found} spaced by factors"),
            "a lower end above 0, or even spacing",
        );
    }
    Ok(())
}

fn check_weights<'a>(
    name: &'static str,
    weights: impl Iterator<Item = &'a f64>,
) -> Result<(), SimulateError> {
    let mut sum = 0.0;
    for weight in weights {
        if !(*weight >= 0.0 && weight.is_finite()) {
            return refuse(name, &format!("weight {weight}"), "0 or a positive number");
        }
        sum += weight;
    }
    if sum > 0.0 && sum.is_finite() {
        Ok(())
    } else {
        refuse(name, &format!("weights of {sum} in all"), "a positive sum")
    }
}
