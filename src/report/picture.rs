//! One picture as plain data, and its drawing as SVG: the only place that knows the plotting library.
//!
//! Lines differ by stroke as well as by colour (palette after M. Okabe and K. Ito, "Color Universal Design", 2008), and
//! every picture carries its text alternative as the SVG's title. Drawn at twice the size it is shown at, because the
//! library places points on whole pixels.

use plotters::coord::types::RangedCoordf64;
use plotters::element::DashedPathElement;
use plotters::prelude::*;
use plotters::style::text_anchor::{HPos, Pos, VPos};
use thiserror::Error;

use super::decimate::Run;
use super::html::escaped;
use super::labels;

pub(super) const WIDTH: u32 = 1800;
const KEY_HEIGHT: i32 = 58;
/// Of one row of labels above the plot.
const ROW_HEIGHT: i32 = 38;
const LEFT: i32 = 140;
const BELOW: i32 = 84;
const RIGHT: i32 = 28;
const TEXT_PX: i32 = 32;
/// Mean width of a letter of the text, in pixels; only to keep labels apart.
const LETTER_PX: f64 = 14.0;
/// How strongly a ribbon is inked.
const RIBBON: f64 = 0.16;
const GREY: RGBColor = RGBColor(0x5a, 0x62, 0x6b);
const PAPER: RGBColor = RGBColor(0xff, 0xff, 0xff);

/// A picture could not be drawn.
#[derive(Debug, Error)]
#[error("the picture {title:?} could not be drawn: {reason}")]
pub struct PictureError {
    pub title: String,
    pub reason: String,
}

/// The colours in use. Black for what is neither measured nor modelled.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Ink {
    Blue,
    Vermilion,
    Black,
}

impl Ink {
    const fn colour(self) -> RGBColor {
        match self {
            Self::Blue => RGBColor(0x00, 0x5a, 0x9c),
            Self::Vermilion => RGBColor(0xd5, 0x5e, 0x00),
            Self::Black => RGBColor(0x1b, 0x1f, 0x24),
        }
    }
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Stroke {
    Solid,
    Dashed,
}

#[derive(Debug, Clone, PartialEq)]
pub(super) struct Line {
    pub(super) name: String,
    pub(super) ink: Ink,
    pub(super) stroke: Stroke,
    pub(super) runs: Vec<Run>,
}

/// A band about a line: its runs go along the upper edge and back along the lower one.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Ribbon {
    pub(super) name: String,
    pub(super) ink: Ink,
    pub(super) outline: Run,
}

/// A stretch of the x axis with a name, such as a phase.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Stretch {
    pub(super) name: String,
    pub(super) from: f64,
    pub(super) to: f64,
}

#[derive(Debug, Clone, PartialEq)]
pub(super) struct Mark {
    pub(super) label: String,
    pub(super) at: f64,
}

#[derive(Debug, Clone, PartialEq, Default)]
pub(super) struct Picture {
    pub(super) title: String,
    /// What the picture shows, in words with numbers.
    pub(super) alternative: String,
    pub(super) height: u32,
    pub(super) x_label: String,
    pub(super) y_label: String,
    pub(super) x_range: (f64, f64),
    pub(super) y_range: (f64, f64),
    pub(super) stretches: Vec<Stretch>,
    pub(super) ribbons: Vec<Ribbon>,
    pub(super) lines: Vec<Line>,
    /// Vertical lines, at x.
    pub(super) marks: Vec<Mark>,
    /// Horizontal lines, at y.
    pub(super) levels: Vec<Mark>,
}

type Chart<'a, 'b> = ChartContext<'a, SVGBackend<'b>, Cartesian2d<RangedCoordf64, RangedCoordf64>>;
type Drawn = Result<(), Box<dyn std::error::Error>>;

impl Picture {
    /// How many pixel columns the plot has: finer detail than this can't be seen.
    pub(super) const fn n_columns() -> usize {
        (WIDTH as i32 - LEFT - RIGHT) as usize
    }

    /// Inline SVG with its text alternative.
    pub(super) fn svg(&self) -> Result<String, PictureError> {
        let mut svg = String::new();
        self.draw(&mut svg).map_err(|error| PictureError { title: self.title.clone(), reason: error.to_string() })?;
        let (title, alternative) = (escaped(&self.title), escaped(&self.alternative));
        let opening = format!("<svg role=\"img\" aria-label=\"{title}: {alternative}\" ");
        Ok(svg.replacen("<svg ", &opening, 1))
    }

