//! A report in the form asked for.

use super::{CommandError, output};
use crate::cli::ReportArguments;
use crate::present::plot::{Picture, PlotError, PlotFile};
use crate::present::{json, text};

/// The faces of one report.
pub struct Faces<'a, R> {
    /// The table for people, cautions included.
    pub text: fn(&R) -> String,
    /// The JSON document.
    pub json: fn(&R) -> serde_json::Value,
    /// The CSV rows.
    pub csv: fn(&R) -> String,
    /// The picture.
    pub picture: fn(&R) -> Result<Picture, PlotError>,
    /// Its cautions.
    pub cautions: &'a [String],
}

/// The plot file asked for, checked before anything is computed.
pub fn plot_file(arguments: &ReportArguments) -> Result<Option<PlotFile>, CommandError> {
    let plot = arguments.plot.as_deref();
    let file = plot.map(|path| PlotFile::new(path, arguments.overwrite));
    Ok(file.transpose()?)
}

/// Draw and print `report`. The picture comes first: once the figures are on standard output nothing can fail.
pub fn show<R>(
    report: &R,
    faces: &Faces<R>,
    arguments: &ReportArguments,
    plot: Option<PlotFile>,
) -> Result<(), CommandError> {
    if let Some(file) = plot {
        file.write(&(faces.picture)(report)?)?;
    }
    if !arguments.json && !arguments.csv {
        return output::print(&(faces.text)(report));
    }
    output::say(&text::cautions(faces.cautions));
    if arguments.json {
        output::print(&json::printed(&(faces.json)(report)))
    } else {
        output::print(&(faces.csv)(report))
    }
}
