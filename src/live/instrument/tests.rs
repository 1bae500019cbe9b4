use super::*;
use crate::link::DeviceIdx;
use crate::live::AlarmChange;
use crate::live::testing::{End, Instant, ZERO_NS, blocks, description, north_pier, scene};
use crate::rig::{LineCut, Protocol, TextColumn, TextInstrument};

const S: i64 = 1_000_000_000;

/// A run of `Live` over a scene, block by block with a tick after each.
struct Run {
    live: Live,
    told: Vec<Happening>,
}

impl Run {
    fn new() -> Self {
        Self::of(&north_pier())
    }

    fn of(rig: &Rig) -> Self {
        let mut run = Self { live: Live::new(rig), told: Vec::new() };
        for (idx, channels) in [(0, ["line", "anchor"]), (1, ["encoder", "accel"])] {
            let path = String::from("port");
            let what = LinkWhat::Up { path, baud: 1 };
            run.link(ZERO_NS, idx, what);
            let name = run.live.devices[usize::from(idx)].name.clone();
            run.told.extend(run.live.on_captured(usize::from(idx), &description(&name, channels)));
        }
        run
    }

    fn link(&mut self, host_ns: i64, idx: u16, what: LinkWhat) {
        self.told.extend(self.live.on_link(&LinkEvent { host_ns, device: DeviceIdx(idx), what }));
    }

    /// Plays the scene from the first to the last second; `keep` says which device's blocks arrive.
    fn play(&mut self, scene: &[Instant], from_s: f64, to_s: f64, keep: impl Fn(usize) -> bool) {
        for (device, block) in blocks(scene) {
            let t_s = (block.host_ns - ZERO_NS) as f64 * 1e-9;
            if t_s < from_s || t_s >= to_s {
                continue;
            }
            if keep(device) {
                let told = self.live.on_captured(device, &Captured::Block(block.clone()));
                self.told.extend(told);
            }
            self.told.extend(self.live.tick(block.host_ns));
        }
    }

    fn phases(&self) -> Vec<Phase> {
        let to = |happening: &Happening| match happening {
            Happening::Phase { to, .. } => Some(*to),
            _ => None,
        };
        self.told.iter().filter_map(to).collect()
    }

    fn raised(&self) -> Vec<&str> {
        let told = self.told.iter();
        told.filter_map(|happening| match happening {
            Happening::Alarm { change: AlarmChange::Raised, sentence, .. } => Some(sentence.as_str()),
            _ => None,
        })
        .collect()
    }

    fn when(&self, wanted: impl Fn(&Happening) -> bool) -> Option<f64> {
        let happening = self.told.iter().find(|happening| wanted(happening))?;
        let host_ns = match happening {
            Happening::OpenTrial { host_ns, .. }
            | Happening::CloseTrial { host_ns, .. }
            | Happening::Phase { host_ns, .. }
            | Happening::Alarm { host_ns, .. }
            | Happening::Device { host_ns, .. }
            | Happening::LaunchSeen { host_ns, .. } => *host_ns,
        };
        Some((host_ns - ZERO_NS) as f64 * 1e-9)
    }

    fn closed(&self) -> Option<&str> {
        self.told.iter().find_map(|happening| match happening {
            Happening::CloseTrial { reason, .. } => Some(reason.as_str()),
            _ => None,
        })
    }
}

#[test]
fn a_nominal_launch_goes_through_every_phase_once_and_raises_nothing() {
    let mut run = Run::new();
    let scene = scene(End::Launch, 1.0);
    run.play(&scene, 0.0, 25.0, |_| true);
    use Phase::*;
    assert_eq!(run.phases(), [Slack, WinchBack, Hold, Launch, RunOut, Rest]);
    assert_eq!(run.raised(), Vec::<&str>::new());
    let released_s = run.when(|h| matches!(h, Happening::Phase { to: Launch, .. })).unwrap();
    assert!((15.0..15.05).contains(&released_s), "{released_s}");
    let opened_s = run.when(|h| matches!(h, Happening::OpenTrial { .. })).unwrap();
    assert!((2.0..2.5).contains(&opened_s), "{opened_s}");
    assert_eq!(run.closed(), Some("launched and at rest"));
}