    fn draw(&self, svg: &mut String) -> Drawn {
        let root = SVGBackend::with_string(svg, (WIDTH, self.height)).into_drawing_area();
        root.fill(&PAPER)?;
        self.draw_key(&root)?;
        let mut chart = ChartBuilder::on(&root)
            .margin_top(KEY_HEIGHT + ROW_HEIGHT * self.n_label_rows() as i32)
            .margin_right(RIGHT)
            .x_label_area_size(BELOW)
            .y_label_area_size(LEFT)
            .build_cartesian_2d(self.x_range.0..self.x_range.1, self.y_range.0..self.y_range.1)?;
        self.draw_stretches(&mut chart)?;
        self.draw_mesh(&mut chart)?;
        self.draw_ribbons(&mut chart)?;
        self.draw_levels(&mut chart)?;
        self.draw_lines(&mut chart)?;
        self.draw_marks(&mut chart)?;
        root.present()?;
        Ok(())
    }

    /// Names of lines and ribbons above the plot, each with a sample of its stroke.
    fn draw_key(&self, root: &DrawingArea<SVGBackend<'_>, plotters::coord::Shift>) -> Drawn {
        let mut x = LEFT;
        let y = KEY_HEIGHT / 2;
        for ribbon in &self.ribbons {
            let corners = [(x, y - 9), (x + 60, y + 9)];
            root.draw(&Rectangle::new(corners, ribbon.ink.colour().mix(RIBBON).filled()))?;
            x = draw_key_name(root, &ribbon.name, x, y)?;
        }
        for line in &self.lines {
            let ends = vec![(x, y), (x + 60, y)];
            match line.stroke {
                Stroke::Solid => root.draw(&PathElement::new(ends, line.ink.colour().stroke_width(4)))?,
                Stroke::Dashed => root.draw(&dashes(ends, line.ink.colour().stroke_width(4)))?,
            }
            x = draw_key_name(root, &line.name, x, y)?;
        }
        Ok(())
    }

    fn draw_stretches(&self, chart: &mut Chart<'_, '_>) -> Drawn {
        let (bottom, top) = self.y_range;
        let px_per_x = Self::n_columns() as f64 / (self.x_range.1 - self.x_range.0);
        for (index, stretch) in self.stretches.iter().enumerate() {
            let (from, to) = (stretch.from.max(self.x_range.0), stretch.to.min(self.x_range.1));
            if to <= from {
                continue;
            }
            let shade = if index % 2 == 0 { 0.05 } else { 0.12 };
            chart.draw_series([Rectangle::new([(from, bottom), (to, top)], GREY.mix(shade).filled())])?;
            if (to - from) * px_per_x > LETTER_PX * stretch.name.chars().count() as f64 {
                let middle = EmptyElement::at(((from + to) / 2.0, top));
                let name = Text::new(stretch.name.clone(), (0, -8), text(HPos::Center, VPos::Bottom));
                chart.draw_series([middle + name])?;
            }
        }
        Ok(())
    }

    fn draw_mesh(&self, chart: &mut Chart<'_, '_>) -> Drawn {
        let n_rows = (self.height / 110).max(3) as usize;
        let labels = ("sans-serif", TEXT_PX).into_font().color(&Ink::Black.colour());
        let (x_step, y_step) = (self.x_range.1 - self.x_range.0, self.y_range.1 - self.y_range.0);
        chart
            .configure_mesh()
            .light_line_style(TRANSPARENT)
            .bold_line_style(GREY.mix(0.25))
            .axis_style(GREY)
            .x_labels(12)
            .y_labels(n_rows)
            .x_label_formatter(&|x| tick(*x, x_step / 12.0))
            .y_label_formatter(&|y| tick(*y, y_step / n_rows as f64))
            .label_style(labels.clone())
            .axis_desc_style(labels)
            .x_desc(self.x_label.as_str())
            .y_desc(self.y_label.as_str())
            .draw()?;
        Ok(())
    }

    fn draw_ribbons(&self, chart: &mut Chart<'_, '_>) -> Drawn {
        for ribbon in &self.ribbons {
            chart.draw_series([Polygon::new(ribbon.outline.clone(), ribbon.ink.colour().mix(RIBBON).filled())])?;
        }
        Ok(())
    }

    fn draw_lines(&self, chart: &mut Chart<'_, '_>) -> Drawn {
        for line in &self.lines {
            let style = line.ink.colour().stroke_width(3);
            for run in &line.runs {
                match line.stroke {
                    Stroke::Solid => chart.draw_series([PathElement::new(run.clone(), style)])?,
                    Stroke::Dashed => chart.draw_series([dashes(run.clone(), style)])?,
                };
            }
        }
        Ok(())
    }

    fn draw_levels(&self, chart: &mut Chart<'_, '_>) -> Drawn {
        let (bottom, top) = self.y_range;
        for level in &self.levels {
            let ends = vec![(self.x_range.0, level.at), (self.x_range.1, level.at)];
            let line = DashedPathElement::new(ends, 22, 10, Ink::Black.colour().stroke_width(2));
            chart.draw_series([line])?;
            let near_top = (level.at - bottom) > 0.9 * (top - bottom);
            let (dy, v_pos) = if near_top { (8, VPos::Top) } else { (-8, VPos::Bottom) };
            let place = EmptyElement::at((self.x_range.1, level.at));
            chart.draw_series([place + Text::new(level.label.clone(), (-10, dy), text(HPos::Right, v_pos))])?;
        }
        Ok(())
    }

