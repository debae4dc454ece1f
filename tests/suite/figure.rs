//! Figures: round ticks, curves inside the plot, lines told apart without colour, no lettering in the drawing.

use qsheaf::figure::{draw, ticks};
use qsheaf::markup::Math;
use qsheaf::quantity::{Dimension, Kind, Unit};
use qsheaf::study::{AxisFinding, Curve, CurveStyle, FigureFinding, Mark};

fn axis(low: f64, high: f64, logarithmic: bool) -> AxisFinding {
    AxisFinding {
        symbol: Math::Symbol { base: "V".into(), subscript: "CE".into(), owner: "Q1".into() },
        title: "Collector voltage".into(),
        unit: Unit { symbol: "mV".into(), kind: Kind::of(Dimension::VOLT), factor: 1e-3, offset: 0.0 },
        low,
        high,
        logarithmic,
    }
}

fn figure(curves: Vec<Curve>) -> FigureFinding {
    FigureFinding {
        title: "t".into(),
        alt: "a".into(),
        x: axis(0.0, 1.0, false),
        y: axis(0.0, 1.0, false),
        curves,
        marks: vec![
            Mark { name: "here".into(), x: 0.5, y: 0.5 },
            Mark { name: "outside".into(), x: 5.0, y: 0.5 },
        ],
    }
}

fn curve(style: CurveStyle, points: Vec<(f64, Option<f64>)>) -> Curve {
    Curve { name: format!("{style:?}"), points, style }
}

fn labels(low: f64, high: f64, logarithmic: bool, wanted: usize) -> Vec<String> {
    ticks(low, high, logarithmic, wanted)
        .into_iter()
        .map(|tick| tick.label)
        .filter(|label| !label.is_empty())
        .collect()
}

#[test]
fn ticks_are_one_two_or_five_times_a_power_of_ten() {
    assert_eq!(labels(0.0, 14.0, false, 7), ["0", "2", "4", "6", "8", "10", "12", "14"]);
    assert_eq!(labels(-0.3, 0.32, false, 6), ["−0.2", "0.0", "0.2"]);
    assert_eq!(labels(-20.0, 50.0, false, 7), ["−20", "−10", "0", "10", "20", "30", "40", "50"]);
    assert_eq!(labels(0.0, 4.7e4, false, 5), ["0", "10000", "20000", "30000", "40000"]);
    assert_eq!(labels(0.01, 1000.0, true, 7), ["0.01", "0.1", "1", "10", "100", "1000"]);
    assert_eq!(labels(10.0, 500.0, true, 7), ["10", "20", "50", "100", "200", "500"]);
    assert_eq!(labels(1e-9, 1e-3, true, 7), ["10⁻⁹", "10⁻⁸", "10⁻⁷", "10⁻⁶", "10⁻⁵", "10⁻⁴", "0.001"]);
}

#[test]
fn axes_without_extent_have_no_ticks() {
    for (low, high) in [(1.0, 1.0), (2.0, 1.0), (f64::NAN, 1.0), (0.0, f64::INFINITY)] {
        assert!(ticks(low, high, false, 5).is_empty());
        let mut odd = figure(vec![curve(CurveStyle::Nominal, vec![(0.0, Some(0.0)), (1.0, Some(1.0))])]);
        odd.x = axis(low, high, true);
        assert!(draw(&odd).svg.starts_with("<svg"));
    }
}

#[test]
fn ticks_are_labelled_in_the_unit_of_the_axis() {
    let drawn = draw(&figure(vec![]));
    let labels: Vec<&str> = drawn.x_ticks.iter().map(|(_, label)| label.as_str()).collect();
    assert_eq!(labels, ["0", "200", "400", "600", "800", "1000"]);
    let [left, _, width, _] = drawn.plot;
    assert!((drawn.x_ticks[0].0 - left).abs() < 1e-9 && (drawn.x_ticks[5].0 - left - width).abs() < 1e-9);
}

