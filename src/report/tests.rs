//! The page's promises, on an invented trial.

use super::*;
use crate::reading::{Absent, Decision, Instant, ResultRow, Verdict};

const STEP_S: f64 = 1e-4;
const RELEASE_S: f64 = 20.0;

/// An invented trial: 3 s slack, 12 s winch-back, 5 s hold, release, rest. Shapes are sketched, not simulated.
fn invented() -> TrialPage {
    TrialPage {
        heading: Heading {
            trial_id: "000012-7f3a9c".into(),
            rig: "north-pier".into(),
            payload: "survey-8".into(),
            started: "2031-05-04T10:12:33.120+00:00".into(),
            started_quality: "wall clock set by the network".into(),
            outcome: "launched".into(),
            outcome_evidence: vec![
                "line fell below half its hold tension and the shuttle moved 4.02 m in 0.52 s".into(),
            ],
            program: "tautrail 0.1.0".into(),
            invented: true,
        },
        rail: Some(RailStrip {
            length_m: 7.0,
            incline_deg: 6.0,
            zero_mark_x_m: 4.0,
            brake_x_m: 5.0,
            release_x_m: Some(0.0),
            separation_x_m: Some(4.02),
            rest_x_m: Some(5.58),
        }),
        proof_load: String::new(),
        limits: PageLimits { tension_n: Some(900.0), peak_g: Some(10.0), launch_speed_mps: Some((15.0, 18.0)) },
        tension: tension(),
        phases: phases(),
        instants: instants(),
        motion: Some(motion()),
        residuals: residuals(),
        residual_sentence: "The model leaves 0.12 m/s too fast at separation: within twice its uncertainty.".into(),
        results: results(),
        absent: vec![Absent {
            name: "peak_g_cfc180".into(),
            reason: "the accelerometer states no anti-alias bandwidth".into(),
        }],
        verdicts: vec![Verdict {
            name: "tension_limit".into(),
            asked: "tension of the whole launcher at most 900 N".into(),
            decision: Decision::Met,
            probability: Some(0.999),
            why: "max_tension (700 N) keeps it; it is kept with a probability of 99.9 %".into(),
        }],
        inspections: vec![
            Inspection { stage: "full draw".into(), item: "cord ends".into(), answer: Some("no fray".into()) },
            Inspection { stage: "full draw".into(), item: "brake pads".into(), answer: None },
        ],
        over_time: None,
        energy: Some(energy()),
        health: health(),
        said: vec![("note (amendment 0001, A. Recorder)".into(), "left cord <chafed>".into())],
        hashes: vec![("/raw/winch-node/line".into(), "ab".repeat(32)), ("north-pier.toml".into(), "0f".repeat(32))],
        cautions: vec!["anchor and line differ by 14 N in the hold: friction on the rail or a pulley".into()],
    }
}

fn tension() -> Vec<Trace> {
    let shape = |time_s: f64| match time_s {
        t if t < 3.0 => 0.0,
        t if t < 15.0 => 700.0 * ((t - 3.0) / 12.0).powf(0.7),
        t if t < RELEASE_S => 690.0 - 12.0 * ((t - 15.0) / 5.0).sqrt(),
        _ => 0.0,
    };
    let time_s: Vec<f64> = (0..260_000).map(|index| f64::from(index) * STEP_S).collect();
    let noise = |time_s: f64| (time_s * 5_000.0).sin();
    let line = time_s.iter().map(|t| shape(*t) + noise(*t)).collect();
    let anchor = time_s
        .iter()
        .map(|t| {
            let since_s = t - RELEASE_S;
            let pull =
                if (0.0..0.48).contains(&since_s) { 660.0 * (since_s * 3.27).cos().max(0.0) } else { 0.96 * shape(*t) };
            pull + noise(*t + 1.0)
        })
        .collect();
    let trace = |name: &str, value| Trace { name: name.into(), time_s: time_s.clone(), value, step_s: STEP_S };
    vec![trace("release line", line), trace("cord anchor", anchor)]
}

