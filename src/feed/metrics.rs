//! A daemon's snapshot in the text format of Prometheus (exposition format 0.0.4), for whoever watches many rigs.
//!
//! Served by a client of the feed in a process of its own, so that no scraper comes near the recording. Numbers of a snapshot
//! that is older than a second are left out: what is not known has no line.

use std::fmt::Write as _;
use std::io::{self, Read, Write};
use std::net::{SocketAddr, TcpListener, TcpStream};
use std::time::Duration;

use crate::live::{CordsNow, LinkNow, Phase, Snapshot};

use super::message::Hello;

/// Older than this, a snapshot's numbers are not told.
pub const SILENT_S: f64 = 1.0;
const REQUEST_LEN_MAX: usize = 4096;
/// A scraper that takes longer than this is cut.
const PATIENCE: Duration = Duration::from_millis(500);

/// Every metric of a rig; `snapshot` with its age in seconds.
pub fn exposition(hello: &Hello, snapshot: Option<(&Snapshot, f64)>) -> String {
    let mut page = Page::default();
    let info = [("rig", &*hello.rig), ("payload", &*hello.payload), ("version", &*hello.program_version)];
    page.family(
        "tautrail_info",
        "gauge",
        "Rig, payload and program; always 1. No safety device: it advises and records.",
    );
    page.line("tautrail_info", &info, 1.0);
    page.one(
        "tautrail_limit_tension_newtons",
        "gauge",
        "Tension limit of the rig file (advice)",
        hello.limit_tension_n,
    );
    page.one("tautrail_limit_peak_g", "gauge", "Peak g limit of the rig file, CFC 60 (advice)", hello.limit_peak_g);
    let fresh = snapshot.filter(|(_, age_s)| *age_s < SILENT_S);
    page.one("tautrail_up", "gauge", "Whether the daemon tells its state", if fresh.is_some() { 1.0 } else { 0.0 });
    if let Some((_, age_s)) = snapshot {
        page.one("tautrail_snapshot_age_seconds", "gauge", "Age of the newest state", age_s);
    }
    let Some((snapshot, _)) = fresh else { return page.text };
    state(&mut page, snapshot);
    channels(&mut page, snapshot);
    links(&mut page, snapshot);
    journal(&mut page, snapshot);
    page.text
}

fn state(page: &mut Page, snapshot: &Snapshot) {
    page.family("tautrail_phase", "gauge", "1 for the phase under way");
    for phase in Phase::ALL {
        page.line("tautrail_phase", &[("phase", phase.words())], flag(phase == snapshot.phase));
    }
    let (loaded, slack, unknown) = match snapshot.cords {
        CordsNow::Loaded { .. } => (true, false, false),
        CordsNow::Slack => (false, true, false),
        CordsNow::Unknown => (false, false, true),
    };
    page.family("tautrail_cords", "gauge", "1 for what is known of the cords; treat unknown as loaded");
    for (word, is) in [("loaded", loaded), ("slack", slack), ("unknown", unknown)] {
        page.line("tautrail_cords", &[("state", word)], flag(is));
    }
    if let CordsNow::Loaded { tension_n, energy_j } = snapshot.cords {
        page.one("tautrail_cords_tension_newtons", "gauge", "Greatest tension of any fresh cell", tension_n);
        if let Some(energy_j) = energy_j {
            page.one("tautrail_cords_energy_joules", "gauge", "Energy that a release would set free", energy_j);
        }
    }
    if let Some(now) = snapshot.released_now {
        let help = "Launch speed that a release now would give";
        page.one("tautrail_released_now_speed_metres_per_second", "gauge", help, now.launch_speed_mps);
        page.one("tautrail_released_now_peak_g", "gauge", "Peak g of a release now, CFC 60", now.peak_g);
        page.one("tautrail_released_now_in_window_ratio", "gauge", "Chance of the window", now.in_window);
    }
    page.one("tautrail_trial_open", "gauge", "Whether a trial is open", flag(snapshot.trial.is_some()));
    page.family("tautrail_alarms", "gauge", "Alarms whose cause stands, and those nobody has acknowledged");
    let active = snapshot.alarms.iter().filter(|alarm| alarm.active).count();
    let unseen = snapshot.alarms.iter().filter(|alarm| alarm.acknowledged_by.is_none()).count();
    page.line("tautrail_alarms", &[("state", "active")], active as f64);
    page.line("tautrail_alarms", &[("state", "unacknowledged")], unseen as f64);
}

fn channels(page: &mut Page, snapshot: &Snapshot) {
    let fresh = || snapshot.channels.iter().filter(|channel| channel.age_s.is_some_and(|age_s| age_s < SILENT_S));
    page.family("tautrail_channel_value", "gauge", "Newest value of a channel, none while it is silent");
    for channel in fresh() {
        let labels = [("channel", &*channel.name), ("role", &*channel.role), ("unit", &*channel.unit)];
        page.line("tautrail_channel_value", &labels, channel.value.unwrap_or(f64::NAN));
    }
}

