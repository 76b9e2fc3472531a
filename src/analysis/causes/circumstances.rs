//! Causes by when it hums and at which frequency.

use super::orders::ramp;
use super::{Seen, Told};
use crate::analysis::supplies::nearest_supply;

/// Wander in one recording that interconnected grids do not show: within minutes they keep
/// to some hundredths of a hertz (common practice).
const GRID_WANDER_HZ: f64 = 0.15;
/// Wander below which a supply is kept by a crystal, over at least so many seconds: a grid
/// wanders by some millihertz in a minute already (common practice).
const CRYSTAL_WANDER_HZ: f64 = 5e-4;
const CRYSTAL_S: f64 = 120.0;

pub(super) fn switched_load(seen: &Seen) -> Told {
    let changes = seen.signs.changes;
    let first = changes.first()?;
    let more = match changes.len() {
        1 => String::new(),
        2 => format!("; it changes again at {:.1} s", changes[1].time_s),
        n => format!("; {} more changes up to {:.1} s", n - 1, changes[n - 1].time_s),
    };
    let size = changes.iter().map(|change| (change.to_dbfs - change.from_dbfs).abs()).fold(0.0, f64::max);
    let slow =
        if first.over_s > 0.0 { format!(", half of it within {:.1} s", first.over_s) } else { String::new() };
    let evidence = format!(
        "order {} goes from {:.1} to {:.1} dBFS at {:.1} s{slow}{more}",
        first.order, first.from_dbfs, first.to_dbfs, first.time_s
    );
    // What changes slowly may as well be the coupling, by a load that draws more.
    let sure = if first.over_s > 0.0 { 0.8 } else { 1.0 };
    Some((sure * ramp(size, (1.0, 0.5), (6.0, 0.9)), evidence))
}

pub(super) fn island(seen: &Seen) -> Told {
    let mains = seen.signs.mains;
    let frequency_hz = mains.frequency_hz?;
    let supply = nearest_supply(frequency_hz).filter(|supply| supply.is_public())?;
    let stray_pct = 100.0 * supply.stray(frequency_hz);
    let spread_hz =
        mains.spread_hz.filter(|spread| *spread > 2.0 * mains.spread_floor_hz.unwrap_or(0.0)).unwrap_or(0.0);
    let off = !supply.is_usual(frequency_hz);
    if !off && spread_hz < GRID_WANDER_HZ {
        return None;
    }
    let mut evidence = format!("{frequency_hz:.2} Hz, {stray_pct:.2} % off {} Hz", supply.nominal_hz);
    if spread_hz > 0.0 {
        evidence += &format!(", wandering by ± {spread_hz:.2} Hz within {:.0} s", seen.signs.duration_s);
    }
    evidence += "; an interconnected grid keeps within 1 %, and within minutes to some hundredths of a hertz (common \
                 practice)";
    let by_wander = ramp(spread_hz, (GRID_WANDER_HZ, 0.5), (0.5, 0.85));
    Some((if off { by_wander.max(0.7) } else { by_wander }, evidence))
}

pub(super) fn crystal(seen: &Seen) -> Told {
    let mains = seen.signs.mains;
    let (spread_hz, floor_hz) = (mains.spread_hz?, mains.spread_floor_hz?);
    let duration_s = seen.signs.duration_s;
    (duration_s >= CRYSTAL_S && spread_hz.max(floor_hz) < CRYSTAL_WANDER_HZ).then(|| {
        let evidence = format!(
            "the frequency wanders by less than {:.1} mHz within {duration_s:.0} s; a grid wanders by several (common \
             practice)",
            1e3 * spread_hz.max(floor_hz).max(1e-4)
        );
        (0.5, evidence)
    })
}

pub(super) fn railway(seen: &Seen) -> Told {
    let is_railway = |nominal_hz: f64| nominal_hz < 20.0;
    if let Some(hertz) =
        seen.signs.mains.frequency_hz.filter(|_| seen.signs.mains.nominal_hz.is_some_and(is_railway))
    {
        return Some((0.8, format!("the strongest comb is that of {hertz:.2} Hz")));
    }
    let beside = seen.signs.other_supplies.iter().find(|supply| is_railway(supply.nominal_hz))?;
    Some((
        0.7,
        format!("a line at {:.2} Hz stands beside, {:.1} dBFS", beside.frequency_hz, beside.level_dbfs),
    ))
}

pub(super) fn second_supply(seen: &Seen) -> Told {
    let is_aircraft = |nominal_hz: f64| nominal_hz > 300.0;
    if let Some(hertz) =
        seen.signs.mains.frequency_hz.filter(|_| seen.signs.mains.nominal_hz.is_some_and(is_aircraft))
    {
        return Some((0.7, format!("the strongest comb is that of {hertz:.1} Hz")));
    }
    let beside = seen.signs.other_supplies.iter().find(|supply| supply.nominal_hz > 20.0)?;
    let evidence = format!(
        "a supply of {} Hz hums beside, at {:.2} Hz and {:.1} dBFS",
        beside.nominal_hz, beside.frequency_hz, beside.level_dbfs
    );
    Some((0.6, evidence))
}