#[test]
fn the_launch_is_seen_as_the_scene_made_it() {
    let mut run = Run::new();
    let scene = scene(End::Launch, 1.0);
    run.play(&scene, 0.0, 27.0, |_| true);
    let seen =
        run.told.iter().find_map(|h| if let Happening::LaunchSeen { launch, .. } = h { Some(*launch) } else { None });
    let seen = seen.unwrap();
    // The scene's own truth: the speed at the zero mark, where its cords let go, and its greatest specific force.
    let fastest_mps = scene.windows(2).map(|pair| (pair[1].x_m - pair[0].x_m) * 2_000.0).fold(0.0, f64::max);
    let greatest_g = scene.iter().map(|now| now.specific_force_mps2).fold(0.0, f64::max) / 9.80665;
    assert!((seen.launch_speed_mps / fastest_mps - 1.0).abs() < 0.01, "{seen:?} against {fastest_mps}");
    assert!((seen.peak_g / greatest_g - 1.0).abs() < 0.05, "{seen:?} against {greatest_g}");
}

#[test]
fn a_let_down_ends_slack_without_a_launch() {
    let mut run = Run::new();
    use Phase::*;
    let mut long = scene(End::LetDown, 1.0);
    let last = *long.last().unwrap();
    long.extend(std::iter::repeat_n(last, 8_000));
    run.play(&long, 0.0, 31.0, |_| true);
    assert_eq!(run.phases(), [Slack, WinchBack, Hold, LetDown, Slack]);
    assert_eq!(run.closed(), Some("slack again without a launch"));
}

#[test]
fn a_line_that_drops_without_motion_is_no_launch_but_an_alarm() {
    let mut run = Run::new();
    run.play(&scene(End::HangFire, 1.0), 0.0, 27.0, |_| true);
    assert!(!run.phases().contains(&Phase::Launch));
    assert!(run.raised().iter().any(|sentence| sentence.contains("hang-fire")), "{:?}", run.raised());
    assert!(matches!(run.live.cords(), CordsNow::Loaded { .. }));
    assert_eq!(run.closed(), None);
}

#[test]
fn cords_loaded_and_a_pulled_cable_read_unknown_never_slack() {
    let mut run = Run::new();
    let scene = scene(End::Launch, 1.0);
    run.play(&scene, 0.0, 13.0, |_| true);
    assert!(matches!(run.live.cords(), CordsNow::Loaded { .. }));
    run.link(ZERO_NS + 13 * S, 0, LinkWhat::Down { reason: "cable pulled".into() });
    run.play(&scene, 13.0, 27.0, |device| device == 1);
    assert_eq!(run.live.cords(), CordsNow::Unknown);
    assert_eq!(run.live.phase(), Phase::Unknown);
    assert_eq!(run.closed(), None);
    let raised = run.raised();
    for part in ["winch-node: link lost", "cords loaded and line and anchor silent"] {
        assert!(raised.iter().any(|sentence| sentence.contains(part)), "{part} in {raised:?}");
    }
    assert_eq!(raised.len(), 2, "the lost link explains its silent channels: {raised:?}");
    assert!(run.live.close_by_hand(ZERO_NS + 27 * S, "winch").is_err());
}

/// north-pier whose cells are read by an indicator that prints both every `interval_s`.
fn printed_cells(interval_s: f64) -> Rig {
    let column = |name: &str, field| TextColumn {
        name: name.into(),
        field,
        unit: None,
        delay_s: None,
        bandwidth_hz: None,
        least: None,
        greatest: None,
    };
    let mut rig = north_pier();
    rig.devices[0].protocol = Protocol::Text(Box::new(TextInstrument {
        cut: LineCut::At { separator: ',', n_fields: 2 },
        decimal_comma: false,
        columns: vec![column("line", 1), column("anchor", 2)],
        time: None,
        header_lines: 1,
        skip_prefix: None,
        interval_s,
        start: None,
        poll: None,
        delay_s: 0.0,
        bandwidth_hz: None,
        arrival_uncertainty_s: None,
    }));
    rig
}

