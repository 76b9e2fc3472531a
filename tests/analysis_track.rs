//! The frequency track: 1 s means beside strong harmonics; steps, ramps and sines.

mod accuracy;
mod analysis_signals;

use accuracy::track::{self, Motion};
use accuracy::trials_or;

/// IEC/IEEE 60255-118-1 asks of instruments 0.005 Hz with a tenth of one harmonic beside the
/// fundamental (from memory); the tenth part of that is kept, from 45 to 65 Hz, 60 dB over noise.
#[test]
fn one_second_means_are_within_half_a_millihertz_beside_a_tenth_of_any_harmonic() {
    let (worst_hz, missed) = track::worst_of(8000, 10.0, &track::beside_each_order(1));
    assert!(worst_hz < 5e-4, "{worst_hz} Hz off");
    assert!(missed.len() < 5, "not found: {missed:?}");
}

#[test]
#[ignore = "of 200 fundamentals from 45 to 65 Hz beside one harmonic, three are taken for another comb's lines"]
fn every_fundamental_beside_a_tenth_of_one_harmonic_is_found() {
    let (_, missed) = track::worst_of(8000, 10.0, &track::beside_each_order(4));
    assert!(missed.is_empty(), "not found: {missed:?}");
}

fn is_followed(motion: Motion, worst_hz: f64) {
    let (score, worst) = track::followed(motion, trials_or(5));
    assert_eq!(score.missed, 0, "{}", score.row());
    assert!(worst < worst_hz, "{motion:?}: {worst} Hz off");
    // For motion smoother than a random walk the stated errors are larger than the true ones.
    assert!(score.normalised < 1.15, "{}", score.row());
}

#[test]
fn steps_ramps_and_sines_are_followed() {
    is_followed(Motion::Step(0.2), 0.02);
    is_followed(Motion::Ramp(0.2), 0.02);
    is_followed(Motion::Sine(20.0), 0.01);
}

#[test]
#[ignore = "a ramp of 2 Hz at 1 Hz/s between steady stretches is taken for no hum in most trials"]
fn a_ramp_of_one_hertz_a_second_is_followed() {
    is_followed(Motion::Ramp(1.0), 0.1);
}
