//! Which of several recordings are of one supply, so that their means may be merged.

/// Most that two means of one supply lie apart, as a share of the lower one: each may be
/// 2 % off the nominal, which islands keep for 95 % of a week (EN 50160); interconnected
/// systems keep 1 %. 50 and 60 Hz lie 20 % apart.
const APART: f64 = 0.04;

/// What a recording says of its supply.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Reading {
    pub frequency_hz: f64,
    /// Nats, as a verdict gives them.
    pub evidence: f64,
}

/// Of each reading, whether it belongs to the account: to the reading with which most
/// others agree, of equals the one of the strongest evidence, and to those that agree with it.
pub(super) fn of_one_supply(readings: &[Reading]) -> Vec<bool> {
    let company = |of: &Reading| readings.iter().filter(|other| agree(of, other)).count();
    let leads =
        |a: &&Reading, b: &&Reading| company(a).cmp(&company(b)).then(a.evidence.total_cmp(&b.evidence));
    // Of equals the first: the last maximum of the reversed sequence.
    let Some(lead) = readings.iter().rev().max_by(leads) else { return Vec::new() };
    readings.iter().map(|reading| agree(lead, reading)).collect()
}

fn agree(a: &Reading, b: &Reading) -> bool {
    let (low, high) = (a.frequency_hz.min(b.frequency_hz), a.frequency_hz.max(b.frequency_hz));
    high <= (1.0 + APART) * low
}

#[cfg(test)]
mod tests {
    use super::*;

    fn kept(readings: &[(f64, f64)]) -> Vec<bool> {
        let reading = |&(frequency_hz, evidence): &(f64, f64)| Reading { frequency_hz, evidence };
        of_one_supply(&readings.iter().map(reading).collect::<Vec<_>>())
    }

    #[test]
    fn means_of_one_supply_are_kept_together() {
        assert_eq!(kept(&[(49.6, 30.0), (50.4, 20.0)]), [true, true]);
        assert!(kept(&[]).is_empty());
    }

    #[test]
    fn most_recordings_lead_and_then_the_strongest_evidence() {
        assert_eq!(kept(&[(60.0, 90.0), (50.0, 20.0), (49.9, 30.0)]), [false, true, true]);
        assert_eq!(kept(&[(60.0, 30.0), (50.0, 90.0)]), [false, true]);
        assert_eq!(kept(&[(60.0, 30.0), (50.0, 30.0)]), [true, false]);
    }
}
