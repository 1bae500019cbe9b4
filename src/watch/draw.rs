//! One state of the view on one frame. Pure: the same state on the same screen gives the same cells.

use ratatui::Frame;
use ratatui::layout::{Constraint, Layout, Rect};
use ratatui::text::{Line, Span};
use ratatui::widgets::{Block, Clear, Paragraph, Wrap};

use crate::live::Phase;

use super::history::{BIN_S, Range};
use super::view::{CordsShown, ViewState};
use super::words::Freshness;
use super::{CAUTION, big, chart, panels, rail};

/// Least width for the forecast beside the rail, and for the second column below.
const WIDE: u16 = 110;
const FORECAST_WIDTH: u16 = 27;
/// Least time that the history shows.
const HISTORY_S: f64 = 60.0;
const N_ALARM_ROWS_MAX: u16 = 6;

/// Draws the whole display. Any size is taken; what has no room is left out, the cords' line last.
pub fn draw(frame: &mut Frame, view: &ViewState) {
    let area = frame.area();
    let alarms = panels::alarms(view, area.width, usize::from(N_ALARM_ROWS_MAX));
    let n_alarm_rows = (alarms.len() as u16).min(N_ALARM_ROWS_MAX);
    let small = area.height < 14;
    let below = if small { 0 } else { (area.height / 4).clamp(6, 14) };
    let [cords, title, alarm_rows, middle, bottom, footer] = Layout::vertical([
        Constraint::Length(1),
        Constraint::Length(1),
        Constraint::Length(n_alarm_rows),
        Constraint::Min(0),
        Constraint::Length(below),
        Constraint::Length(1),
    ])
    .areas(area);
    frame.render_widget(Paragraph::new(cords_line(view)), cords);
    frame.render_widget(Paragraph::new(title_line(view, area.width)), title);
    frame.render_widget(Paragraph::new(alarms), alarm_rows);
    if view.big {
        big::draw(frame, middle.union(bottom), view);
    } else {
        draw_middle(frame, middle, view);
        draw_bottom(frame, bottom, view);
    }
    frame.render_widget(Paragraph::new(footer_line(view)), footer);
    if view.help {
        draw_help(frame, area);
    }
}

/// Whether the cords hold energy: the first line of every view.
pub fn cords_line(view: &ViewState) -> Line<'static> {
    if let Some(banner) = &view.recorded {
        let cords = match view.cords() {
            CordsShown::Loaded { tension_n, .. } => format!("cords were loaded, {}", view.units.force(tension_n)),
            CordsShown::Unknown => String::from("tension was unknown"),
            CordsShown::Slack => String::from("cords were slack"),
        };
        return Line::styled(format!(" {banner}  {cords} "), view.theme.alert());
    }
    match view.cords() {
        CordsShown::Loaded { tension_n, energy_j, freshness } => {
            let old = match freshness {
                Freshness::Fresh => String::new(),
                _ => format!(" ({:.1} s old)", view.since_snapshot_s),
            };
            let energy = energy_j.map_or(String::from("energy unknown"), |energy_j| format!("{energy_j:.0} J"));
            let text = format!(" CORDS LOADED  {}  {energy}{old}  keep clear ", view.units.force(tension_n));
            Line::styled(text, view.theme.alert())
        }
        CordsShown::Unknown => Line::styled(" TENSION UNKNOWN, TREAT AS LOADED  keep clear ", view.theme.alert()),
        CordsShown::Slack => {
            let text =
                format!(" cords slack: every cell fresh and under {}", view.units.force(view.hello.slack_tension_n));
            Line::styled(text, view.theme.good())
        }
    }
}

