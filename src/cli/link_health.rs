//! How a running daemon does, for `check`: of each link what came, what was refused and why, what is missing, how good the
//! clock is; of the journal how long data wait to be on the disk.

use std::path::Path;
use std::time::{Duration, Instant};

use tautrail::feed::FeedClient;
use tautrail::feed::message::{JournalNow, LinkNow, Message};

/// The first snapshot comes within a thirtieth of a second.
const PATIENCE: Duration = Duration::from_secs(2);

/// What a daemon tells.
#[derive(Default)]
pub struct Health {
    pub links: Vec<LinkNow>,
    pub journal: Option<JournalNow>,
}

/// Of a daemon that records the rig of this name; `None` where there is none to ask.
pub fn ask(socket: &Path, rig_name: &str) -> Option<Health> {
    let mut client = FeedClient::connect(socket).ok().filter(|client| client.hello().rig == rig_name)?;
    let deadline = Instant::now() + PATIENCE;
    while Instant::now() < deadline {
        match client.next(deadline.saturating_duration_since(Instant::now())) {
            Ok(Some(Message::Snapshot(snapshot))) => {
                return Some(Health { links: snapshot.links, journal: snapshot.journal });
            }
            Ok(_) => {}
            Err(_) => return None,
        }
    }
    None
}

/// One sentence about the journal.
pub fn journal_sentence(journal: &JournalNow) -> String {
    if let Some(trouble) = &journal.trouble {
        return format!("journal: TROUBLE: {trouble}");
    }
    let gib = |bytes: u64| bytes as f64 / f64::from(1 << 30);
    let free = journal.free_bytes.map_or("room unknown".to_owned(), |free| format!("{:.1} GiB free", gib(free)));
    format!(
        "journal: {:.3} GiB, {free}, synced within {:.3} s lately (0.1 s is wanted), queue {:.0} % filled at most lately, {} reads lost",
        gib(journal.bytes),
        journal.sync_interval_s,
        journal.queue_high_water * 100.0,
        journal.lost_events
    )
}

/// What is wrong with a link that is up, a sentence each.
pub fn troubles(link: &LinkNow) -> impl Iterator<Item = String> {
    let of_device = |trouble: &String| format!("{}: {trouble}", link.device);
    link.no_samples.iter().chain(&link.clock_trouble).map(of_device)
}

/// One sentence a link.
pub fn sentence(link: &LinkNow) -> String {
    if !link.up {
        return format!("link {}: DOWN: {}", link.device, link.note);
    }
    let mut refused = format!("{} refused", link.refused);
    if link.refused > 0 {
        let by: Vec<String> = link.refused_by.iter().map(|(reason, n)| format!("{n} {reason}")).collect();
        let last = link.last_refusal.as_ref().map_or(String::new(), |last| format!("; the last: {last}"));
        refused = format!("{refused} ({}{last})", by.join(", "));
    }
    let clock = link.clock_uncertainty_s.map_or("not known yet".to_owned(), |u_s| {
        let drift = link.clock_drift_ppm.map_or(String::new(), |ppm| format!(", {ppm:+.1} ppm"));
        format!("known to {:.3} ms{drift}", u_s * 1e3)
    });
    format!(
        "link {}: up, {} bytes, {} frames, {} blocks, {refused}, {} lost, {} samples missing in {} gaps, longest stall {:.3} s, clock {clock}; {}",
        link.device,
        link.bytes,
        link.frames,
        link.blocks,
        link.lost_frames,
        link.missing_samples,
        link.gaps,
        link.longest_stall_s,
        link.note
    )
}
