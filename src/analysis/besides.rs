//! Other supplies beside the main one: which of the combs heard are claimed.

use super::PhaseTrack;
use super::comb::Candidate;
use super::findings::OtherSupply;
use super::gather::Gathered;
use super::orders::power_dbfs;
use super::reference::motion;
use super::supplies::nearest_supply;
use super::tracker::{Cells, Tracked, track};
use super::verdict::{Company, Verdict};
use std::f64::consts::TAU;

/// Share of the time for which another supply's line must be there.
const OTHER_PRESENT: f64 = 0.9;
/// RMS wander, as a share of its frequency, up to which another supply's line is narrow.
const OTHER_WANDER: f64 = 0.002;

/// Another supply and the orders heard of it.
pub(super) struct Claim {
    pub supply: OtherSupply,
    pub orders: Vec<u32>,
}

/// Every fourth line of a 16 Hz comb is a line of a 64 Hz comb: what the
/// supply of the higher frequency explains is not claimed again.
pub(super) fn each_line_once(claims: Vec<Claim>) -> Vec<OtherSupply> {
    let explained = |claim: &Claim| {
        claims.iter().any(|higher| {
            let times = higher.supply.frequency_hz / claim.supply.frequency_hz;
            let whole = times.round() as u32;
            whole >= 2
                && (times / f64::from(whole) - 1.0).abs() < 2e-3
                && claim.orders.iter().all(|order| order.is_multiple_of(whole))
        })
    };
    claims.iter().filter(|claim| !explained(claim)).map(|claim| claim.supply.clone()).collect()
}

pub(super) fn other_supply(candidate: &Candidate, gathered: Gathered, duration_s: f64) -> Option<Claim> {
    let Gathered { cells, fine } = gathered;
    let centre_hz = candidate.mean_hz();
    let tracked = track(&cells, &candidate.orders, 0.3 * centre_hz / 50.0, duration_s)?;
    let frequency_hz = centre_hz + tracked.advance.phase_rad / (TAU * duration_s);
    let steady = PhaseTrack::constant(centre_hz, duration_s);
    let verdict = Verdict::of(
        &fine,
        &tracked,
        frequency_hz,
        duration_s,
        &motion(&steady, &tracked, f64::INFINITY),
        Company::BesideAnother,
    );
    let supply = nearest_supply(frequency_hz).filter(|_| verdict.found)?;
    if !is_there_all_the_time(&cells, &tracked, &verdict, frequency_hz) {
        return None;
    }
    let strongest = verdict.lasting.iter().filter_map(|k| {
        let values = &cells.values[cells.orders.iter().position(|order| order == k)?];
        let read = values.iter().map(|z| 0.5 * z.norm_sqr()).sum::<f64>() / values.len() as f64;
        let response = cells.response(f64::from(*k) * (frequency_hz - centre_hz));
        Some(read / (response * response).max(0.1))
    });
    let level_dbfs = power_dbfs(strongest.fold(0.0, f64::max));
    let supply = OtherSupply { nominal_hz: supply.nominal_hz, frequency_hz, level_dbfs };
    Some(Claim { supply, orders: verdict.lasting })
}

/// A main supply hums in rooms where a bass plays: another supply beside it is
/// claimed only for a narrow line that is heard in nearly every cell.
fn is_there_all_the_time(cells: &Cells, tracked: &Tracked, verdict: &Verdict, frequency_hz: f64) -> bool {
    let lines = cells.orders.iter().zip(&tracked.lines);
    let present = lines
        .filter(|(order, _)| verdict.lasting.contains(order))
        .any(|(_, line)| line.presence >= OTHER_PRESENT);
    let omega = &tracked.smoothed.omega;
    let count = omega.len() as f64;
    let mean = omega.iter().sum::<f64>() / count;
    let wander_hz = (omega.iter().map(|w| (w - mean) * (w - mean)).sum::<f64>() / count).sqrt() / TAU;
    present && wander_hz <= OTHER_WANDER * frequency_hz
}
