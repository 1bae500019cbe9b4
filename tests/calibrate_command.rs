//! `tautrail calibrate` as a person runs it: from a table, and guided beside a feed. Invented data.
#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test fails by panicking")]

#[path = "support/rehearsal_rig.rs"]
mod rehearsal_rig;

use std::fs;
use std::io::Write;
use std::path::Path;
use std::process::{Command, Output, Stdio};
use std::time::Duration;

use tautrail::feed::FeedServer;
use tautrail::feed::message::{Command as Asked, Hello, Message, RawNow};
use tautrail::rig::{self, CalibrationRecord};

const SHEET: &str = r#"
kind = "cell"
channel = "line"
sensor = "invented cell 0417"
person = "rig engineer"
date = "2031-05-04"
valid_until = "2032-05-04"
invented = true
drift_per_year = "0.05 %"
reference_uncertainty = "0.05 %"
[place]
gravity = "9.8146 m/s2"
air_density = "1.225 kg/m3"
"#;

fn tautrail(arguments: &[&str], input: &str, dir: &Path) -> Output {
    let mut command = Command::new(env!("CARGO_BIN_EXE_tautrail"));
    command.args(arguments).current_dir(dir).env("NO_COLOR", "1");
    let mut child = command.stdin(Stdio::piped()).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
    // A child that refuses early reads no input.
    let _ = child.stdin.take().unwrap().write_all(input.as_bytes());
    child.wait_with_output().unwrap()
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

fn csv(counts: impl Fn(u32) -> f64) -> String {
    let rows =
        (0..=6).map(|n| format!("1,up,{},{}\n", if n == 0 { "0".into() } else { format!("{} N", 100 * n) }, counts(n)));
    format!("run,direction,load,counts\n{}", rows.collect::<String>())
}

#[test]
fn a_table_becomes_a_record_that_a_rig_file_uses_and_a_page() {
    let dir = tempfile::tempdir().unwrap();
    fs::write(dir.path().join("sheet.toml"), SHEET).unwrap();
    fs::write(dir.path().join("line.csv"), csv(|n| 12_000.0 + 2e5 * f64::from(n) + f64::from(n % 2))).unwrap();
    let arguments = [
        "calibrate",
        "cell",
        "sheet.toml",
        "--readings",
        "line.csv",
        "--record",
        "records/line.toml",
        "--page",
        "line.html",
    ];
    let done = tautrail(&arguments, "", dir.path());
    assert!(done.status.success(), "{}{}", text(&done.stdout), text(&done.stderr));
    assert!(text(&done.stdout).contains("no class"), "{}", text(&done.stdout));
    let page = fs::read_to_string(dir.path().join("line.html")).unwrap();
    assert!(page.contains("<svg") && page.contains("invented") && page.contains("no safety device"));
    let written = fs::read_to_string(dir.path().join("records/line.toml")).unwrap();
    assert!(CalibrationRecord::read("line.toml", &written).0.is_some());
    let again = tautrail(&arguments, "", dir.path());
    assert_eq!(again.status.code(), Some(2));
    assert!(text(&again.stderr).contains("never overwritten"), "{}", text(&again.stderr));

    let rig_text = fs::read_to_string(concat!(env!("CARGO_MANIFEST_DIR"), "/tools/rehearsal/every-key.toml")).unwrap();
    let start = rig_text.find("[channel.calibration]").unwrap();
    let end = rig_text[start..].find("[[").map_or(rig_text.len(), |at| start + at);
    let with_record = format!("{}record = \"records/line.toml\"\n\n{}", &rig_text[..start], &rig_text[end..]);
    fs::write(dir.path().join("rig.toml"), with_record).unwrap();
    let rig = rig::load(&dir.path().join("rig.toml")).unwrap();
    let used = rig.channels.iter().find(|channel| channel.record.is_some()).expect("the record is used");
    assert!((used.calibration.coefficients[1] - 5e-4).abs() < 1e-8);
    assert_eq!(rig.attached[0].text, written);
    assert_eq!(rig::parse(&rig.text).unwrap().attached, rig.attached);
    fs::remove_file(dir.path().join("records/line.toml")).unwrap();
    let without = rig::load(&dir.path().join("rig.toml")).unwrap();
    assert_eq!(without.uncalibrated.len(), rig.uncalibrated.len() + 1, "a missing record leaves counts only");
}

#[test]
fn the_rehearsals_records_are_what_calibrate_makes_of_their_bench_sheets() {
    let rehearsal = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal");
    let dir = tempfile::tempdir().unwrap();
    let mut names: Vec<String> = fs::read_dir(rehearsal.join("records"))
        .unwrap()
        .map(|entry| entry.unwrap().path().file_stem().unwrap().to_string_lossy().into_owned())
        .collect();
    names.sort();
    assert_eq!(names.len(), 8, "four of the boards, four of the text instruments: {names:?}");
    for name in names {
        let kind = match name.split('-').next() {
            Some("line" | "anchor") => "cell",
            Some("encoder") => "encoder",
            _ => "accelerometer",
        };
        let (sheet, readings) = (format!("bench/{name}-sheet.toml"), format!("bench/{name}.csv"));
        let made = dir.path().join(&name);
        let arguments = ["calibrate", kind, &sheet, "--readings", &readings, "--record", made.to_str().unwrap()];
        let done = tautrail(&arguments, "", &rehearsal);
        assert!(done.status.success(), "{name}: {}{}", text(&done.stdout), text(&done.stderr));
        let kept = fs::read_to_string(rehearsal.join("records").join(format!("{name}.toml"))).unwrap();
        assert!(fs::read_to_string(&made).unwrap() == kept, "{name} is not what its sheet gives");
        assert!(CalibrationRecord::read(&name, &kept).0.unwrap().invented);
    }
}

#[test]
fn a_flagged_reading_and_a_shunt_that_moved_fail_the_check() {
    let dir = tempfile::tempdir().unwrap();
    fs::write(dir.path().join("sheet.toml"), format!("shunt_counts = 812000\n{SHEET}")).unwrap();
    fs::write(dir.path().join("line.csv"), csv(|n| if n == 3 { 10.0 } else { 1.0 } * (12_000.0 + 2e5 * f64::from(n))))
        .unwrap();
    let done = tautrail(&["calibrate", "cell", "sheet.toml", "--readings", "line.csv"], "", dir.path());
    assert_eq!(done.status.code(), Some(1), "{}{}", text(&done.stdout), text(&done.stderr));
    assert!(text(&done.stdout).contains("FLAGGED line 5"), "{}", text(&done.stdout));
    fs::write(dir.path().join("line.csv"), csv(|n| 12_000.0 + 2e5 * f64::from(n))).unwrap();
    let good =
        tautrail(&["calibrate", "cell", "sheet.toml", "--readings", "line.csv", "--record", "r.toml"], "", dir.path());
    assert!(good.status.success(), "{}", text(&good.stderr));
    let shunt =
        |on: &str| tautrail(&["calibrate", "shunt", "r.toml", "--zero", "12000", "--with-shunt", on], "", dir.path());
    assert_eq!(shunt("812100").status.code(), Some(0), "{}", text(&shunt("812100").stdout));
    assert_eq!(shunt("830000").status.code(), Some(1));
}

#[test]
fn guided_readings_come_from_the_feed_once_they_settle() {
    let dir = tempfile::tempdir().unwrap();
    fs::write(dir.path().join("sheet.toml"), SHEET).unwrap();
    let plan = csv(|_| 0.0).lines().map(|line| line.rsplit_once(',').unwrap().0.to_owned() + "\n").collect::<String>();
    fs::write(dir.path().join("plan.csv"), plan).unwrap();
    let rig = rig::parse(&rehearsal_rig::rig_text("every-key.toml")).unwrap();
    let (server, requests) = FeedServer::start(&dir.path().join("feed.sock"), Hello::of(&rig)).unwrap();
    let taken = dir.path().join("taken.csv");
    let playing = std::thread::spawn(move || play_cell(&server, &requests, &taken));
    let arguments = [
        "calibrate",
        "cell",
        "sheet.toml",
        "--live",
        "--plan",
        "plan.csv",
        "--readings",
        "taken.csv",
        "--record",
        "r.toml",
        "--socket",
        "feed.sock",
    ];
    let done = tautrail(&arguments, "\n\n\n\n\n\n\n", dir.path());
    assert!(done.status.success(), "{}{}", text(&done.stdout), text(&done.stderr));
    let record = CalibrationRecord::read("r.toml", &fs::read_to_string(dir.path().join("r.toml")).unwrap()).0.unwrap();
    assert!((record.coefficients.coefficients[1] - 5e-4).abs() < 1e-7, "{:?}", record.coefficients);
    assert!(text(&done.stdout).contains("step 7 of 7"), "{}", text(&done.stdout));
    playing.join().unwrap();
}

/// Tells the counts of a cell in fast time; the next load hangs once the reading before it is on the disk.
fn play_cell(server: &FeedServer, requests: &crossbeam_channel::Receiver<tautrail::feed::Request>, taken: &Path) {
    let (mut host_ns, mut level) = (0_i64, 0_usize);
    while level < 7 && host_ns < 36_000_000_000_000 {
        for request in requests.try_iter() {
            let known = matches!(&request.command, Asked::Raw { channel, .. } if channel == "line");
            request.replier.answer(known, "told");
        }
        let n_taken = fs::read_to_string(taken).map_or(0, |text| text.lines().count().saturating_sub(1));
        if n_taken != level {
            level = n_taken;
            host_ns += 5_000_000_000;
        }
        host_ns += 33_333_333;
        let mean = 12_000.0 + 2e5 * level as f64 + if host_ns % 2 == 0 { 3.0 } else { -3.0 };
        let (min, max) = (mean - 90.0, mean + 90.0);
        server.publish(&Message::Raw(RawNow {
            channel: "line".into(),
            host_ns,
            n: 33,
            mean,
            sd: Some(40.0),
            min,
            max,
        }));
        std::thread::sleep(Duration::from_millis(2));
    }
}
