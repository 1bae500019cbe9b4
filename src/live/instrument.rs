//! [`Live`]: link events in, happenings and snapshots out. Pure: time comes with the data and with [`Live::tick`].
//!
//! Fed the same events and ticks it says the same, so phases, alarms and silences replay from a journal.

use std::collections::BTreeMap;

use jiff::civil::Date;

use crate::calibration::Tare;
use crate::capture::Captured;
use crate::link::{DeviceIdx, LinkEvent, LinkWhat};
use crate::rig::{Rig, Role, Served};

use super::alarm::{Board, Cause};
use super::channel::ChannelMonitor;
use super::cords::{Cells, SlackRule};
use super::device::{DeviceMonitor, Sample};
use super::drawn::{Drawn, Pull};
use super::happening::Happening;
use super::launch::LaunchWatch;
use super::phase::{Seen, Tracker};
use super::plan::Plan;
use super::raw::Taps;
use super::rules;
use super::state::{CordsNow, JournalNow, LaunchSeen, Phase, RawNow, Snapshot, TrialNow};
use super::trial::TrialKeeper;

const MS: i64 = 1_000_000;
const SPEED_WINDOW_NS: i64 = 100 * MS;
const FAST_SPEED_WINDOW_NS: i64 = 10 * MS;

/// What only the daemon knows of a snapshot.
#[derive(Debug, Clone, Default)]
pub struct Around {
    /// RFC 3339; empty when the wall clock was never set.
    pub wall: String,
    pub journal: Option<JournalNow>,
    pub trial: Option<TrialNow>,
}

/// Everything the live thread knows.
#[derive(Debug)]
pub struct Live {
    pub(super) rig: Rig,
    /// None when the model cannot take the rig file's cords to the planned draw; an alarm says so.
    pub(super) plan: Option<Plan>,
    pub(super) no_plan: Option<String>,
    pub(super) devices: Vec<DeviceMonitor>,
    pub(super) channels: Vec<ChannelMonitor>,
    pub(super) tracker: Tracker,
    pub(super) board: Board,
    pub(super) cords: CordsNow,
    pub(super) cells: Cells,
    pub(super) started_ns: Option<i64>,
    has_uncalibrated_cell: bool,
    slack_rule: SlackRule,
    trial: TrialKeeper,
    launch: LaunchWatch,
    launch_ns: i64,
    last_launch: Option<LaunchSeen>,
    pub(super) drawn: Drawn,
    taps: Taps,
    tares: Vec<(Tare, String)>,
}

impl Live {
    pub fn new(rig: &Rig) -> Self {
        let (plan, no_plan) = match Plan::new(rig) {
            Ok(plan) => (Some(plan), None),
            Err(error) => (None, Some(error.to_string())),
        };
        Self {
            plan,
            no_plan,
            devices: rig.devices.iter().map(DeviceMonitor::new).collect(),
            channels: rig.channels.iter().map(|channel| ChannelMonitor::new(channel, &rig.devices)).collect(),
            tracker: Tracker::new(rig.plan.slack_tension_n, rig.rail.zero_mark_x_m),
            board: Board::default(),
            cords: CordsNow::Unknown,
            cells: Cells::default(),
            started_ns: None,
            has_uncalibrated_cell: rig.uncalibrated.iter().any(|channel| channel.role.is_tension()),
            slack_rule: SlackRule::default(),
            trial: TrialKeeper::default(),
            launch: LaunchWatch::default(),
            launch_ns: 0,
            last_launch: None,
            drawn: Drawn::new(rig),
            taps: Taps::new(rig),
            tares: Vec::new(),
            rig: rig.clone(),
        }
    }

    /// Takes what a link saw; gives what follows from it. Events of devices that the rig does not have are ignored.
    pub fn on_link(&mut self, event: &LinkEvent) -> Vec<Happening> {
        let device_idx = usize::from(event.device.0);
        let Some(device) = self.devices.get_mut(device_idx) else { return Vec::new() };
        let host_ns = event.host_ns;
        match &event.what {
            LinkWhat::Up { path, baud } => device.link_up(host_ns, path, *baud),
            LinkWhat::Down { reason } => device.link_down(host_ns, reason),
            LinkWhat::Note { text } => device.note_port(text),
            LinkWhat::TimeRequested { token } => device.time_requested(host_ns, *token),
            LinkWhat::Bytes(bytes) => {
                let captured = device.decode(host_ns, bytes);
                return captured.iter().flat_map(|what| self.on_captured(device_idx, what)).collect();
            }
        }
        self.judge(host_ns)
    }