/// What the cords are called at each heartbeat of 20 ms while lines come at an interval, each late by as much as `late`
/// says of its number; they end at `until_s`.
fn called(interval_ms: i64, until_s: i64, late: impl Fn(i64) -> i64) -> Vec<(i64, CordsNow)> {
    const MS: i64 = 1_000_000;
    let mut live = Live::new(&printed_cells(interval_ms as f64 * 1e-3));
    let bytes = |live: &mut Live, host_ns, line: String| {
        let what = LinkWhat::Bytes(line.into_bytes().into());
        live.on_link(&LinkEvent { host_ns, device: DeviceIdx(0), what });
    };
    bytes(&mut live, ZERO_NS, "heading\n".to_owned());
    let lines = (1..).map(|k| (k * interval_ms + late(k), k)).take_while(|(at_ms, _)| *at_ms < until_s * 1_000);
    let mut lines = lines.peekable();
    let mut told = Vec::new();
    for at_ms in (0..(until_s + 5) * 1_000).step_by(20) {
        while let Some((_, k)) = lines.next_if(|(line_ms, _)| *line_ms <= at_ms) {
            // Counts of a thousandth of a newton: 600 N and a little more from line to line.
            bytes(&mut live, ZERO_NS + at_ms * MS, format!("{},{}\n", 600_000 + k, 590_000 + k));
        }
        live.tick(ZERO_NS + at_ms * MS);
        told.push((at_ms, live.cords()));
    }
    told
}

#[test]
fn a_slow_indicator_is_believed_between_its_lines_and_silent_soon_after_the_last() {
    for (interval_ms, silent_after_ms) in [(12, 500), (200, 600), (300, 900), (600, 1_800), (3_000, 2_000)] {
        let told = called(interval_ms, 12, |k| k % 3 * interval_ms / 5);
        let last_ms = (1..).map(|k| k * interval_ms + k % 3 * interval_ms / 5).take_while(|at| *at < 12_000).last();
        let last_ms = last_ms.unwrap();
        let loaded = |cords: &CordsNow| matches!(cords, CordsNow::Loaded { .. });
        let between = told.iter().filter(|(at_ms, _)| *at_ms > 4 * interval_ms.min(1_000) && *at_ms < last_ms);
        let n_unknown = between.filter(|(_, cords)| !loaded(cords)).count();
        assert_eq!(n_unknown > 0, interval_ms == 3_000, "{interval_ms} ms: unknown at {n_unknown} heartbeats");
        let fell_silent = told.iter().find(|(at_ms, cords)| *at_ms > last_ms && *cords == CordsNow::Unknown);
        let after_ms = fell_silent.unwrap().0 - last_ms;
        // By arrival alone a line is taken to be some milliseconds older than its arrival.
        assert!((silent_after_ms - 40..=silent_after_ms + 40).contains(&after_ms), "{interval_ms} ms: {after_ms} ms");
    }
}

#[test]
fn a_slow_cell_that_reads_slack_once_does_not_unload_the_cords() {
    let mut live = Live::new(&printed_cells(0.6));
    let mut told = Vec::new();
    for (k, counts) in [0, 600_000, 600_000, 0, 600_000, 600_000, 0, 0, 0, 0].into_iter().enumerate() {
        let from_ns = ZERO_NS + k as i64 * 600_000_000;
        let line = if k == 0 { "heading\n".to_owned() } else { format!("{counts},{counts}\n") };
        let what = LinkWhat::Bytes(line.into_bytes().into());
        live.on_link(&LinkEvent { host_ns: from_ns, device: DeviceIdx(0), what });
        for beat in 0..30 {
            live.tick(from_ns + beat * 20_000_000);
            told.push((k, live.cords()));
        }
    }
    let slack_at: Vec<usize> = told.iter().filter(|(_, cords)| *cords == CordsNow::Slack).map(|(k, _)| *k).collect();
    assert_eq!(slack_at.first(), Some(&8), "after two intervals of slack readings, not after the lone one at 3");
}

#[test]
fn one_silent_cell_is_enough_to_doubt_slack() {
    let mut rig = north_pier();
    rig.channels[1].device = "shuttle-node".into();
    let mut run = Run::of(&rig);
    run.play(&scene(End::Launch, 1.0), 0.0, 1.9, |_| true);
    assert_eq!(run.live.cords(), CordsNow::Unknown, "the anchor was never heard");
    assert_eq!(run.live.phase(), Phase::Unknown);
}

#[test]
fn a_cell_without_a_calibration_is_never_taken_for_slack() {
    let mut rig = north_pier();
    let anchor = rig.channels.remove(1);
    rig.uncalibrated.push(crate::rig::UncalibratedChannel {
        name: anchor.name,
        device: anchor.device,
        device_channel: anchor.device_channel,
        role: anchor.role,
    });
    let mut run = Run::of(&rig);
    run.play(&scene(End::Launch, 1.0), 0.0, 1.9, |_| true);
    assert_eq!(run.live.cords(), CordsNow::Unknown);
    assert!(run.raised().iter().any(|sentence| sentence.contains("no calibration")), "{:?}", run.raised());
}

