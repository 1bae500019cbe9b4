//! Cords that hold energy while something about them is not as it should be.

use crate::live::alarm::Cause;
use crate::live::happening::Happening;
use crate::live::instrument::Live;
use crate::live::state::CordsNow;

/// The cords were last seen loaded, and now a tension cell or its link is gone.
pub(super) fn blind(live: &mut Live, host_ns: i64) -> Option<Happening> {
    match live.cords {
        CordsNow::Slack => return live.board.clear(Cause::LoadedAndBlind, host_ns),
        _ if live.cells.every_cell_fresh => return live.board.clear(Cause::LoadedAndBlind, host_ns),
        _ => {}
    }
    let slack_n = live.rig.plan.slack_tension_n;
    let last_n = live.channels.iter().filter(|channel| channel.is_tension()).filter_map(|channel| channel.last_level());
    let last_n = last_n.reduce(f64::max).filter(|last_n| *last_n >= slack_n)?;
    let silent: Vec<_> = live
        .channels
        .iter()
        .filter(|channel| channel.is_tension() && !channel.is_fresh(host_ns))
        .map(|channel| channel.name.as_str())
        .collect();
    if live.board.is_active(Cause::LoadedAndBlind) {
        return None;
    }
    let sentence = format!(
        "cords loaded and {} silent (last tension {last_n:.0} N): tension unknown, treat as loaded, keep clear, restore the link before anyone approaches",
        silent.join(" and ")
    );
    live.board.raise(Cause::LoadedAndBlind, host_ns, sentence)
}
