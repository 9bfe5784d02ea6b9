//! Pictures of a report, as SVG or PNG.
//!
//! A picture is first a list of marks in its own coordinates (`picture`), so that its layout can be tested; `render`
//! hands the marks to plotters, `file` writes the result in one piece. The look is a laboratory notebook's: light
//! paper, dark ink, a quiet grid, series told apart by lightness, dash and marker so that they survive a grey print
//! and every kind of colour vision. Text is set in DejaVu Sans (Bitstream Vera licence) in PNG and in the reader's
//! own sans-serif in SVG.

mod bars;
mod curve;
mod error;
mod file;
mod font;
mod frame;
mod ink;
mod panel;
mod picture;
mod render;
mod scale;
mod thd;
mod transfer;
mod waveform;

pub use bars::{Drive, harmonic_bars};
pub use error::PlotError;
pub use file::PlotFile;
pub use picture::Picture;
pub use thd::{thd_against_frequency, thd_against_level};
pub use transfer::transfer_curve;
pub use waveform::{spectrum_and_waveform, waveform};

use crate::measure::report::{BiasReport, DistortionReport};

/// The picture of `distortion`: a single point as spectrum and waveform; otherwise THD against whichever of level
/// and frequency has more values, a curve for each value of the other.
pub fn distortion_picture(report: &DistortionReport) -> Result<Picture, PlotError> {
    let frequencies = thd::distinct(report.points.iter().map(|point| point.frequency)).len();
    let levels = thd::distinct(report.points.iter().map(|point| point.level)).len();
    match report.points.as_slice() {
        [point] => spectrum_and_waveform(&report.title, &report.conditions, point),
        _ if frequencies > levels => thd_against_frequency(report),
        _ => thd_against_level(report),
    }
}

