//! Streamed writing: all or nothing.

use std::fs::{File, OpenOptions};
use std::io::{self, BufWriter, Seek, SeekFrom, Write};
use std::path::{Path, PathBuf};

use tempfile::TempPath;

use super::{AudioError, MAX_CHANNELS, RATES, SampleFormat};
use crate::audio::dither::{Dither, Quantizer};

/// What to write, and how.
#[derive(Clone, Copy, Debug)]
pub struct WavOptions {
    /// Sampling rate in hertz, 8000 to 192000.
    pub rate: u32,
    /// Number of channels, 1 to 8.
    pub channels: usize,
    /// How samples are stored.
    pub format: SampleFormat,
    /// Dither for integer formats.
    pub dither: Dither,
    /// Seed of the dither.
    pub seed: u64,
    /// Whether an existing target is replaced.
    pub overwrite: bool,
}

impl WavOptions {
    /// TPDF dither of seed 0, an existing target kept.
    pub fn new(rate: u32, channels: usize, format: SampleFormat) -> Self {
        Self {
            rate,
            channels,
            format,
            dither: Dither::Tpdf,
            seed: 0,
            overwrite: false,
        }
    }
}

/// What was written.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Written {
    /// Sample instants.
    pub frames: u64,
    /// Samples of all channels that were beyond full scale and held there; 0 for float.
    pub clipped_samples: u64,
}

/// A WAV file in the making, beside its target, which stays as it is until [`WavWriter::finish`];
/// dropped before that, it leaves nothing.
pub struct WavWriter {
    target: PathBuf,
    options: WavOptions,
    // Before `temporary`, so that the file is closed before it is removed.
    samples: hound::WavWriter<BufWriter<File>>,
    temporary: TempPath,
    quantizers: Vec<Quantizer>,
    frames: u64,
    max_frames: u64,
}

impl WavWriter {
    /// Opens a temporary file beside `target`; a target that may not be replaced is refused here,
    /// before a long run.
    pub fn create(target: &Path, options: WavOptions) -> Result<Self, AudioError> {
        check_options(&options)?;
        check_target(target, options.overwrite)?;
        let create_error = |source| AudioError::File {
            path: target.to_owned(),
            action: "create",
            source,
        };
        let (file, temporary) = temporary_beside(target).map_err(create_error)?;
        let spec = hound::WavSpec {
            channels: options.channels as u16,
            sample_rate: options.rate,
            bits_per_sample: options.format.bits(),
            sample_format: if options.format.is_integer() {
                hound::SampleFormat::Int
            } else {
                hound::SampleFormat::Float
            },
        };
        let samples = hound::WavWriter::new(BufWriter::with_capacity(1 << 16, file), spec)
            .map_err(|e| encode_error(target, e))?;
        let bits = u32::from(options.format.bits());
        let quantizer =
            |channel| Quantizer::new(bits, options.dither, options.seed, channel as u64);
        let frame_bytes = u64::from(bits / 8) * options.channels as u64;
        Ok(Self {
            target: target.to_owned(),
            options,
            samples,
            temporary,
            quantizers: (0..options.channels).map(quantizer).collect(),
            frames: 0,
            // 68 bytes is the longest header; one more for the pad byte.
            max_frames: (u64::from(u32::MAX) - 69) / frame_bytes,
        })
    }

    /// Appends a block, a slice a channel, all of one length, in ±1 full scale.
    pub fn write_block<S: AsRef<[f64]>>(&mut self, channels: &[S]) -> Result<(), AudioError> {
        let length = self.check_shape(channels)?;
        if self.frames + length as u64 > self.max_frames {
            return Err(AudioError::TooLong {
                path: self.target.clone(),
            });
        }
        for i in 0..length {
            for (c, channel) in channels.iter().enumerate() {
                self.write_sample(c, channel.as_ref()[i])?;
            }
            self.frames += 1;
        }
        Ok(())
    }

    /// Samples so far that were beyond full scale; 0 for float.
    pub fn clipped_samples(&self) -> u64 {
        self.quantizers.iter().map(Quantizer::clipped).sum()
    }

