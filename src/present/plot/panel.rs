//! One pair of axes with its grid, labels and legend. The legend and the axis titles stand above the plot, so that
//! nothing ever covers a curve and no text is turned on its side.

use super::font;
use super::frame::{LABEL_EM, words};
use super::ink::{Colour, FINE_GRID, GRID, INK, Style};
use super::picture::{Anchor, Area, Picture, Point, Text};
use super::scale::{Scale, Tick};

/// Distance of base lines above the plot, px.
const ROW: f64 = 40.0;
/// Length of the sample line in a legend, px.
const KEY: f64 = 58.0;
/// From a tick label to the plot, px.
const GAP: f64 = 12.0;
/// Least distance of two labels on the x axis, px.
const APART: f64 = 14.0;

/// One axis: its scale, its title with the unit, and how a tick is written.
pub(super) struct Axis<'a> {
    pub(super) scale: Scale,
    pub(super) title: String,
    pub(super) label: &'a dyn Fn(f64) -> String,
    /// Most labels that find room.
    pub(super) most: usize,
    /// Whether lines run across the plot at the ticks.
    pub(super) grid: bool,
}

/// What a legend shows beside a name.
#[derive(Clone, Copy)]
pub(super) enum Key {
    Line(Style),
    Fill(Colour),
}

/// A pair of axes to be laid out.
pub(super) struct Panel<'a> {
    pub(super) x: Axis<'a>,
    pub(super) y: Axis<'a>,
    /// A second reading of the y axis, on its right.
    pub(super) second: Option<&'a dyn Fn(f64) -> String>,
    pub(super) legend: Vec<(String, Key)>,
    /// Room kept free to the right of the plot, px.
    pub(super) side: f64,
}

/// Axes on the sheet, ready for curves.
pub(super) struct Plot {
    pub(super) area: Area,
    pub(super) x: Scale,
    pub(super) y: Scale,
}

impl Plot {
    /// Where a value lies on the sheet; it may be outside the area.
    pub(super) fn at(&self, x: f64, y: f64) -> Point {
        let Area {
            left,
            top,
            right,
            bottom,
        } = self.area;
        (
            left + self.x.share(x) * (right - left),
            bottom - self.y.share(y) * (bottom - top),
        )
    }
}

