//! The display drawn into a text buffer: one snapshot a phase and size, and rules that must hold on every one.

use ratatui::Terminal;
use ratatui::backend::TestBackend;
use ratatui::style::{Color, Modifier};

use super::history::Range;
use super::{ForceUnit, ShownUnits, SpeedUnit, Theme, ViewState, draw, plain_line};
use crate::feed::message::{Event, Hello, Message, Snapshot};
use std::collections::BTreeMap;

use crate::live::{
    AlarmNow, ChannelNow, CordsFit, CordsNow, HoldNow, JournalNow, LaunchSeen, LinkNow, Phase, ReleasedNow, ToGo,
    TrialNow,
};

const COLOUR: Theme = Theme { colour: true, ascii: false };
const POUNDS_AND_KNOTS: ShownUnits = ShownUnits { force: ForceUnit::PoundForce, speed: SpeedUnit::Knot };
const PLAIN: Theme = Theme { colour: false, ascii: true };

/// The invented rig `north-pier`. Invented data.
fn hello() -> Hello {
    let band = |draw_m: f64| {
        let planned_n = (175.0 * draw_m - 9.0).max(0.0);
        (draw_m, (0.9 * planned_n - 12.0).max(0.0), planned_n, 1.1 * planned_n + 12.0)
    };
    Hello {
        feed_version: 1,
        program_version: "0.1.0".into(),
        rig: "north-pier".into(),
        payload: "survey-8".into(),
        rail_length_m: 7.0,
        zero_mark_x_m: 4.0,
        brake_x_m: 5.0,
        incline_deg: 6.0,
        limit_tension_n: 900.0,
        limit_peak_g: 10.0,
        proof_limit_g: None,
        proof_load: None,
        plan_draw_m: 4.0,
        plan_speed_min_mps: 15.0,
        plan_speed_max_mps: 18.0,
        slack_tension_n: 15.0,
        plan_band: (0..=44).map(|k| band(0.1 * f64::from(k))).collect(),
    }
}

fn channel(name: &str, role: &str, unit: &str, value: f64) -> ChannelNow {
    ChannelNow {
        name: name.into(),
        role: role.into(),
        unit: unit.into(),
        value: Some(value),
        min: Some(value - 0.01 * value.abs()),
        max: Some(value + 0.01 * value.abs()),
        age_s: Some(0.008),
    }
}

fn link(device: &str) -> LinkNow {
    LinkNow {
        device: device.into(),
        up: true,
        bytes: 4_000_000,
        bytes_per_s: 66_500.0,
        frames: 12_345,
        refused: 0,
        refused_by: BTreeMap::new(),
        blocks: 12_000,
        last_refusal: None,
        no_samples: None,
        lost_frames: 0,
        missing_samples: 0,
        gaps: 0,
        silent_s: Some(0.006),
        longest_stall_s: 0.02,
        clock_uncertainty_s: Some(40e-6),
        clock_drift_ppm: Some(-12.0),
        clock_trouble: None,
        note: format!("ports/{device} at 3000000 baud"),
    }
}

fn snapshot(phase: Phase, x_m: f64, line_n: f64, anchor_n: f64, cords: CordsNow) -> Snapshot {
    Snapshot {
        host_ns: 81_000_000_000_000,
        wall: "2031-05-04T09:41:07Z".into(),
        phase,
        phase_s: 3.2,
        cords,
        channels: vec![
            channel("line", "release_line_tension", "N", line_n),
            channel("anchor", "cord_anchor_tension", "N", anchor_n),
            channel("encoder", "shuttle_position", "m", x_m),
            channel("accel", "shuttle_specific_force", "m/s^2", 1.02),
        ],
        x_m: Some(x_m),
        draw_m: Some(4.0 - x_m),
        released_now: None,
        to_go: None,
        hold: None,
        cords_fit: None,
        last_launch: None,
        links: vec![link("winch-node"), link("shuttle-node")],
        journal: Some(JournalNow {
            bytes: 10_485_760,
            free_bytes: Some(9_000_000_000),
            sync_interval_s: 0.1,
            queue_high_water: 0.01,
            lost_events: 0,
            trouble: None,
        }),
        trial: Some(TrialNow { id: "000012-7f3a9c".into(), open_s: 21.0 }),
        alarms: Vec::new(),
    }
}

