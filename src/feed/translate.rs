//! The rig and live's happenings as the feed tells them.

use crate::live::{AlarmChange, Happening, Plan};
use crate::rig::{ProofLoad, Rig};

use super::message::{Event, FEED_VERSION, Hello};

impl Hello {
    /// What a display needs to know of a rig.
    pub fn of(rig: &Rig) -> Self {
        // Without a plan there is no band to show; live says why.
        let band = Plan::new(rig).map(|plan| plan.band()).unwrap_or_default();
        Self {
            feed_version: FEED_VERSION,
            program_version: env!("CARGO_PKG_VERSION").to_owned(),
            rig: rig.name.clone(),
            payload: rig.payload.name.clone(),
            rail_length_m: rig.rail.length_m,
            zero_mark_x_m: rig.rail.zero_mark_x_m,
            brake_x_m: rig.rail.brake_x_m,
            incline_deg: rig.incline_deg(),
            limit_tension_n: rig.limits.tension_n,
            limit_peak_g: rig.limits.peak_g,
            proof_limit_g: rig.details.proof_load.as_ref().map(ProofLoad::limit_g),
            proof_load: rig.details.proof_load.as_ref().map(ProofLoad::sentence),
            plan_draw_m: rig.plan.draw_m,
            plan_speed_min_mps: rig.plan.launch_speed_min_mps,
            plan_speed_max_mps: rig.plan.launch_speed_max_mps,
            slack_tension_n: rig.plan.slack_tension_n,
            plan_band: band.iter().map(|at| (at.draw_m, at.low_n, at.planned_n, at.high_n)).collect(),
        }
    }
}

impl Event {
    /// A happening of the live room as the feed tells it.
    pub fn of(happening: &Happening) -> Self {
        let (host_ns, kind, text) = match happening {
            Happening::OpenTrial { host_ns, .. } => (*host_ns, "trial", String::from("trial opens")),
            Happening::CloseTrial { host_ns, reason } => (*host_ns, "trial", format!("trial closes: {reason}")),
            Happening::Phase { host_ns, from, to } => {
                (*host_ns, "phase", format!("{} after {}", to.words(), from.words()))
            }
            Happening::Alarm { host_ns, sentence, change } => {
                let over = if *change == AlarmChange::Cleared { "over: " } else { "" };
                (*host_ns, "alarm", format!("{over}{sentence}"))
            }
            Happening::Device { host_ns, device, kind, text } => {
                // A device's text may hold anything, and goes to terminals.
                let text = text.replace(char::is_control, "·");
                let (kind, source) = ((*kind).to_owned(), device.clone());
                return Self { host_ns: *host_ns, kind, source, person: None, text: format!("{device}: {text}") };
            }
            Happening::LaunchSeen { host_ns, launch } => {
                let text = format!("launched at {:.2} m/s, peak {:.2} g", launch.launch_speed_mps, launch.peak_g);
                (*host_ns, "launch", text)
            }
        };
        Self { host_ns, kind: kind.to_owned(), source: String::from("live"), person: None, text }
    }
}