#[test]
fn a_drawing_has_neither_lettering_nor_colour_nor_pixels() {
    let all = [
        CurveStyle::Nominal,
        CurveStyle::Low,
        CurveStyle::High,
        CurveStyle::LoadLine,
        CurveStyle::Limit,
        CurveStyle::Family,
    ];
    let line = || vec![(0.0, Some(0.1)), (1.0, Some(0.9))];
    let svg = draw(&figure(all.into_iter().map(|style| curve(style, line())).collect())).svg;
    assert!(!svg.contains("<text") && !svg.contains("<image"));
    for colour in svg.split('#').skip(1) {
        let hex = &colour[..6];
        assert!(hex[..2] == hex[2..4] && hex[2..4] == hex[4..], "{hex} is not grey");
    }
}

#[test]
fn every_style_of_line_leaves_its_own_trace() {
    let line = || vec![(0.0, Some(0.5)), (1.0, Some(0.5))];
    let svg_of = |style| draw(&figure(vec![curve(style, line())])).svg;
    let styles = [
        CurveStyle::Nominal,
        CurveStyle::Low,
        CurveStyle::High,
        CurveStyle::LoadLine,
        CurveStyle::Limit,
        CurveStyle::Family,
    ];
    let drawings: Vec<String> = styles.into_iter().map(svg_of).collect();
    for (i, one) in drawings.iter().enumerate() {
        assert!(drawings.iter().skip(i + 1).all(|other| other != one), "{:?}", styles[i]);
    }
    let count = |svg: &str| svg.matches("<polyline").count();
    assert!(count(&drawings[1]) > count(&drawings[0]) + 20, "a dashed line is many strokes");
}

#[test]
fn curves_end_at_the_border_and_at_gaps() {
    let outside = curve(
        CurveStyle::Nominal,
        vec![(-1.0, Some(-1.0)), (2.0, Some(2.0)), (3.0, None), (0.5, Some(f64::NAN))],
    );
    let drawn = draw(&figure(vec![outside]));
    let [left, top, width, height] = drawn.plot.map(|v| (v * 10.0) as i64);
    for points in drawn.svg.split("points=\"").skip(1) {
        for pair in points.split('"').next().unwrap_or_default().split_whitespace() {
            let (x, y) = pair.split_once(',').expect("a pair");
            let (x, y): (i64, i64) = (x.parse().expect("a number"), y.parse().expect("a number"));
            // Ticks stand up to 3.5 points outside the plot; samples of lines stand to its right.
            assert!((left - 36..=left + width + 250).contains(&x), "{pair}");
            assert!((top - 1..=top + height + 36).contains(&y), "{pair}");
        }
    }
    let gap = |middle| {
        curve(
            CurveStyle::Nominal,
            vec![(0.1, Some(0.1)), (0.2, Some(0.2)), (0.3, middle), (0.4, Some(0.4)), (0.5, Some(0.5))],
        )
    };
    let strokes = |middle| draw(&figure(vec![gap(middle)])).svg.matches("<polyline").count();
    assert_eq!(strokes(None), strokes(Some(0.3)) + 1);
}

#[test]
fn marks_outside_the_plot_are_left_out_and_names_do_not_overprint() {
    let line = || vec![(0.0, Some(0.5)), (1.0, Some(0.5))];
    let drawn = draw(&figure((0..9).map(|_| curve(CurveStyle::Family, line())).collect()));
    assert_eq!(drawn.marks.len(), 1);
    assert_eq!(drawn.names.len(), 9);
    for pair in drawn.names.windows(2) {
        assert!(pair[1].0 - pair[0].0 > 9.0, "{pair:?}");
    }
}

#[test]
fn logarithmic_axes_put_equal_ratios_at_equal_distances() {
    let mut log = figure(vec![]);
    log.x = axis(1e-3, 1.0, true);
    let at: Vec<f64> = draw(&log)
        .x_ticks
        .iter()
        .filter(|(_, label)| ["1", "10", "100", "1000"].contains(&label.as_str()))
        .map(|(at, _)| *at)
        .collect();
    assert_eq!(at.len(), 4);
    assert!((at[1] - at[0] - (at[3] - at[2])).abs() < 1e-6);
}