const FORECAST: ReleasedNow = ReleasedNow {
    launch_speed_mps: 16.6,
    launch_speed_low_mps: 16.2,
    launch_speed_high_mps: 17.0,
    airspeed_mps: 18.6,
    airspeed_low_mps: 17.5,
    airspeed_high_mps: 19.7,
    peak_g: 8.1,
    peak_g_low: 7.8,
    peak_g_high: 8.4,
    in_window: 0.99,
    under_limit: 1.0,
};

fn alarm(sentence: &str, active: bool) -> AlarmNow {
    AlarmNow { sentence: sentence.into(), raised_ns: 80_999_000_000_000, active, acknowledged_by: None }
}

fn event(age_s: f64, kind: &str, text: &str) -> Message {
    let host_ns = 81_000_000_000_000 - (age_s * 1e9) as i64;
    Message::Event(Event { host_ns, kind: kind.into(), source: "live".into(), person: None, text: text.into() })
}

/// A view during the hold, with the winch-back behind it.
fn holding(theme: Theme) -> ViewState {
    let mut view = ViewState::new(hello(), theme);
    for k in 0..=100 {
        let draw_m = 0.04 * f64::from(k);
        let tension_n = (183.0 * draw_m - 5.0).max(0.0);
        view.trace.push(4.0 - draw_m, 7.0, tension_n);
        let t_ns = 80_980_000_000_000 + i64::from(k) * 200_000_000;
        view.history.push(t_ns, Range { min: tension_n - 4.0, max: tension_n + 4.0 });
    }
    view.apply(event(21.0, "trial", "trial opens"));
    view.apply(event(21.0, "phase", "winch-back after slack"));
    view.apply(event(3.2, "phase", "hold after winch-back"));
    let mut now =
        snapshot(Phase::Hold, 0.002, 688.0, 694.0, CordsNow::Loaded { tension_n: 694.0, energy_j: Some(1_410.0) });
    now.released_now = Some(FORECAST);
    now.hold = Some(HoldNow { fell_n: 5.1, in_a_minute_n: Some(684.0), window_missed_in_s: None });
    view.apply(Message::Snapshot(Box::new(now)));
    view
}

fn slack(theme: Theme) -> ViewState {
    let mut view = ViewState::new(hello(), theme);
    let mut now = snapshot(Phase::Slack, 4.0, 0.4, 0.9, CordsNow::Slack);
    now.trial = None;
    view.apply(Message::Snapshot(Box::new(now)));
    view
}

fn at_rest() -> ViewState {
    let mut view = holding(COLOUR);
    let mut now = snapshot(Phase::Rest, 5.62, 0.2, 0.3, CordsNow::Slack);
    now.last_launch = Some(LaunchSeen { launch_speed_mps: 16.43, peak_g: 8.02 });
    view.apply(event(0.9, "launch", "launched at 16.43 m/s, peak 8.02 g"));
    view.apply(Message::Snapshot(Box::new(now)));
    view
}

/// Hold, the winch node's cable pulled, alarms standing.
fn pulled_cable() -> ViewState {
    let mut view = holding(COLOUR);
    let mut now = snapshot(Phase::Unknown, 0.002, 688.0, 694.0, CordsNow::Unknown);
    now.channels[0].age_s = Some(2.4);
    now.channels[1].age_s = Some(2.4);
    now.links[0].up = false;
    now.links[0].note = "the port is gone".into();
    now.alarms = vec![
        alarm("cords loaded and line and anchor silent (last tension 694 N): tension unknown, treat as loaded", true),
        alarm("winch-node: link lost on ports/winch-node (the port is gone): check cable and power", true),
        alarm("tension 790 N at 3.99 m draw is over the plan's band (616 to 782 N): stop", false),
    ];
    view.apply(Message::Snapshot(Box::new(now)));
    view
}

fn screen(view: &ViewState, width: u16, height: u16) -> Terminal<TestBackend> {
    let mut terminal = Terminal::new(TestBackend::new(width, height)).unwrap();
    terminal.draw(|frame| draw(frame, view)).unwrap();
    terminal
}

