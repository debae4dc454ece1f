//! Series -> SVG. Curves, grid and ticks are drawn without any lettering; titles, tick labels and names are handed to
//! the typesetter with their places, so that they are real text in the note's own face. Solves nothing.
//!
//! The drawing library's coordinates are whole numbers, so the canvas is ten times larger than the figure in points. Its
//! dashed series knows one dash length only; curves are told apart by patterns of dashes and dots, cut here.

mod line;
mod ticks;

pub use ticks::{Tick, ticks};

use plotters::prelude::{
    BLACK, Circle, DrawingBackend, IntoDrawingArea, PathElement, RGBColor, Rectangle, SVGBackend, WHITE,
};
use plotters::style::{Color, ShapeStyle};

use crate::study::{AxisFinding, Curve, CurveStyle, FigureFinding};

/// Size of the plotting area and of the borders around it, in points.
const PLOT: (f64, f64) = (240.0, 160.0);
const LEFT: f64 = 30.0;
const RIGHT: f64 = 106.0;
const TOP: f64 = 20.0;
const BOTTOM: f64 = 32.0;
/// Where the sample of a curve's line begins and ends, and where its name begins, from the right side of the plot.
const SAMPLE: (f64, f64) = (5.0, 22.0);
const NAME: f64 = 26.0;
/// Units of the canvas per point.
const SCALE: f64 = 10.0;
/// Letters in one line of a name, and height of a line in points.
const NAME_LETTERS: usize = 22;
const NAME_LINE: f64 = 9.5;

/// A figure without lettering, and the lettering with its places in points from the upper left corner.
#[derive(Clone, PartialEq, Debug)]
pub struct Drawing {
    pub svg: String,
    pub width: f64,
    pub height: f64,
    /// Left, top, width and height of the plotting area.
    pub plot: [f64; 4],
    /// Labelled ticks: place along the axis and label.
    pub x_ticks: Vec<(f64, String)>,
    pub y_ticks: Vec<(f64, String)>,
    /// Names of curves at the right border begin here.
    pub name: f64,
    /// Height of each name, and the name.
    pub names: Vec<(f64, String)>,
    /// Names of marks: place of the mark and name.
    pub marks: Vec<(f64, f64, String)>,
}

/// Draws a figure.
pub fn draw(figure: &FigureFinding) -> Drawing {
    let x = Scale::new(&figure.x, LEFT, LEFT + PLOT.0);
    let y = Scale::new(&figure.y, TOP + PLOT.1, TOP);
    let (width, height) = (LEFT + PLOT.0 + RIGHT, TOP + PLOT.1 + BOTTOM);
    let x_all = x.ticks(7);
    let y_all = y.ticks(6);
    let mut svg = String::new();
    let mut ends: Vec<(f64, &Curve)> = Vec::new();
    {
        let area = SVGBackend::with_string(&mut svg, (units(width) as u32, units(height) as u32))
            .into_drawing_area();
        let mut pen = Pen { area: &area };
        for (at, label) in &x_all {
            pen.tick((*at, TOP + PLOT.1), (*at, TOP), !label.is_empty());
        }
        for (at, label) in &y_all {
            pen.tick((LEFT, *at), (LEFT + PLOT.0, *at), !label.is_empty());
        }
        pen.frame();
        for curve in &figure.curves {
            let runs = line::runs(&curve.points, &x, &y);
            runs.iter().for_each(|run| pen.stroke(run, curve.style));
            if let Some(end) = line::name_end(&runs) {
                leader(&mut pen, end);
                ends.push((end.1, curve));
            }
        }
        spread_names(&mut ends);
        for (at, curve) in &ends {
            let border = LEFT + PLOT.0;
            pen.stroke(&[(border + SAMPLE.0, *at), (border + SAMPLE.1, *at)], curve.style);
        }
        for mark in &figure.marks {
            if let (Some(px), Some(py)) = (x.inside(mark.x), y.inside(mark.y)) {
                pen.mark((px, py));
            }
        }
        // A string cannot fail to be written.
        let _ = area.present();
    }
    let labelled = |all: Vec<(f64, String)>| all.into_iter().filter(|(_, label)| !label.is_empty()).collect();
    let marks = figure
        .marks
        .iter()
        .filter_map(|mark| Some((x.inside(mark.x)?, y.inside(mark.y)?, mark.name.clone())))
        .collect();
    Drawing {
        svg,
        width,
        height,
        plot: [LEFT, TOP, PLOT.0, PLOT.1],
        x_ticks: labelled(x_all),
        y_ticks: labelled(y_all),
        name: LEFT + PLOT.0 + NAME,
        names: ends.into_iter().map(|(at, curve)| (at, curve.name.clone())).collect(),
        marks,
    }
}

/// From the values of an axis to points on the paper.
pub(crate) struct Scale<'a> {
    axis: &'a AxisFinding,
    from: f64,
    to: f64,
    low: f64,
    high: f64,
    logarithmic: bool,
}