/// The picture of `bias`: the static transfer curve.
pub fn bias_picture(report: &BiasReport) -> Result<Picture, PlotError> {
    transfer_curve(report)
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::super::sample;
    use super::*;

    #[test]
    fn the_grid_decides_the_picture() {
        let levels = sample::levels(1e-3, 0.3, 12);
        let subtitle = |frequencies: &[f64], levels: &[f64]| {
            distortion_picture(&sample::distortion(frequencies, levels))
                .unwrap()
                .texts()
                .join("\n")
        };
        assert!(subtitle(&[1000.0], &levels).contains("against level"));
        assert!(subtitle(&[100.0, 1000.0], &levels).contains("against level"));
        assert!(subtitle(&[100.0, 1000.0, 5000.0], &[0.01]).contains("against frequency"));
        assert!(subtitle(&[1000.0], &[0.1]).contains("One period"));
    }

    #[test]
    fn a_report_without_points_is_refused() {
        let report = sample::distortion(&[], &[]);
        assert!(matches!(
            distortion_picture(&report),
            Err(PlotError::NothingToDraw { .. })
        ));
    }

    /// Every picture, for the checks that hold for all of them.
    fn gallery() -> Vec<(&'static str, Picture)> {
        let many = sample::levels(1e-3, 0.4, 60);
        let audio = sample::levels(20.0, 20e3, 31);
        let drives = [0.01, 0.08, 0.2].map(|level| sample::point(1000.0, level));
        let named: Vec<Drive> = ["clean", "edge", "crushed"]
            .iter()
            .zip(&drives)
            .map(|(name, point)| Drive { name, point })
            .collect();
        let long = "A stage with a title so long that no sheet of any size could hold it on one line, nor on two, \
                    however small the letters: direct-coupled pair with series feedback and a split emitter";
        let mut titled = sample::bias();
        titled.title = long.into();
        titled.conditions.assumed = vec!["0 Ω source".into(), "no load".into()];
        let first = sample::distortion(&[1000.0], &many);
        vec![
            ("thd-level", thd_against_level(&first).unwrap()),
            (
                "thd-family",
                thd_against_level(&sample::distortion(&[100.0, 1000.0, 5000.0], &many)).unwrap(),
            ),
            (
                "thd-frequency",
                thd_against_frequency(&sample::distortion(&audio, &[0.01, 0.05, 0.1])).unwrap(),
            ),
            (
                "bars",
                harmonic_bars(&first.title, &first.conditions, &named).unwrap(),
            ),
            (
                "waveform",
                waveform(&first.title, &first.conditions, &drives[2]).unwrap(),
            ),
            (
                "single",
                spectrum_and_waveform(&first.title, &first.conditions, &drives[1]).unwrap(),
            ),
            ("transfer", transfer_curve(&sample::bias()).unwrap()),
            ("transfer-long", transfer_curve(&titled).unwrap()),
        ]
    }

    #[test]
    fn no_text_leaves_the_sheet_or_covers_another() {
        for (name, picture) in gallery() {
            let boxes = picture.text_boxes();
            for (text, area) in &boxes {
                assert!(
                    area.inside(&picture.sheet()),
                    "{name}: {text:?} at {area:?} leaves the sheet"
                );
            }
            for (index, (text, area)) in boxes.iter().enumerate() {
                for (other, other_area) in &boxes[index + 1..] {
                    assert!(
                        !area.overlaps(other_area),
                        "{name}: {text:?} covers {other:?}"
                    );
                }
            }
        }
    }

    #[test]
    fn every_svg_is_balanced_and_carries_title_and_conditions() {
        for (name, picture) in gallery() {
            let svg = render::svg(&picture).unwrap();
            assert!(
                svg.starts_with("<svg ") && svg.trim_end().ends_with("</svg>"),
                "{name}"
            );
            assert_eq!(
                svg.matches("<text").count(),
                svg.matches("</text>").count(),
                "{name}"
            );
            assert!(
                svg.contains("25 °C, source 600 Ω"),
                "{name} has no conditions"
            );
            let title = if name == "transfer-long" {
                "A stage with a title"
            } else {
                "Fernhill talkback preamp"
            };
            assert!(svg.contains(title), "{name} has no title");
        }
    }

    /// `CLEANSWING_GALLERY=FOLDER cargo test gallery` leaves every picture in a folder, for a look.
    #[test]
    fn the_gallery_is_written_where_it_is_asked_for() {
        let Some(folder) = std::env::var_os("CLEANSWING_GALLERY") else {
            return;
        };
        for (name, picture) in gallery() {
            for extension in ["svg", "png"] {
                let path = std::path::Path::new(&folder)
                    .join(name)
                    .with_extension(extension);
                PlotFile::new(&path, true).unwrap().write(&picture).unwrap();
            }
        }
    }

    #[test]
    fn legends_name_every_curve() {
        for (name, entries) in [
            ("thd-level", vec!["THD", "H2", "H3", "H4", "H5"]),
            ("thd-family", vec!["100 Hz", "1 kHz", "5 kHz"]),
            ("thd-frequency", vec!["10 mV", "50 mV", "100 mV"]),
            ("bars", vec!["clean", "edge", "crushed"]),
        ] {
            let gallery = gallery();
            let picture = &gallery.iter().find(|(of, _)| *of == name).unwrap().1;
            let texts = picture.texts().join("\n");
            entries
                .iter()
                .for_each(|entry| assert!(texts.contains(entry), "{name} lacks {entry}: {texts}"));
        }
    }

    #[test]
    fn every_png_decodes_and_is_not_blank() {
        for (name, picture) in gallery() {
            let bytes = render::png(&picture).unwrap();
            let mut reader = png::Decoder::new(bytes.as_slice()).read_info().unwrap();
            let mut pixels = vec![0; reader.output_buffer_size()];
            let info = reader.next_frame(&mut pixels).unwrap();
            assert_eq!(
                (f64::from(info.width), f64::from(info.height)),
                picture.size(),
                "{name}"
            );
            let paper = pixels[..3].to_vec();
            let drawn = pixels
                .chunks_exact(3)
                .filter(|pixel| *pixel != paper)
                .count();
            // Text, frame and curves cover a few percent of a sheet; a blank one none.
            assert!(
                drawn * 100 > pixels.len() / 3,
                "{name}: {drawn} pixels drawn"
            );
        }
    }
}