fn text(view: &ViewState, width: u16, height: u16) -> String {
    screen(view, width, height).backend().to_string()
}

#[test]
fn holding_at_80_by_24() {
    insta::assert_snapshot!(text(&holding(COLOUR), 80, 24));
}

#[test]
fn holding_at_160_by_50() {
    insta::assert_snapshot!(text(&holding(COLOUR), 160, 50));
}

#[test]
fn holding_in_ascii_at_80_by_24() {
    let shown = text(&holding(PLAIN), 80, 24);
    insta::assert_snapshot!(shown);
}

#[test]
fn holding_in_big_numbers_at_80_by_24() {
    let mut view = holding(COLOUR);
    view.big = true;
    insta::assert_snapshot!(text(&view, 80, 24));
}

#[test]
fn holding_in_pounds_and_knots_at_80_by_24() {
    let mut view = holding(COLOUR);
    view.units = POUNDS_AND_KNOTS;
    let shown = text(&view, 80, 24);
    // 688 N over 4.448222 N, 16.6 m/s over 0.514444 m/s (NIST SP 811, appendix B.8).
    assert!(shown.contains("tension 154.7 lbf") && shown.contains("32.3 kt"), "{shown}");
    assert!(!shown.contains("688") && !shown.contains("16.6"), "one unit at a time:\n{shown}");
    insta::assert_snapshot!(shown);
}

#[test]
fn big_numbers_of_a_frozen_daemon_are_gone_within_a_second() {
    let mut view = holding(PLAIN);
    view.big = true;
    let fresh = text(&view, 80, 24);
    view.since_snapshot_s = 0.5;
    let stale = text(&view, 80, 24);
    assert!(fresh.contains("###") && stale.contains("(0.5 s old)") && stale != fresh, "{stale}");
    view.since_snapshot_s = 1.0;
    let old = text(&view, 80, 24);
    assert!(old.contains("tension SILENT, treat as loaded") && old.contains("no forecast"), "{old}");
    let mut blank = ViewState::new(hello(), PLAIN);
    blank.big = true;
    let middle = |shown: &str| shown.lines().skip(4).take(18).map(str::to_owned).collect::<Vec<_>>();
    assert_eq!(middle(&old), middle(&text(&blank, 80, 24)), "a number of the past is still there");
}

#[test]
fn a_recorded_trial_is_never_taken_for_a_live_one() {
    for mut view in all_views() {
        view.recorded = Some("RECORDED, NOT LIVE: 8.0 of 15.0 s, x1".into());
        for (width, height) in [(80, 24), (160, 50)] {
            let shown = text(&view, width, height);
            let first = shown.lines().next().unwrap_or_default();
            assert!(first.contains("RECORDED, NOT LIVE") && !first.contains("CORDS LOADED"), "{shown}");
        }
    }
}

#[test]
fn slack_at_80_by_24() {
    insta::assert_snapshot!(text(&slack(COLOUR), 80, 24));
}

#[test]
fn at_rest_at_120_by_40() {
    insta::assert_snapshot!(text(&at_rest(), 120, 40));
}

#[test]
fn a_pulled_cable_at_80_by_24() {
    insta::assert_snapshot!(text(&pulled_cable(), 80, 24));
}

#[test]
fn nothing_heard_yet_at_80_by_24() {
    insta::assert_snapshot!(text(&ViewState::new(hello(), COLOUR), 80, 24));
}

fn all_views() -> Vec<ViewState> {
    let mut help = holding(COLOUR);
    help.help = true;
    let mut lost = holding(COLOUR);
    lost.lost = Some("the daemon stops".into());
    lost.since_snapshot_s = 40.0;
    let mut big = holding(PLAIN);
    big.big = true;
    let mut pounds = holding(COLOUR);
    pounds.units = POUNDS_AND_KNOTS;
    let views = [big, pounds, holding(COLOUR), holding(PLAIN), slack(COLOUR), at_rest(), pulled_cable()];
    views.into_iter().chain([ViewState::new(hello(), COLOUR), help, lost]).collect()
}