fn title_line(view: &ViewState, width: u16) -> Line<'static> {
    let phase = view.phase();
    let phase_s = view.current().filter(|snapshot| snapshot.phase == phase).map(|snapshot| snapshot.phase_s);
    let since = phase_s.map_or(String::new(), |phase_s| format!(" {:.0} s", phase_s + view.since_snapshot_s));
    let style = match phase {
        Phase::Slack | Phase::Rest => view.theme.good(),
        Phase::WinchBack | Phase::LetDown => view.theme.strong(),
        Phase::Hold | Phase::Launch | Phase::RunOut | Phase::Unknown => view.theme.alert(),
    };
    let shown = format!(" {}{since} ", phase.words().to_uppercase());
    let trial = match view.current().map(|snapshot| snapshot.trial.as_ref()) {
        None => String::from("trial unknown"),
        Some(None) => String::from("no trial open"),
        Some(Some(trial)) => format!("trial {} open {:.0} s", trial.id, trial.open_s),
    };
    let rig = format!(" {}  {}   ", view.hello.rig, view.hello.payload);
    let wall = view.current().map_or(String::new(), |snapshot| snapshot.wall.clone());
    let room = usize::from(width).saturating_sub(rig.len() + shown.len() + trial.len() + 3);
    let wall = if wall.len() < room { format!("   {wall}") } else { String::new() };
    Line::from(vec![
        Span::raw(rig),
        Span::styled(shown, style),
        Span::raw("   "),
        Span::raw(trial),
        Span::styled(wall, view.theme.quiet()),
    ])
}

fn draw_middle(frame: &mut Frame, area: Rect, view: &ViewState) {
    let beside = area.width >= 60 && area.height >= 6;
    let width = if area.width >= WIDE { FORECAST_WIDTH + 6 } else { FORECAST_WIDTH };
    let [left, right] =
        Layout::horizontal([Constraint::Min(0), Constraint::Length(if beside { width } else { 0 })]).areas(area);
    draw_rail(frame, left, view);
    if beside {
        let (title, lines) = panels::released_now(view, width - 2);
        let block = Block::bordered().title(title);
        frame.render_widget(Paragraph::new(lines).block(block), right);
    }
}

/// The chart above the strip, on one x axis.
fn draw_rail(frame: &mut Frame, area: Rect, view: &ViewState) {
    let strip = if area.height >= rail::HEIGHT { rail::HEIGHT } else { 0 };
    let [title, above, below] =
        Layout::vertical([Constraint::Length(1), Constraint::Min(0), Constraint::Length(strip)]).areas(area);
    frame.render_widget(Paragraph::new(tension_line(view, area.width)), title);
    let scale = rail::Scale::new(area, view.hello.rail_length_m);
    let buffer = frame.buffer_mut();
    chart::draw(buffer, above, &scale, view);
    rail::draw(buffer, below, &scale, view);
}

/// Tension against plan and limit, in words.
fn tension_line(view: &ViewState, width: u16) -> Line<'static> {
    let (theme, units) = (view.theme, view.units);
    let line = view.line_tension();
    let shown = Span::styled(format!(" tension {}", view.line_text()), theme.strong());
    let Some(tension_n) = line.value else { return Line::from(vec![shown.style(theme.alert())]) };
    let limit_n = view.hello.limit_tension_n;
    let band = view.x().value.and_then(|x_m| view.band_at(x_m));
    let mut spans = vec![shown];
    if let Some((low_n, _, high_n)) = band.filter(|_| matches!(view.phase(), Phase::WinchBack | Phase::Hold)) {
        let (word, style) = match tension_n {
            n if n > high_n => ("OVER PLAN", theme.alert()),
            n if n < low_n => ("below plan", theme.caution()),
            _ => ("in plan", theme.good()),
        };
        spans.push(Span::raw(format!("  plan {} to {} ", units.force_number(low_n), units.force_number(high_n))));
        spans.push(Span::styled(word, style));
    }
    spans.push(if tension_n > limit_n {
        Span::styled(format!("  OVER LIMIT {}", units.force(limit_n)), theme.alert())
    } else {
        Span::raw(format!("  limit {}", units.force(limit_n)))
    });
    let whole = Line::from(spans.clone());
    if whole.width() > usize::from(width) && spans.len() > 3 {
        // The plan's numbers are in the chart too; how the tension stands to plan and limit has to be said.
        spans[1] = Span::raw("  ");
        return Line::from(spans);
    }
    whole
}

