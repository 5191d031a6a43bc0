//! # The logging interval: many samples, one reading
//!
//! Samples of one point are gathered on a grid of wall time; the reading of an interval is the median of what arrived in it,
//! stamped with the interval's end, so that nothing is dated before it was known.

use super::reading::{Arrival, Figure};
use crate::electrode::units::Timestamp;

/// Longest time between two rows that say "nothing came".
const MISSING_EVERY_MS: i64 = 60_000;

/// Gathers the samples of one point.
#[derive(Debug)]
pub struct Interval {
    every_ms: i64,
    /// End of the interval being gathered.
    end: Option<Timestamp>,
    mv: Vec<Figure>,
    temperature: Vec<Figure>,
    /// The last temperature of an earlier interval, for meters that give it less often than mV.
    last_temperature: Option<(Timestamp, Figure)>,
    last_arrival: Option<Timestamp>,
    last_missing: Option<Timestamp>,
}

impl Interval {
    /// A grid of `every_ms` milliseconds; `since` is when listening began.
    pub fn new(every_ms: i64, since: Timestamp) -> Self {
        Self {
            every_ms: every_ms.max(1),
            end: None,
            mv: Vec::new(),
            temperature: Vec::new(),
            last_temperature: None,
            last_arrival: Some(since),
            last_missing: None,
        }
    }

    /// How old a temperature may be to stand beside a potential, and how long nothing may come before it is a gap, ms.
    pub fn patience_ms(&self) -> i64 {
        (3 * self.every_ms).max(10_000)
    }

    /// End of the grid interval that `at` lies in.
    pub fn end_of(&self, at: Timestamp) -> Timestamp {
        Timestamp::from_ms((at.ms().div_euclid(self.every_ms) + 1) * self.every_ms)
    }

    /// A potential arrived. Gives the reading of the interval before, if this begins another.
    pub fn add_mv(&mut self, at: Timestamp, figure: Figure) -> Option<Arrival> {
        let closed = self.begin(at);
        self.mv.push(figure);
        self.last_arrival = Some(at);
        self.last_missing = None;
        closed
    }

    /// A temperature arrived. Gives the reading of the interval before, if this begins another.
    pub fn add_temperature(&mut self, at: Timestamp, figure: Figure) -> Option<Arrival> {
        let closed = self.begin(at);
        self.temperature.push(figure);
        closed
    }

    /// What is due at `now`: the reading of an interval that has ended, or word that nothing comes.
    pub fn due(&mut self, now: Timestamp) -> Option<Arrival> {
        if self.end.is_some_and(|end| end <= now) {
            return self.close();
        }
        let silent_since = self.last_arrival?;
        if now.ms() - silent_since.ms() < self.patience_ms() || !self.mv.is_empty() {
            return None;
        }
        let spacing = self.every_ms.max(MISSING_EVERY_MS);
        if self
            .last_missing
            .is_some_and(|last| (0..spacing).contains(&(now.ms() - last.ms())))
        {
            return None;
        }
        self.last_missing = Some(now);
        let at = Timestamp::from_ms(now.ms().div_euclid(self.every_ms) * self.every_ms);
        Some(Arrival {
            at,
            mv: Figure::Nothing,
            temperature: Figure::Nothing,
        })
    }

    fn begin(&mut self, at: Timestamp) -> Option<Arrival> {
        let end = self.end_of(at);
        // Also when the clock stepped back: the samples before the step make a reading of their own.
        let closed = if self.end.is_some_and(|open| open != end) {
            self.close()
        } else {
            None
        };
        self.end = Some(end);
        closed
    }

    fn close(&mut self) -> Option<Arrival> {
        let end = self.end.take()?;
        let temperature = median(&mut self.temperature);
        if temperature != Figure::Nothing {
            self.last_temperature = Some((end, temperature));
        }
        self.temperature.clear();
        if self.mv.is_empty() {
            return None;
        }
        let mv = median(&mut self.mv);
        self.mv.clear();
        let fresh = |(when, _): &(Timestamp, Figure)| {
            (0..=self.patience_ms()).contains(&(end.ms() - when.ms()))
        };
        let temperature = match self.last_temperature.filter(fresh) {
            Some((_, figure)) => figure,
            None => Figure::Nothing,
        };
        Some(Arrival {
            at: end,
            mv,
            temperature,
        })
    }
}

