//! The spread of ten minutes of wander, and what is said where noise would show as much.

mod accuracy;
mod analysis_signals;

use accuracy::spread::{self, CASES, Wander};
use accuracy::trials_or;

#[test]
fn the_spread_is_within_a_tenth_where_it_is_five_times_its_floor() {
    for (wander, size_hz, hum_to_noise_db) in CASES {
        let share = spread::score(wander, size_hz, hum_to_noise_db, trials_or(12));
        assert!(share.trials > 0, "none is five times over its floor: {}", share.row());
        share.assert_at_least(0.95);
    }
}

#[test]
fn a_wander_below_the_floor_is_said_to_be() {
    let said = (0..10).filter(|&seed| spread::found(Wander::Ramp, 1e-6, 0.0, seed).below_is_said).count();
    assert!(said >= 8, "{said} of 10");
}
