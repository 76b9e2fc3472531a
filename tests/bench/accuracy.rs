//! All the trials of accuracy at full size: `cargo bench --bench accuracy -- [word…]`; words
//! choose the cases whose group holds them (`NOTCHWRIGHT_TRIALS` sets the trials, 400 by itself).

#[path = "../accuracy/mod.rs"]
mod accuracy;
#[path = "../analysis_signals/mod.rs"]
mod analysis_signals;

use accuracy::frequency::{Colour, FIVE, ONE};
use accuracy::spread::Wander;
use accuracy::{Score, frequency, levels, music, spread, track, trials_or};
use rayon::prelude::*;

fn main() {
    let words: Vec<String> = std::env::args().skip(1).filter(|word| !word.starts_with('-')).collect();
    let wanted = |group: &str| words.is_empty() || words.iter().any(|word| group.contains(word.as_str()));
    let trials = trials_or(400);
    for (group, colour) in [("white", Colour::White), ("pink", Colour::OneOverF)] {
        if wanted(group) {
            for lines in [&ONE[..], &FIVE[..]] {
                for db in [-10.0, 15.0, 40.0] {
                    frequency::score(lines, colour, db, trials);
                }
            }
        }
    }
    if wanted("hidden") {
        for swing_hz in [0.001, 0.002, 0.004, 0.008] {
            let all: Vec<_> = (0..trials)
                .into_par_iter()
                .map(|seed| frequency::with_hidden_wander(swing_hz, seed))
                .collect();
            Score::of(&format!("hidden wander of {swing_hz} Hz"), &all);
        }
    }
    if wanted("level") {
        for over_db in [30.0, 50.0] {
            levels::score_known_track(over_db, trials);
        }
        for (lines, colour) in
            [(&ONE[..], Colour::White), (&FIVE[..], Colour::White), (&FIVE[..], Colour::OneOverF)]
        {
            for (over_db, drift_hz) in
                [(30.0, 0.0), (30.0, levels::DRIFT), (50.0, 0.0), (50.0, levels::DRIFT)]
            {
                levels::score(lines, colour, over_db, drift_hz, trials);
            }
        }
    }
    if wanted("track") {
        let orders: Vec<(f64, u32)> = (1..=50).map(|k| (45.0 + 0.41 * f64::from(k), k)).collect();
        for (rate, duration_s) in [(8000, 5.0), (8000, 1.0), (48000, 5.0)] {
            track::worst_of(rate, duration_s, &orders);
        }
    }
    if wanted("spread") {
        for (wander, size_hz, db) in [
            (Wander::Gaussian { memory_s: 60.0 }, 0.01, 10.0),
            (Wander::Gaussian { memory_s: 10.0 }, 0.01, 10.0),
            (Wander::Gaussian { memory_s: 60.0 }, 0.005, 0.0),
            (Wander::Sine { turn_s: 300.0 }, 0.02, 0.0),
            (Wander::Sine { turn_s: 60.0 }, 0.01, 0.0),
            (Wander::Ramp, 0.02, 0.0),
            (Wander::Ramp, 0.005, 0.0),
        ] {
            spread::score(wander, size_hz, db, trials);
        }
    }
    if words == ["one"] {
        for (f, k) in [(46.23, 3), (46.23, 30), (50.0, 1)] {
            track::worst_of(8000, 5.0, &[(f, k)]);
        }
    }
    if wanted("music") {
        for swing_hz in [0.0, 0.02] {
            music::score(20.0, swing_hz, trials);
        }
    }
}
