//! Colours, dashes and markers. Series differ in lightness (L* of about 15, 35, 47, 58, 62, 50 on paper of 98), in
//! dash and in marker, so that any one of the three tells them apart.

/// Red, green, blue.
pub(super) type Colour = (u8, u8, u8);

/// The sheet.
pub(super) const PAPER: Colour = (252, 251, 247);
/// Titles, labels, axes.
pub(super) const INK: Colour = (34, 38, 44);
/// Conditions and other quiet words.
pub(super) const QUIET: Colour = (88, 92, 100);
/// Grid lines with a label.
pub(super) const GRID: Colour = (206, 203, 193);
/// Grid lines between.
pub(super) const FINE_GRID: Colour = (233, 230, 221);

/// The shape that sits on a curve here and there.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Marker {
    None,
    Disc,
    Square,
    Triangle,
    Diamond,
}

/// How one series is drawn.
#[derive(Clone, Copy, Debug)]
pub(super) struct Style {
    pub(super) colour: Colour,
    /// Width of the line, px.
    pub(super) width: f64,
    /// Lengths of line and gap in turn, px; empty for a whole line.
    pub(super) dash: &'static [f64],
    pub(super) marker: Marker,
}

/// The styles of a family of curves, in the order they are given out.
pub(super) const SERIES: [Style; 6] = [
    Style {
        colour: (20, 33, 61),
        width: 5.0,
        dash: &[],
        marker: Marker::None,
    },
    Style {
        colour: (155, 45, 31),
        width: 3.5,
        dash: &[],
        marker: Marker::Disc,
    },
    Style {
        colour: (31, 117, 138),
        width: 3.5,
        dash: &[18.0, 8.0],
        marker: Marker::Square,
    },
    Style {
        colour: (190, 124, 10),
        width: 3.5,
        dash: &[18.0, 7.0, 4.0, 7.0],
        marker: Marker::Triangle,
    },
    Style {
        colour: (134, 148, 168),
        width: 3.5,
        dash: &[5.0, 6.0],
        marker: Marker::Diamond,
    },
    Style {
        colour: (110, 110, 130),
        width: 3.5,
        dash: &[30.0, 9.0],
        marker: Marker::None,
    },
];

/// Fills of bars side by side, dark to light; each bar has an outline of ink.
pub(super) const FILLS: [Colour; 3] = [(28, 44, 78), (78, 144, 160), (226, 186, 104)];