    /// Bytes of a device were dropped on the way here.
    pub fn on_lost(&mut self, device: DeviceIdx, host_ns: i64) {
        if let Some(device) = self.devices.get_mut(usize::from(device.0)) {
            device.bytes_lost(host_ns);
        }
    }

    /// Takes one decoded thing.
    fn on_captured(&mut self, device_idx: usize, what: &Captured) -> Vec<Happening> {
        let Self { devices, channels, launch, rig, board, taps, .. } = self;
        let device = &mut devices[device_idx];
        device.heard(what);
        match what {
            Captured::Description(description) => {
                let host_ns = device.last_bytes_ns().unwrap_or(0);
                let missing = device.describe(description, &rig.channels, taps);
                for (idx, low_counts, high_counts) in device.ranges(description) {
                    if let Some(channel) = channels.get_mut(idx) {
                        channel.health.set_range(low_counts, high_counts);
                    }
                }
                for (idx, interval_ns) in device.intervals(description) {
                    if let Some(channel) = channels.get_mut(idx) {
                        channel.set_interval(interval_ns);
                    }
                }
                let mut happenings = vec![said(device, host_ns, "device", description.to_string())];
                happenings.extend(rules::channels_described(board, rig, &device.name, &missing, host_ns));
                happenings
            }
            Captured::Block(block) => {
                device.spread(block, &mut |sample: Sample| {
                    taps.push(sample.channel_idx, sample.counts);
                    let Some(channel) = channels.get_mut(sample.channel_idx) else { return };
                    let Some(value) = channel.push(sample.t_ns, sample.counts) else { return };
                    match channel.role {
                        Role::ShuttlePosition => launch.x_m.push(sample.t_ns, value),
                        Role::ShuttleSpecificForce => launch.specific_force_mps2.push(sample.t_ns, value),
                        _ => {}
                    }
                });
                self.judge(block.host_ns)
            }
            Captured::Reboot(reboot) => vec![said(device, reboot.host_ns, "device", reboot.to_string())],
            // An instrument that prints readings says nothing but readings.
            Captured::Text { host_ns, text } if device.speaks_frames() => {
                vec![said(device, *host_ns, "text", text.clone())]
            }
            Captured::TimeReply(reply) => {
                device.time_replied(reply);
                Vec::new()
            }
            _ => Vec::new(),
        }
    }

    /// Time passes: silences, dwell times, forecasts. Call it at every heartbeat.
    pub fn tick(&mut self, host_ns: i64) -> Vec<Happening> {
        let mut happenings = self.judge(host_ns);
        for device in &mut self.devices {
            if let Some(text) = device.tell_losses(host_ns) {
                happenings.push(said(device, host_ns, "loss", text));
            }
        }
        let pull = self.pull(host_ns);
        self.drawn.follow(&self.rig, self.plan.as_ref(), self.tracker.phase(), pull, host_ns);
        happenings
    }

    fn judge(&mut self, host_ns: i64) -> Vec<Happening> {
        self.started_ns.get_or_insert(host_ns);
        let slack_n = self.rig.plan.slack_tension_n;
        self.cells = Cells::of(&self.channels, host_ns, slack_n);
        self.cells.every_cell_fresh &= !self.has_uncalibrated_cell;
        let draw_m = self.x_m(host_ns).map(|x_m| self.rig.draw_m(x_m));
        self.cords = self.slack_rule.judge(&self.cells, host_ns, self.plan.as_ref(), slack_n, draw_m);
        let mut happenings = Vec::new();
        if let Some(from) = self.tracker.step(&self.seen(host_ns)) {
            self.entered(from, host_ns, &mut happenings);
        }
        happenings.extend(self.trial.judge(host_ns, self.tracker.phase(), self.tracker.since_ns(), &self.cords));
        happenings.extend(rules::judge(self, host_ns));
        happenings
    }

    fn entered(&mut self, from: Phase, host_ns: i64, happenings: &mut Vec<Happening>) {
        let to = self.tracker.phase();
        happenings.push(Happening::Phase { host_ns, from, to });
        match to {
            Phase::Launch => self.launch_ns = host_ns,
            Phase::WinchBack if matches!(from, Phase::Slack | Phase::Rest) => self.last_launch = None,
            Phase::Rest if matches!(from, Phase::Launch | Phase::RunOut) => {
                self.last_launch = self.launch.judge(&self.rig, self.launch_ns);
                happenings.extend(self.last_launch.map(|launch| Happening::LaunchSeen { host_ns, launch }));
            }
            _ => {}
        }
        self.drawn.entered(from, to, host_ns);
    }

