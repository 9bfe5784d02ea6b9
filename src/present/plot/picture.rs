//! A picture as a list of marks on a sheet; x to the right and y downward, in px of the finished PNG.

use super::font;
use super::ink::{Colour, INK, Marker, Style};

/// A point on the sheet.
pub(super) type Point = (f64, f64);

/// A rectangle with its sides along the sheet's.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Area {
    pub(super) left: f64,
    pub(super) top: f64,
    pub(super) right: f64,
    pub(super) bottom: f64,
}

impl Area {
    pub(super) fn corners(&self) -> Vec<Point> {
        let Area {
            left,
            top,
            right,
            bottom,
        } = *self;
        vec![(left, top), (right, top), (right, bottom), (left, bottom)]
    }

    #[cfg(test)]
    pub(super) fn inside(&self, other: &Area) -> bool {
        self.left >= other.left
            && self.top >= other.top
            && self.right <= other.right
            && self.bottom <= other.bottom
    }

    #[cfg(test)]
    pub(super) fn overlaps(&self, other: &Area) -> bool {
        self.left < other.right
            && other.left < self.right
            && self.top < other.bottom
            && other.top < self.bottom
    }
}

/// Which point of a text its position names; always on the base line.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Anchor {
    Left,
    Middle,
    Right,
}

/// One line of text.
#[derive(Clone, Debug)]
pub(super) struct Text {
    pub(super) content: String,
    /// The anchor's place on the base line.
    pub(super) at: Point,
    pub(super) anchor: Anchor,
    /// Size of the em, px.
    pub(super) em: f64,
    pub(super) bold: bool,
    pub(super) colour: Colour,
}

impl Text {
    /// Where the line begins on the sheet.
    pub(super) fn left(&self) -> f64 {
        let width = font::width(&self.content, self.em, self.bold);
        match self.anchor {
            Anchor::Left => self.at.0,
            Anchor::Middle => self.at.0 - width / 2.0,
            Anchor::Right => self.at.0 - width,
        }
    }

    /// The area of the letters: from the top of the capitals to a little under the base line.
    #[cfg(test)]
    fn area(&self) -> Area {
        let width = font::width(&self.content, self.em, self.bold);
        let (top, bottom) = (self.at.1 - 0.76 * self.em, self.at.1 + 0.2 * self.em);
        Area {
            left: self.left(),
            top,
            right: self.left() + width,
            bottom,
        }
    }
}

/// One thing on the sheet, in the order drawn.
#[derive(Clone, Debug)]
pub(super) enum Mark {
    Line {
        points: Vec<Point>,
        width: f64,
        dash: &'static [f64],
        colour: Colour,
    },
    Fill {
        points: Vec<Point>,
        colour: Colour,
    },
    Text(Text),
}

/// A drawn sheet, ready for a [`super::PlotFile`].
#[derive(Clone, Debug)]
pub struct Picture {
    width: f64,
    height: f64,
    marks: Vec<Mark>,
}

impl Picture {
    /// An empty sheet; its size in px.
    pub(super) fn new(width: f64, height: f64) -> Self {
        Picture {
            width,
            height,
            marks: Vec::new(),
        }
    }

    /// Width and height, px.
    pub fn size(&self) -> (f64, f64) {
        (self.width, self.height)
    }

    pub(super) fn marks(&self) -> &[Mark] {
        &self.marks
    }

    pub(super) fn text(&mut self, text: Text) {
        self.marks.push(Mark::Text(text));
    }

    /// A straight or broken line.
    pub(super) fn line(&mut self, points: Vec<Point>, width: f64, colour: Colour) {
        self.marks.push(Mark::Line {
            points,
            width,
            dash: &[],
            colour,
        });
    }

    /// A dashed line.
    pub(super) fn dashed(
        &mut self,
        points: Vec<Point>,
        width: f64,
        dash: &'static [f64],
        colour: Colour,
    ) {
        self.marks.push(Mark::Line {
            points,
            width,
            dash,
            colour,
        });
    }

    pub(super) fn fill(&mut self, points: Vec<Point>, colour: Colour) {
        self.marks.push(Mark::Fill { points, colour });
    }

    /// A line in the style of its series.
    pub(super) fn stroke(&mut self, points: Vec<Point>, style: &Style) {
        self.dashed(points, style.width, style.dash, style.colour);
    }

    /// The marker of a series, about 16 px across.
    pub(super) fn marker(&mut self, (x, y): Point, style: &Style) {
        let r = 8.0;
        let points = match style.marker {
            Marker::None => return,
            Marker::Disc => disc((x, y), r),
            Marker::Square => Area {
                left: x - r,
                top: y - r,
                right: x + r,
                bottom: y + r,
            }
            .corners(),
            Marker::Triangle => vec![
                (x, y - 1.2 * r),
                (x + 1.1 * r, y + 0.8 * r),
                (x - 1.1 * r, y + 0.8 * r),
            ],
            Marker::Diamond => vec![
                (x, y - 1.3 * r),
                (x + 1.3 * r, y),
                (x, y + 1.3 * r),
                (x - 1.3 * r, y),
            ],
        };
        self.fill(points, style.colour);
    }

    /// A large ring, for the bias.
    pub(super) fn ring(&mut self, at: Point, paper: Colour) {
        self.fill(disc(at, 13.0), INK);
        self.fill(disc(at, 7.0), paper);
    }

    #[cfg(test)]
    pub(super) fn sheet(&self) -> Area {
        Area {
            left: 0.0,
            top: 0.0,
            right: self.width,
            bottom: self.height,
        }
    }

    #[cfg(test)]
    pub(super) fn texts(&self) -> Vec<String> {
        self.text_boxes()
            .into_iter()
            .map(|(text, _)| text)
            .collect()
    }

    #[cfg(test)]
    pub(super) fn text_boxes(&self) -> Vec<(String, Area)> {
        let texts = self.marks.iter().filter_map(|mark| match mark {
            Mark::Text(text) => Some((text.content.clone(), text.area())),
            _ => None,
        });
        texts.collect()
    }
}

fn disc((x, y): Point, radius: f64) -> Vec<Point> {
    let corner = |k: u32| std::f64::consts::TAU * f64::from(k) / 32.0;
    (0..32)
        .map(|k| (x + radius * corner(k).cos(), y + radius * corner(k).sin()))
        .collect()
}
