//! The bundled font: DejaVu Sans, regular and bold, free to embed and pass on (Bitstream Vera licence, changes in
//! the public domain). It draws the text of PNG files and measures that of both formats; it is wider than most
//! sans-serif faces, so what fits here fits in the SVG of a reader with another font.

use super::error::PlotError;
use plotters::style::{FontDesc, FontFamily, FontStyle, register_font};
use std::sync::OnceLock;

/// Height from the lowest descender to the highest ascender over the em: (483 + 1901)/2048, from the font's own
/// header. The PNG backend takes this height as the size of a text.
pub(super) const HEIGHT_PER_EM: f64 = 1.164_062_5;
/// The em at which widths are taken: large, since plotters rounds them to whole pixels.
const MEASURED_EM: f64 = 1000.0;

/// Make the font known to plotters, once a process.
pub(super) fn register() -> Result<(), PlotError> {
    static DONE: OnceLock<bool> = OnceLock::new();
    let done = DONE.get_or_init(|| {
        register_font("sans-serif", FontStyle::Normal, dejavu::sans::regular()).is_ok()
            && register_font("sans-serif", FontStyle::Bold, dejavu::sans::bold()).is_ok()
    });
    if *done {
        Ok(())
    } else {
        Err(PlotError::draw("the bundled font cannot be read"))
    }
}

/// The font of one text, its size in the backend's own measure.
pub(super) fn description(size: f64, bold: bool) -> FontDesc<'static> {
    FontDesc::new(
        FontFamily::SansSerif,
        size,
        if bold {
            FontStyle::Bold
        } else {
            FontStyle::Normal
        },
    )
}

/// Width of `text` at `em`, in the unit of `em`.
pub(super) fn width(text: &str, em: f64, bold: bool) -> f64 {
    let measured = register().ok().and_then(|()| {
        let font = description(MEASURED_EM * HEIGHT_PER_EM, bold);
        font.box_size(text).ok()
    });
    // Without the font nothing can be drawn anyway, and the drawing says so.
    measured.map_or(0.0, |(width, _)| f64::from(width) * em / MEASURED_EM)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn widths_grow_with_text_and_size() {
        let one = width("THD", 20.0, false);
        // The advance widths of T, H and D in the font are 1251, 1540 and 1577 of 2048 (kerning may take a little).
        assert!((one - 20.0 * 4368.0 / 2048.0).abs() < 0.5, "{one}");
        assert!((width("THD", 40.0, false) - 2.0 * one).abs() < 1e-9);
        assert!(width("THD", 20.0, true) > one);
    }
}