fn links(page: &mut Page, snapshot: &Snapshot) {
    page.family("tautrail_link_up", "gauge", "Whether a device's port is open");
    for link in &snapshot.links {
        page.line("tautrail_link_up", &[("device", &*link.device)], flag(link.up));
    }
    let mut counted = |name: &str, help: &str, count: fn(&LinkNow) -> u64| {
        page.family(name, "counter", help);
        for link in &snapshot.links {
            page.line(name, &[("device", &*link.device)], count(link) as f64);
        }
    };
    counted("tautrail_link_bytes_total", "Bytes received", |link| link.bytes);
    counted("tautrail_link_frames_total", "Frames or lines accepted", |link| link.frames);
    counted("tautrail_link_refused_total", "Frames or lines refused", |link| link.refused);
    counted("tautrail_link_lost_frames_total", "Frames missing by sequence", |link| link.lost_frames);
    counted("tautrail_link_missing_samples_total", "Samples missing by index", |link| link.missing_samples);
    page.family("tautrail_link_clock_uncertainty_seconds", "gauge", "Standard uncertainty of a device's clock");
    for link in &snapshot.links {
        if let Some(u_s) = link.clock_uncertainty_s {
            page.line("tautrail_link_clock_uncertainty_seconds", &[("device", &*link.device)], u_s);
        }
    }
}

fn journal(page: &mut Page, snapshot: &Snapshot) {
    let Some(journal) = &snapshot.journal else { return };
    page.one("tautrail_journal_bytes_total", "counter", "Bytes written to the journal", journal.bytes as f64);
    if let Some(free) = journal.free_bytes {
        page.one("tautrail_disk_free_bytes", "gauge", "Free bytes on the archive's disk", free as f64);
    }
    let help = "Longest that data waited to be on the disk, last ten seconds";
    page.one("tautrail_journal_sync_interval_seconds", "gauge", help, journal.sync_interval_s);
    page.one("tautrail_journal_queue_ratio", "gauge", "Greatest filled share of the queue", journal.queue_high_water);
    page.one(
        "tautrail_journal_lost_reads_total",
        "counter",
        "Reads that found the queue full",
        journal.lost_events as f64,
    );
    page.one("tautrail_journal_trouble", "gauge", "Whether the journal is in trouble", flag(journal.trouble.is_some()));
}

const fn flag(is: bool) -> f64 {
    if is { 1.0 } else { 0.0 }
}

#[derive(Debug, Default)]
struct Page {
    text: String,
}

impl Page {
    fn family(&mut self, name: &str, kind: &str, help: &str) {
        // Writing to a String can't fail.
        let _ = write!(self.text, "# HELP {name} {help}\n# TYPE {name} {kind}\n");
    }

    fn line(&mut self, name: &str, labels: &[(&str, &str)], value: f64) {
        let labels: Vec<String> = labels.iter().map(|(label, text)| format!("{label}=\"{}\"", escaped(text))).collect();
        let labels = if labels.is_empty() { String::new() } else { format!("{{{}}}", labels.join(",")) };
        let value = match value {
            value if value == f64::INFINITY => "+Inf".to_owned(),
            value if value == f64::NEG_INFINITY => "-Inf".to_owned(),
            value => format!("{value}"),
        };
        let _ = writeln!(self.text, "{name}{labels} {value}");
    }

    fn one(&mut self, name: &str, kind: &str, help: &str, value: f64) {
        self.family(name, kind, help);
        self.line(name, &[], value);
    }
}

/// As the format asks for label values: backslash, quote and line feed.
fn escaped(text: &str) -> String {
    text.replace('\\', "\\\\").replace('"', "\\\"").replace('\n', "\\n")
}

/// Answers one scraper: the page for `GET /metrics`, else what is wrong. One at a time, each bounded in length and time.
///
/// # Errors
/// Of the connection; it is closed either way.
pub fn answer(mut stream: TcpStream, page: impl FnOnce() -> String) -> io::Result<()> {
    stream.set_read_timeout(Some(PATIENCE))?;
    stream.set_write_timeout(Some(PATIENCE))?;
    let mut request = Vec::new();
    let mut part = [0; 1024];
    while !request.windows(4).any(|end| end == b"\r\n\r\n") && request.len() < REQUEST_LEN_MAX {
        match stream.read(&mut part)? {
            0 => break,
            n => request.extend_from_slice(&part[..n]),
        }
    }
    let first = request.split(|byte| *byte == b'\r').next().unwrap_or_default();
    let mut words = first.split(|byte| *byte == b' ');
    let (status, kind, body) = match (words.next(), words.next()) {
        (Some(b"GET"), Some(b"/metrics")) => ("200 OK", "text/plain; version=0.0.4; charset=utf-8", page()),
        (Some(b"GET"), _) => ("404 Not Found", "text/plain", "the metrics are at /metrics\n".to_owned()),
        _ => ("405 Method Not Allowed", "text/plain", "only GET /metrics is answered\n".to_owned()),
    };
    let head = format!(
        "HTTP/1.1 {status}\r\nContent-Type: {kind}\r\nContent-Length: {}\r\nConnection: close\r\n\r\n",
        body.len()
    );
    stream.write_all(head.as_bytes())?;
    stream.write_all(body.as_bytes())
}

