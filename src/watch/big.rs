//! Numbers that are read from across the rail: tension, and what a release now would give, as large as the screen allows.

use ratatui::Frame;
use ratatui::layout::{Constraint, Layout, Rect};
use ratatui::style::Style;
use ratatui::text::Line;
use ratatui::widgets::Paragraph;

use super::view::ViewState;
use super::words::{against_limit, against_window};

/// Height of a sign in dots, and its width with the gap behind it.
const DOTS_HIGH: usize = 5;
const DOTS_WIDE: usize = 4;

/// Rows of a sign, three dots each, the leftmost the highest bit. What has no sign is left blank.
const fn dots(sign: char) -> [u8; DOTS_HIGH] {
    match sign {
        '0' => [0b111, 0b101, 0b101, 0b101, 0b111],
        '1' => [0b010, 0b110, 0b010, 0b010, 0b111],
        '2' => [0b111, 0b001, 0b111, 0b100, 0b111],
        '3' => [0b111, 0b001, 0b111, 0b001, 0b111],
        '4' => [0b101, 0b101, 0b111, 0b001, 0b001],
        '5' => [0b111, 0b100, 0b111, 0b001, 0b111],
        '6' => [0b111, 0b100, 0b111, 0b101, 0b111],
        '7' => [0b111, 0b001, 0b010, 0b010, 0b010],
        '8' => [0b111, 0b101, 0b111, 0b101, 0b111],
        '9' => [0b111, 0b101, 0b111, 0b001, 0b111],
        '.' => [0b000, 0b000, 0b000, 0b000, 0b010],
        '-' => [0b000, 0b000, 0b111, 0b000, 0b000],
        '~' => [0b000, 0b011, 0b110, 0b000, 0b000],
        '?' => [0b111, 0b001, 0b010, 0b000, 0b010],
        _ => [0; DOTS_HIGH],
    }
}

/// A text in large signs for a place; in ordinary ones where there is no room. Never cut: half a number misleads.
pub fn large(text: &str, width: u16, height: u16, dot: &str) -> Vec<String> {
    let n_signs = text.chars().count().max(1);
    let across = usize::from(width) / (n_signs * DOTS_WIDE);
    let scale = across.min(usize::from(height) / DOTS_HIGH);
    if scale == 0 {
        return vec![text.to_owned()];
    }
    // A cell of a terminal is about twice as high as wide.
    let wide = (2 * scale).min(usize::from(width) / (n_signs * DOTS_WIDE));
    let row = |k: usize| {
        let mut line = String::new();
        for sign in text.chars() {
            for bit in (0..DOTS_WIDE).rev() {
                let on = bit > 0 && dots(sign)[k] >> (bit - 1) & 1 == 1;
                line.push_str(&if on { dot.repeat(wide) } else { " ".repeat(wide) });
            }
        }
        line
    };
    (0..DOTS_HIGH).flat_map(|k| std::iter::repeat_n(row(k), scale)).collect()
}

/// One number of the large view.
struct Shown {
    /// What it is and its unit, with how it stands.
    words: String,
    number: String,
    style: Style,
}

/// The large view's middle: tension above, launch speed and peak g below it.
pub fn draw(frame: &mut Frame, area: Rect, view: &ViewState) {
    let [above, below] = Layout::vertical([Constraint::Percentage(58), Constraint::Percentage(42)]).areas(area);
    let [left, right] = Layout::horizontal([Constraint::Percentage(50), Constraint::Percentage(50)]).areas(below);
    draw_one(frame, above, view, tension(view));
    let [speed, peak] = forecast(view);
    draw_one(frame, left, view, speed);
    draw_one(frame, right, view, peak);
}

fn draw_one(frame: &mut Frame, area: Rect, view: &ViewState, shown: Shown) {
    let room = area.height.saturating_sub(1);
    let mut lines = vec![Line::styled(shown.words, shown.style)];
    let rows = large(&shown.number, area.width.saturating_sub(2), room, view.theme.bar());
    lines.extend(rows.into_iter().map(|row| Line::styled(format!(" {row}"), shown.style)));
    frame.render_widget(Paragraph::new(lines), area);
}

fn tension(view: &ViewState) -> Shown {
    let (theme, units) = (view.theme, view.units);
    let line = view.line_tension();
    let Some(tension_n) = line.value else {
        let words = String::from(" tension SILENT, treat as loaded");
        return Shown { words, number: String::from("???"), style: theme.alert() };
    };
    let limit_n = view.hello.limit_tension_n;
    let over = tension_n > limit_n;
    let (stands, style) = if over { ("OVER LIMIT", theme.alert()) } else { ("limit", theme.strong()) };
    let old = if line.is_fresh() { "" } else { "~" };
    Shown {
        words: format!(" tension, {}  {stands} {}", units.force.symbol(), units.force(limit_n)),
        number: format!("{old}{}", units.force_number(tension_n)),
        style,
    }
}

fn forecast(view: &ViewState) -> [Shown; 2] {
    let (theme, units, hello) = (view.theme, view.units, &view.hello);
    let snapshot = view.current();
    let now = snapshot.and_then(|snapshot| snapshot.released_now);
    let seen = snapshot.and_then(|snapshot| snapshot.last_launch);
    let style = |good: bool| if good { theme.strong() } else { theme.caution() };
    let window = |low: f64, high: f64| against_window(low, high, hello.plan_speed_min_mps, hello.plan_speed_max_mps);
    let limit = |low: f64, high: f64| against_limit(low, high, hello.limit_peak_g);
    let told = |what: &str, speed: (f64, &'static str), peak: (f64, &'static str)| {
        [
            Shown {
                words: format!(" {what}, {}  {}", units.speed.symbol(), speed.1),
                number: units.speed_number(speed.0, 1),
                style: style(speed.1 == "IN WINDOW"),
            },
            Shown {
                words: format!(" peak g, CFC 60  {}", peak.1),
                number: format!("{:.1}", peak.0),
                style: style(peak.1 == "under limit"),
            },
        ]
    };
    match (now, seen) {
        (Some(now), _) => told(
            "released now",
            (now.launch_speed_mps, window(now.launch_speed_low_mps, now.launch_speed_high_mps)),
            (now.peak_g, limit(now.peak_g_low, now.peak_g_high)),
        ),
        (None, Some(seen)) => told(
            "launched",
            (seen.launch_speed_mps, window(seen.launch_speed_mps, seen.launch_speed_mps)),
            (seen.peak_g, limit(seen.peak_g, seen.peak_g)),
        ),
        (None, None) => ["released now", "peak g"].map(|what| Shown {
            words: format!(" {what}: no forecast"),
            number: String::from("-"),
            style: theme.quiet(),
        }),
    }
}

#[cfg(test)]
mod tests {
    use super::large;

    #[test]
    fn a_number_grows_with_its_place_and_is_never_cut() {
        assert_eq!(large("613", 5, 3, "#"), ["613"]);
        assert_eq!(large("1", 4, 5, "#"), [" #  ", "##  ", " #  ", " #  ", "### "]);
        for (width, height) in [(12, 5), (40, 11), (200, 60)] {
            let rows = large("613", width, height, "#");
            assert!(rows.len() <= usize::from(height) && rows.len().is_multiple_of(5));
            assert!(rows.iter().all(|row| row.chars().count() <= usize::from(width)));
            assert!(rows.concat().contains('#'));
        }
    }
}