fn phases() -> Vec<PhaseSpan> {
    let span = |(name, from_s, to_s): (&str, f64, f64)| PhaseSpan { name: name.into(), from_s, to_s };
    let phases = [
        ("slack", 0.0, 3.0),
        ("winch-back", 3.0, 15.0),
        ("hold", 15.0, 20.0),
        ("launch", 20.0, 20.52),
        ("rest", 20.52, 26.0),
    ];
    phases.map(span).into()
}

fn instants() -> Vec<Instant> {
    let instant = |(name, time_s): (&str, f64)| Instant {
        name: name.into(),
        time_s,
        standard_uncertainty_s: 2e-4,
        evidence: "line below half its hold tension".into(),
    };
    [("release", 20.0), ("separation", 20.48), ("brake_contact", 20.52), ("rest", 20.62)].map(instant).into()
}

fn motion() -> MotionOverRail {
    let curve = |top_mps: f64, u: f64| {
        let x_m: Vec<f64> = (0..5600).map(|index| f64::from(index) * 1e-3).collect();
        let v = |x: f64| {
            if x < 4.0 {
                top_mps * (x / 4.0).sqrt()
            } else if x < 5.0 {
                top_mps
            } else {
                top_mps * ((5.6 - x) / 0.6).max(0.0).sqrt()
            }
        };
        let a = |x: f64| {
            if x < 4.0 {
                75.0 - 14.0 * x
            } else if x < 5.0 {
                -1.2
            } else {
                -290.0
            }
        };
        MotionCurve {
            v_mps: x_m.iter().map(|x| v(*x)).collect(),
            a_mps2: x_m.iter().map(|x| a(*x) + u * 20.0 * (x * 40.0).sin()).collect(),
            u_v_mps: vec![u; x_m.len()],
            u_a_mps2: vec![30.0 * u; x_m.len()],
            x_m,
        }
    };
    let modelled = MotionCurve { u_v_mps: Vec::new(), u_a_mps2: Vec::new(), ..curve(16.6, 0.0) };
    MotionOverRail {
        measured: curve(16.4, 0.05),
        modelled: Some(modelled),
        separation_x_m: Some(4.02),
        sensors: "encoder and accelerometer".into(),
    }
}

fn residuals() -> Vec<ResidualTrace> {
    let trace = |(quantity, unit, size): (&str, &str, f64)| {
        let time_s: Vec<f64> = (0..5200).map(|index| RELEASE_S + f64::from(index) * STEP_S).collect();
        ResidualTrace {
            quantity: quantity.into(),
            unit: unit.into(),
            residual: time_s.iter().map(|t| -size * (t - RELEASE_S) + 0.2 * size * (t * 90.0).sin()).collect(),
            uncertainty: vec![0.4 * size; time_s.len()],
            time_s,
            step_s: STEP_S,
            bias: -0.26 * size,
            rms: 0.33 * size,
            largest: -0.71 * size,
            largest_at_s: 20.511,
            largest_at_x_m: Some(4.61),
        }
    };
    vec![
        trace(("velocity", "m/s", 0.3)),
        trace(("acceleration", "m/s²", 2.0)),
        trace(("cord anchor tension", "N", 22.0)),
    ]
}

fn results() -> Vec<ResultRow> {
    let row = |(name, value, unit, u, method): (&str, f64, &str, f64, &str)| ResultRow {
        name: name.into(),
        value,
        unit: unit.into(),
        standard_uncertainty: u,
        low: value - 1.96 * u,
        high: value + 1.96 * u,
        method: method.into(),
        budget: Vec::new(),
    };
    vec![
        row(("launch_speed", 16.4123, "m/s", 0.0214, "smoothed encoder and accelerometer, at separation")),
        row((
            "peak_g_cfc60_specific",
            8.1234,
            "g",
            0.0312,
            "accelerometer through CFC 60, greatest in the power stroke",
        )),
        row(("max_tension", 701.3, "N", 0.86, "release line, greatest of all samples")),
        row(("release_time", 20.00012, "s", 0.00021, "line below half its hold tension")),
    ]
}

