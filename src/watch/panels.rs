//! The panels of words and numbers: what a release now would give, links, channels, journal, alarms, events.

use ratatui::style::Style;
use ratatui::text::{Line, Span};

use crate::feed::message::{Event, LinkNow, ReleasedNow, Snapshot};
use crate::live::{JournalNow, LaunchSeen, Phase};

use super::view::ViewState;
use super::words::{Freshness, Reading, against_limit, against_window, bytes, limit_words};

/// "Released now": speed against the window, peak g against the limit; from rest on, what the launch gave.
pub fn released_now(view: &ViewState, width: u16) -> (&'static str, Vec<Line<'static>>) {
    let Some(snapshot) = view.current() else {
        return (" released now ", vec![Line::from("no data: UNKNOWN")]);
    };
    match (snapshot.released_now, snapshot.last_launch) {
        (Some(now), _) => (" released now ", forecast(view, snapshot, &now, width)),
        (None, Some(seen)) => (" launched ", launched(view, &seen)),
        (None, None) => (" released now ", vec![Line::from(why_no_forecast(snapshot.phase))]),
    }
}

const fn why_no_forecast(phase: Phase) -> &'static str {
    match phase {
        Phase::Slack | Phase::Rest => "not drawn",
        Phase::Launch | Phase::RunOut => "under way",
        Phase::WinchBack | Phase::Hold | Phase::LetDown => "no forecast: needs tension, place, card",
        Phase::Unknown => "UNKNOWN",
    }
}

fn forecast(view: &ViewState, snapshot: &Snapshot, now: &ReleasedNow, width: u16) -> Vec<Line<'static>> {
    let (hello, theme, units) = (&view.hello, view.theme, view.units);
    let (low, high) = (now.launch_speed_low_mps, now.launch_speed_high_mps);
    let (min, max) = (hello.plan_speed_min_mps, hello.plan_speed_max_mps);
    let window = against_window(low, high, min, max);
    let limit = against_limit(now.peak_g_low, now.peak_g_high, hello.limit_peak_g);
    let verdict = |word: &'static str, good: &str, chance: String| {
        let style = if word == good { theme.good() } else { theme.caution() };
        Line::styled(format!("{word} {chance:>width$}", width = 24 - word.len()), style)
    };
    let old = if view.snapshot_freshness() == Freshness::Fresh { "" } else { " ~old" };
    let mut lines = vec![
        speed_line(view, "speed", now.launch_speed_mps, 1, old),
        Line::from(format!("      {} to {}", units.speed_number(low, 1), units.speed_number(high, 1))),
        Line::from(format!("window {} to {}", units.speed_number(min, 1), units.speed_number(max, 1))),
        Line::from(gauge(width, (min, max), (low, now.launch_speed_mps, high), theme.ascii)),
        verdict(window, "IN WINDOW", format!("in {}", percent(now.in_window))),
        Line::styled(format!("peak  {:>5.1} g{old}", now.peak_g), theme.strong()),
        Line::from(format!("      {:.1} to {:.1}", now.peak_g_low, now.peak_g_high)),
        Line::from(limit_words(hello.limit_peak_g, hello.proof_limit_g)),
        verdict(limit, "under limit", percent(now.under_limit)),
    ];
    lines.extend(on_the_way(view, snapshot));
    if (now.airspeed_mps - now.launch_speed_mps).abs() > 0.05 {
        lines.push(speed_line(view, "air  ", now.airspeed_mps, 1, "").style(Style::new()));
    }
    lines.push(Line::styled("forecast, 95 % intervals", theme.quiet()));
    lines
}

fn speed_line(view: &ViewState, what: &str, speed_mps: f64, decimals: usize, old: &str) -> Line<'static> {
    let (number, unit) = (view.units.speed_number(speed_mps, decimals), view.units.speed.symbol());
    Line::styled(format!("{what} {number:>5} {unit}{old}"), view.theme.strong())
}

/// A probability as people read it; nothing is ever certain.
pub fn percent(chance: f64) -> String {
    match 100.0 * chance {
        percent if percent > 99.0 => String::from(">99 %"),
        percent if percent < 1.0 => String::from("<1 %"),
        percent => format!("{percent:.0} %"),
    }
}

