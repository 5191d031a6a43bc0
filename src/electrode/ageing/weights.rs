//! # Weights of the bank: a hidden Markov chain over temperament and set
//!
//! A probe is steady or changeable for life (its temperament); within it, now and then, it turns from one set of noise to another,
//! drawn by the shares. So one that has been quiet for a year is trusted, and one that begins to misbehave is soon believed to.
//! Always: 1. forward weights sum to 1.

use super::noise::Prior;

/// Weights by temperament, then by set.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Weights(Vec<Vec<f64>>);

impl Weights {
    /// Before anything is known.
    pub(super) fn start(prior: &Prior) -> Self {
        let temperaments = prior.temperaments.iter();
        Self(
            temperaments
                .map(|t| prior.shares.iter().map(|s| t.share * s).collect())
                .collect(),
        )
    }

    /// What lies after the last event says nothing.
    pub(super) fn nothing(prior: &Prior) -> Self {
        Self(vec![
            vec![1.0; prior.shares.len()];
            prior.temperaments.len()
        ])
    }

    /// `days` later: `w' = (1 − ε)·w + ε·share·Σw` within each temperament.
    #[must_use]
    pub(super) fn turned(&self, prior: &Prior, days: f64) -> Self {
        let turned = self.0.iter().zip(&prior.temperaments).map(|(weights, t)| {
            let turnover = t.turnover(days);
            let sum: f64 = weights.iter().sum();
            weights
                .iter()
                .zip(&prior.shares)
                .map(|(w, share)| (1.0 - turnover) * w + turnover * share * sum)
                .collect()
        });
        Self(turned.collect())
    }

    /// The same seen backward, `days` earlier: `β' = (1 − ε)·β + ε·Σ share·β`.
    #[must_use]
    pub(super) fn earlier(&self, prior: &Prior, days: f64) -> Self {
        let earlier = self.0.iter().zip(&prior.temperaments).map(|(beta, t)| {
            let turnover = t.turnover(days);
            let pooled: f64 = beta.iter().zip(&prior.shares).map(|(b, s)| b * s).sum();
            beta.iter()
                .map(|b| (1.0 - turnover) * b + turnover * pooled)
                .collect()
        });
        Self(earlier.collect())
    }

    /// Times a figure per set.
    #[must_use]
    pub(super) fn times(&self, likelihoods: &[f64]) -> Self {
        let product = |w: &Vec<f64>| w.iter().zip(likelihoods).map(|(w, l)| w * l).collect();
        Self(self.0.iter().map(product).collect())
    }

    /// Times another, place by place.
    #[must_use]
    pub(super) fn met(&self, other: &Self) -> Self {
        let places = self.0.iter().zip(&other.0);
        Self(
            places
                .map(|(a, b)| a.iter().zip(b).map(|(a, b)| a * b).collect())
                .collect(),
        )
    }

    /// Sum 1, and what the sum was; figures that have all vanished become equal.
    pub(super) fn normalised(mut self) -> (Self, f64) {
        let sum: f64 = self.0.iter().flatten().sum();
        if sum > 0.0 {
            self.0.iter_mut().flatten().for_each(|w| *w /= sum);
            return (self, sum);
        }
        #[expect(clippy::cast_precision_loss, reason = "some dozen figures")]
        let share = 1.0 / self.0.iter().flatten().count() as f64;
        self.0.iter_mut().flatten().for_each(|w| *w = share);
        (self, f64::MIN_POSITIVE)
    }

    /// Weight of each set, whatever the temperament.
    pub(super) fn by_set(&self) -> Vec<f64> {
        let n_sets = self.0.first().map_or(0, Vec::len);
        (0..n_sets)
            .map(|set| self.0.iter().map(|w| w[set]).sum())
            .collect()
    }

    /// Weight of each temperament.
    pub(super) fn by_temperament(&self) -> Vec<f64> {
        self.0.iter().map(|w| w.iter().sum()).collect()
    }
}