fn energy() -> EnergyBar {
    let part = |(name, energy_j, u): (&str, f64, Option<f64>)| EnergyPart {
        name: name.into(),
        energy_j,
        standard_uncertainty_j: u,
    };
    EnergyBar {
        total_name: "work of the release line, winch-back".into(),
        total_j: 1480.0,
        parts: [
            ("payload, kinetic", 835.0, Some(2.2)),
            ("shuttle, kinetic", 323.0, Some(0.9)),
            ("lifted against gravity", 35.0, Some(0.1)),
            ("friction, drag, hysteresis, cords", 260.0, None),
        ]
        .map(part)
        .into(),
    }
}

fn health() -> Vec<DeviceHealth> {
    let device = |name: &str, n_gaps, n_missing, refused| DeviceHealth {
        device: name.into(),
        firmware: "1.4.0".into(),
        n_blocks: 2600,
        n_samples: 520_000,
        n_gaps,
        n_missing,
        refused,
        clock: "12.4 ppm fast, u = 40 µs".into(),
    };
    vec![device("winch-node", 0, 0, Vec::new()), device("shuttle-node", 1, 100, vec![("checksum".into(), 1)])]
}

fn page_of_html(page: &TrialPage) -> String {
    trial_page(page).expect("the page can be made")
}

#[test]
fn a_page_needs_nothing_from_anywhere() {
    let html = page_of_html(&invented());
    for outside in ["<script", "<link", "@import", "url(http", "src=", "href="] {
        assert!(!html.contains(outside), "{outside}");
    }
    let addresses: Vec<_> = html.match_indices("http").map(|(at, _)| &html[at..at + 26]).collect();
    assert!(addresses.iter().all(|address| *address == "http://www.w3.org/2000/svg"), "{addresses:?}");
}

#[test]
fn every_picture_has_a_text_alternative_with_numbers() {
    let html = page_of_html(&invented());
    let pictures: Vec<&str> = html.split("<svg ").skip(1).collect();
    assert_eq!(pictures.len(), 10);
    for picture in pictures {
        let label = picture.strip_prefix("role=\"img\" aria-label=\"").and_then(|rest| rest.split('"').next());
        assert!(label.is_some_and(|label| label.chars().any(|c| c.is_ascii_digit())), "{label:?}");
    }
}

#[test]
fn numbers_stand_with_unit_and_uncertainty() {
    let html = page_of_html(&invented());
    assert!(html.contains("<td class=\"n\">16.412</td><td class=\"n\">0.021</td><td>m/s</td>"));
    assert!(html.contains("inside the window, 15.0 to 18.0 m/s"));
    assert!(html.contains("the accelerometer states no anti-alias bandwidth"));
    assert!(html.contains("1 × checksum"));
}

#[test]
fn a_limit_passed_is_said_in_words_and_never_as_clearance() {
    let mut page = invented();
    page.results[2].value = 912.0;
    let html = page_of_html(&page);
    assert!(html.contains("ABOVE the limit of 900.0 N (advice only)"));
    assert!(html.contains("is no safety device"));
}

#[test]
fn a_page_without_data_says_so_in_every_section() {
    let html = page_of_html(&TrialPage::default());
    for sentence in [
        "No tension was recorded",
        "No motion could be derived",
        "No replay was made",
        "No result could be derived",
        "No energy audit",
    ] {
        assert!(html.contains(sentence), "{sentence}");
    }
    assert!(!html.contains("NaN"));
}