fn draw_bottom(frame: &mut Frame, area: Rect, view: &ViewState) {
    let mut health = panels::links(view);
    health.push(panels::journal(view));
    if area.width >= WIDE && area.height >= 8 {
        let [left, right] = Layout::horizontal([Constraint::Percentage(50), Constraint::Percentage(50)]).areas(area);
        let [past, told] = Layout::vertical([Constraint::Percentage(60), Constraint::Percentage(40)]).areas(left);
        draw_history(frame, past, view);
        draw_events(frame, told, view);
        health.extend(panels::channels(view));
        let block = Block::bordered().title(" health ");
        frame.render_widget(Paragraph::new(health).block(block).wrap(Wrap { trim: false }), right);
        return;
    }
    let n_health = (health.len() as u16).min(area.height);
    let [top, told] = Layout::vertical([Constraint::Length(n_health), Constraint::Min(0)]).areas(area);
    frame.render_widget(Paragraph::new(health), top);
    frame.render_widget(Paragraph::new(panels::events(view, usize::from(told.height))), told);
}

fn draw_events(frame: &mut Frame, area: Rect, view: &ViewState) {
    let n = usize::from(area.height.saturating_sub(2));
    let block = Block::bordered().title(" events, newest first ");
    frame.render_widget(Paragraph::new(panels::events(view, n)).block(block), area);
}

/// Tension over the last time, from least to greatest in each column.
fn draw_history(frame: &mut Frame, area: Rect, view: &ViewState) {
    let block = Block::bordered();
    let inner = block.inner(area);
    let per_column = ((HISTORY_S / BIN_S) / f64::from(inner.width.max(1))).ceil() as usize;
    let seconds = f64::from(inner.width) * per_column as f64 * BIN_S;
    let unit = view.units.force.symbol();
    frame.render_widget(block.title(format!(" tension, last {seconds:.0} s, {unit}, least to greatest ")), area);
    if inner.is_empty() {
        return;
    }
    let rows = chart::Rows::new(inner, chart::top_n(view));
    let buffer = frame.buffer_mut();
    let bins: Vec<_> = view.history.columns(usize::from(inner.width), per_column);
    let first = inner.right() - bins.len() as u16;
    for (column, bin) in (first..).zip(bins) {
        let Some(Range { min, max }) = bin else { continue };
        for row in rows.row(max)..=rows.row(min) {
            buffer[(column, row)].set_symbol(view.theme.bar()).set_style(view.theme.good());
        }
    }
    let limit = rows.row(view.hello.limit_tension_n);
    let text = format!("limit {}", view.units.force_number(view.hello.limit_tension_n));
    buffer.set_stringn(inner.left(), limit, text, usize::from(inner.width), view.theme.caution());
}

fn footer_line(view: &ViewState) -> Line<'static> {
    let mut spans = vec![Span::styled(format!(" {CAUTION}"), view.theme.strong())];
    if let Some(notice) = &view.notice {
        spans.push(Span::raw(format!("  {notice}")));
    } else {
        let keys = match view.recorded {
            None => "  q quit a seen u units b big h help",
            Some(_) => "  q quit space arrows + - h help",
        };
        spans.push(Span::styled(keys, view.theme.quiet()));
    }
    if view.n_dropped > 0 {
        spans.push(Span::styled(format!("  {} left out", view.n_dropped), view.theme.caution()));
    }
    Line::from(spans)
}

fn draw_help(frame: &mut Frame, area: Rect) {
    let text = "q or Ctrl-C  leave the display; the daemon goes on recording\n\
                a            acknowledge the alarms, in the name given at the start\n\
                u            units: N, kN, kgf with km/h, lbf with kt; alarms stay in N and m/s\n\
                b            big numbers, to be read from a distance, and back\n\
                h            this help\n\
                a recorded trial: space stops and goes on, arrows 5 s back and on, + - pace,\n\
                0 to the start\n\n\
                Chart: tension over the rail. Shaded the plan's band, dashed the limit, dots\n\
                the greatest tension at each place since the winch-back, a diamond now.\n\
                ~ before a number: older than 0.2 s. A word in its place: older than 1 s.\n\n\
                The display advises and records only. It is no safety device: interlocks,\n\
                exclusion zones, local codes and licensed practice decide.\n\
                No key starts or stops machinery.";
    let height = 17.min(area.height);
    let width = 80.min(area.width);
    // The cords' line stays in view.
    let top = area.top() + 1.min(area.height);
    let place = Rect::new(area.left(), top, width, height.min(area.bottom().saturating_sub(top)));
    frame.render_widget(Clear, place);
    frame
        .render_widget(Paragraph::new(text).block(Block::bordered().title(" help ")).wrap(Wrap { trim: false }), place);
}
