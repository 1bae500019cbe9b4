//! The rail strip: the rail to scale, with the shuttle where it is, and every mark of the trial in its place.

use ratatui::buffer::Buffer;
use ratatui::layout::Rect;

use super::view::ViewState;
use super::words::Freshness;

/// Columns kept for the tension axis.
const MARGIN: u16 = 6;
/// Shown before the nominal release point, as a share of the rail: a shuttle may be drawn too far.
const LEAD_SHARE: f64 = 0.04;
/// Rows that the strip needs.
pub const HEIGHT: u16 = 4;

/// Columns to rail coordinate and back.
#[derive(Debug, Clone, Copy)]
pub struct Scale {
    left: u16,
    width: u16,
    from_m: f64,
    to_m: f64,
}

impl Scale {
    pub fn new(area: Rect, rail_length_m: f64) -> Self {
        let width = area.width.saturating_sub(MARGIN + 1).max(1);
        let left = area.left() + MARGIN.min(area.width.saturating_sub(1));
        Self { left, width, from_m: -LEAD_SHARE * rail_length_m, to_m: rail_length_m }
    }

    pub fn columns(&self) -> std::ops::Range<u16> {
        self.left..self.left + self.width
    }

    /// Column of a place; what is beyond the rail sticks to its end.
    pub fn column(&self, x_m: f64) -> u16 {
        let share = ((x_m - self.from_m) / (self.to_m - self.from_m)).clamp(0.0, 1.0);
        self.left + (share * f64::from(self.width - 1)).round() as u16
    }

    pub fn x_m(&self, column: u16) -> f64 {
        let share = (f64::from(column) - f64::from(self.left)) / f64::from(self.width.max(2) - 1);
        self.from_m + share * (self.to_m - self.from_m)
    }
}

/// Draws the strip into the four rows of `area`.
pub fn draw(buffer: &mut Buffer, area: Rect, scale: &Scale, view: &ViewState) {
    if area.height < HEIGHT || area.width < 12 {
        return;
    }
    let [names, rail, marks, below] = [0, 1, 2, 3].map(|k| area.top() + k);
    draw_names(buffer, names, scale, view);
    draw_rail(buffer, rail, scale, view);
    draw_places(buffer, marks, scale, view);
    draw_shuttle(buffer, rail, scale, view);
    let text = draw_words(view);
    buffer.set_stringn(area.left() + MARGIN, below, text, usize::from(scale.width), view.theme.strong());
}

/// Marks along the rail: place, name.
fn marks(view: &ViewState) -> [(f64, &'static str); 4] {
    let hello = &view.hello;
    [(0.0, "release"), (hello.zero_mark_x_m, "zero"), (hello.brake_x_m, "brake"), (hello.rail_length_m, "stop")]
}

fn draw_names(buffer: &mut Buffer, row: u16, scale: &Scale, view: &ViewState) {
    put_labels(buffer, row, scale, marks(view).map(|(x_m, name)| (x_m, format!("{}{name}", view.theme.mark()))));
}

fn draw_places(buffer: &mut Buffer, row: u16, scale: &Scale, view: &ViewState) {
    put_labels(buffer, row, scale, marks(view).map(|(x_m, _)| (x_m, format!("{x_m:.1} m"))));
}

/// Labels begin at their column, or end there where the room runs out; one that would overwrite another is left out.
fn put_labels(buffer: &mut Buffer, row: u16, scale: &Scale, labels: [(f64, String); 4]) {
    let end = scale.columns().end;
    let mut free_from = scale.left;
    for (x_m, text) in labels {
        let len = text.chars().count() as u16;
        let column = scale.column(x_m);
        let at = if column + len <= end { column } else { end.saturating_sub(len) };
        if at >= free_from {
            buffer.set_stringn(at, row, &text, usize::from(len), ratatui::style::Style::new());
            free_from = at + len + 1;
        }
    }
}

fn draw_rail(buffer: &mut Buffer, row: u16, scale: &Scale, view: &ViewState) {
    let theme = view.theme;
    for column in scale.columns() {
        let x_m = scale.x_m(column);
        let symbol = match x_m {
            x_m if x_m < 0.0 => " ",
            x_m if x_m <= view.hello.zero_mark_x_m => theme.power_stroke(),
            x_m if x_m < view.hello.brake_x_m => theme.run_out(),
            _ => theme.brake(),
        };
        buffer[(column, row)].set_symbol(symbol);
    }
    buffer[(scale.column(view.hello.rail_length_m), row)].set_symbol(theme.stop());
}

fn draw_shuttle(buffer: &mut Buffer, row: u16, scale: &Scale, view: &ViewState) {
    let x = view.x();
    let Some(x_m) = x.value else { return };
    let sign = if x.freshness == Freshness::Fresh { view.theme.shuttle() } else { "[?]" };
    let first = scale.column(x_m).saturating_sub(1).max(scale.left);
    let room = usize::from(scale.columns().end.saturating_sub(first));
    buffer.set_stringn(first, row, sign, room, view.theme.strong());
}

fn draw_words(view: &ViewState) -> String {
    let x = view.x();
    let Some(x_m) = x.value else { return String::from("shuttle position SILENT") };
    let draw_m = view.hello.zero_mark_x_m - x_m;
    let to_go_m = view.hello.plan_draw_m - draw_m;
    let age = if x.freshness == Freshness::Fresh { String::new() } else { format!(" ({:.1} s old)", x.age_s) };
    if draw_m < -0.02 {
        return format!("shuttle {:.2} m past the zero mark{age}", -draw_m);
    }
    let rest = if to_go_m >= 0.005 {
        format!("{to_go_m:.2} m to go")
    } else if to_go_m > -0.05 {
        String::from("planned draw reached")
    } else {
        format!("{:.2} m PAST THE PLAN", -to_go_m)
    };
    format!("draw {:.2} m of {:.2} m, {rest}{age}", draw_m.max(0.0), view.hello.plan_draw_m)
}
