//! `demo`: a stage, its figures, its pictures and its sound, without a question asked.

mod drives;
mod sound;

use std::path::{Path, PathBuf};

use super::CommandError;
use super::interrupt::Guard;
use super::output::{print, say, write_file};
use super::progress::Waiting;
use crate::measure::bias::bias;
use crate::measure::distortion::{DEFAULT_BANDWIDTH, DistortionRequest, distortion};
use crate::measure::report::{BiasReport, DistortionReport};
use crate::present::plot::{self, Picture, PlotFile, harmonic_bars};
use crate::present::text;
use crate::render::SoundStage;
use crate::stage::{Stage, starters};
use drives::Drive;
use sound::Rendered;

/// Where everything goes.
const FOLDER: &str = "cleanswing-demo";
/// The starter shown, and its file.
const STARTER: &str = "common-emitter-split";
const STAGE: &str = "stage.toml";
/// The tone of the figures, Hz.
const TONE: f64 = 1000.0;
/// Levels of the table, V rms: round numbers through the range of the stage.
const TABLE: [f64; 9] = [1e-3, 2e-3, 5e-3, 10e-3, 20e-3, 50e-3, 0.1, 0.2, 0.5];

/// Everything the demo measured.
struct Measured {
    bias: BiasReport,
    sweep: DistortionReport,
    table: DistortionReport,
    drives: Vec<Drive>,
}

/// Run `demo`.
pub fn run() -> Result<(), CommandError> {
    let folder = Path::new(FOLDER);
    std::fs::create_dir_all(folder).map_err(|source| CommandError::Unwritable {
        path: folder.to_owned(),
        source,
    })?;
    let waiting = Waiting::new("measuring and rendering");
    let guard = Guard::new();
    let starter = starters::find(STARTER)?;
    let stage = Stage::from_text(STAGE, starter.text)?.0;
    write_file(&folder.join(STAGE), starter.text, true)?;
    let measured = measure(&stage)?;
    guard.check()?;
    draw(&measured, folder)?;
    let sounding = SoundStage::new(&stage).map_err(CommandError::render(Path::new(STAGE)))?;
    let rendered = sound::render(&sounding, &measured.drives, folder, &guard)?;
    drop(guard);
    drop(waiting);
    for caution in measured
        .sweep
        .cautions
        .iter()
        .chain(&measured.table.cautions)
    {
        say(&text::cautions(std::slice::from_ref(caution)));
    }
    print(&told(&measured, &rendered))
}

fn measure(stage: &Stage) -> Result<Measured, CommandError> {
    let failed = CommandError::engine(Path::new(STAGE));
    let at = |levels: Vec<f64>| {
        let request = DistortionRequest {
            levels,
            frequencies: vec![TONE],
            bandwidth: Some(DEFAULT_BANDWIDTH),
        };
        distortion(stage, &request).map_err(&failed)
    };
    let sweep = at(Vec::new())?;
    let levels = drives::levels(&sweep.points);
    let points = at(levels.to_vec())?.points;
    Ok(Measured {
        bias: bias(stage).map_err(&failed)?,
        table: at(TABLE.to_vec())?,
        sweep,
        drives: drives::NAMES
            .into_iter()
            .zip(points)
            .map(|(name, point)| Drive { name, point })
            .collect(),
    })
}

/// The three pictures, each in its own file.
fn draw(measured: &Measured, folder: &Path) -> Result<(), CommandError> {
    let bars: Vec<plot::Drive> = measured
        .drives
        .iter()
        .map(|drive| plot::Drive {
            name: drive.name,
            point: &drive.point,
        })
        .collect();
    let bias = &measured.bias;
    let pictures: [(&str, Picture); 3] = [
        ("distortion.png", plot::distortion_picture(&measured.sweep)?),
        (
            "harmonics.png",
            harmonic_bars(&bias.title, &bias.conditions, &bars)?,
        ),
        ("transfer.png", plot::bias_picture(bias)?),
    ];
    for (name, picture) in pictures {
        PlotFile::new(&folder.join(name), true)?.write(&picture)?;
    }
    Ok(())
}

/// What the demo says.
fn told(measured: &Measured, rendered: &[Rendered]) -> String {
    let sounds: Vec<text::DrivenSound> = measured
        .drives
        .iter()
        .zip(rendered)
        .map(|(drive, sound)| text::DrivenSound {
            name: drive.name,
            point: &drive.point,
            input_full_scale: sound.input_full_scale,
            output_full_scale: sound.output_full_scale,
            levels: sound.levels,
        })
        .collect();
    let stage: PathBuf = [FOLDER, STAGE].iter().collect();
    format!(
        "{}\n{}\n{}\n{}",
        text::bias(&measured.bias),
        text::distortion_tables(&measured.table).trim_start(),
        text::driven_sounds(&sounds),
        next(&stage.display().to_string()),
    )
}

/// The files, and what to type next.
fn next(stage: &str) -> String {
    format!(
        "\
Turn the volume down before you play them, headphones off, and bring it up slowly.

in {FOLDER}/
  {STAGE}                the stage, with the reason of every part's value
  input.wav                 a plucked phrase, and what the stage makes of it:
  output-clean.wav  output-edge.wav  output-crushed.wav
  distortion.png            THD and harmonics 2 to 5 against level
  harmonics.png             the harmonics at the three drives
  transfer.png              output against EMF, with bias and swing

next (in a clone, `cargo run --release --` stands for cleanswing)
  cleanswing bias {stage} --set R4=100
  cleanswing distortion {stage} --level 50mV --frequency 100,1k,10k
  cleanswing listen {stage} YOUR.wav -o heard.wav --full-scale 500mVpk
  cleanswing start                      stages to begin your own from
"
    )
}
