//! `distortion`: THD and harmonics against level and frequency.

use super::progress::Waiting;
use super::report::{self, Faces};
use super::{CommandError, stage};
use crate::cli::DistortionArguments;
use crate::measure::distortion::{DistortionRequest, distortion};
use crate::present::{csv, json, plot, text};

/// Run `distortion`.
pub fn run(arguments: &DistortionArguments) -> Result<(), CommandError> {
    let file = report::plot_file(&arguments.report)?;
    let stage = stage::read(&arguments.stage)?;
    let waiting = Waiting::new("measuring");
    let found = distortion(&stage, &request(arguments))
        .map_err(CommandError::engine(&arguments.stage.stage))?;
    drop(waiting);
    let faces = Faces {
        text: text::distortion,
        json: json::distortion,
        csv: csv::distortion,
        picture: plot::distortion_picture,
        cautions: &found.cautions,
    };
    report::show(&found, &faces, &arguments.report, file)
}

fn request(arguments: &DistortionArguments) -> DistortionRequest {
    let levels = arguments.level.iter().flat_map(|list| &list.0);
    let frequencies = arguments.frequency.0.iter();
    DistortionRequest {
        levels: levels.map(|level| level.rms).collect(),
        frequencies: frequencies.map(|frequency| frequency.hertz).collect(),
        bandwidth: arguments.bandwidth.0,
    }
}
