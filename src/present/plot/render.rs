//! From marks to bytes, by plotters. Both backends draw on whole pixels, so a picture is drawn enlarged: the PNG is
//! averaged down again, which smooths its edges, and the SVG says its true size in its first line.

use super::error::PlotError;
use super::font;
use super::ink::{Colour, PAPER};
use super::picture::{Anchor, Mark, Picture, Point, Text};
use plotters::prelude::{BitMapBackend, DrawingBackend, SVGBackend};
use plotters::style::text_anchor::{HPos, Pos, VPos};
use plotters::style::{RGBColor, ShapeStyle, TextStyle};

/// Enlargement of the SVG's coordinates.
const SVG_SCALE: u32 = 8;
/// Enlargement of the PNG before it is averaged down.
const PNG_SCALE: u32 = 2;

/// How a backend sets text.
struct Setting {
    /// Its font size over the em.
    size_per_em: f64,
    /// From the top of a text to its base line, over its font size.
    base_line: f64,
    /// Whether it places the anchor itself. The reader of an SVG may have a font of other widths, so there the
    /// anchor must stay in the file.
    anchors: bool,
}

/// plotters writes `font-size = size/1.24` and shifts a top-anchored text by 0.76 em.
const SVG_SETTING: Setting = Setting {
    size_per_em: 1.24,
    base_line: 0.76 / 1.24,
    anchors: true,
};
/// plotters takes the size as the font's full height and draws the base line half of it below the top.
const PNG_SETTING: Setting = Setting {
    size_per_em: font::HEIGHT_PER_EM,
    base_line: 0.5,
    anchors: false,
};

/// The picture as an SVG document.
pub(super) fn svg(picture: &Picture) -> Result<String, PlotError> {
    font::register()?;
    let (width, height) = enlarged(picture, SVG_SCALE);
    let mut document = String::new();
    draw(
        &mut SVGBackend::with_string(&mut document, (width, height)),
        picture,
        SVG_SCALE,
        &SVG_SETTING,
    )?;
    let (w, h) = picture.size();
    let drawn = format!("width=\"{width}\" height=\"{height}\"");
    Ok(document.replacen(&drawn, &format!("width=\"{w}\" height=\"{h}\""), 1))
}

/// The picture as a PNG file.
pub(super) fn png(picture: &Picture) -> Result<Vec<u8>, PlotError> {
    font::register()?;
    let (width, height) = enlarged(picture, PNG_SCALE);
    let mut pixels = vec![0; width as usize * height as usize * 3];
    draw(
        &mut BitMapBackend::with_buffer(&mut pixels, (width, height)),
        picture,
        PNG_SCALE,
        &PNG_SETTING,
    )?;
    let (small_width, small_height) = (width / PNG_SCALE, height / PNG_SCALE);
    encode(
        &averaged(&pixels, small_width as usize, small_height as usize),
        small_width,
        small_height,
    )
}

fn enlarged(picture: &Picture, scale: u32) -> (u32, u32) {
    let (width, height) = picture.size();
    (width as u32 * scale, height as u32 * scale)
}

/// Mean of each PNG_SCALE × PNG_SCALE block, a colour at a time.
fn averaged(pixels: &[u8], width: usize, height: usize) -> Vec<u8> {
    let scale = PNG_SCALE as usize;
    let mut small = Vec::with_capacity(width * height * 3);
    for y in 0..height {
        for x in 0..width {
            for colour in 0..3 {
                let block = (0..scale * scale).map(|k| {
                    let (column, row) = (x * scale + k % scale, y * scale + k / scale);
                    u32::from(pixels[(row * width * scale + column) * 3 + colour])
                });
                small.push((block.sum::<u32>() / (PNG_SCALE * PNG_SCALE)) as u8);
            }
        }
    }
    small
}

fn encode(pixels: &[u8], width: u32, height: u32) -> Result<Vec<u8>, PlotError> {
    let mut bytes = Vec::new();
    let mut encoder = png::Encoder::new(&mut bytes, width, height);
    encoder.set_color(png::ColorType::Rgb);
    encoder.set_depth(png::BitDepth::Eight);
    // Flat paper and repeated grid lines compress best unfiltered.
    encoder.set_filter(png::FilterType::NoFilter);
    encoder.set_compression(png::Compression::Best);
    let mut writer = encoder.write_header().map_err(PlotError::draw)?;
    writer.write_image_data(pixels).map_err(PlotError::draw)?;
    writer.finish().map_err(PlotError::draw)?;
    Ok(bytes)
}

