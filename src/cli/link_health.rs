//! The links of a running daemon, for `check`: what came, what was refused and why, what is missing, how good the clock is.

use std::path::Path;
use std::time::{Duration, Instant};

use tautrail::feed::FeedClient;
use tautrail::feed::message::{LinkNow, Message};

/// The first snapshot comes within a thirtieth of a second.
const PATIENCE: Duration = Duration::from_secs(2);

/// The links, of a daemon that records the rig of this name; `None` where there is none to ask.
pub fn ask(socket: &Path, rig_name: &str) -> Option<Vec<LinkNow>> {
    let mut client = FeedClient::connect(socket).ok().filter(|client| client.hello().rig == rig_name)?;
    let deadline = Instant::now() + PATIENCE;
    while Instant::now() < deadline {
        match client.next(deadline.saturating_duration_since(Instant::now())) {
            Ok(Some(Message::Snapshot(snapshot))) => return Some(snapshot.links),
            Ok(_) => {}
            Err(_) => return None,
        }
    }
    None
}

/// One sentence a link.
pub fn sentence(link: &LinkNow) -> String {
    if !link.up {
        return format!("link {}: DOWN: {}", link.device, link.note);
    }
    let mut refused = format!("{} refused", link.refused);
    if link.refused > 0 {
        let by: Vec<String> = link.refused_by.iter().map(|(reason, n)| format!("{n} {reason}")).collect();
        refused = format!("{refused} ({})", by.join(", "));
    }
    let clock = link.clock_uncertainty_s.map_or("not known yet".to_owned(), |u_s| {
        let drift = link.clock_drift_ppm.map_or(String::new(), |ppm| format!(", {ppm:+.1} ppm"));
        format!("known to {:.3} ms{drift}", u_s * 1e3)
    });
    format!(
        "link {}: up, {} bytes, {} frames, {refused}, {} lost, {} samples missing in {} gaps, longest stall {:.3} s, clock {clock}; {}",
        link.device,
        link.bytes,
        link.frames,
        link.lost_frames,
        link.missing_samples,
        link.gaps,
        link.longest_stall_s,
        link.note
    )
}
