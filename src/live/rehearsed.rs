//! Live against the virtual rig in virtual time: another program's physics, sensors and clocks, with its truth beside.

use std::collections::BTreeSet;

use bytes::Bytes;
use virtual_rig::performance::{Options, prepare};
use virtual_rig::play::virtual_time::{Delivered, VirtualPlay};
use virtual_rig::truth::Truth;

use super::{AlarmChange, CordsNow, Happening, LaunchSeen, Live, Phase};
use crate::link::{DeviceIdx, LinkEvent, LinkWhat};
use crate::live::Around;

const HEARTBEAT_NS: i64 = 20_000_000;

/// What live said of a scenario, and the truth.
struct Rehearsed {
    told: Vec<Happening>,
    forecasts: Vec<(Phase, f64, f64, f64)>,
    /// Greatest age in seconds of any tension cell at a heartbeat, once both had been heard.
    oldest_s: f64,
    end: CordsNow,
    truth: Truth,
}

fn rehearse(scenario: &str, seed: u64) -> Rehearsed {
    rehearse_on(&crate::rig::testing::north_pier(), &Options { scenario: scenario.into(), seed, ..Options::default() })
}

fn rehearse_on(rig: &crate::rig::Rig, options: &Options) -> Rehearsed {
    let performance = prepare(options).unwrap();
    let mut play = VirtualPlay::new(&performance).unwrap();
    let mut live = Live::new(rig);
    let (mut told, mut forecasts, mut oldest_s) = (Vec::new(), Vec::new(), 0.0_f64);
    let mut beat_ns = 0;
    for delivery in play.by_ref() {
        let delivery = delivery.unwrap();
        if beat_ns == 0 {
            beat_ns = delivery.host_ns;
            for device in 0..2 {
                let what = LinkWhat::Up { path: "port".into(), baud: 921_600 };
                told.extend(live.on_link(&LinkEvent { host_ns: beat_ns, device: DeviceIdx(device), what }));
            }
        }
        while beat_ns + HEARTBEAT_NS <= delivery.host_ns {
            beat_ns += HEARTBEAT_NS;
            told.extend(live.tick(beat_ns));
            let now = live.snapshot(beat_ns, Around::default());
            let cells = now.channels.iter().take(2).map(|channel| channel.age_s);
            oldest_s = cells.flatten().fold(oldest_s, f64::max);
            forecasts.extend(now.released_now.map(|forecast| {
                let (low, high) = (forecast.launch_speed_low_mps, forecast.launch_speed_high_mps);
                (now.phase, low, forecast.launch_speed_mps, high)
            }));
        }
        let device = DeviceIdx(delivery.device as u16);
        let what = match delivery.what {
            Delivered::Bytes(bytes) => LinkWhat::Bytes(Bytes::from(bytes)),
            Delivered::TimeRequested { token } => LinkWhat::TimeRequested { token },
            Delivered::Down => LinkWhat::Down { reason: "cable pulled".into() },
            Delivered::Up => LinkWhat::Up { path: "port".into(), baud: 921_600 },
        };
        told.extend(live.on_link(&LinkEvent { host_ns: delivery.host_ns, device, what }));
    }
    Rehearsed { told, forecasts, oldest_s, end: live.cords(), truth: play.truth() }
}

impl Rehearsed {
    fn phases(&self) -> Vec<Phase> {
        let to = |happening: &Happening| match happening {
            Happening::Phase { to, .. } => Some(*to),
            _ => None,
        };
        self.told.iter().filter_map(to).collect()
    }

    fn raised(&self) -> BTreeSet<&str> {
        let raised =
            |happening: &'_ Happening| matches!(happening, Happening::Alarm { change: AlarmChange::Raised, .. });
        let told = self.told.iter().filter(|happening| raised(happening));
        told.filter_map(|happening| match happening {
            Happening::Alarm { sentence, .. } => Some(sentence.as_str()),
            _ => None,
        })
        .collect()
    }

    fn launch(&self) -> Option<LaunchSeen> {
        self.told.iter().find_map(|happening| match happening {
            Happening::LaunchSeen { launch, .. } => Some(*launch),
            _ => None,
        })
    }

    fn closed(&self) -> bool {
        self.told.iter().any(|happening| matches!(happening, Happening::CloseTrial { .. }))
    }
}