/// What is left to draw and how many cords pull, while drawing; what the hold does to the tension, in the hold.
pub fn on_the_way(view: &ViewState, snapshot: &Snapshot) -> Vec<Line<'static>> {
    let plus_minus = if view.theme.ascii { "+-" } else { "±" };
    let mut lines = Vec::new();
    if let Some(hold) = snapshot.hold {
        // One decimal more than a tension: what a hold loses is small.
        let (decimals, unit) = (view.units.force.decimals() + 1, view.units.force.symbol());
        // Less than the last digit either way has no sign.
        let scale = 10_f64.powi(decimals as i32);
        let fell = (view.units.force_value(hold.fell_n) * scale).round() / scale + 0.0;
        lines.push(Line::from(format!("fell {fell:.decimals$} {unit}")));
        lines.extend(hold.in_a_minute_n.map(|later_n| Line::from(format!("{} in 1 min", view.units.force(later_n)))));
        lines.extend(hold.window_missed_in_s.map(|in_s| {
            let text = if in_s < 1.0 { String::from("window MISSED") } else { format!("window missed in {in_s:.0} s") };
            Line::styled(text, view.theme.caution())
        }));
        return lines;
    }
    lines.extend(snapshot.to_go.map(|to_go| {
        let tension = to_go.tension_n.map_or(String::new(), |tension_n| {
            let sign = if tension_n < 0.0 { '-' } else { '+' };
            format!(", {sign}{}", view.units.force(tension_n.abs()))
        });
        Line::from(format!("to go {:.2} m{tension}", to_go.draw_m))
    }));
    lines.extend(snapshot.cords_fit.map(|fit| {
        let style = if (fit.low..=fit.high).contains(&f64::from(fit.rig_file)) {
            view.theme.quiet()
        } else {
            view.theme.caution()
        };
        let half = 0.5 * (fit.high - fit.low);
        Line::styled(format!("fits {:.1} {plus_minus} {half:.1} of {} cords", fit.cords, fit.rig_file), style)
    }));
    lines
}

fn launched(view: &ViewState, seen: &LaunchSeen) -> Vec<Line<'static>> {
    let (hello, theme, units) = (&view.hello, view.theme, view.units);
    let (min, max) = (hello.plan_speed_min_mps, hello.plan_speed_max_mps);
    let window = against_window(seen.launch_speed_mps, seen.launch_speed_mps, min, max);
    let limit = against_limit(seen.peak_g, seen.peak_g, hello.limit_peak_g);
    let style = |good: bool| if good { theme.good() } else { theme.caution() };
    vec![
        speed_line(view, "speed", seen.launch_speed_mps, 2, ""),
        Line::from(format!("window {} to {}", units.speed_number(min, 1), units.speed_number(max, 1))),
        Line::styled(window, style(window == "IN WINDOW")),
        Line::styled(format!("peak  {:>5.2} g", seen.peak_g), theme.strong()),
        Line::from(limit_words(hello.limit_peak_g, hello.proof_limit_g)),
        Line::styled(limit, style(limit == "under limit")),
        Line::styled(if view.recorded.is_some() { "the trial's reading" } else { "first estimate" }, theme.quiet()),
    ]
}

/// The interval on a scale that holds the window and a third of it on either side: `--[==(=O=)==]--`.
fn gauge(width: u16, (min, max): (f64, f64), (low, value, high): (f64, f64, f64), ascii: bool) -> String {
    let n = usize::from(width.max(8));
    let margin = (max - min) / 3.0;
    let (from, to) = (min - margin, max + margin);
    let place = |v: f64| (((v - from) / (to - from)).clamp(0.0, 1.0) * (n - 1) as f64).round() as usize;
    let (rail, inside, spread, now) = if ascii { ('-', '=', '+', 'O') } else { ('─', '━', '▒', '◆') };
    let mut cells: Vec<char> = (0..n).map(|k| if k >= place(min) && k <= place(max) { inside } else { rail }).collect();
    cells[place(low).min(place(high))..=place(high).max(place(low))].fill(spread);
    cells[place(min)] = '[';
    cells[place(max)] = ']';
    cells[place(value)] = now;
    cells.into_iter().collect()
}

