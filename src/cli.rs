//! Options and help texts. No work is done here; a value is checked as far as its spelling goes.

use std::path::PathBuf;

use clap::{Args, Parser, Subcommand};

use crate::audio::dither::Dither;
use crate::audio::oversample::MAX_FACTOR;
use crate::audio::wav::SampleFormat;
use crate::measure::distortion::DEFAULT_BANDWIDTH;
use crate::quantity::{Frequency, Level, List, ValueError, quoted};
use crate::stage::Override;

/// What a transistor audio stage does to sound: bias, gain, distortion, and the sound itself.
///
/// A stage is described in one text file; `cleanswing demo` shows all of it at work. Results go to standard output,
/// cautions and progress to standard error.
#[derive(Debug, Parser)]
#[command(
    version,
    arg_required_else_help = true,
    max_term_width = 110,
    after_help = "Exit codes: 0 done, 2 the request or a file is wrong, 3 the computation has no answer, 130 interrupted."
)]
pub struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

/// The subcommands.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// Show what this does, now: a stage, its figures, plots and sound, in the folder cleanswing-demo.
    Demo,
    /// List the stage files to start from, or write one.
    Start(StartArguments),
    /// Where the stage sits: node voltages, currents, supply, static swing.
    Bias(BiasArguments),
    /// THD and every harmonic against input level and frequency.
    Distortion(DistortionArguments),
    /// Play a WAV file through the stage.
    Listen(ListenArguments),
}

/// `start`.
#[derive(Debug, Args)]
pub struct StartArguments {
    /// The starter to write; without it all starters are listed.
    pub name: Option<String>,
    /// Write the stage to FILE instead of standard output.
    #[arg(short, long, value_name = "FILE", requires = "name")]
    pub output: Option<PathBuf>,
    /// Replace FILE where it exists.
    #[arg(long, requires = "output")]
    pub overwrite: bool,
}

/// The stage and what is changed in it.
#[derive(Debug, Args)]
pub struct StageArguments {
    /// The stage file, or - for standard input.
    pub stage: PathBuf,
    /// Change one value of the stage for this run, such as R4=100, vcc=9, P1.turn=0.7, temperature=60C,
    /// Q1.forward_gain=120, R6=open or C2=short; may be given several times.
    #[arg(long = "set", value_name = "NAME=VALUE")]
    pub overrides: Vec<Override>,
}

/// How a report is shown.
#[derive(Debug, Args)]
pub struct ReportArguments {
    /// Print the report as one JSON document with full precision.
    #[arg(long, conflicts_with = "csv")]
    pub json: bool,
    /// Print the report as CSV with full precision.
    #[arg(long)]
    pub csv: bool,
    /// Draw the report into FILE, which ends in .svg or .png.
    #[arg(long, value_name = "FILE")]
    pub plot: Option<PathBuf>,
    /// Replace the plot's FILE where it exists.
    #[arg(long, requires = "plot")]
    pub overwrite: bool,
}

/// `bias`.
#[derive(Debug, Args)]
pub struct BiasArguments {
    /// The stage.
    #[command(flatten)]
    pub stage: StageArguments,
    /// The report.
    #[command(flatten)]
    pub report: ReportArguments,
}

/// `distortion`.
#[derive(Debug, Args)]
pub struct DistortionArguments {
    /// The stage.
    #[command(flatten)]
    pub stage: StageArguments,
    /// Measure at these levels of the source EMF, such as 20mV (rms), 28.3mVpk, -34dBV, a list 10mV,20mV or a range
    /// 1mV..1V/60; without it 60 levels run from 60 dB below the level of 10 % THD to 10 dB above it.
    #[arg(long, value_name = "LIST", allow_hyphen_values = true)]
    pub level: Option<List<Level>>,
    /// Measure at these frequencies, such as 1kHz, a list 100,1k,10k or a range 20Hz..20kHz/31.
    #[arg(
        long,
        value_name = "LIST",
        default_value = "1kHz",
        allow_hyphen_values = true
    )]
    pub frequency: List<Frequency>,
    /// Count the harmonics up to HZ into the THD, such as 22kHz, 30kHz or 80kHz; none counts all there are.
    #[arg(long, value_name = "HZ", default_value_t = Bandwidth(Some(DEFAULT_BANDWIDTH)), allow_hyphen_values = true)]
    pub bandwidth: Bandwidth,
    /// The report.
    #[command(flatten)]
    pub report: ReportArguments,
}