/// Listens for scrapers, without waiting in `accept`.
///
/// # Errors
/// The address can't be had.
pub fn listen(address: SocketAddr) -> io::Result<TcpListener> {
    let listener = TcpListener::bind(address)?;
    listener.set_nonblocking(true)?;
    Ok(listener)
}

#[cfg(test)]
mod tests {
    use std::thread;

    use super::*;
    use crate::feed::message::Message;

    fn asked(request: &[u8]) -> String {
        let listener = TcpListener::bind("127.0.0.1:0").unwrap();
        let mut client = TcpStream::connect(listener.local_addr().unwrap()).unwrap();
        let (stream, _) = listener.accept().unwrap();
        let answering = thread::spawn(move || answer(stream, || "tautrail_up 1\n".to_owned()));
        client.write_all(request).unwrap();
        let mut text = String::new();
        let read = client.read_to_string(&mut text);
        let _ = answering.join().unwrap();
        read.map(|_| text).unwrap_or_default()
    }

    /// The examples of FEED.md. Invented data.
    fn documented() -> (Hello, Box<Snapshot>) {
        let document = include_str!("FEED.md");
        let message = |kind: &str| {
            let start = format!("{{\"type\":\"{kind}\"");
            let line = document.lines().find(|line| line.starts_with(&start)).unwrap();
            serde_json::from_str::<Message>(line).unwrap()
        };
        let (Message::Hello(hello), Message::Snapshot(snapshot)) = (message("hello"), message("snapshot")) else {
            panic!("the document's examples are of other kinds");
        };
        (hello, snapshot)
    }

    // Prometheus, "Exposition formats", text-based format 0.0.4: names, labels, values, one HELP and TYPE a family.
    #[test]
    fn every_line_keeps_to_the_exposition_format() {
        let (mut hello, snapshot) = documented();
        hello.payload = "survey \"8\"\n\\".into();
        let page = exposition(&hello, Some((&snapshot, 0.02)));
        let line = regex::Regex::new(
            r#"^([a-z_:][a-z0-9_:]*)(\{[a-z_]+="(\\.|[^"\\\n])*"(,[a-z_]+="(\\.|[^"\\\n])*")*\})? (NaN|[+-]Inf|-?[0-9.e-]+)$"#,
        )
        .unwrap();
        let mut family = String::new();
        let mut families = std::collections::BTreeSet::new();
        for text in page.lines() {
            if let Some(told) = text.strip_prefix("# TYPE ") {
                let (name, kind) = told.split_once(' ').unwrap();
                assert_eq!(kind == "counter", name.ends_with("_total"), "{text}");
                assert!(families.insert(name.to_owned()), "{name} comes twice");
                family = name.to_owned();
            } else if !text.starts_with("# HELP ") {
                let name = line.captures(text).unwrap_or_else(|| panic!("{text}"));
                assert_eq!(name[1], family, "{text} stands in another family");
            }
        }
        for wanted in [
            "tautrail_up 1\n",
            "tautrail_phase{phase=\"hold\"} 1\n",
            "tautrail_cords{state=\"loaded\"} 1\n",
            "tautrail_channel_value{channel=\"line\",role=\"release_line_tension\",unit=\"N\"} 688.1\n",
            "tautrail_link_bytes_total{device=\"winch-node\"} 8012345\n",
        ] {
            assert!(page.contains(wanted), "{wanted} is missing in\n{page}");
        }
        assert!(!page.contains("channel=\"encoder\""), "a silent channel has no number");
    }

    #[test]
    fn old_numbers_are_left_out() {
        let (hello, snapshot) = documented();
        let page = exposition(&hello, Some((&snapshot, 1.0)));
        assert!(
            page.contains("tautrail_up 0\n") && !page.contains("688.1") && !page.contains("tautrail_cords"),
            "{page}"
        );
        assert!(exposition(&hello, None).contains("tautrail_up 0\n"));
    }

    #[test]
    fn a_scraper_gets_the_page_and_others_are_told_where_it_is() {
        let page = asked(b"GET /metrics HTTP/1.1\r\nHost: x\r\n\r\n");
        assert!(page.starts_with("HTTP/1.1 200 OK\r\n") && page.ends_with("\r\n\r\ntautrail_up 1\n"), "{page}");
        assert!(page.contains("Content-Length: 14\r\n"), "{page}");
        assert!(asked(b"GET / HTTP/1.1\r\n\r\n").contains("404"));
        assert!(asked(b"POST /metrics HTTP/1.1\r\n\r\n").contains("405"));
    }

    #[test]
    fn hostile_requests_end_within_their_bounds() {
        // Half open: nothing comes, and nothing is answered for ever.
        assert_eq!(asked(b"GET /metr"), "");
        let flood = vec![b'x'; 3 * REQUEST_LEN_MAX];
        let answer = asked(&flood);
        assert!(answer.is_empty() || answer.contains("405"), "{answer}");
    }
}
