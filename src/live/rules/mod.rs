//! What raises and clears each alarm. Sentences say what, where, and what to do; they advise, they stop nothing.

mod channels;
mod drawn;
mod let_go;
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
    told.extend(tension::against_plan(live, host_ns).into_iter().flatten());
    told.extend(tension::rising_too_fast(live, host_ns));
    told.extend(tension::falling_in_hold(live, host_ns));
    told.extend(let_go::released_not_moving(live, host_ns));
    told.extend(let_go::early_release(live, host_ns));
    told.extend(let_go::hook_slip(live, host_ns));
    told.extend(drawn::misrigged(live, host_ns));
    told.extend(drawn::near_card_end(live, host_ns));
    told.extend(drawn::out_of_window(live, host_ns));
    told.extend(drawn::peak_over_limit(live, host_ns));
    links::judge(live, host_ns, &mut told);
    links::no_samples(live, host_ns, &mut told);
    links::clock_poor(live, host_ns, &mut told);
    links::clock_beyond(live, host_ns, &mut told);
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