fn draw<B: DrawingBackend>(
    backend: &mut B,
    picture: &Picture,
    scale: u32,
    setting: &Setting,
) -> Result<(), PlotError> {
    let (width, height) = enlarged(picture, scale);
    let scale = f64::from(scale);
    let corner = (width as i32, height as i32);
    backend
        .draw_rect((0, 0), corner, &shape(PAPER, 1), true)
        .map_err(PlotError::draw)?;
    for mark in picture.marks() {
        match mark {
            Mark::Line {
                points,
                width,
                dash,
                colour,
            } => {
                let style = shape(*colour, (width * scale).round() as u32);
                for piece in dashes(points, dash) {
                    backend
                        .draw_path(enlarge(&piece, scale), &style)
                        .map_err(PlotError::draw)?;
                }
            }
            Mark::Fill { points, colour } => {
                backend
                    .fill_polygon(enlarge(points, scale), &shape(*colour, 1))
                    .map_err(PlotError::draw)?;
            }
            Mark::Text(text) => set(backend, text, scale, setting)?,
        }
    }
    backend.present().map_err(PlotError::draw)
}

fn set<B: DrawingBackend>(
    backend: &mut B,
    text: &Text,
    scale: f64,
    setting: &Setting,
) -> Result<(), PlotError> {
    let size = text.em * scale * setting.size_per_em;
    let (left, anchor) = match text.anchor {
        Anchor::Middle if setting.anchors => (text.at.0, HPos::Center),
        Anchor::Right if setting.anchors => (text.at.0, HPos::Right),
        _ => (text.left(), HPos::Left),
    };
    let ink = colour(text.colour);
    let style = TextStyle::from(font::description(size, text.bold))
        .color(&ink)
        .pos(Pos::new(anchor, VPos::Top));
    let top = text.at.1 * scale - size * setting.base_line;
    let at = ((left * scale).round() as i32, top.round() as i32);
    backend
        .draw_text(&text.content, &style, at)
        .map_err(PlotError::draw)
}

fn enlarge(points: &[Point], scale: f64) -> Vec<(i32, i32)> {
    points
        .iter()
        .map(|(x, y)| ((x * scale).round() as i32, (y * scale).round() as i32))
        .collect()
}

fn colour((red, green, blue): Colour) -> RGBColor {
    RGBColor(red, green, blue)
}

fn shape(ink: Colour, stroke_width: u32) -> ShapeStyle {
    ShapeStyle::from(colour(ink))
        .filled()
        .stroke_width(stroke_width)
}

/// The drawn pieces of a line whose dash pattern runs on around its corners.
fn dashes(points: &[Point], pattern: &[f64]) -> Vec<Vec<Point>> {
    if pattern.is_empty() || points.len() < 2 {
        return vec![points.to_vec()];
    }
    let mut pieces = Vec::new();
    let mut piece = vec![points[0]];
    let (mut index, mut left) = (0, pattern[0]);
    for pair in points.windows(2) {
        let (from, to) = (pair[0], pair[1]);
        let length = (to.0 - from.0).hypot(to.1 - from.1);
        let mut done = 0.0;
        while length - done > left {
            done += left;
            let share = done / length;
            let corner = (
                from.0 + share * (to.0 - from.0),
                from.1 + share * (to.1 - from.1),
            );
            if index % 2 == 0 {
                piece.push(corner);
                pieces.push(std::mem::take(&mut piece));
            } else {
                piece = vec![corner];
            }
            index = (index + 1) % pattern.len();
            left = pattern[index];
        }
        left -= length - done;
        if index % 2 == 0 {
            piece.push(to);
        }
    }
    if piece.len() > 1 {
        pieces.push(piece);
    }
    pieces
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn dashes_and_gaps_alternate_along_a_corner() {
        let pieces = dashes(&[(0.0, 0.0), (10.0, 0.0), (10.0, 10.0)], &[6.0, 2.0]);
        let expected = [
            vec![(0.0, 0.0), (6.0, 0.0)],
            vec![(8.0, 0.0), (10.0, 0.0), (10.0, 4.0)],
            vec![(10.0, 6.0), (10.0, 10.0)],
        ];
        assert_eq!(pieces, expected);
    }

    #[test]
    fn a_block_of_pixels_becomes_its_mean() {
        let rows = [[0, 0, 0, 100, 0, 0], [100, 0, 0, 200, 0, 8]].concat();
        assert_eq!(averaged(&rows, 1, 1), [100, 0, 2]);
    }

    #[test]
    fn the_svg_states_its_true_size() -> Result<(), PlotError> {
        let document = svg(&Picture::new(300.0, 200.0))?;
        assert!(
            document.starts_with("<svg width=\"300\" height=\"200\" viewBox=\"0 0 2400 1600\""),
            "{document}"
        );
        Ok(())
    }
}
