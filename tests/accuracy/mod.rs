//! Seeded trials of the analyser against what theory allows: shared by the tests, which run a
//! few, and by the benchmark `accuracy`, which runs many and prints the table.
#![allow(dead_code)]

pub mod frequency;
pub mod levels;
pub mod music;
pub mod pink;
pub mod spread;
pub mod track;

/// Trials of each case: few enough for every day, or as many as the environment asks
/// for (`NOTCHWRIGHT_TRIALS=400`).
pub fn trials_or(usual: u64) -> u64 {
    std::env::var("NOTCHWRIGHT_TRIALS").map_or(usual, |count| count.parse().expect("a number of trials"))
}

/// One trial: what was wrong, what theory allows, what was stated, all in one unit.
#[derive(Debug, Clone, Copy)]
pub struct Outcome {
    pub error: f64,
    pub bound: f64,
    pub stated: f64,
}

/// What the trials of one case come to.
#[derive(Debug, Clone)]
pub struct Score {
    pub case: String,
    pub trials: u64,
    /// Trials in which nothing was found.
    pub missed: u64,
    /// Typical bound.
    pub bound: f64,
    /// RMS of the error over its bound.
    pub ratio: f64,
    /// RMS of the error over its stated standard error.
    pub normalised: f64,
}

impl Score {
    pub fn of(case: &str, outcomes: &[Option<Outcome>]) -> Self {
        let seen: Vec<&Outcome> = outcomes.iter().flatten().collect();
        let count = seen.len().max(1) as f64;
        let rms = |part: &dyn Fn(&Outcome) -> f64| {
            (seen.iter().map(|o| part(o).powi(2)).sum::<f64>() / count).sqrt()
        };
        let score = Self {
            case: case.to_owned(),
            trials: outcomes.len() as u64,
            missed: (outcomes.len() - seen.len()) as u64,
            bound: rms(&|o| o.bound),
            ratio: rms(&|o| o.error / o.bound),
            normalised: rms(&|o| o.error / o.stated),
        };
        println!("{}", score.row());
        score
    }

    pub fn row(&self) -> String {
        format!(
            "{:44} {:5} trials {:3} missed  bound {:.3e}  error/bound {:.3}  normalised {:.3}",
            self.case, self.trials, self.missed, self.bound, self.ratio, self.normalised
        )
    }

    /// What so many trials alone may put an RMS off by, as a factor (95 % of the time, one-sided).
    fn chance(&self) -> f64 {
        1.0 + 1.65 / (2.0 * (self.trials - self.missed).max(1) as f64).sqrt()
    }

    /// Nothing is missed, and the error is at most so many times its bound.
    pub fn assert_within(&self, most: f64) {
        assert_eq!(self.missed, 0, "{}", self.row());
        assert!(self.ratio < most * self.chance(), "at most {most} times the bound: {}", self.row());
    }

    /// The stated error is neither too large nor too small a claim.
    pub fn assert_stated_error_is_true(&self) {
        let range = 0.9 / self.chance()..1.15 * self.chance();
        assert!(range.contains(&self.normalised), "normalised error not in {range:?}: {}", self.row());
    }
}

/// How many of the trials keep to a limit.
#[derive(Debug, Clone)]
pub struct Share {
    pub case: String,
    pub trials: u64,
    pub within: u64,
}

impl Share {
    pub fn of(case: &str, within: &[bool]) -> Self {
        let share = Self {
            case: case.to_owned(),
            trials: within.len() as u64,
            within: within.iter().filter(|kept| **kept).count() as u64,
        };
        println!("{}", share.row());
        share
    }

    pub fn row(&self) -> String {
        let percent = 100.0 * self.within as f64 / self.trials.max(1) as f64;
        format!("{:44} {:5} trials  {} within: {percent:.1} %", self.case, self.trials, self.within)
    }

    /// At least so large a share keeps to the limit, but for what chance does in 95 % of cases.
    pub fn assert_at_least(&self, share: f64) {
        let count = self.trials as f64;
        let least = count * share - 1.65 * (count * share * (1.0 - share)).sqrt();
        assert!(self.within as f64 >= least.floor(), "{share} asked for: {}", self.row());
    }
}