#[test]
fn no_size_panics_and_the_cords_line_is_there_on_every_one() {
    for view in all_views() {
        for (width, height) in
            [(1, 1), (2, 1), (5, 2), (9, 3), (20, 5), (40, 12), (61, 14), (80, 24), (110, 30), (200, 60)]
        {
            let shown = text(&view, width, height);
            if width >= 40 {
                let cords = ["CORDS LOADED", "TREAT AS LOADED", "cords slack"];
                assert!(cords.iter().any(|words| shown.contains(words)), "{width}x{height}\n{shown}");
            }
        }
    }
}

#[test]
fn every_screen_with_a_limit_says_that_it_only_advises() {
    for view in all_views() {
        for (width, height) in [(80, 24), (120, 40), (200, 60)] {
            let shown = text(&view, width, height);
            assert!(shown.contains("advises and records only"), "{shown}");
        }
    }
}

#[test]
fn strange_numbers_from_the_daemon_do_not_panic() {
    for strange in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY, 1e300, -1e300, 0.0] {
        let mut view = holding(COLOUR);
        view.hello.limit_tension_n = strange;
        view.hello.rail_length_m = strange;
        view.hello.plan_band = vec![(strange, strange, strange, strange); 3];
        let mut now = snapshot(Phase::Hold, strange, strange, strange, CordsNow::Slack);
        now.released_now = Some(ReleasedNow { launch_speed_mps: strange, peak_g: strange, ..FORECAST });
        now.host_ns = i64::MIN;
        view.apply(Message::Snapshot(Box::new(now)));
        for (width, height) in [(80, 24), (160, 50), (3, 3)] {
            text(&view, width, height);
        }
    }
}

/// Digits that stand for measurements on a screen: none of these values may be seen once the data are old.
const MEASURED: [&str; 5] = ["688", "694", "1410", "16.6", "8.1"];

#[test]
fn a_frozen_daemon_turns_every_number_into_a_word_within_a_second() {
    let mut view = holding(COLOUR);
    let fresh = text(&view, 160, 50);
    assert!(MEASURED.iter().all(|digits| fresh.contains(digits)), "{fresh}");
    view.since_snapshot_s = 0.5;
    let stale = text(&view, 160, 50);
    assert!(stale.contains("(0.5 s old)") && stale.contains("~688 N"), "{stale}");
    view.since_snapshot_s = 1.0;
    let old = text(&view, 160, 50);
    for digits in MEASURED {
        assert!(!old.contains(digits), "{digits} is still on the screen:\n{old}");
    }
    for word in ["TENSION UNKNOWN, TREAT AS LOADED", "tension SILENT", "UNKNOWN", "shuttle position SILENT"] {
        assert!(old.contains(word), "{word} is missing:\n{old}");
    }
}

#[test]
fn old_data_never_say_slack() {
    for view in [slack(COLOUR), at_rest()] {
        let mut view = view;
        assert!(text(&view, 80, 24).contains("cords slack"));
        view.since_snapshot_s = 0.3;
        let shown = text(&view, 80, 24);
        assert!(!shown.contains("cords slack") && shown.contains("TREAT AS LOADED"), "{shown}");
        assert!(!shown.contains("SLACK"), "{shown}");
    }
}

#[test]
fn without_colour_no_cell_has_one_and_alerts_still_stand_out() {
    let terminal = screen(&holding(PLAIN), 160, 50);
    let cells = terminal.backend().buffer().content();
    assert!(cells.iter().all(|cell| cell.fg == Color::Reset && cell.bg == Color::Reset));
    assert!(cells.iter().all(|cell| cell.symbol().is_ascii() || "┌┐└┘─│".contains(cell.symbol())));
    assert!(cells[1].modifier.contains(Modifier::REVERSED), "the cords' line");
    let coloured = screen(&holding(COLOUR), 80, 24);
    assert_eq!(coloured.backend().buffer().content()[1].bg, Color::Indexed(208));
}

#[test]
fn a_winch_back_starts_a_new_trace() {
    let mut view = holding(COLOUR);
    assert!(view.trace.between(0.0, 4.0, 7.0).is_some());
    let mut view_slack = snapshot(Phase::Slack, 4.0, 0.0, 0.0, CordsNow::Slack);
    view_slack.trial = None;
    view.apply(Message::Snapshot(Box::new(view_slack)));
    let now = snapshot(Phase::WinchBack, 3.5, 80.0, 82.0, CordsNow::Loaded { tension_n: 82.0, energy_j: Some(20.0) });
    view.apply(Message::Snapshot(Box::new(now)));
    assert!(view.trace.between(0.0, 3.4, 7.0).is_none());
    assert!(view.trace.between(3.4, 3.6, 7.0).is_some());
}

