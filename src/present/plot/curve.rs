//! A curve within its plot: cut at the border (Liang and Barsky, ACM Trans. Graphics 3, 1984), broken where there is
//! no value, marked at intervals.

use super::ink::Style;
use super::panel::Plot;
use super::picture::{Area, Picture, Point};

/// Markers on a long curve.
const MARKERS: usize = 8;
/// A curve of so few points has a marker on each.
const FEW: usize = 12;

/// Draw `points`; `place` (the curve's number in its family) shifts its markers away from those of the others.
pub(super) fn curve(
    picture: &mut Picture,
    plot: &Plot,
    points: &[(f64, Option<f64>)],
    style: &Style,
    place: usize,
) {
    let on_sheet: Vec<Option<Point>> = points.iter().map(|&(x, y)| on_sheet(plot, x, y)).collect();
    for run in runs(&on_sheet, &plot.area) {
        picture.stroke(run, style);
    }
    let stride = if points.len() <= FEW {
        1
    } else {
        points.len() / MARKERS
    };
    let marked = on_sheet
        .iter()
        .skip((place * stride).div_ceil(5).min(stride - 1))
        .step_by(stride);
    marked
        .flatten()
        .filter(|at| within(&plot.area, **at))
        .for_each(|at| picture.marker(*at, style));
}

fn on_sheet(plot: &Plot, x: f64, y: Option<f64>) -> Option<Point> {
    let at = plot.at(x, y?);
    (at.0.is_finite() && at.1.is_finite()).then_some(at)
}

fn within(area: &Area, (x, y): Point) -> bool {
    x >= area.left && x <= area.right && y >= area.top && y <= area.bottom
}

/// The stretches of the curve inside the area.
fn runs(points: &[Option<Point>], area: &Area) -> Vec<Vec<Point>> {
    let mut runs: Vec<Vec<Point>> = Vec::new();
    for pair in points.windows(2) {
        let (Some(from), Some(to)) = (pair[0], pair[1]) else {
            continue;
        };
        let Some((from, to)) = clipped(from, to, area) else {
            continue;
        };
        match runs.last_mut() {
            Some(run) if run.last() == Some(&from) => run.push(to),
            _ => runs.push(vec![from, to]),
        }
    }
    runs
}

/// The part of a stretch that lies inside the area.
fn clipped(from: Point, to: Point, area: &Area) -> Option<(Point, Point)> {
    let (dx, dy) = (to.0 - from.0, to.1 - from.1);
    let edges = [
        (-dx, from.0 - area.left),
        (dx, area.right - from.0),
        (-dy, from.1 - area.top),
        (dy, area.bottom - from.1),
    ];
    let (mut enter, mut leave) = (0.0f64, 1.0f64);
    for (toward, room) in edges {
        if toward == 0.0 && room < 0.0 {
            return None;
        }
        if toward < 0.0 {
            enter = enter.max(room / toward);
        } else if toward > 0.0 {
            leave = leave.min(room / toward);
        }
    }
    // Unmoved ends keep their very value, so that neighbouring stretches join.
    let at = |share: f64| (from.0 + share * dx, from.1 + share * dy);
    let start = if enter == 0.0 { from } else { at(enter) };
    let end = if leave == 1.0 { to } else { at(leave) };
    (enter < leave).then_some((start, end))
}

#[cfg(test)]
mod tests {
    use super::*;

    const AREA: Area = Area {
        left: 0.0,
        top: 0.0,
        right: 10.0,
        bottom: 10.0,
    };

    #[test]
    fn a_stretch_is_cut_where_it_leaves() {
        assert_eq!(
            clipped((5.0, 5.0), (5.0, 20.0), &AREA),
            Some(((5.0, 5.0), (5.0, 10.0)))
        );
        assert_eq!(
            clipped((-10.0, 5.0), (20.0, 5.0), &AREA),
            Some(((0.0, 5.0), (10.0, 5.0)))
        );
        assert_eq!(clipped((-5.0, -5.0), (-1.0, 20.0), &AREA), None);
    }

    #[test]
    fn a_missing_value_breaks_the_curve() {
        let points = [
            Some((1.0, 1.0)),
            Some((2.0, 1.0)),
            Some((3.0, 1.0)),
            None,
            Some((5.0, 1.0)),
            Some((6.0, 1.0)),
        ];
        let lengths: Vec<usize> = runs(&points, &AREA).iter().map(Vec::len).collect();
        assert_eq!(lengths, [3, 2]);
    }
}
