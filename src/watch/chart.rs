//! Tension above the rail strip, on the strip's own x axis: plan band, limit, the greatest seen at each place, and now.

use ratatui::buffer::Buffer;
use ratatui::layout::Rect;

use super::rail::Scale;
use super::view::ViewState;
use super::words::Freshness;

/// More marks on the axis than any sensible limit needs; a limit that is no sensible number gets no more.
const N_TICKS_MAX: u32 = 60;

/// The vertical axis: tension from zero at the lowest row to `top_n` at the highest.
#[derive(Debug, Clone, Copy)]
pub struct Rows {
    area: Rect,
    top_n: f64,
}

impl Rows {
    pub fn new(area: Rect, top_n: f64) -> Self {
        Self { area, top_n }
    }

    /// Row of a tension; what is beyond the axis sticks to its end.
    pub fn row(&self, tension_n: f64) -> u16 {
        let span = f64::from(self.area.height.saturating_sub(1));
        let up = (tension_n / self.top_n).clamp(0.0, 1.0) * span;
        // A tension that is no number casts to 0: the lowest row.
        self.area.bottom().saturating_sub(1 + up.round() as u16)
    }
}

/// Greatest tension the axis must hold.
pub fn top_n(view: &ViewState) -> f64 {
    let line_n = view.line_tension().value.unwrap_or(0.0);
    let band_n = view.hello.plan_band.iter().map(|row| row.3).fold(0.0, f64::max);
    (1.08 * view.hello.limit_tension_n).max(line_n).max(band_n).max(1.0)
}

/// Draws into `area`, whose columns `scale` maps.
pub fn draw(buffer: &mut Buffer, area: Rect, scale: &Scale, view: &ViewState) {
    if area.height < 2 || area.width < 12 {
        return;
    }
    let rows = Rows::new(area, top_n(view));
    draw_band(buffer, &rows, scale, view);
    draw_limit(buffer, area, &rows, scale, view);
    draw_trace(buffer, &rows, scale, view);
    draw_axis(buffer, area, &rows, view);
    draw_now(buffer, area, &rows, scale, view);
}

fn draw_band(buffer: &mut Buffer, rows: &Rows, scale: &Scale, view: &ViewState) {
    for column in scale.columns() {
        let Some((low_n, planned_n, high_n)) = view.band_at(scale.x_m(column)) else { continue };
        for row in rows.row(high_n)..=rows.row(low_n) {
            buffer[(column, row)].set_symbol(view.theme.band()).set_style(view.theme.good());
        }
        buffer[(column, rows.row(planned_n))].set_symbol(view.theme.planned()).set_style(view.theme.good());
    }
}

fn draw_limit(buffer: &mut Buffer, area: Rect, rows: &Rows, scale: &Scale, view: &ViewState) {
    let row = rows.row(view.hello.limit_tension_n);
    for column in scale.columns() {
        buffer[(column, row)].set_symbol(view.theme.limit()).set_style(view.theme.caution());
    }
    let text = format!(" limit {} ", view.units.force(view.hello.limit_tension_n));
    let at = area.right().saturating_sub(text.chars().count() as u16 + 1).max(area.left());
    buffer.set_stringn(at, row, &text, usize::from(area.right() - at), view.theme.caution());
}

fn draw_trace(buffer: &mut Buffer, rows: &Rows, scale: &Scale, view: &ViewState) {
    for column in scale.columns() {
        let (from, to) = (scale.x_m(column), scale.x_m(column + 1));
        if let Some(tension_n) = view.trace.between(from, to, view.hello.rail_length_m) {
            buffer[(column, rows.row(tension_n))].set_symbol(view.theme.trace()).set_style(view.theme.strong());
        }
    }
}

fn draw_axis(buffer: &mut Buffer, area: Rect, rows: &Rows, view: &ViewState) {
    for row in area.rows() {
        buffer[(area.left() + 5, row.y)].set_symbol(view.theme.axis());
    }
    let (fine_n, coarse_n) = view.units.force_steps_n();
    let step_n = if area.height >= 18 { fine_n } else { coarse_n };
    let tick = |k: u32| f64::from(k) * step_n;
    for tension_n in (0..N_TICKS_MAX).map(tick).take_while(|tension_n| *tension_n < rows.top_n) {
        let text = format!("{:>4}", view.units.force_mark(tension_n));
        buffer.set_stringn(area.left(), rows.row(tension_n), text, 5, view.theme.quiet());
    }
}

fn draw_now(buffer: &mut Buffer, area: Rect, rows: &Rows, scale: &Scale, view: &ViewState) {
    let line = view.line_tension();
    let Some(tension_n) = line.value else { return };
    let row = rows.row(tension_n);
    let fresh = line.freshness == Freshness::Fresh && view.x().freshness == Freshness::Fresh;
    buffer[(area.left() + 5, row)].set_symbol(view.theme.pointer()).set_style(view.theme.strong());
    let Some(x_m) = view.x().value else { return };
    let column = scale.column(x_m);
    let sign = if fresh { view.theme.now() } else { view.theme.now_stale() };
    buffer[(column, row)].set_symbol(sign).set_style(view.theme.strong());
    let text = format!(" {} ", view.units.force(tension_n));
    let room = usize::from(area.right().saturating_sub(column + 1));
    buffer.set_stringn(column + 1, row, text, room, view.theme.strong());
}