/// One line a device.
pub fn links(view: &ViewState) -> Vec<Line<'static>> {
    match view.current() {
        None => vec![Line::styled("links: no data, UNKNOWN", view.theme.caution())],
        Some(snapshot) => snapshot.links.iter().map(|link| link_line(view, link)).collect(),
    }
}

fn link_line(view: &ViewState, link: &LinkNow) -> Line<'static> {
    if !link.up {
        return Line::styled(format!("{} DOWN: {}", link.device, link.note), view.theme.alert());
    }
    let silent_s = link.silent_s.map_or(f64::INFINITY, |silent_s| silent_s + view.since_snapshot_s);
    if Freshness::of(silent_s) == Freshness::Silent {
        return Line::styled(format!("{} SILENT, link is up", link.device), view.theme.alert());
    }
    let clock = link.clock_uncertainty_s.map_or(String::from("clock by arrival"), |u_s| {
        format!("clock ±{:.2} ms", 2.0 * u_s * 1e3).replace('±', if view.theme.ascii { "+-" } else { "±" })
    });
    let lost = lost_span(view, link);
    Line::from(vec![Span::raw(format!("{} up {}/s, {clock}, ", link.device, bytes(link.bytes_per_s))), lost])
}

/// What a link cost. A refused frame is no missing sample: after a start the first one is often only its tail.
fn lost_span(view: &ViewState, link: &LinkNow) -> Span<'static> {
    let refused = format!("{} refused", link.refused);
    if link.no_samples.is_some() {
        return Span::styled(format!("NO SAMPLES, {refused}"), view.theme.alert());
    }
    match (link.missing_samples, link.refused) {
        (0, 0) => Span::raw("none missing"),
        (0, _) => Span::raw(format!("none missing, {refused}")),
        (n, 0) => Span::styled(format!("{n} samples MISSING"), view.theme.caution()),
        (n, _) => Span::styled(format!("{n} samples MISSING, {refused}"), view.theme.caution()),
    }
}

/// One line a channel: newest value, least and greatest since the last snapshot.
pub fn channels(view: &ViewState) -> Vec<Line<'static>> {
    let Some(snapshot) = &view.snapshot else { return Vec::new() };
    snapshot.channels.iter().map(|channel| channel_line(view, channel)).collect()
}

fn channel_line(view: &ViewState, channel: &crate::live::ChannelNow) -> Line<'static> {
    let reading = Reading::of(channel, view.since_snapshot_s);
    let decimals = if channel.unit == "m" { 3 } else { 1 };
    let text = format!("{:<9}{}", channel.name, reading.text(decimals, &channel.unit));
    match (reading.freshness, channel.min, channel.max) {
        (Freshness::Fresh, Some(min), Some(max)) => {
            let extremes = format!("  {min:.decimals$} to {max:.decimals$}");
            Line::from(vec![Span::raw(text), Span::styled(extremes, view.theme.quiet())])
        }
        (Freshness::Fresh, ..) => Line::from(text),
        _ => Line::styled(text, view.theme.caution()),
    }
}

/// Journal and trial in one line.
pub fn journal(view: &ViewState) -> Line<'static> {
    let Some(snapshot) = view.current() else { return Line::styled("journal: no data, UNKNOWN", view.theme.caution()) };
    match &snapshot.journal {
        None => Line::styled("journal: not told", view.theme.quiet()),
        Some(JournalNow { trouble: Some(trouble), .. }) => {
            Line::styled(format!("journal TROUBLE: {trouble}"), view.theme.alert())
        }
        Some(journal) => {
            let lost =
                if journal.lost_events > 0 { format!(", {} reads LOST", journal.lost_events) } else { String::new() };
            let style = if journal.lost_events > 0 { view.theme.caution() } else { Style::new() };
            let written = bytes(journal.bytes as f64);
            let free =
                journal.free_bytes.map_or("room unknown".to_owned(), |free| format!("{} free", bytes(free as f64)));
            let text = format!("journal {written}, {free}, synced within {:.2} s{lost}", journal.sync_interval_s);
            Line::styled(text, style)
        }
    }
}

