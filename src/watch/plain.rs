//! The display for slow lines, logs and pipes: one line a second, no terminal needed.

use std::io::{self, Write};
use std::time::{Duration, Instant};

use crate::feed::{ClientError, FeedClient};

use super::CAUTION;
use super::draw::cords_line;
use super::panels::{on_the_way, percent};
use super::theme::Theme;
use super::view::ViewState;

const EVERY: Duration = Duration::from_secs(1);

/// One state in one line, cords first.
pub fn plain_line(view: &ViewState) -> String {
    let cords: String = cords_line(view).spans.iter().map(|span| span.content.as_ref()).collect();
    let mut parts = vec![cords.trim().to_owned(), view.phase().words().to_uppercase()];
    parts.push(format!("line {}", view.line_tension().text(0, "N")));
    parts.push(format!("x {}", view.x().text(2, "m")));
    if let Some(snapshot) = view.current() {
        if let Some(now) = snapshot.released_now {
            parts.push(format!(
                "released now {:.1} m/s ({:.1} to {:.1}), in window {}, {:.1} g ({:.1} to {:.1})",
                now.launch_speed_mps,
                now.launch_speed_low_mps,
                now.launch_speed_high_mps,
                percent(now.in_window),
                now.peak_g,
                now.peak_g_low,
                now.peak_g_high
            ));
        }
        let on_the_way = on_the_way(view, snapshot);
        parts.extend(on_the_way.iter().map(ToString::to_string));
        if let Some(seen) = snapshot.last_launch {
            parts.push(format!("launched {:.2} m/s, {:.2} g", seen.launch_speed_mps, seen.peak_g));
        }
    }
    if let Some(reason) = &view.lost {
        parts.push(format!("NO CONNECTION ({reason})"));
    }
    let alarms = view.snapshot.iter().flat_map(|snapshot| snapshot.alarms.iter()).filter(|alarm| alarm.active);
    parts.extend(alarms.map(|alarm| format!("ALARM: {}", alarm.sentence)));
    parts.join(" | ")
}

/// Prints a line a second, and every event at once, until the daemon hangs up or `stop` says so.
///
/// # Errors
/// [`ClientError`]; a reader of our output that closed its end is no error.
pub fn follow_plain(
    client: &mut FeedClient,
    output: &mut impl Write,
    stop: &dyn Fn() -> bool,
) -> Result<(), ClientError> {
    let mut view = ViewState::new(client.hello().clone(), Theme { colour: false, ascii: true });
    let mut print = |text: &str| match writeln!(output, "{text}").and_then(|()| output.flush()) {
        Err(error) if error.kind() == io::ErrorKind::BrokenPipe => Ok(false),
        Err(error) => Err(ClientError::from(error)),
        Ok(()) => Ok(true),
    };
    let mut going = print(&format!("{} {}: {CAUTION}", view.hello.rig, view.hello.payload))?;
    let (mut snapshot_at, mut printed_at) = (Instant::now(), Instant::now());
    while going && !stop() {
        if let Some(message) = client.next(Duration::from_millis(100))? {
            if matches!(message, crate::feed::message::Message::Snapshot(_)) {
                snapshot_at = Instant::now();
            }
            if let crate::feed::message::Message::Event(event) = &message {
                going = print(&format!("{}: {}", event.kind, event.text))?;
            }
            view.apply(message);
        }
        view.since_snapshot_s = snapshot_at.elapsed().as_secs_f64();
        if printed_at.elapsed() >= EVERY {
            printed_at = Instant::now();
            going = going && print(&plain_line(&view))?;
        }
    }
    Ok(())
}
