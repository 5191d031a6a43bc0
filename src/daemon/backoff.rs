//! # How long to wait before trying again

use std::hash::{BuildHasher, Hasher, RandomState};
use std::time::Duration;

/// Waits that double from `first` to `longest`, each shortened by up to a third at random so that many lines do not try at once.
#[derive(Debug, Clone)]
pub struct Backoff {
    first: Duration,
    longest: Duration,
    next: Duration,
    dice: RandomState,
    thrown: u64,
}

/// A first wait of nothing, or longer than the longest.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
#[error("a backoff from {first:?} to {longest:?} makes no sense")]
pub struct BackoffError {
    /// First wait.
    pub first: Duration,
    /// Longest wait.
    pub longest: Duration,
}

impl Backoff {
    /// For a port that is gone: 0.2 s to 10 s.
    pub fn of_a_port() -> Self {
        Self::unchecked(Duration::from_millis(200), Duration::from_secs(10))
    }

    /// From the first wait to the longest.
    ///
    /// # Errors
    /// When the first is nothing or longer than the longest.
    pub fn new(first: Duration, longest: Duration) -> Result<Self, BackoffError> {
        if first.is_zero() || first > longest {
            return Err(BackoffError { first, longest });
        }
        Ok(Self::unchecked(first, longest))
    }

    fn unchecked(first: Duration, longest: Duration) -> Self {
        Self {
            first,
            longest,
            next: first,
            dice: RandomState::new(),
            thrown: 0,
        }
    }

    /// How long to wait now.
    pub fn wait(&mut self) -> Duration {
        self.thrown += 1;
        let mut hasher = self.dice.build_hasher();
        hasher.write_u64(self.thrown);
        let permille = u32::try_from(hasher.finish() % 334).unwrap_or(0);
        let wait = self.next * (1000 - permille) / 1000;
        self.next = (self.next * 2).min(self.longest);
        wait.max(self.first)
    }

    /// All is well again.
    pub fn reset(&mut self) {
        self.next = self.first;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn waits_double_up_to_the_longest_and_differ_between_lines() {
        let waits =
            |mut backoff: Backoff| -> Vec<Duration> { (0..12).map(|_| backoff.wait()).collect() };
        let (one, other) = (waits(Backoff::of_a_port()), waits(Backoff::of_a_port()));
        for wait in one.iter().chain(&other) {
            assert!((200..=10_000).contains(&wait.as_millis()), "{wait:?}");
        }
        assert!(one[11] > Duration::from_secs(6), "{:?}", one[11]);
        assert_ne!(one, other);
    }

    #[test]
    fn after_success_it_begins_anew() {
        let mut backoff = Backoff::of_a_port();
        for _ in 0..9 {
            assert!(backoff.wait() >= Duration::from_millis(200));
        }
        backoff.reset();
        assert_eq!(backoff.wait(), Duration::from_millis(200));
    }

    #[test]
    fn a_wait_of_nothing_is_refused() {
        assert!(Backoff::new(Duration::ZERO, Duration::from_secs(1)).is_err());
        assert!(Backoff::new(Duration::from_secs(2), Duration::from_secs(1)).is_err());
    }
}