impl<'a> Scale<'a> {
    fn new(axis: &'a AxisFinding, from: f64, to: f64) -> Scale<'a> {
        let good = axis.low.is_finite() && axis.high.is_finite() && axis.low < axis.high;
        let (low, high) = if good { (axis.low, axis.high) } else { (0.0, 1.0) };
        let logarithmic = axis.logarithmic && low > 0.0;
        let bend = |v: f64| if logarithmic { libm::log10(v) } else { v };
        Scale { axis, from, to, low: bend(low), high: bend(high), logarithmic }
    }

    /// Place of a value (SI), which may lie outside the axis; `None` where it has none.
    pub(crate) fn place(&self, value: f64) -> Option<f64> {
        if !value.is_finite() {
            return None;
        }
        let bent = match self.logarithmic {
            true if value <= 0.0 => self.low - 10.0 * (self.high - self.low),
            true => libm::log10(value),
            false => value,
        };
        let part = ((bent - self.low) / (self.high - self.low)).clamp(-1e3, 1e3);
        Some(self.from + part * (self.to - self.from))
    }

    fn inside(&self, value: f64) -> Option<f64> {
        let slack = 0.01;
        let (least, most) = (self.from.min(self.to) - slack, self.from.max(self.to) + slack);
        self.place(value).filter(|at| (least..=most).contains(at))
    }

    /// Least and greatest place on the axis.
    pub(crate) fn ends(&self) -> (f64, f64) {
        (self.from.min(self.to), self.from.max(self.to))
    }

    /// Ticks in the axis's unit: place and label.
    fn ticks(&self, wanted: usize) -> Vec<(f64, String)> {
        let unit = &self.axis.unit;
        let factor = if unit.factor == 0.0 { 1.0 } else { unit.factor };
        let bound = |v: f64| if self.logarithmic { libm::pow(10.0, v) } else { v };
        let shown = |v: f64| (bound(v) - unit.offset) / factor;
        ticks(shown(self.low), shown(self.high), self.logarithmic, wanted)
            .into_iter()
            .filter_map(|tick| Some((self.inside(tick.at * factor + unit.offset)?, tick.label)))
            .collect()
    }
}

/// Dash pattern (drawn, left out, drawn ... in points; empty for a solid line) and weight in points. Told apart without
/// colour.
fn stroke(style: CurveStyle) -> (&'static [f64], f64) {
    match style {
        CurveStyle::Nominal => (&[], 1.3),
        CurveStyle::Low => (&[5.0, 2.6], 0.8),
        CurveStyle::High => (&[1.2, 2.2], 1.0),
        CurveStyle::LoadLine => (&[9.0, 2.2, 1.4, 2.2], 0.8),
        CurveStyle::Limit => (&[12.0, 3.0], 1.6),
        CurveStyle::Family => (&[], 0.7),
    }
}

/// Moves names apart that would overprint, keeping their order, inside the height of the plot where that is possible.
fn spread_names(names: &mut [(f64, &Curve)]) {
    names.sort_by(|a, b| a.0.total_cmp(&b.0));
    // Half of the height that a name takes, on either side of its middle.
    let half = |curve: &Curve| {
        let lines = curve.name.chars().count().div_ceil(NAME_LETTERS).clamp(1, 3);
        (lines as f64 * NAME_LINE + 1.0) / 2.0
    };
    let mut least = f64::NEG_INFINITY;
    for (at, curve) in names.iter_mut() {
        *at = at.max(least + half(curve));
        least = *at + half(curve);
    }
    let mut most = TOP + PLOT.1 + BOTTOM / 2.0;
    for (at, curve) in names.iter_mut().rev() {
        *at = at.min(most - half(curve));
        most = *at - half(curve);
    }
}

/// A hairline from the end of a curve inside the plot to the right border, so that its name finds it.
fn leader<DB: DrawingBackend>(pen: &mut Pen<DB>, end: (f64, f64)) {
    let border = LEFT + PLOT.0;
    if end.0 < border - 2.0 {
        pen.path(&[end, (border, end.1)], 0.25, &GREY);
    }
}

const GREY: RGBColor = RGBColor(150, 150, 150);
const PALE: RGBColor = RGBColor(214, 214, 214);

struct Pen<'a, DB: DrawingBackend> {
    area: &'a plotters::drawing::DrawingArea<DB, plotters::coord::Shift>,
}

impl<DB: DrawingBackend> Pen<'_, DB> {
    // Drawing into a string cannot fail; the results of `draw` carry nothing.
    fn path(&mut self, points: &[(f64, f64)], weight: f64, colour: &RGBColor) {
        let points: Vec<(i32, i32)> = points.iter().map(|(x, y)| (units(*x), units(*y))).collect();
        let _ = self.area.draw(&PathElement::new(points, line_style(weight, colour)));
    }

    fn stroke(&mut self, run: &[(f64, f64)], style: CurveStyle) {
        let (pattern, weight) = stroke(style);
        line::dashes(run, pattern).iter().for_each(|dash| self.path(dash, weight, &BLACK));
    }

    /// A grid line from the axis across the plot, with a tick outside it.
    fn tick(&mut self, from: (f64, f64), to: (f64, f64), labelled: bool) {
        if labelled {
            self.path(&[from, to], 0.3, &PALE);
        }
        let length = if labelled { 3.5 } else { 1.8 };
        let outside = if from.0 == to.0 { (from.0, from.1 + length) } else { (from.0 - length, from.1) };
        self.path(&[from, outside], 0.5, &BLACK);
    }

    fn frame(&mut self) {
        let (left, top, right, bottom) = (LEFT, TOP, LEFT + PLOT.0, TOP + PLOT.1);
        let corners = [(units(left), units(top)), (units(right), units(bottom))];
        let _ = self.area.draw(&Rectangle::new(corners, line_style(0.5, &BLACK)));
    }

    fn mark(&mut self, at: (f64, f64)) {
        let centre = (units(at.0), units(at.1));
        let _ = self.area.draw(&Circle::new(centre, units(2.8), WHITE.filled()));
        let _ = self.area.draw(&Circle::new(centre, units(2.8), line_style(1.1, &BLACK)));
        let _ = self.area.draw(&Circle::new(centre, units(0.8), BLACK.filled()));
    }
}

fn line_style(weight: f64, colour: &RGBColor) -> ShapeStyle {
    colour.stroke_width((weight * SCALE).round() as u32)
}

fn units(points: f64) -> i32 {
    (points * SCALE).round().clamp(-1e6, 1e6) as i32
}
