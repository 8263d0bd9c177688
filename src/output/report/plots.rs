//! Charts as inline SVG, drawn by plotters, coloured by the page's style sheet.
//!
//! Drawn four times too large, for fine lines, and scaled down by the page. Colours are stand-ins
//! that become variables of the style sheet, so that a chart follows light and dark.

use plotters::prelude::*;
use plotters::style::text_anchor::{HPos, Pos, VPos};

use super::axis::Axis;

/// How much larger than shown.
const FINE: i32 = 4;
/// Width of a chart as shown.
const WIDTH: i32 = 360;

/// Stand-ins for the style sheet's colours.
const INK: RGBColor = RGBColor(1, 1, 1);
const SOFT: RGBColor = RGBColor(2, 2, 2);
const DATA: RGBColor = RGBColor(3, 3, 3);
const MODEL: RGBColor = RGBColor(4, 4, 4);
const WHOLE: RGBColor = RGBColor(5, 5, 5);
const PAPER: RGBColor = RGBColor(6, 6, 6);
const NAMES: [(RGBColor, &str); 6] = [
    (INK, "var(--ink)"),
    (SOFT, "var(--rule)"),
    (DATA, "var(--data)"),
    (MODEL, "var(--model)"),
    (WHOLE, "var(--whole)"),
    (PAPER, "var(--paper)"),
];

type Area<'a> = DrawingArea<SVGBackend<'a>, plotters::coord::Shift>;
type Drawn<T> = Result<T, DrawingAreaErrorKind<std::io::Error>>;
type Chart<'a, 'b> = ChartContext<'a, SVGBackend<'b>, plotters::coord::cartesian::Cartesian2d<Axis, Axis>>;

/// What was observed in a class.
#[derive(Debug, Clone, Copy)]
pub(super) struct Observed {
    /// Smallest and largest value of the class.
    pub class: (f64, f64),
    /// Where its point stands.
    pub at: f64,
    /// Observed over available share; 0 where nothing was observed.
    pub ratio: f64,
    /// Its interval (for nothing observed: from the foot to the largest ratio still likely).
    pub interval: (f64, f64),
    /// Mean of the whole candidate in the class.
    pub whole: f64,
}

/// A fitted curve over what was observed.
pub(super) struct CurveChart {
    pub across: Axis,
    pub up: Axis,
    pub titles: (String, String),
    pub observed: Vec<Observed>,
    pub line: Vec<(f64, f64)>,
}

/// Draws it.
pub(super) fn curve(c: &CurveChart) -> String {
    sheet(250, |area| {
        let mut chart = frame(area, (&c.across, &c.up), (&c.titles.0, &c.titles.1))?;
        let foot = c.up.low;
        let even = [(c.across.low, 1.0), (c.across.high, 1.0)];
        chart.draw_series(DashedLineSeries::new(even, 4 * FINE, 4 * FINE, INK.stroke_width(FINE as u32)))?;
        for o in &c.observed {
            // a class of a single value still gets a dash that can be seen
            let from = c.across.at((c.across.along(o.class.0).min(c.across.along(o.at) - 0.012)).max(0.0));
            let to = c.across.at((c.across.along(o.class.1).max(c.across.along(o.at) + 0.012)).min(1.0));
            let height = o.whole.max(foot);
            chart.draw_series(LineSeries::new(
                [(from, height), (to, height)],
                WHOLE.stroke_width(5 * FINE as u32),
            ))?;
        }
        chart.draw_series(LineSeries::new(c.line.iter().copied(), MODEL.stroke_width(2 * FINE as u32)))?;
        let size = if c.observed.len() > 12 { 3 } else { 4 } * FINE;
        for o in &c.observed {
            let (low, high) = (o.interval.0.max(foot), o.interval.1.max(foot));
            let thin = DATA.stroke_width(3 * FINE as u32 / 2);
            chart.draw_series(LineSeries::new([(o.at, low), (o.at, high)], thin))?;
            let point = (o.at, o.ratio.max(foot));
            let fill = if o.ratio > 0.0 { DATA } else { PAPER };
            chart.draw_series([Circle::new(point, size, fill.filled())])?;
            chart.draw_series([Circle::new(point, size, thin)])?;
        }
        Ok(())
    })
}

/// A criterion over the values tried, and the one chosen.
pub(super) struct CriterionChart {
    pub across: Axis,
    pub up: Axis,
    pub titles: (String, String),
    pub tried: Vec<(f64, f64)>,
    pub chosen: f64,
}

/// Draws it.
pub(super) fn criterion(c: &CriterionChart) -> String {
    sheet(230, |area| {
        let mut chart = frame(area, (&c.across, &c.up), (&c.titles.0, &c.titles.1))?;
        let mark = [(c.chosen, c.up.low), (c.chosen, c.up.high)];
        chart.draw_series(DashedLineSeries::new(mark, 5 * FINE, 3 * FINE, INK.stroke_width(FINE as u32)))?;
        chart.draw_series(LineSeries::new(c.tried.iter().copied(), MODEL.stroke_width(2 * FINE as u32)))?;
        let points = c.tried.iter().map(|p| Circle::new(*p, 3 * FINE, MODEL.filled()));
        chart.draw_series(points)?;
        Ok(())
    })
}

