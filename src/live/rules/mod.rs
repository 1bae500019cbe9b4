//! What raises and clears each alarm. Sentences say what, where, and what to do; they advise, they stop nothing.

mod channels;
mod links;
mod loaded;
mod tension;

use super::alarm::Cause;
use super::happening::Happening;
use super::instrument::Live;

pub use links::channels_described;

const MS: i64 = 1_000_000;

/// Judges every rule at one instant.
pub fn judge(live: &mut Live, host_ns: i64) -> Vec<Happening> {
    let mut told = Vec::new();
    told.extend(tension::over_limit(live, host_ns));
    told.extend(tension::over_plan(live, host_ns));
    told.extend(loaded::released_not_moving(live, host_ns));
    links::judge(live, host_ns, &mut told);
    channels::judge(live, host_ns, &mut told);
    told.extend(loaded::blind(live, host_ns));
    told.extend(channels::uncalibrated(live, host_ns));
    told.extend(no_plan(live, host_ns));
    told
}

/// Without the model's plan there is neither band nor forecast nor energy.
fn no_plan(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let reason = live.no_plan.as_ref()?;
    let sentence = format!("no plan, no forecast, no energy: {reason}; correct the rig file");
    live.board.raise(Cause::NoPlan, host_ns, sentence)
}