#[test]
fn a_cord_past_its_limit_and_a_limit_past_its_proof_stand_as_alarms() {
    use crate::rig::{Served, parse, testing::EVERY_KEY};
    let every_key = parse(&EVERY_KEY).unwrap();
    let mut rig = north_pier();
    // Six cords that retire at 500 cycles and had 12 before; the proof load stands for 60.4 kg / 4.6 kg / 1.25 = 10.50 g.
    rig.details.cord_items.clone_from(&every_key.details.cord_items);
    rig.details.proof_load.clone_from(&every_key.details.proof_load);
    let mut run = Run::of(&rig);
    assert_eq!(run.live.judge_proof(0), None, "10 g are within what was proven");
    let served = |cycles| [("7-02".to_owned(), Served { cycles, hours: 1.0 })].into();
    assert_eq!(run.live.judge_cords(0, &served(487), None), []);
    let raised = run.live.judge_cords(0, &served(488), None);
    let [Happening::Alarm { sentence, .. }] = &raised[..] else { panic!("{raised:?}") };
    assert_eq!(sentence, "cord 7-02 (main 2) is to come off: 500 cycles, retired at 500");
    assert_eq!(run.live.judge_cords(1, &served(489), None), [], "it stands already");
    let day = Some("2033-05-04".parse().unwrap());
    assert_eq!(run.live.judge_cords(2, &served(488), day).len(), 5, "the last day of all the others");
    rig.limits.peak_g = 11.0;
    let over = format!("{:?}", Run::of(&rig).live.judge_proof(0));
    assert!(over.contains("the peak limit of 11.00 g is above 10.50 g, what the proof load of"), "{over}");
}

#[test]
fn more_tension_than_planned_and_than_allowed_each_raise_their_sentence() {
    let mut run = Run::new();
    run.play(&scene(End::Launch, 1.35), 0.0, 14.0, |_| true);
    let raised = run.raised();
    assert!(raised.iter().any(|sentence| sentence.contains("over the plan's band")), "{raised:?}");
    assert!(raised.iter().any(|sentence| sentence.contains("over the limit of 900 N")), "{raised:?}");
}

#[test]
fn a_start_under_tension_opens_a_trial_at_once_and_a_resumed_one_does_not() {
    let scene = scene(End::Launch, 1.0);
    let mut run = Run::new();
    run.play(&scene, 13.0, 14.5, |_| true);
    assert_eq!(run.live.phase(), Phase::Hold);
    assert!(run.when(|h| matches!(h, Happening::OpenTrial { .. })).is_some());
    let mut run = Run::new();
    run.live.resume_trial();
    run.play(&scene, 13.0, 27.0, |_| true);
    assert!(run.when(|h| matches!(h, Happening::OpenTrial { .. })).is_none());
    assert_eq!(run.closed(), Some("launched and at rest"));
}

#[test]
fn the_same_input_gives_the_same_happenings() {
    let scene = scene(End::Launch, 1.0);
    let play = || {
        let mut run = Run::new();
        run.play(&scene, 0.0, 27.0, |_| true);
        run.told
    };
    assert_eq!(play(), play());
}

#[test]
fn a_spike_between_two_snapshots_shows_as_their_maximum() {
    let mut run = Run::new();
    let mut scene = scene(End::Launch, 1.0);
    run.play(&scene, 0.0, 1.0, |_| true);
    run.live.snapshot(ZERO_NS + S, Around::default());
    scene[2_010].line_n = 333.0;
    run.play(&scene, 1.0, 1.05, |_| true);
    let now = run.live.snapshot(ZERO_NS + S + S / 20, Around::default());
    assert!((now.channels[0].max.unwrap() - 333.0).abs() < 2.1);
    assert!(now.channels[0].value.unwrap() < 3.0);
    let next = run.live.snapshot(ZERO_NS + S + S / 15, Around::default());
    assert_eq!(next.channels[0].max, next.channels[0].value);
}