    /// Vertical marks, each rising to its label above the plot.
    fn draw_marks(&self, chart: &mut Chart<'_, '_>) -> Drawn {
        let (bottom, top) = self.y_range;
        let rows = labels::rows(&self.mark_spans());
        let n_rows = labels::n_rows(&rows);
        for (mark, row) in self.marks.iter().zip(rows) {
            let line = DashedPathElement::new(vec![(mark.at, bottom), (mark.at, top)], 5, 8, GREY.stroke_width(3));
            chart.draw_series([line])?;
            let above = ROW_HEIGHT * (n_rows - row) as i32;
            let rise = PathElement::new(vec![(0, 0), (0, 6 - above)], GREY.stroke_width(2));
            let (h_pos, dx) = if self.label_is_left_of(mark) { (HPos::Right, -8) } else { (HPos::Left, 8) };
            let label = Text::new(mark.label.clone(), (dx, 4 - above), text(h_pos, VPos::Top));
            chart.draw_series([EmptyElement::at((mark.at, top)) + rise + label])?;
        }
        Ok(())
    }

    /// Where a mark's line stands in the plot, and how wide its label is, in pixels.
    fn mark_place(&self, mark: &Mark) -> (f64, f64) {
        let px_per_x = Self::n_columns() as f64 / (self.x_range.1 - self.x_range.0);
        ((mark.at - self.x_range.0) * px_per_x, LETTER_PX * mark.label.chars().count() as f64 + 24.0)
    }

    /// Whether a mark's label would run out of the picture to the right of its line.
    fn label_is_left_of(&self, mark: &Mark) -> bool {
        let (at, width) = self.mark_place(mark);
        at + width > f64::from(Self::n_columns() as u32 + RIGHT as u32)
    }

    /// Left and right edges of the marks' labels, in pixels of the plot.
    fn mark_spans(&self) -> Vec<(f64, f64)> {
        let span = |mark: &Mark| {
            let (at, width) = self.mark_place(mark);
            if self.label_is_left_of(mark) { (at - width, at) } else { (at, at + width) }
        };
        self.marks.iter().map(span).collect()
    }

    /// Rows of labels between the key and the plot: stretches take one, marks as many as keep them apart.
    fn n_label_rows(&self) -> usize {
        labels::n_rows(&labels::rows(&self.mark_spans())).max(usize::from(!self.stretches.is_empty()))
    }
}

fn dashes<Coord: Clone>(points: Vec<Coord>, style: ShapeStyle) -> DashedPathElement<std::vec::IntoIter<Coord>, i32> {
    DashedPathElement::new(points, 16, 8, style)
}

fn draw_key_name(
    root: &DrawingArea<SVGBackend<'_>, plotters::coord::Shift>,
    name: &str,
    x: i32,
    y: i32,
) -> Result<i32, Box<dyn std::error::Error>> {
    root.draw(&Text::new(name.to_owned(), (x + 72, y), text(HPos::Left, VPos::Center)))?;
    Ok(x + 72 + (LETTER_PX * name.chars().count() as f64) as i32 + 44)
}

fn text(h_pos: HPos, v_pos: VPos) -> TextStyle<'static> {
    ("sans-serif", TEXT_PX).into_font().color(&Ink::Black.colour()).pos(Pos::new(h_pos, v_pos))
}

/// A tick's label with as many decimals as its step needs, never "-0".
fn tick(value: f64, step: f64) -> String {
    let decimals = (-step.abs().log10().floor()).clamp(0.0, 6.0) as usize;
    let label = format!("{value:.decimals$}");
    if label.trim_start_matches(['-', '0', '.']).is_empty() { label.trim_start_matches('-').to_owned() } else { label }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_tick_has_the_decimals_its_step_needs() {
        assert_eq!(tick(2.5, 0.5), "2.5");
        assert_eq!(tick(700.0, 100.0), "700");
        assert_eq!(tick(-0.0, 0.1), "0.0");
        assert_eq!(tick(-0.004, 0.01), "0.00");
        assert_eq!(tick(-0.2, 0.1), "-0.2");
    }

    #[test]
    fn a_picture_without_any_line_is_still_drawn_with_its_alternative() {
        let picture = Picture {
            title: "tension <N>".into(),
            alternative: "nothing was recorded".into(),
            height: 400,
            x_range: (0.0, 1.0),
            y_range: (0.0, 1.0),
            ..Picture::default()
        };
        let svg = picture.svg().expect("it can be drawn");
        assert!(svg.starts_with("<svg role=\"img\" aria-label=\"tension &lt;N&gt;: nothing was recorded\" "), "{svg}");
        assert!(svg.trim_end().ends_with("</svg>"));
    }
}
