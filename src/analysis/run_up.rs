//! Changes that take their time: from one level that stays to another that stays.
//!
//! A load that runs up leaves its old level once and keeps the new one; a level that swings
//! is on its way most of the time.

/// Shares of the way between the two levels at which one counts as left, and the other as reached.
const LEFT: f64 = 0.25;
const REACHED: f64 = 0.75;
/// Most of the time that the level may be on its way: a sine is for a third of it.
const MOST_ON_ITS_WAY: f64 = 0.25;
/// Most changes told.
const MOST: usize = 20;

/// One change, in indices of the series.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct RunUp {
    /// Where the old level is left.
    pub start: usize,
    /// Where half of the way is done.
    pub middle: usize,
    /// Where the new level is reached.
    pub end: usize,
    /// The stretch before, from and to.
    pub before: (usize, usize),
    /// The stretch after.
    pub after: (usize, usize),
}

/// The changes of a series between its low and its high level; none where it swings.
pub(super) fn run_ups(levels: &[f64], low: f64, high: f64) -> Vec<RunUp> {
    let share = |level: f64| (level - low) / (high - low);
    let on_way = levels.iter().filter(|level| (LEFT..REACHED).contains(&share(**level))).count();
    if on_way as f64 > MOST_ON_ITS_WAY * levels.len() as f64 {
        return Vec::new();
    }
    // Where it is last at one level, and then first at the other.
    let mut ways: Vec<(usize, usize)> = Vec::new();
    let mut last: Option<(usize, bool)> = None;
    for (i, level) in levels.iter().enumerate() {
        let is_high = match share(*level) {
            share if share >= REACHED => true,
            share if share < LEFT => false,
            _ => continue,
        };
        if let Some((at, was_high)) = last
            && was_high != is_high
        {
            ways.push((at, i));
        }
        last = Some((i, is_high));
    }
    if ways.len() > MOST {
        return Vec::new();
    }
    let middle = |&(start, end): &(usize, usize)| {
        let was_high = share(levels[start]) >= 0.5;
        (start..=end).find(|&i| (share(levels[i]) >= 0.5) != was_high).unwrap_or(end)
    };
    let change = |i: usize| {
        let (start, end) = ways[i];
        let from = i.checked_sub(1).map_or(0, |before| ways[before].1);
        let to = ways.get(i + 1).map_or(levels.len(), |next| next.0 + 1);
        RunUp { start, middle: middle(&ways[i]), end, before: (from, start + 1), after: (end, to) }
    };
    (0..ways.len()).map(change).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_level_that_is_left_once_and_kept_after_is_one_change() {
        let levels: Vec<f64> = (0..200).map(|i| f64::from(i - 80).clamp(0.0, 20.0)).collect();
        let found = run_ups(&levels, 0.0, 20.0);
        let expected = RunUp { start: 84, middle: 90, end: 95, before: (0, 85), after: (95, 200) };
        assert_eq!(found, [expected]);
    }

    #[test]
    fn a_swing_is_no_change() {
        let levels: Vec<f64> = (0..200).map(|i| (f64::from(i) / 9.0).sin()).collect();
        assert_eq!(run_ups(&levels, -0.98, 0.98), []);
    }
}