/// `listen`.
#[derive(Debug, Args)]
pub struct ListenArguments {
    /// The stage.
    #[command(flatten)]
    pub stage: StageArguments,
    /// The sound to play: a WAV file of 16, 24 or 32-bit integer or 32-bit float samples.
    #[arg(value_name = "INPUT.wav")]
    pub input: PathBuf,
    /// Write the sound that comes out to OUTPUT.wav, as many samples at the same rate.
    #[arg(short, long, value_name = "OUTPUT.wav")]
    pub output: PathBuf,
    /// Let digital full scale of the input be this source EMF: 200mVpk is its peak, +18dBu or 1V the rms of a
    /// full-scale sine.
    #[arg(long, value_name = "LEVEL", value_parser = positive_level, allow_hyphen_values = true)]
    pub full_scale: Option<Level>,
    /// Let digital full scale of the output be this voltage, or fit it: two passes, the true peak at -1 dBTP.
    #[arg(
        long,
        value_name = "LEVEL",
        default_value = "fit",
        allow_hyphen_values = true
    )]
    pub output_full_scale: OutputFullScale,
    /// Step the stage at N times the sampling rate; without it at the least product of twos and threes that makes
    /// 384 kHz or more.
    #[arg(long, value_name = "N", value_parser = factor, allow_hyphen_values = true)]
    pub oversample: Option<usize>,
    /// Store samples as s16, s24 or s32 (integers) or f32 (float, which cannot clip).
    #[arg(long, value_name = "FORMAT", default_value = "s24")]
    pub format: SampleFormat,
    /// Round integers with tpdf dither or with none.
    #[arg(long, value_name = "DITHER", default_value = "tpdf")]
    pub dither: Dither,
    /// Replace OUTPUT.wav where it exists.
    #[arg(long)]
    pub overwrite: bool,
}

/// Full scale without `--full-scale`, V peak.
pub const ASSUMED_FULL_SCALE: f64 = 1.0;

/// Upper edge of the harmonics that count, Hz; `None` for no edge.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Bandwidth(pub Option<f64>);

impl std::str::FromStr for Bandwidth {
    type Err = ValueError;

    fn from_str(text: &str) -> Result<Self, ValueError> {
        match text {
            "none" => Ok(Bandwidth(None)),
            _ => text
                .parse::<Frequency>()
                .map(|frequency| Bandwidth(Some(frequency.hertz))),
        }
    }
}

impl std::fmt::Display for Bandwidth {
    fn fmt(&self, out: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self.0 {
            Some(hertz) => write!(out, "{}kHz", hertz / 1e3),
            None => write!(out, "none"),
        }
    }
}

/// What digital full scale of the output stands for.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum OutputFullScale {
    /// Whatever puts the true peak at −1 dBTP.
    Fit,
    /// A stated voltage.
    Level(Level),
}

impl std::str::FromStr for OutputFullScale {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        match text {
            "fit" => Ok(OutputFullScale::Fit),
            _ => positive_level(text)
                .map(OutputFullScale::Level)
                .map_err(|error| format!("{error}, or fit")),
        }
    }
}

fn positive_level(text: &str) -> Result<Level, String> {
    let level: Level = text
        .parse()
        .map_err(|error: ValueError| error.to_string())?;
    if level.rms > 0.0 {
        Ok(level)
    } else {
        Err(format!(
            "{} is nothing, must be above 0 V such as 200mVpk or +18dBu",
            quoted(text)
        ))
    }
}

fn factor(text: &str) -> Result<usize, String> {
    text.parse()
        .ok()
        .filter(|factor| (1..=MAX_FACTOR).contains(factor))
        .ok_or_else(|| format!("must be a whole number from 1 to {MAX_FACTOR}"))
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    #[test]
    fn the_options_do_not_contradict_each_other() {
        Arguments::command().debug_assert();
    }

    #[test]
    fn every_option_is_explained_in_a_full_sentence() {
        for command in Arguments::command().get_subcommands() {
            for argument in command.get_arguments() {
                let help = argument.get_help().map(ToString::to_string);
                let help = help.unwrap_or_default();
                // clap takes the full stop off a single paragraph
                assert!(
                    help.len() > 12 && help.starts_with(char::is_uppercase),
                    "{} {}: {help:?}",
                    command.get_name(),
                    argument.get_id()
                );
            }
        }
    }

    #[test]
    fn a_full_scale_is_the_peak_of_a_full_scale_sine() {
        // Peak as typed; +18 dBu is 0.7746·10^(18/20) = 6.153 V rms, √2 times that at the peak.
        assert!((positive_level("200mVpk").unwrap().peak() - 0.2).abs() < 1e-15);
        assert!((positive_level("+18dBu").unwrap().peak() - 8.7018).abs() < 1e-3);
        assert!(positive_level("0V").is_err());
    }

    #[test]
    fn a_bandwidth_is_a_frequency_or_none() {
        assert_eq!("none".parse(), Ok(Bandwidth(None)));
        assert_eq!("22k".parse(), Ok(Bandwidth(Some(22e3))));
        assert_eq!(Bandwidth(Some(80e3)).to_string(), "80kHz");
        assert!("wide".parse::<Bandwidth>().is_err());
    }
}
