//! `listen`: a WAV file through the stage.

use std::path::Path;
use std::time::Instant;

use super::interrupt::Guard;
use super::progress::Bar;
use super::{CommandError, output, stage};
use crate::audio::wav::{WavOptions, WavReader, WavSpec, WavWriter};
use crate::cli::{ASSUMED_FULL_SCALE, ListenArguments, OutputFullScale};
use crate::present::text;
use crate::render::{RenderReport, Side, SoundLevels, SoundMeter, SoundStage, default_factor};

/// Frames taken at once.
const BLOCK: usize = 8192;
/// True peak of a fitted output, dBTP.
const FIT_DBTP: f64 = -1.0;
/// Mean of a sound, relative to its full scale, above which it has a DC offset: −50 dBFS.
const OFFSET: f64 = 3e-3;

/// One rendering: what goes in, through what, how fine.
struct Job<'a> {
    arguments: &'a ListenArguments,
    stage: SoundStage,
    spec: WavSpec,
    /// V peak at digital full scale of the input.
    full_scale: f64,
    factor: usize,
    guard: Guard,
    bar: Bar,
}

/// Run `listen`.
pub fn run(arguments: &ListenArguments) -> Result<(), CommandError> {
    let stage = stage::read(&arguments.stage)?;
    for (path, what) in [
        (&arguments.input, "the sound that goes in"),
        (&arguments.output, "the sound that comes out"),
    ] {
        if path.as_os_str() == "-" {
            return Err(CommandError::NeedsFile { what });
        }
    }
    check_output(arguments)?;
    let spec = WavReader::open(&arguments.input)?.spec();
    let guard = Guard::new();
    let writer = WavWriter::create(&arguments.output, options(arguments, &spec))?;
    let stage = SoundStage::new(&stage).map_err(CommandError::render(&arguments.stage.stage))?;
    let passes = match arguments.output_full_scale {
        OutputFullScale::Fit => 2,
        OutputFullScale::Level(_) => 1,
    };
    let full_scale = arguments.full_scale.map(|level| level.peak());
    let factor = arguments.oversample;
    let job = Job {
        arguments,
        stage,
        spec,
        full_scale: full_scale.unwrap_or(ASSUMED_FULL_SCALE),
        factor: factor.unwrap_or_else(|| default_factor(f64::from(spec.rate))),
        guard,
        bar: Bar::new(passes * spec.frames),
    };
    let report = job.render(writer)?;
    drop(job);
    output::say(&text::listen(&report));
    Ok(())
}

/// The output must be named as what it is and must not replace what is read, `--overwrite` or not.
fn check_output(arguments: &ListenArguments) -> Result<(), CommandError> {
    let path = &arguments.output;
    let named = path
        .extension()
        .is_some_and(|extension| extension.eq_ignore_ascii_case("wav"));
    if !named {
        return Err(CommandError::NotNamedWav { path: path.clone() });
    }
    let same = |other: &Path| match (path.canonicalize(), other.canonicalize()) {
        (Ok(a), Ok(b)) => a == b,
        _ => false,
    };
    if same(&arguments.input) || same(&arguments.stage.stage) {
        return Err(CommandError::OutputIsInput { path: path.clone() });
    }
    Ok(())
}

fn options(arguments: &ListenArguments, spec: &WavSpec) -> WavOptions {
    WavOptions {
        dither: arguments.dither,
        overwrite: arguments.overwrite,
        ..WavOptions::new(spec.rate, spec.channels, arguments.format)
    }
}