    fn seen(&self, host_ns: i64) -> Seen {
        let position = self.with_role(Role::ShuttlePosition);
        let speed = |window_ns| position.and_then(|channel| channel.slope_per_s(host_ns, window_ns));
        Seen {
            host_ns,
            line_n: self.level(Role::ReleaseLineTension, host_ns),
            anchor_n: self.level(Role::CordAnchorTension, host_ns),
            every_cell_fresh: self.cells.all_speak(),
            slack_for_ns: self.cells.slack_for_ns,
            tension_n: self.cells.tension_n,
            x_m: self.x_m(host_ns),
            speed_mps: speed(SPEED_WINDOW_NS),
            fast_speed_mps: speed(FAST_SPEED_WINDOW_NS),
        }
    }

    pub(super) fn with_role(&self, role: Role) -> Option<&ChannelMonitor> {
        self.channels.iter().find(|channel| channel.role == role)
    }

    pub(super) fn level(&self, role: Role, host_ns: i64) -> Option<f64> {
        self.with_role(role).and_then(|channel| channel.level(host_ns))
    }

    pub(super) fn x_m(&self, host_ns: i64) -> Option<f64> {
        self.level(Role::ShuttlePosition, host_ns)
    }

    /// Line and place together, when both are fresh. A line that fell alone tells nothing of the cords.
    fn pull(&self, host_ns: i64) -> Option<Pull> {
        if self.tracker.released_not_moving() {
            return None;
        }
        let line_n = self.level(Role::ReleaseLineTension, host_ns)?;
        Some(Pull { line_n, x_m: self.x_m(host_ns)? })
    }

    /// The state of everything; starts new extremes for the next snapshot.
    pub fn snapshot(&mut self, host_ns: i64, around: Around) -> Snapshot {
        let x_m = self.x_m(host_ns);
        Snapshot {
            host_ns,
            wall: around.wall,
            phase: self.tracker.phase(),
            phase_s: (host_ns - self.tracker.since_ns()).max(0) as f64 * 1e-9,
            cords: self.cords,
            channels: self.channels.iter_mut().map(|channel| channel.take_now(host_ns)).collect(),
            x_m,
            draw_m: x_m.map(|x_m| self.rig.draw_m(x_m)),
            released_now: self.drawn.released_now,
            to_go: self.drawn.to_go(&self.rig, self.plan.as_ref(), self.tracker.phase(), self.pull(host_ns)),
            hold: self.drawn.hold_now(&self.rig),
            cords_fit: self.drawn.cords_fit(&self.rig),
            last_launch: self.last_launch,
            links: self.devices.iter_mut().map(|device| device.now(host_ns)).collect(),
            journal: around.journal,
            trial: around.trial,
            alarms: self.board.list(),
        }
    }

    pub fn phase(&self) -> Phase {
        self.tracker.phase()
    }

    pub fn cords(&self) -> CordsNow {
        self.cords
    }

    /// Whether the live room holds a trial open.
    pub fn trial_is_open(&self) -> bool {
        self.trial.is_open()
    }

    /// The daemon goes on with a trial that a crash left open: no second one is opened, and it closes by the rule.
    pub fn resume_trial(&mut self) {
        self.trial.resume();
    }

    /// The daemon could not begin, or had to end, the trial that the live room holds open: the next tension opens another.
    pub fn forget_trial(&mut self) {
        self.trial.forget();
    }

    /// A person opens a trial by hand; none when one is open.
    pub fn open_by_hand(&mut self, host_ns: i64) -> Option<Happening> {
        self.trial.open_by_hand(host_ns)
    }

    /// A person closes the trial by hand.
    ///
    /// # Errors
    /// [`super::KeptOpen`] when there is none, or while the cords are loaded or unknown.
    pub fn close_by_hand(&mut self, host_ns: i64, person: &str) -> Result<Happening, super::KeptOpen> {
        self.trial.close_by_hand(host_ns, person, &self.cords)
    }

