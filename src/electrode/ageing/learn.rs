//! # Learning how restless a site's electrodes are
//!
//! in: the observations of every probe of one kind. out: the bank with its shares moved towards what they showed.
//! Shares are the mixing proportions of a mixture over the bank, found by expectation and maximisation of the marginal likelihood
//! under a Dirichlet prior at the shares of practice: that is shrinkage, strong while the site has shown little.

use super::noise::Prior;
use super::observation::Observation;
use super::track::Track;

/// Weight of practice, in probes.
const PRACTICE_WEIGHS: f64 = 4.0;
/// An electrode counts as a whole once this many of its events are known.
const WHOLE_AT_EVENTS: f64 = 6.0;
/// Rounds of expectation and maximisation; the shares settle to the second digit.
const N_ROUNDS: usize = 3;

/// The bank for one kind of probe at one site. `probes`: each one's observations; those of the other kind do not belong here.
pub fn learn(probes: &[Vec<Observation>], practice: &Prior) -> Prior {
    let mut prior = practice.clone();
    for _ in 0..N_ROUNDS {
        let mut shares: Vec<f64> = practice
            .shares
            .iter()
            .map(|s| s * PRACTICE_WEIGHS)
            .collect();
        for observations in probes {
            let Some(track) = Track::run(observations, &prior) else {
                continue;
            };
            #[expect(clippy::cast_precision_loss, reason = "some hundred events")]
            let worth = ((track.n_events() as f64 - 1.0) / WHOLE_AT_EVENTS).clamp(0.0, 1.0);
            for (share, own) in shares.iter_mut().zip(track.shares()) {
                *share += worth * own;
            }
        }
        let total: f64 = shares.iter().sum();
        prior.shares = shares.iter().map(|s| s / total).collect();
    }
    prior
}