impl Job<'_> {
    /// Measure first where the output is fitted, then write.
    fn render(&self, mut writer: WavWriter) -> Result<RenderReport, CommandError> {
        let (output_full_scale, note) = self.output_full_scale()?;
        let mut heard = SoundMeter::new(self.spec.channels, self.spec.rate)?;
        let mut given = SoundMeter::new(self.spec.channels, self.spec.rate)?;
        let began = Instant::now();
        self.pass(
            |input| Ok(given.push(input)?),
            |volts| {
                let samples = scaled(volts, 1.0 / output_full_scale);
                heard.push(&samples)?;
                Ok(writer.write_block(&samples)?)
            },
        )?;
        let written = writer.finish()?;
        let speed = self.spec.seconds() / began.elapsed().as_secs_f64();
        let (given, heard) = (given.finish(), heard.finish());
        Ok(RenderReport {
            input: Side {
                path: self.arguments.input.display().to_string(),
                format: self.spec.format,
                full_scale: self.full_scale,
                full_scale_note: self
                    .arguments
                    .full_scale
                    .is_none()
                    .then(|| "assumed; state it with --full-scale".to_owned()),
                levels: given,
            },
            output: Side {
                path: self.arguments.output.display().to_string(),
                format: self.arguments.format,
                full_scale: output_full_scale,
                full_scale_note: note,
                levels: heard,
            },
            rate: self.spec.rate,
            channels: self.spec.channels,
            seconds: self.spec.seconds(),
            factor: self.factor,
            rule: self.renderer()?.rule(),
            clipped_samples: written.clipped_samples,
            speed,
            cautions: cautions(&given, &heard, written.clipped_samples),
        })
    }

    /// V peak at digital full scale of the output, and where it comes from if it was not stated.
    fn output_full_scale(&self) -> Result<(f64, Option<String>), CommandError> {
        if let OutputFullScale::Level(level) = self.arguments.output_full_scale {
            return Ok((level.peak(), None));
        }
        let mut meter = SoundMeter::new(self.spec.channels, self.spec.rate)?;
        self.pass(|_| Ok(()), |volts| Ok(meter.push(volts)?))?;
        let peak = meter.finish().true_peak;
        if peak > 0.0 {
            let note = format!("fit: true peak at {FIT_DBTP:.0} dBTP");
            Ok((peak / 10f64.powf(FIT_DBTP / 20.0), Some(note)))
        } else {
            let note = "nothing to fit: the output is silent".to_owned();
            Ok((ASSUMED_FULL_SCALE, Some(note)))
        }
    }

    fn renderer(&self) -> Result<crate::render::Renderer, CommandError> {
        self.stage
            .renderer(self.spec.channels, f64::from(self.spec.rate), self.factor)
            .map_err(CommandError::render(self.stage_path()))
    }

    fn stage_path(&self) -> &Path {
        &self.arguments.stage.stage
    }

    /// The whole file through the stage: `given` takes the samples that go in, `heard` the volts that come out.
    fn pass(
        &self,
        mut given: impl FnMut(&[Vec<f64>]) -> Result<(), CommandError>,
        mut heard: impl FnMut(&[Vec<f64>]) -> Result<(), CommandError>,
    ) -> Result<(), CommandError> {
        let mut reader = WavReader::open(&self.arguments.input)?;
        let mut renderer = self.renderer()?;
        let mut block = vec![Vec::new(); self.spec.channels];
        loop {
            self.guard.check()?;
            let frames = reader.read_block(&mut block, BLOCK)?;
            if frames == 0 {
                break;
            }
            given(&block)?;
            let volts = renderer.push(&scaled(&block, self.full_scale));
            heard(volts.map_err(CommandError::render(self.stage_path()))?)?;
            self.bar.advance(frames as u64);
        }
        heard(
            renderer
                .finish()
                .map_err(CommandError::render(self.stage_path()))?,
        )
    }
}

fn scaled(channels: &[Vec<f64>], by: f64) -> Vec<Vec<f64>> {
    let scale = |samples: &Vec<f64>| samples.iter().map(|x| x * by).collect();
    channels.iter().map(scale).collect()
}

fn cautions(given: &SoundLevels, heard: &SoundLevels, clipped: u64) -> Vec<String> {
    let mut cautions = Vec::new();
    if given.peak == 0.0 {
        cautions.push("the input is silent".to_owned());
    }
    if given.offset.abs() > OFFSET {
        cautions.push(format!(
            "the input has a DC offset of {:.1} % of full scale; outside the file there is none, so it begins and ends with a step",
            100.0 * given.offset
        ));
    }
    if clipped > 0 {
        cautions.push(format!(
            "{clipped} samples were held at digital full scale, which is not the stage's doing; \
             raise --output-full-scale, or leave it at fit"
        ));
    } else if heard.true_peak > 1.0 {
        cautions.push(
            "the output passes full scale between or at its samples; a player will clip it"
                .to_owned(),
        );
    }
    cautions
}

#[cfg(test)]
mod tests {
    use super::*;

    fn levels(peak: f64, offset: f64) -> SoundLevels {
        SoundLevels {
            peak,
            true_peak: peak,
            rms_dbfs: None,
            loudness_lufs: None,
            offset,
        }
    }

    #[test]
    fn an_ordinary_rendering_has_no_caution() {
        assert!(cautions(&levels(0.5, 1e-4), &levels(0.89, 0.0), 0).is_empty());
    }

    #[test]
    fn silence_an_offset_and_a_clipped_output_are_each_told() {
        assert!(cautions(&levels(0.0, 0.0), &levels(0.0, 0.0), 0)[0].contains("silent"));
        assert!(cautions(&levels(0.5, -0.1), &levels(0.5, 0.0), 0)[0].contains("-10.0 %"));
        assert!(cautions(&levels(0.5, 0.0), &levels(2.0, 0.0), 7)[0].contains("7 samples"));
        assert_eq!(cautions(&levels(0.5, 0.0), &levels(2.0, 0.0), 0).len(), 1);
    }
}
