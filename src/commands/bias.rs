//! `bias`: where the stage sits.

use super::report::{self, Faces};
use super::{CommandError, stage};
use crate::cli::BiasArguments;
use crate::measure::bias::bias;
use crate::present::{csv, json, plot, text};

/// Run `bias`.
pub fn run(arguments: &BiasArguments) -> Result<(), CommandError> {
    let file = report::plot_file(&arguments.report)?;
    let stage = stage::read(&arguments.stage)?;
    let found = bias(&stage).map_err(CommandError::engine(&arguments.stage.stage))?;
    let faces = Faces {
        text: text::bias,
        json: json::bias,
        csv: csv::bias,
        picture: plot::bias_picture,
        cautions: &found.cautions,
    };
    report::show(&found, &faces, &arguments.report, file)
}
