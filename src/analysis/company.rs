//! Two public supplies in one recording: what each can be measured by.
//!
//! Lines of combs of 50 and 60 Hz lie 10 Hz apart, or nearly together. In blocks so long
//! that 10 Hz is beyond the main lobe of their window one does not shake the other; an
//! order that both have is no measure of either.

use super::comb::Candidate;
use super::supplies::nearest_supply;

/// Lines of two combs nearer than this are shared, in hertz: half of the 10 Hz.
const SHARED_HZ: f64 = 5.0;
/// Time between blocks in seconds: the main lobe of a Blackman–Harris window of four hops
/// ends 1/hop from its middle, 9 Hz, and 50.5 and 59.5 Hz are as far apart.
pub(super) const APART_HOP_S: f64 = 1.0 / 9.0;

/// Of the candidates, those in the usual range of another public supply than this one's.
pub(super) fn usual_beside(besides: &[Candidate], main_hz: f64) -> impl Iterator<Item = &Candidate> {
    let own = usual_nominal_hz(main_hz);
    besides.iter().filter(move |candidate| {
        let other = usual_nominal_hz(candidate.mean_hz());
        own.is_some() && other.is_some() && own != other
    })
}

fn usual_nominal_hz(frequency_hz: f64) -> Option<f64> {
    let supply = nearest_supply(frequency_hz)?;
    (supply.is_public() && supply.is_usual(frequency_hz)).then_some(supply.nominal_hz)
}

/// Whether a line lies on one of another comb.
pub(super) fn are_shared(line_hz: f64, other_hz: f64) -> bool {
    let order = (line_hz / other_hz).round();
    order >= 1.0 && (line_hz - order * other_hz).abs() < SHARED_HZ
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn combs_of_50_and_60_hz_share_the_multiples_of_300_hz() {
        for k in 1..=24u32 {
            assert_eq!(are_shared(50.02 * f64::from(k), 59.97), k % 6 == 0, "order {k} of 50 Hz");
            assert_eq!(are_shared(60.0 * f64::from(k), 50.0), k % 5 == 0, "order {k} of 60 Hz");
        }
    }

    #[test]
    fn only_another_public_supply_in_its_usual_range_is_company() {
        let at =
            |hz: f64| Candidate { path_hz: vec![hz], score: 9.0, power: 0.0, orders: vec![1], stays: None };
        let besides = [at(16.7), at(61.735), at(60.02), at(49.9)];
        let found: Vec<f64> = usual_beside(&besides, 50.0).map(Candidate::mean_hz).collect();
        assert_eq!(found, [60.02]);
        assert_eq!(usual_beside(&besides, 52.0).count(), 0);
    }
}