#[test]
fn link_loss_during_the_launch_does_not_make_a_trial_disappear() {
    let mut run = Run::new();
    let scene = scene(End::Launch, 1.0);
    run.play(&scene, 0.0, 15.1, |_| true);
    run.play(&scene, 15.1, 18.0, |_| false);
    run.live.tick(ZERO_NS + 17 * S);
    run.play(&scene, 18.0, 27.0, |_| true);
    assert_eq!(run.live.phase(), Phase::Rest);
    assert_eq!(run.closed(), Some("launched and at rest"));
}

#[test]
fn a_device_that_falls_silent_on_a_living_link_is_told_channel_by_channel() {
    let mut run = Run::new();
    let scene = scene(End::Launch, 1.0);
    run.play(&scene, 0.0, 13.0, |_| true);
    run.play(&scene, 13.0, 14.5, |device| device == 0);
    let raised = run.raised();
    for part in ["encoder (shuttle position) is silent", "accel (shuttle specific force) is silent"] {
        assert!(raised.iter().any(|sentence| sentence.contains(part)), "{part} in {raised:?}");
    }
    assert!(matches!(run.live.cords(), CordsNow::Loaded { .. }));
}

#[test]
fn ticks_from_nowhere_neither_stop_the_daemon_nor_move_a_level() {
    for wild in [0, 1, u64::MAX, u64::MAX - 1, 1 << 63, (1 << 63) - 1, 1 << 40] {
        let mut run = Run::new();
        let scene = scene(End::Launch, 1.0);
        run.play(&scene, 0.0, 6.0, |_| true);
        let (device, good) = blocks(&scene).find(|(_, block)| block.host_ns - ZERO_NS >= 6 * S).unwrap();
        let level = run.live.channels[0].last_level();
        for (first_tick, sent_tick) in [(wild, good.sent_tick), (good.first_tick, wild), (wild, wild)] {
            let block = crate::capture::Block { first_tick, sent_tick, ..good.clone() };
            let told = run.live.on_captured(device, &Captured::Block(block));
            run.told.extend(told);
            run.told.extend(run.live.tick(good.host_ns));
        }
        let now = run.live.channels[0].last_level();
        assert!(level.zip(now).is_some_and(|(was, is)| (was - is).abs() < 30.0), "tick {wild}: {level:?}, {now:?}");
        run.play(&scene, 6.1, 8.0, |_| true);
    }
}

/// A device's part of the conversation in frames.
fn frame(message: &firmware_protocol::Message<'_>) -> LinkWhat {
    let mut out = [0; firmware_protocol::MAX_FRAME_LEN];
    let header = firmware_protocol::Header { boot_id: 9, ..Default::default() };
    let n = firmware_protocol::encode(&header, message, &mut out).unwrap();
    LinkWhat::Bytes(bytes::Bytes::copy_from_slice(&out[..n]))
}

#[test]
fn a_board_that_is_being_brought_up_is_told_what_is_wrong_with_it() {
    let mut run = Run { live: Live::new(&north_pier()), told: Vec::new() };
    run.link(ZERO_NS, 0, LinkWhat::Up { path: "port".into(), baud: 1 });
    run.told.extend(run.live.tick(ZERO_NS + 2 * S));
    assert!(!run.raised().iter().any(|sentence| sentence.contains("nothing came")), "too early: {:?}", run.raised());
    run.told.extend(run.live.tick(ZERO_NS + 4 * S));
    assert!(run.raised().iter().any(|sentence| sentence.starts_with("winch-node: nothing came in the 4 s")));
    let hello = firmware_protocol::Message::Text("hello\u{1b}[2J");
    run.link(ZERO_NS + 5 * S, 0, frame(&hello));
    run.told.extend(run.live.tick(ZERO_NS + 5 * S));
    let link = run.live.snapshot(ZERO_NS + 5 * S, Around::default()).links.remove(0);
    assert!(link.no_samples.unwrap().contains("has not described itself"));
    let said = run.told.iter().find(|happening| matches!(happening, Happening::Device { kind: "text", .. })).unwrap();
    let event = crate::feed::message::Event::of(said);
    assert_eq!((event.source.as_str(), event.text.as_str()), ("winch-node", "winch-node: hello·[2J"));
    run.link(ZERO_NS + 6 * S, 0, LinkWhat::Bytes(bytes::Bytes::from_static(b"\0boot loader\0")));
    run.told.extend(run.live.tick(ZERO_NS + 6 * S));
    let lost = run.told.iter().any(|happening| matches!(happening, Happening::Device { kind: "loss", .. }));
    assert!(lost, "{:?}", run.told);
}
