//! What the brief asks of this recording, and what misses it.

use std::f64::consts::SQRT_2;

use super::{KeepMeasured, Residual};
use crate::plan::{Design, LineBrief, ReductionTarget, span};

/// How much a loss may be over the allowed one and still be the rounding of it, decibels.
const ROUNDING_DB: f64 = 1e-6;

/// A residual with the standard error of its reduction.
pub(super) struct Judged<'a> {
    pub residual: &'a Residual,
    /// Standard error of the level after, decibels.
    pub after_se_db: f64,
}

/// Whether the brief asks for less of an order that stands at `before_dbfs`: those it
/// lists; else those that the plan reduces, and of any other those that are not already
/// that far below the strongest, as the planner reads the brief.
pub(super) fn is_asked_for(
    order: u32,
    before_dbfs: f64,
    strongest_dbfs: f64,
    brief: &LineBrief,
    design: &Design,
) -> bool {
    if let Some(orders) = &brief.orders {
        return orders.contains(&order);
    }
    match design.predicted.iter().find(|predicted| predicted.order == order) {
        Some(predicted) => predicted.target_db.is_some() || leave_dbfs(brief).is_some(),
        None => match brief.target {
            ReductionTarget::ReduceByDb(db) => before_dbfs > strongest_dbfs - db,
            _ => true,
        },
    }
}

/// The level to be left, dBFS, where the target is one.
fn leave_dbfs(brief: &LineBrief) -> Option<f64> {
    match brief.target {
        ReductionTarget::ReduceByDb(_) => None,
        // Full scale is a peak; its sine's RMS reads 0 dBFS.
        ReductionTarget::LeaveV(volts) => Some(20.0 * (volts * SQRT_2 / brief.full_scale_v).log10()),
        ReductionTarget::LeaveDbfs(dbfs) => Some(dbfs),
    }
}

/// The reduction asked of an order that stands at `before_dbfs`; `None` where it
/// need not go down.
pub(super) fn target_db(brief: &LineBrief, before_dbfs: f64) -> Option<f64> {
    let asked = match brief.target {
        ReductionTarget::ReduceByDb(db) => db,
        _ => before_dbfs - leave_dbfs(brief)?,
    };
    (asked > 0.0).then_some(asked)
}

/// One line for each order and keep band that misses the brief.
///
/// A measured reduction that falls short by less than twice its own standard error
/// is a miss only where the prediction falls short too. A residual at the noise
/// floor shows an upper bound only: there the prediction decides.
pub(super) fn misses(residuals: &[Judged], keep: &[KeepMeasured]) -> Vec<String> {
    let orders = residuals.iter().filter_map(order_miss);
    orders.chain(keep.iter().filter_map(keep_miss)).collect()
}

fn order_miss(judged: &Judged) -> Option<String> {
    let Residual { order, frequency_hz, reduction_db, predicted_db, target_db, at_noise_floor, .. } =
        *judged.residual;
    let asked = target_db?;
    let reached = if at_noise_floor { predicted_db.max(reduction_db) } else { reduction_db };
    let short_by_noise =
        !at_noise_floor && predicted_db >= asked && reached + 2.0 * judged.after_se_db >= asked;
    if reached >= asked || short_by_noise {
        return None;
    }
    let how = if at_noise_floor { "predicted (the residual is in the noise)" } else { "measured" };
    Some(format!(
        "order {order} ({frequency_hz:.2} Hz): reduced by {reached:.2} dB as {how}, {asked:.2} dB is asked"
    ))
}

fn keep_miss(band: &KeepMeasured) -> Option<String> {
    let KeepMeasured { from_hz, to_hz, allowed_db, loss_db, .. } = *band;
    (loss_db.abs() > allowed_db + ROUNDING_DB).then(|| {
        let what = if loss_db < 0.0 { "gain" } else { "loss" };
        format!(
            "keep band {}: {what} of {:.3} dB, {allowed_db} dB is allowed",
            span(from_hz, to_hz),
            loss_db.abs()
        )
    })
}