#[test]
fn the_nominal_trial_goes_phase_by_phase_and_raises_no_alarm() {
    for seed in [1, 2] {
        let run = rehearse("nominal", seed);
        use Phase::*;
        assert_eq!(run.phases(), [Slack, WinchBack, Hold, Launch, RunOut, Rest], "seed {seed}");
        assert_eq!(run.raised(), BTreeSet::new(), "seed {seed}");
        assert!(run.closed() && run.end == CordsNow::Slack, "seed {seed}");
        assert!(run.oldest_s < 0.1, "seed {seed}: a cell looked {} s old", run.oldest_s);
    }
}

#[test]
fn the_first_estimate_of_a_launch_is_near_the_truth() {
    let run = rehearse("nominal", 3);
    let seen = run.launch().unwrap();
    let truth = run.truth.launch.as_ref().unwrap();
    let peak = run.truth.peaks.iter().find(|peak| peak.filter == "cfc60").unwrap();
    assert!((seen.launch_speed_mps / truth.speed_rail_mps - 1.0).abs() < 0.01, "{seen:?}, {truth:?}");
    assert!((seen.peak_g / peak.specific_g - 1.0).abs() < 0.03, "{seen:?}, {peak:?}");
    let (_, low, value, high) = *run.forecasts.iter().rfind(|(phase, ..)| *phase == Phase::Hold).unwrap();
    println!("forecast in the hold {low:.2} {value:.2} {high:.2}, truth {:.2}", truth.speed_ground_mps);
    assert!((value / truth.speed_ground_mps - 1.0).abs() < 0.05, "{value}, {truth:?}");
}

/// The winch stops once on the way, holds, and lets the shuttle down to the zero mark.
#[test]
fn a_let_down_is_no_launch_and_closes_the_trial_once_slack() {
    let run = rehearse("let-down", 1);
    use Phase::*;
    assert_eq!(run.phases(), [Slack, WinchBack, Hold, WinchBack, Hold, LetDown, Slack]);
    assert_eq!(run.raised(), BTreeSet::new());
    assert!(run.launch().is_none() && run.closed() && run.end == CordsNow::Slack, "{:?}", run.end);
}

#[test]
fn a_hang_fire_keeps_the_cords_loaded_and_says_so() {
    let run = rehearse("hang-fire", 1);
    assert!(!run.phases().contains(&Phase::Launch), "{:?}", run.phases());
    assert!(run.raised().iter().any(|sentence| sentence.contains("hang-fire")), "{:?}", run.raised());
}

#[test]
fn an_early_release_is_a_launch() {
    let run = rehearse("early-release", 1);
    assert!(run.phases().contains(&Phase::Launch), "{:?}", run.phases());
    assert!(run.launch().is_some() && run.closed());
}

#[test]
fn a_hook_that_slips_and_holds_again_is_no_launch() {
    let run = rehearse("hook-slip", 1);
    assert!(!run.phases().contains(&Phase::Launch), "{:?}", run.phases());
}

/// What each scenario makes of the alarms: a part of every sentence that must be raised, in any order, and no other.
const RAISED: [(&str, &[&str]); 10] = [
    ("hook-slip", &["hook slip"]),
    ("cord-failure-in-hold", &["tension falls in the hold", "below the plan's band", "outside the window"]),
    ("hang-fire", &["hang-fire"]),
    ("early-release", &["early release: the shuttle let go at 2.5"]),
    ("misrigged-count", &["fits 4.9 ± ", "below the plan's band"]),
    ("misrigged-length", &["came taut at", "over the plan's band"]),
    ("clipped-accelerometer", &["accel (shuttle specific force) is saturated"]),
    // A kilogram more on the shuttle shows in nothing that is measured before the release (DEVELOPERS.md).
    ("misrigged-mass", &[]),
    ("incline-head-wind", &[]),
    ("soft-rail", &[]),
];

#[test]
fn every_scenario_raises_its_own_sentences_and_no_other() {
    let mut wrong = Vec::new();
    for (scenario, wanted) in RAISED {
        let run = rehearse(scenario, 1);
        let raised = run.raised();
        let missing = wanted.iter().filter(|part| !raised.iter().any(|sentence| sentence.contains(**part)));
        wrong.extend(missing.map(|part| format!("{scenario}: nothing says \"{part}\": {raised:#?}")));
        let others = raised.iter().filter(|sentence| !wanted.iter().any(|part| sentence.contains(part)));
        wrong.extend(others.map(|sentence| format!("{scenario}: unwanted \"{sentence}\"")));
    }
    assert!(wrong.is_empty(), "{wrong:#?}");
}