impl Panel<'_> {
    /// Draw the axes within `room` and say where the plot lies.
    pub(super) fn lay(&self, picture: &mut Picture, room: Area) -> Plot {
        let titles = self.draw_legend(picture, room) + ROW;
        let (x_ticks, y_ticks) = (
            self.x.scale.ticks(self.x.most),
            self.y.scale.ticks(self.y.most),
        );
        let area = Area {
            left: room.left + widest(&y_ticks, self.y.label) + GAP,
            top: titles + 26.0,
            right: room.right - self.right_border(&x_ticks, &y_ticks),
            bottom: room.bottom - 2.0 * ROW + 6.0,
        };
        let plot = Plot {
            area,
            x: self.x.scale,
            y: self.y.scale,
        };
        self.draw_grid(picture, &plot, &x_ticks, &y_ticks);
        self.draw_labels(picture, &plot, &x_ticks, &y_ticks);
        self.draw_titles(picture, room, area, titles);
        plot
    }

    fn right_border(&self, x_ticks: &[Tick], y_ticks: &[Tick]) -> f64 {
        let second = self
            .second
            .map_or(0.0, |label| widest(y_ticks, label) + GAP);
        second
            .max(self.side)
            .max(end_label(x_ticks, self.x.label) / 2.0)
    }

    /// The legend in rows from the top of `room`; returns the last base line used.
    fn draw_legend(&self, picture: &mut Picture, room: Area) -> f64 {
        if self.legend.is_empty() {
            return room.top - 18.0;
        }
        let (mut x, mut y) = (room.left, room.top + LABEL_EM);
        for (name, key) in &self.legend {
            let width = KEY + 10.0 + font::width(name, LABEL_EM, false);
            if x > room.left && x + width > room.right {
                (x, y) = (room.left, y + ROW);
            }
            draw_key(picture, (x, y - 0.36 * LABEL_EM), key);
            picture.text(words(name.clone(), (x + KEY + 10.0, y), LABEL_EM, false));
            x += width + 34.0;
        }
        y
    }

    fn draw_grid(&self, picture: &mut Picture, plot: &Plot, x_ticks: &[Tick], y_ticks: &[Tick]) {
        let Area {
            left,
            top,
            right,
            bottom,
        } = plot.area;
        for major in [false, true] {
            let colour = if major { GRID } else { FINE_GRID };
            let chosen = |tick: &&Tick| tick.major == major;
            for tick in x_ticks.iter().filter(chosen).filter(|_| self.x.grid) {
                let x = left + plot.x.share(tick.value) * (right - left);
                picture.line(vec![(x, top), (x, bottom)], 1.5, colour);
            }
            for tick in y_ticks.iter().filter(chosen).filter(|_| self.y.grid) {
                let y = bottom - plot.y.share(tick.value) * (bottom - top);
                picture.line(vec![(left, y), (right, y)], 1.5, colour);
            }
        }
        let mut border = plot.area.corners();
        border.push((left, top));
        picture.line(border, 2.0, INK);
    }

    fn draw_labels(&self, picture: &mut Picture, plot: &Plot, x_ticks: &[Tick], y_ticks: &[Tick]) {
        self.draw_x_labels(picture, plot, x_ticks);
        for tick in y_ticks.iter().filter(|tick| tick.major) {
            let y = plot.at(0.0, tick.value).1 + 0.36 * LABEL_EM;
            let at = (plot.area.left - GAP, y);
            let text = words((self.y.label)(tick.value), at, LABEL_EM, false);
            picture.text(Text {
                anchor: Anchor::Right,
                ..text
            });
            if let Some(label) = &self.second {
                let at = (plot.area.right + GAP, y);
                picture.text(words(label(tick.value), at, LABEL_EM, false));
            }
        }
    }

    /// The major ticks first, then both ends of the axis (20 Hz and 20 kHz, say). A label that would touch one that
    /// is there already is left out; its grid line stays.
    fn draw_x_labels(&self, picture: &mut Picture, plot: &Plot, ticks: &[Tick]) {
        let Area {
            left,
            right,
            bottom,
            ..
        } = plot.area;
        let ends = ticks.first().into_iter().chain(ticks.last());
        let mut taken: Vec<(f64, f64)> = Vec::new();
        for tick in ticks.iter().filter(|tick| tick.major).chain(ends) {
            let x = left + plot.x.share(tick.value) * (right - left);
            let at = (x, bottom + LABEL_EM + 10.0);
            let text = words((self.x.label)(tick.value), at, LABEL_EM, false);
            let text = Text {
                anchor: Anchor::Middle,
                ..text
            };
            let (from, to) = (text.left(), 2.0 * x - text.left());
            if taken
                .iter()
                .all(|(start, end)| to + APART < *start || from - APART > *end)
            {
                taken.push((from, to));
                picture.text(text);
            }
        }
    }

    fn draw_titles(&self, picture: &mut Picture, room: Area, area: Area, y: f64) {
        picture.text(words(self.y.title.clone(), (room.left, y), LABEL_EM, false));
        let middle = ((area.left + area.right) / 2.0, room.bottom);
        let text = words(self.x.title.clone(), middle, LABEL_EM, false);
        picture.text(Text {
            anchor: Anchor::Middle,
            ..text
        });
    }
}

fn draw_key(picture: &mut Picture, (x, y): Point, key: &Key) {
    match key {
        Key::Line(style) => {
            picture.stroke(vec![(x, y), (x + KEY, y)], style);
            picture.marker((x + KEY / 2.0, y), style);
        }
        Key::Fill(colour) => {
            let swatch = Area {
                left: x + 14.0,
                top: y - 12.0,
                right: x + KEY,
                bottom: y + 12.0,
            };
            outlined(picture, swatch, *colour);
        }
    }
}

/// A filled rectangle with an outline of ink, so that a light fill keeps its edge.
pub(super) fn outlined(picture: &mut Picture, area: Area, colour: Colour) {
    picture.fill(area.corners(), colour);
    let mut edge = area.corners();
    edge.push((area.left, area.top));
    picture.line(edge, 1.5, INK);
}

fn widest(ticks: &[Tick], label: &dyn Fn(f64) -> String) -> f64 {
    let labels = ticks
        .iter()
        .filter(|tick| tick.major)
        .map(|tick| label(tick.value));
    labels
        .map(|label| font::width(&label, LABEL_EM, false))
        .fold(0.0, f64::max)
}

/// Width of the label at the right end of the x axis.
fn end_label(ticks: &[Tick], label: &dyn Fn(f64) -> String) -> f64 {
    ticks
        .last()
        .map_or(0.0, |tick| font::width(&label(tick.value), LABEL_EM, false))
}
