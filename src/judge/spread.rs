//! How a quantity is spread over the outline: a histogram in whole numbers.

use std::collections::BTreeMap;

/// Values with weights in bins of a fixed step, with the exact extremes and a mean to 1e-6.
///
/// Whole-number sums: the same for any order of adding, and small however many samples went in.
#[derive(Clone, Debug, PartialEq)]
pub struct Spread {
    step: f64,
    bins: BTreeMap<i64, u128>,
    weight: u128,
    /// Σ weight × value, in millionths.
    moment: i128,
    worst: f64,
}

impl Spread {
    pub(super) fn new(step: f64) -> Self {
        Self {
            step,
            bins: BTreeMap::new(),
            weight: 0,
            moment: 0,
            worst: 0.0,
        }
    }

    pub(super) fn add(&mut self, value: f64, weight: u128) {
        *self.bins.entry(whole(value / self.step)).or_default() += weight;
        self.weight += weight;
        self.moment += i128::from(whole(value * 1e6)) * i128::try_from(weight).unwrap_or(i128::MAX);
        self.worst = self.worst.max(value.abs());
    }

    pub(super) fn merge(&mut self, other: &Self, times: u128) {
        for (bin, weight) in &other.bins {
            *self.bins.entry(*bin).or_default() += weight * times;
        }
        self.weight += other.weight * times;
        self.moment += other.moment * i128::try_from(times).unwrap_or(i128::MAX);
        self.worst = self.worst.max(other.worst);
    }

    /// As [`Spread::merge`] with every value of `other` times a factor; to half a step.
    pub(super) fn merge_scaled(&mut self, other: &Self, times: u128, factor: f64) {
        if factor == 1.0 {
            return self.merge(other, times);
        }
        for (value, weight) in other.bins() {
            *self
                .bins
                .entry(whole(value * factor / self.step))
                .or_default() += weight * times;
        }
        self.weight += other.weight * times;
        // Rounded once for each kind of place, so still the same in any order.
        let moment = other.moment as f64 * factor;
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a float to integer cast saturates"
        )]
        let moment = moment.round() as i128;
        self.moment += moment * i128::try_from(times).unwrap_or(i128::MAX);
        self.worst = self.worst.max(other.worst * factor);
    }

    /// Mean by weight.
    #[must_use]
    pub fn mean(&self) -> Option<f64> {
        #[allow(
            clippy::cast_precision_loss,
            reason = "a mean needs no more than 53 bits"
        )]
        let mean = self.moment as f64 / self.weight as f64 * 1e-6;
        (self.weight > 0).then_some(mean)
    }

    /// The magnitude that a share of the weight does not exceed, to half a step; never over [`Spread::worst`].
    #[must_use]
    pub fn magnitude(&self, share: f64) -> Option<f64> {
        let mut by_magnitude: BTreeMap<u64, u128> = BTreeMap::new();
        for (bin, weight) in &self.bins {
            *by_magnitude.entry(bin.unsigned_abs()).or_default() += weight;
        }
        let mut passed = 0;
        for (bin, weight) in by_magnitude {
            passed += weight;
            if self::share(passed, self.weight)? >= share {
                #[allow(clippy::cast_precision_loss, reason = "bins are few")]
                return Some((bin as f64 * self.step).min(self.worst));
            }
        }
        None
    }

    /// The greatest magnitude.
    #[must_use]
    pub fn worst(&self) -> Option<f64> {
        (self.weight > 0).then_some(self.worst)
    }

    /// Bins in order: middle and weight.
    pub fn bins(&self) -> impl Iterator<Item = (f64, u128)> + '_ {
        #[allow(clippy::cast_precision_loss, reason = "bins are few")]
        self.bins
            .iter()
            .map(|(bin, weight)| (*bin as f64 * self.step, *weight))
    }
}

/// A part of a whole; `None` of nothing.
pub(super) fn share(part: u128, whole: u128) -> Option<f64> {
    #[allow(
        clippy::cast_precision_loss,
        reason = "a share needs no more than 53 bits"
    )]
    let share = part as f64 / whole as f64;
    (whole > 0).then_some(share)
}

fn whole(x: f64) -> i64 {
    #[allow(
        clippy::cast_possible_truncation,
        reason = "a float to integer cast saturates"
    )]
    let n = x.round() as i64;
    n
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn quantiles_go_by_weight_and_magnitude() {
        let mut s = Spread::new(0.01);
        assert_eq!((s.mean(), s.magnitude(0.5), s.worst()), (None, None, None));
        for (value, weight) in [(0.5, 50), (-1.0, 45), (3.004, 4), (-7.0, 1)] {
            s.add(value, weight);
        }
        // By hand: (25 − 45 + 12.016 − 7)/100.
        assert!((s.mean().unwrap_or(f64::NAN) + 0.149_84).abs() < 1e-9);
        let found = [0.5, 0.51, 0.95, 0.96, 0.995].map(|q| s.magnitude(q).unwrap_or(f64::NAN));
        for (found, expected) in found.into_iter().zip([0.5, 1.0, 1.0, 3.0, 7.0]) {
            assert!(
                (found - expected).abs() < 1e-9,
                "{found}, expected {expected}"
            );
        }
        assert_eq!(s.worst(), Some(7.0));
    }
}