/// Standing alarms, most urgent first, each whole on as many lines as it needs; those that do not fit are counted.
pub fn alarms(view: &ViewState, width: u16, n_rows: usize) -> Vec<Line<'static>> {
    let mut all = Vec::new();
    if let Some(reason) = &view.lost {
        all.push((format!("NO CONNECTION to the daemon ({reason}); trying again"), view.theme.alert()));
    } else if view.snapshot_freshness() == Freshness::Silent {
        all.push((String::from("NO DATA from the daemon for over 1 s: every number is unknown"), view.theme.alert()));
    }
    let standing = view.snapshot.iter().flat_map(|snapshot| &snapshot.alarms);
    all.extend(standing.map(|alarm| match (alarm.active, &alarm.acknowledged_by) {
        (true, None) => (format!("ALARM: {}", alarm.sentence), view.theme.alert()),
        (true, Some(person)) => (format!("alarm (seen by {person}): {}", alarm.sentence), view.theme.caution()),
        (false, _) => (format!("was alarm, press a: {}", alarm.sentence), view.theme.caution()),
    }));
    let n_all = all.len();
    let mut lines: Vec<Line<'static>> = Vec::new();
    for (n_shown, (text, style)) in all.into_iter().enumerate() {
        let sentence = wrapped(&text, width);
        let last = n_shown + 1 == n_all;
        if lines.len() + sentence.len() + usize::from(!last) > n_rows && n_shown > 0 {
            lines.push(Line::styled(format!("and {} more", n_all - n_shown), view.theme.caution()));
            break;
        }
        lines.extend(sentence.into_iter().map(|line| Line::styled(line, style)));
    }
    lines
}

/// Broken between words; lines after the first are indented.
fn wrapped(text: &str, width: u16) -> Vec<String> {
    let mut lines = vec![String::new()];
    for word in text.split(' ') {
        let Some(line) = lines.last_mut() else { break };
        if line.is_empty() {
            line.push_str(word);
        } else if line.chars().count() + 1 + word.chars().count() <= usize::from(width) {
            line.push(' ');
            line.push_str(word);
        } else {
            lines.push(format!("  {word}"));
        }
    }
    lines
}

/// The newest events, newest first.
pub fn events(view: &ViewState, n: usize) -> Vec<Line<'static>> {
    let now_ns = view.snapshot.as_ref().map(|snapshot| snapshot.host_ns);
    view.events.iter().rev().take(n).map(|event| event_line(view, event, now_ns)).collect()
}

fn event_line(view: &ViewState, event: &Event, now_ns: Option<i64>) -> Line<'static> {
    let age = now_ns.map_or(String::from("      "), |now_ns| {
        let age_s = now_ns.saturating_sub(event.host_ns) as f64 * 1e-9 + view.since_snapshot_s.min(1e6);
        format!("{age_s:>5.0} s")
    });
    let person = event.person.as_ref().map_or(String::new(), |person| format!(" ({person})"));
    Line::from(vec![
        Span::styled(format!("{age} {:<6} ", event.kind), view.theme.quiet()),
        Span::raw(format!("{}{person}", event.text)),
    ])
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_gauge_shows_window_interval_and_value_in_their_places() {
        assert_eq!(gauge(16, (15.0, 18.0), (16.0, 16.5, 17.0), true), "---[==++O+==]---");
        assert_eq!(gauge(16, (15.0, 18.0), (2.0, 3.0, 4.0), true), "O--[========]---");
    }

    #[test]
    fn a_long_sentence_keeps_every_word() {
        let text = "tension 912 N is over the limit of 900 N: stop the winch";
        let lines = wrapped(text, 20);
        assert!(lines.iter().all(|line| line.chars().count() <= 20), "{lines:?}");
        let words: Vec<_> = lines.iter().flat_map(|line| line.split_whitespace()).collect();
        assert_eq!(words.join(" "), text);
        assert_eq!(wrapped("averyverylongword x", 4), ["averyverylongword", "  x"]);
    }

    #[test]
    fn the_gauge_takes_any_numbers() {
        for v in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY, 1e300] {
            assert_eq!(gauge(3, (15.0, 15.0), (v, v, v), true).chars().count(), 8);
            assert_eq!(gauge(20, (v, 18.0), (16.0, v, 17.0), false).chars().count(), 20);
        }
    }
}