#[test]
fn texts_from_outside_cannot_break_the_page() {
    let mut page = invented();
    page.heading.payload = "<script>alert(1)</script>\" onload=\"x".into();
    page.residual_sentence = "<b>&".into();
    page.tension[0].name = "line<&>".into();
    let html = page_of_html(&page);
    assert!(!html.contains("<script") && !html.contains("line<&>") && !html.contains("<b>&<"));
    assert!(html.contains("&lt;script&gt;alert(1)&lt;/script&gt;&quot; onload=&quot;x"));
}

#[test]
fn a_long_trial_makes_a_page_of_bounded_size() {
    let html = page_of_html(&invented());
    assert!(html.len() < 1_500_000, "{} bytes", html.len());
}

#[test]
fn verdicts_and_unanswered_inspection_items_stand_on_the_page() {
    let html = page_of_html(&invented());
    assert!(html.contains("tension of the whole launcher at most 900 N") && html.contains("99.9 %"), "verdict");
    assert!(html.contains("1 of 2 items are not answered"));
    let (open, answered) = (html.find("NOT ANSWERED").unwrap(), html.find("no fray").unwrap());
    assert!(open < answered, "what is open comes first");
}

#[test]
fn unaccounted_energy_is_shown_as_such() {
    assert!(page_of_html(&invented()).contains("unaccounted"));
    assert!(page_of_html(&invented()).contains("<td class=\"n\">27</td>"), "1480 − 835 − 323 − 35 − 260 = 27 J");
}

/// A reading of an invented launch with two instants and one result.
fn reading() -> crate::reading::Reading {
    crate::reading::Reading {
        outcome: crate::reading::Outcome::Launched,
        outcome_evidence: Vec::new(),
        instants: instants(),
        results: vec![ResultRow { name: "draw".into(), ..results()[0].clone() }],
        absent: Vec::new(),
        verdicts: Vec::new(),
        findings: vec!["the anchor reads 14 N less than the line".into()],
        motion: None,
        energy: None,
    }
}

#[test]
fn a_reading_and_its_rig_file_fill_the_page() {
    let rig = crate::rig::testing::north_pier();
    let header = crate::trial::Header {
        trial_id: "000001-7f3a9c".into(),
        journal_id: "000001-abc123".into(),
        first_seq: 1,
        last_seq: 2,
        rig: "north-pier".into(),
        started: "2031-05-04T10:12:33Z".into(),
        started_quality: "set".into(),
        program_version: "0.1.0".into(),
        configuration_hash: String::new(),
        series: String::new(),
        zero_host_ns: 0,
    };
    let signal = |role: crate::rig::Role| crate::calibration::Signal {
        name: role.word().into(),
        role,
        time_s: vec![0.0, 10.0, 26.0],
        value: vec![0.0, 300.0, 0.0],
        zero_uncertainty: 0.5,
        scale_relative_uncertainty: 1e-3,
        time_uncertainty_s: 1e-5,
        nominal_rate_hz: 0.1,
        bandwidth_hz: None,
        resolution: 1e-3,
        range: None,
    };
    let roles = [crate::rig::Role::CordAnchorTension, crate::rig::Role::ReleaseLineTension];
    let page = page(&header, &rig, &roles.map(signal), &reading());
    assert!(page.heading.invented, "the rig file says so");
    assert!(page.tension[0].name.ends_with("(release line)") && page.tension[1].name.ends_with("(cord anchor)"));
    let phases: Vec<_> = page.phases.iter().map(|phase| (phase.name.as_str(), phase.from_s, phase.to_s)).collect();
    let expected = [("slack", 0.0, 20.0), ("launch", 20.0, 20.48), ("run-out", 20.48, 20.62), ("rest", 20.62, 26.0)];
    assert_eq!(phases, expected);
    assert_eq!(page.limits.launch_speed_mps, Some((15.0, 18.0)));
    assert!(page_of_html(&page).contains("the anchor reads 14 N less than the line"));
}