#[test]
fn only_alarms_and_phases_are_drawn_at_once() {
    let mut view = slack(COLOUR);
    assert!(view.apply(event(0.0, "alarm", "x")));
    assert!(view.apply(event(0.0, "phase", "x")));
    assert!(!view.apply(event(0.0, "mark", "x")));
    assert!(!view.apply(Message::Dropped { n: 3 }));
    assert_eq!(view.n_dropped, 3);
}

#[test]
fn one_plain_line_answers_what_the_screen_answers() {
    assert_eq!(
        plain_line(&holding(PLAIN)),
        "CORDS LOADED  694 N  1410 J  keep clear | HOLD | line 688 N | x 0.00 m | \
         released now 16.6 m/s (16.2 to 17.0), in window 99 %, 8.1 g (7.8 to 8.4) | fell 5.1 N | 684 N in 1 min"
    );
    let mut drawing = holding(PLAIN);
    let mut now = drawing.snapshot.clone().unwrap();
    now.hold = None;
    now.to_go = Some(ToGo { draw_m: 1.69, tension_n: Some(180.0) });
    now.cords_fit = Some(CordsFit { cords: 6.0, low: 5.7, high: 6.3, rig_file: 7 });
    drawing.apply(Message::Snapshot(now));
    let line = plain_line(&drawing);
    assert!(line.ends_with("to go 1.69 m, +180 N | fits 6.0 +- 0.3 of 7 cords"), "{line}");
    let line = plain_line(&pulled_cable());
    assert!(line.starts_with("TENSION UNKNOWN, TREAT AS LOADED") && line.contains("line SILENT"), "{line}");
    assert!(line.contains("ALARM: cords loaded and line and anchor silent"), "{line}");
}

#[test]
fn alarms_that_do_not_fit_are_counted() {
    let mut view = holding(COLOUR);
    let mut now = view.snapshot.clone().unwrap();
    now.alarms = (0..9).map(|k| alarm(&format!("sentence number {k} that says what is wrong"), true)).collect();
    view.apply(Message::Snapshot(now));
    let shown = text(&view, 80, 24);
    assert!(shown.contains("and 4 more") && shown.contains("number 4") && !shown.contains("number 5"), "{shown}");
}

#[test]
fn a_hold_that_lost_nothing_shows_no_minus_nothing() {
    let mut view = holding(COLOUR);
    let mut now = view.snapshot.clone().unwrap();
    now.hold = Some(HoldNow { fell_n: -0.03, in_a_minute_n: None, window_missed_in_s: None });
    view.apply(Message::Snapshot(now));
    let shown = text(&view, 80, 24);
    assert!(shown.contains("fell 0.0 N") && !shown.contains("-0.0"), "{shown}");
}

/// Six cords in place of seven, on the way back.
#[test]
fn winch_back_shows_what_is_left_and_how_many_cords_pull() {
    let mut view = holding(COLOUR);
    let mut now = view.snapshot.clone().unwrap();
    now.phase = Phase::WinchBack;
    now.hold = None;
    now.to_go = Some(ToGo { draw_m: 1.69, tension_n: Some(180.0) });
    now.cords_fit = Some(CordsFit { cords: 6.0, low: 5.7, high: 6.3, rig_file: 7 });
    view.apply(Message::Snapshot(now));
    let shown = text(&view, 80, 24);
    assert!(shown.contains("to go 1.69 m, +180 N") && shown.contains("fits 6.0 ± 0.3 of 7 cords"), "{shown}");
}

#[test]
fn a_link_that_gives_no_samples_is_not_called_complete() {
    let mut view = holding(Theme { colour: true, ascii: false });
    let link = &mut view.snapshot.as_mut().unwrap().links[0];
    link.no_samples = Some("nothing came".into());
    link.refused = 996;
    let shown = text(&view, 80, 24);
    assert!(shown.contains("NO SAMPLES, 996 refused"), "{shown}");
}
