//! Streamed reading.

use std::fs::File;
use std::io::{BufReader, Chain, Cursor, Read, Seek, SeekFrom, Take};
use std::path::{Path, PathBuf};

use super::header::{Layout, read_error};
use super::{AudioError, SampleFormat, WavSpec};

type Source = Chain<Cursor<Vec<u8>>, Take<BufReader<File>>>;

/// An open WAV file whose header is sound and whose data are all there.
pub struct WavReader {
    path: PathBuf,
    spec: WavSpec,
    samples: hound::WavReader<Source>,
    frames_read: u64,
}

impl WavReader {
    /// Opens `path`; a missing, empty, foreign, truncated or unsupported file is refused here,
    /// before anything is made from it.
    pub fn open(path: &Path) -> Result<Self, AudioError> {
        let mut file = File::open(path).map_err(|source| AudioError::File {
            path: path.to_owned(),
            action: "open",
            source,
        })?;
        if !file.metadata().map_err(|e| read_error(path, e))?.is_file() {
            return Err(AudioError::NotAFile {
                path: path.to_owned(),
            });
        }
        let layout = Layout::read(&mut file, path)?;
        file.seek(SeekFrom::Start(layout.data_start))
            .map_err(|e| read_error(path, e))?;
        let data = BufReader::with_capacity(1 << 16, file).take(layout.data_length.into());
        let source = Cursor::new(layout.plain_header()).chain(data);
        let samples = hound::WavReader::new(source).map_err(|e| decode_error(path, e))?;
        Ok(Self {
            path: path.to_owned(),
            spec: layout.spec,
            samples,
            frames_read: 0,
        })
    }

    /// What the file holds.
    pub fn spec(&self) -> WavSpec {
        self.spec
    }

    /// Reads up to `frames` frames; each of `channels` is emptied and then filled with its samples
    /// in ±1 full scale. Returns the frames read, fewer only at the end, 0 after it.
    pub fn read_block(
        &mut self,
        channels: &mut [Vec<f64>],
        frames: usize,
    ) -> Result<usize, AudioError> {
        if channels.len() != self.spec.channels {
            let detail = format!(
                "{} buffers for a file of {} channels",
                channels.len(),
                self.spec.channels
            );
            return Err(AudioError::Shape { detail });
        }
        channels.iter_mut().for_each(Vec::clear);
        let left = self.spec.frames - self.frames_read;
        let count = left.min(frames as u64) as usize;
        match self.spec.format {
            SampleFormat::F32 => self.read_floats(channels, count)?,
            format => self.read_integers(channels, count, format.bits())?,
        }
        self.frames_read += count as u64;
        Ok(count)
    }

    /// The whole file, a vector a channel; for sounds known to be short.
    pub fn read_all(&mut self) -> Result<Vec<Vec<f64>>, AudioError> {
        let mut channels = vec![Vec::new(); self.spec.channels];
        let left = self.spec.frames - self.frames_read;
        self.read_block(&mut channels, left as usize)?;
        Ok(channels)
    }

    fn read_integers(
        &mut self,
        channels: &mut [Vec<f64>],
        count: usize,
        bits: u16,
    ) -> Result<(), AudioError> {
        let step = 1.0 / (1_u64 << (bits - 1)) as f64;
        let mut samples = self.samples.samples::<i32>();
        for _ in 0..count {
            for channel in channels.iter_mut() {
                let code = next(&mut samples, &self.path)?;
                channel.push(f64::from(code) * step);
            }
        }
        Ok(())
    }

    fn read_floats(&mut self, channels: &mut [Vec<f64>], count: usize) -> Result<(), AudioError> {
        let mut samples = self.samples.samples::<f32>();
        for i in 0..count {
            for (c, channel) in channels.iter_mut().enumerate() {
                let sample = f64::from(next(&mut samples, &self.path)?);
                if !sample.is_finite() {
                    let frame = self.frames_read + i as u64;
                    return Err(AudioError::NotFinite {
                        path: self.path.clone(),
                        frame,
                        channel: c + 1,
                        found: sample,
                    });
                }
                channel.push(sample);
            }
        }
        Ok(())
    }
}

/// The next sample; that none is left means the file shrank while it was read.
fn next<S>(
    samples: &mut impl Iterator<Item = hound::Result<S>>,
    path: &Path,
) -> Result<S, AudioError> {
    match samples.next() {
        Some(sample) => sample.map_err(|e| decode_error(path, e)),
        None => Err(read_error(path, std::io::ErrorKind::UnexpectedEof.into())),
    }
}

fn decode_error(path: &Path, error: hound::Error) -> AudioError {
    match error {
        hound::Error::IoError(source) => read_error(path, source),
        other => AudioError::Malformed {
            path: path.to_owned(),
            detail: other.to_string(),
        },
    }
}