    /// Tells a channel's counts with [`Live::take_raw`] for the next ten seconds.
    ///
    /// # Errors
    /// What channels there are, where `channel` is none.
    pub fn want_raw(&mut self, channel: &str, host_ns: i64) -> Result<(), String> {
        self.taps.want(channel, host_ns)
    }

    /// Counts since the last call, of the channels that somebody wants.
    pub fn take_raw(&mut self, host_ns: i64) -> Vec<RawNow> {
        self.taps.take(host_ns)
    }

    /// Sets a cell's zero where it stands, while the cords are slack.
    ///
    /// # Errors
    /// Why not, in a sentence.
    pub fn tare(&mut self, name: &str, person: &str, host_ns: i64) -> Result<Tare, String> {
        let names = || self.channels.iter().map(|channel| channel.name.as_str()).collect::<Vec<_>>().join(", ");
        let Some(idx) = self.channels.iter().position(|channel| channel.name == name) else {
            return Err(format!("there is no calibrated channel {name:?}, there are: {}", names()));
        };
        let record_zero_counts = self.rig.channels[idx].calibration.zero_counts;
        let slack = self.cords == CordsNow::Slack;
        let allowed_n = self.rig.plan.slack_tension_n;
        let channel = &mut self.channels[idx];
        let tare = channel.tare(host_ns, record_zero_counts, slack, allowed_n).map_err(|error| error.to_string())?;
        self.tares.retain(|(earlier, _)| earlier.channel != tare.channel);
        self.tares.push((tare.clone(), person.to_owned()));
        Ok(tare)
    }

    /// Zeros in force and who set them: at most one a channel.
    pub fn tares(&self) -> &[(Tare, String)] {
        &self.tares
    }

    /// Doubts about calibrations, as standing alarms: each a sentence.
    pub fn calibration_doubts(&mut self, host_ns: i64, doubts: &[String]) -> Vec<Happening> {
        let raised = (0_u16..)
            .zip(doubts)
            .map(|(idx, doubt)| self.board.raise(Cause::CalibrationDoubt(idx), host_ns, doubt.clone()));
        raised.flatten().collect()
    }

    /// The g limit against the proof load, as a standing alarm where the limit is above what was proven.
    pub fn judge_proof(&mut self, host_ns: i64) -> Option<Happening> {
        let exceeded = self.rig.details.proof_load.as_ref()?.exceeded(self.rig.limits.peak_g)?;
        self.board.raise(Cause::OverProof, host_ns, format!("the peak limit of {exceeded}"))
    }

    /// What the archive says each cord has served: those that are to come off, as standing alarms.
    pub fn judge_cords(
        &mut self,
        host_ns: i64,
        served: &BTreeMap<String, Served>,
        today: Option<Date>,
    ) -> Vec<Happening> {
        let board = &mut self.board;
        let judged = self.rig.details.cord_items.iter().enumerate().map(|(index, cord)| {
            let served = cord.served(served.get(&cord.serial).copied().unwrap_or_default());
            match cord.worn(served, today) {
                Some(sentence) => board.raise(Cause::WornCord(index), host_ns, sentence),
                None => board.clear(Cause::WornCord(index), host_ns),
            }
        });
        judged.flatten().collect()
    }

    /// What the journal says of itself; `None` when all is well.
    pub fn journal_trouble(&mut self, host_ns: i64, trouble: Option<&str>) -> Option<Happening> {
        self.recording_trouble(Cause::Journal, host_ns, trouble)
    }

    /// What is wrong with the disk it writes to: an alarm of its own, so that it is raised over one of slowness.
    pub fn disk_trouble(&mut self, host_ns: i64, trouble: Option<&str>) -> Option<Happening> {
        self.recording_trouble(Cause::Disk, host_ns, trouble)
    }

    fn recording_trouble(&mut self, cause: Cause, host_ns: i64, trouble: Option<&str>) -> Option<Happening> {
        match trouble {
            Some(sentence) => self.board.raise(cause, host_ns, format!("journal: {sentence}")),
            None => self.board.clear(cause, host_ns),
        }
    }

    /// `person` has seen the alarms; tells how many were new to a person.
    pub fn acknowledge(&mut self, person: &str) -> usize {
        self.board.acknowledge(person)
    }
}

fn said(device: &DeviceMonitor, host_ns: i64, kind: &'static str, text: String) -> Happening {
    Happening::Device { host_ns, device: device.name.clone(), kind, text }
}

#[cfg(test)]
mod tests;