/// One line of a chart of intervals.
pub(super) struct Interval {
    pub name: String,
    pub value: f64,
    pub ends: Option<(f64, f64)>,
    pub marked: bool,
}

/// Draws figures with their intervals below each other, on one axis.
pub(super) fn intervals(rows: &[Interval], across: &Axis, title: &str) -> String {
    let (step, foot) = (38, 46);
    let height = step * rows.len() as i32 + foot + 8;
    let up = Axis::new(super::axis::Shape::Linear, 0.0, rows.len() as f64, 1.0, 1);
    sheet(height, |area| {
        let mut chart = ChartBuilder::on(area)
            .margin(4 * FINE)
            .set_label_area_size(LabelAreaPosition::Bottom, (foot - 4) * FINE)
            .margin_right(14 * FINE)
            .margin_left(14 * FINE)
            .build_cartesian_2d(across.clone(), up)?;
        let format = |v: &f64| across.label(*v);
        chart
            .configure_mesh()
            .disable_y_mesh()
            .disable_y_axis()
            .x_label_formatter(&format)
            .label_style(text(11))
            .axis_desc_style(text(12))
            .x_desc(title)
            .bold_line_style(SOFT.stroke_width(FINE as u32))
            .light_line_style(TRANSPARENT)
            .axis_style(INK.stroke_width(FINE as u32))
            .draw()?;
        rows.iter()
            .enumerate()
            .try_for_each(|(i, row)| one_interval(&mut chart, across, (rows.len(), i), row))
    })
}

fn one_interval(chart: &mut Chart, across: &Axis, (of, i): (usize, usize), row: &Interval) -> Drawn<()> {
    let at = of as f64 - i as f64 - 0.68;
    let colour = if row.marked { DATA } else { MODEL };
    if let Some((low, high)) = row.ends {
        chart.draw_series(LineSeries::new([(low, at), (high, at)], colour.stroke_width(3 * FINE as u32)))?;
    }
    chart.draw_series([Circle::new((row.value, at), 5 * FINE, colour.filled())])?;
    let style = text(12).pos(Pos::new(HPos::Left, VPos::Bottom));
    chart.draw_series([Text::new(row.name.clone(), (across.low, at + 0.24), style)])?;
    Ok(())
}

fn text(size: i32) -> TextStyle<'static> {
    // plotters takes the line height, 1.24 times the size of the letters
    TextStyle::from(("sans-serif", f64::from(size * FINE) * 1.24).into_font()).color(&INK)
}

/// Axes, ticks and titles.
fn frame<'a, 'b>(
    area: &'a Area<'b>,
    (across, up): (&Axis, &Axis),
    titles: (&str, &str),
) -> Drawn<Chart<'a, 'b>> {
    let widest = up.ticks.iter().map(|t| up.label(*t).chars().count()).max().unwrap_or(1) as i32;
    let mut chart = ChartBuilder::on(area)
        .margin_top(8 * FINE)
        .margin_right(16 * FINE)
        .set_label_area_size(LabelAreaPosition::Left, (28 + 7 * widest) * FINE)
        .set_label_area_size(LabelAreaPosition::Bottom, 42 * FINE)
        .build_cartesian_2d(across.clone(), up.clone())?;
    let (on_x, on_y) = (|v: &f64| across.label(*v), |v: &f64| up.label(*v));
    chart
        .configure_mesh()
        .disable_x_mesh()
        .x_label_formatter(&on_x)
        .y_label_formatter(&on_y)
        .label_style(text(11))
        .axis_desc_style(text(12))
        .x_desc(titles.0)
        .y_desc(titles.1)
        .set_all_tick_mark_size(4 * FINE)
        .bold_line_style(SOFT.stroke_width(FINE as u32))
        .light_line_style(TRANSPARENT)
        .axis_style(INK.stroke_width(FINE as u32))
        .draw()?;
    Ok(chart)
}

/// Draws on a sheet of a height and hands it back as an SVG element for the page.
fn sheet(height: i32, draw: impl FnOnce(&Area) -> Drawn<()>) -> String {
    let (width, height) = ((WIDTH * FINE) as u32, (height * FINE) as u32);
    let mut svg = String::new();
    {
        let area = SVGBackend::with_string(&mut svg, (width, height)).into_drawing_area();
        draw(&area).and_then(|()| area.present()).expect("drawing into memory does not fail");
    }
    let body = svg.split_once('>').map_or("", |(_, rest)| rest);
    let mut out = format!("<svg class=\"plot\" viewBox=\"0 0 {width} {height}\" aria-hidden=\"true\">{body}");
    for (colour, name) in NAMES {
        out = out.replace(
            &format!("\"#{:02X}{:02X}{:02X}\"", colour.0, colour.1, colour.2),
            &format!("\"{name}\""),
        );
    }
    out
}