    /// Completes the file and gives it its name; on any failure the target stays as it was.
    pub fn finish(self) -> Result<Written, AudioError> {
        let written = Written {
            frames: self.frames,
            clipped_samples: self.clipped_samples(),
        };
        self.samples
            .finalize()
            .map_err(|e| encode_error(&self.target, e))?;
        let bytes =
            self.frames * self.options.channels as u64 * u64::from(self.options.format.bits() / 8);
        if bytes % 2 == 1 {
            pad_to_even(&self.temporary).map_err(|e| write_error(&self.target, e))?;
        }
        let renamed = if self.options.overwrite {
            self.temporary.persist(&self.target)
        } else {
            self.temporary.persist_noclobber(&self.target)
        };
        match renamed {
            Ok(()) => Ok(written),
            Err(e) if e.error.kind() == io::ErrorKind::AlreadyExists => {
                Err(AudioError::Exists { path: self.target })
            }
            Err(e) => Err(write_error(&self.target, e.error)),
        }
    }

    fn check_shape<S: AsRef<[f64]>>(&self, channels: &[S]) -> Result<usize, AudioError> {
        let lengths: Vec<usize> = channels.iter().map(|c| c.as_ref().len()).collect();
        if lengths.len() != self.options.channels {
            let detail = format!(
                "{} given for a file of {}",
                lengths.len(),
                self.options.channels
            );
            return Err(AudioError::Shape { detail });
        }
        if lengths.iter().any(|length| *length != lengths[0]) {
            return Err(AudioError::Shape {
                detail: format!("lengths {lengths:?} in one block"),
            });
        }
        Ok(lengths[0])
    }

    fn write_sample(&mut self, channel: usize, sample: f64) -> Result<(), AudioError> {
        if !sample.is_finite()
            || (!self.options.format.is_integer() && !(sample as f32).is_finite())
        {
            let (path, frame) = (self.target.clone(), self.frames);
            return Err(AudioError::NotFinite {
                path,
                frame,
                channel: channel + 1,
                found: sample,
            });
        }
        let written = match self.options.format {
            SampleFormat::F32 => self.samples.write_sample(sample as f32),
            _ => self
                .samples
                .write_sample(self.quantizers[channel].quantize(sample)),
        };
        written.map_err(|e| encode_error(&self.target, e))
    }
}

fn check_options(options: &WavOptions) -> Result<(), AudioError> {
    if !(1..=usize::from(MAX_CHANNELS)).contains(&options.channels) {
        let found = options.channels as f64;
        return Err(AudioError::Range {
            what: "number of channels",
            found,
            allowed: format!("1 to {MAX_CHANNELS}"),
        });
    }
    if !RATES.contains(&options.rate) {
        let allowed = format!("{} to {} Hz", RATES.start(), RATES.end());
        return Err(AudioError::Range {
            what: "sampling rate",
            found: options.rate.into(),
            allowed,
        });
    }
    Ok(())
}

/// Renaming would put an ordinary file in the place of a directory or a device: never done.
fn check_target(target: &Path, overwrite: bool) -> Result<(), AudioError> {
    let path = || target.to_owned();
    match target.metadata() {
        Ok(found) if !found.is_file() => Err(AudioError::NotAFile { path: path() }),
        Ok(_) if !overwrite => Err(AudioError::Exists { path: path() }),
        Ok(_) => Ok(()),
        Err(e) if e.kind() == io::ErrorKind::NotFound => Ok(()),
        Err(source) => Err(AudioError::File {
            path: path(),
            action: "create",
            source,
        }),
    }
}

/// In the target's own folder, since a rename does not cross file systems, and with the access
/// rights of an ordinary new file.
fn temporary_beside(target: &Path) -> io::Result<(File, TempPath)> {
    let folder = target
        .parent()
        .filter(|folder| !folder.as_os_str().is_empty())
        .unwrap_or(Path::new("."));
    let mut builder = tempfile::Builder::new();
    builder.prefix(".cleanswing-").suffix(".wav");
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        // Less whatever the user's mask takes away; a temporary is private otherwise.
        builder.permissions(std::fs::Permissions::from_mode(0o666));
    }
    Ok(builder.tempfile_in(folder)?.into_parts())
}

/// A chunk of odd length is followed by a zero that counts in the file's length only.
fn pad_to_even(path: &Path) -> io::Result<()> {
    let mut file = OpenOptions::new().write(true).open(path)?;
    let end = file.seek(SeekFrom::End(0))?;
    file.write_all(&[0])?;
    file.seek(SeekFrom::Start(4))?;
    // `max_frames` keeps the length within 32 bits.
    file.write_all(&((end + 1 - 8) as u32).to_le_bytes())
}

fn write_error(path: &Path, source: io::Error) -> AudioError {
    AudioError::File {
        path: path.to_owned(),
        action: "write",
        source,
    }
}

fn encode_error(path: &Path, error: hound::Error) -> AudioError {
    let source = match error {
        hound::Error::IoError(source) => source,
        other => io::Error::other(other),
    };
    write_error(path, source)
}