/// The median of the numbers; over range when at least half of what came said so.
fn median(figures: &mut [Figure]) -> Figure {
    let over = figures
        .iter()
        .filter(|f| matches!(f, Figure::OverRange))
        .count();
    if over > 0 && 2 * over >= figures.len() {
        return Figure::OverRange;
    }
    let of = |figure: &Figure| match figure {
        Figure::Number(x) | Figure::Resistance(x) => Some(*x),
        Figure::Nothing | Figure::OverRange => None,
    };
    let resistance = figures.iter().any(|f| matches!(f, Figure::Resistance(_)));
    let mut numbers: Vec<f64> = figures.iter().filter_map(of).collect();
    numbers.sort_by(f64::total_cmp);
    let n = numbers.len();
    if n == 0 {
        return Figure::Nothing;
    }
    let middle = if n % 2 == 1 {
        numbers[n / 2]
    } else {
        f64::midpoint(numbers[n / 2 - 1], numbers[n / 2])
    };
    if resistance {
        Figure::Resistance(middle)
    } else {
        Figure::Number(middle)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn at(ms: i64) -> Timestamp {
        Timestamp::from_ms(ms)
    }

    #[test]
    fn the_reading_of_an_interval_is_the_median_of_its_samples_stamped_with_its_end() {
        let mut interval = Interval::new(1_000, at(0));
        for (ms, mv) in [(10, -23.4), (400, 99.0), (900, -23.6)] {
            assert_eq!(interval.add_mv(at(ms), Figure::Number(mv)), None);
        }
        assert_eq!(
            interval.add_temperature(at(900), Figure::Number(18.2)),
            None
        );
        assert_eq!(interval.due(at(999)), None);
        let due = interval.due(at(1_000)).unwrap();
        assert_eq!(
            due,
            Arrival {
                at: at(1_000),
                mv: Figure::Number(-23.4),
                temperature: Figure::Number(18.2)
            }
        );
        assert_eq!(interval.due(at(1_001)), None);
    }

    #[test]
    fn silence_is_a_row_at_once_when_patience_ends_and_then_once_a_minute() {
        let mut interval = Interval::new(1_000, at(0));
        let rows: Vec<i64> = (0..=130)
            .filter_map(|s| interval.due(at(s * 1_000)))
            .map(|a| a.at.ms())
            .collect();
        assert_eq!(rows, [10_000, 70_000, 130_000]);
    }

    #[test]
    fn a_clock_that_steps_back_loses_no_sample() {
        let mut interval = Interval::new(1_000, at(0));
        assert_eq!(interval.add_mv(at(3_600_100), Figure::Number(1.0)), None);
        let before = interval.add_mv(at(200), Figure::Number(2.0)).unwrap();
        assert_eq!(before.mv, Figure::Number(1.0));
        assert_eq!(interval.due(at(1_000)).unwrap().mv, Figure::Number(2.0));
    }

    #[test]
    fn a_temperature_too_old_does_not_stand_beside_a_potential() {
        let mut interval = Interval::new(1_000, at(0));
        interval.add_temperature(at(100), Figure::Number(20.0));
        interval.add_mv(at(200), Figure::Number(1.0));
        assert_eq!(
            interval.due(at(1_000)).unwrap().temperature,
            Figure::Number(20.0)
        );
        interval.add_mv(at(10_500), Figure::Number(1.0));
        assert_eq!(
            interval.due(at(11_000)).unwrap().temperature,
            Figure::Number(20.0),
            "10 s old is taken"
        );
        interval.add_mv(at(11_500), Figure::Number(1.0));
        assert_eq!(
            interval.due(at(12_000)).unwrap().temperature,
            Figure::Nothing,
            "11 s old is not"
        );
    }

    #[test]
    fn over_range_in_half_of_the_samples_is_over_range() {
        let mut figures = [Figure::OverRange, Figure::Number(1.0)];
        assert_eq!(median(&mut figures), Figure::OverRange);
        let mut figures = [Figure::OverRange, Figure::Number(1.0), Figure::Number(2.0)];
        assert_eq!(median(&mut figures), Figure::Number(1.5));
    }
}
