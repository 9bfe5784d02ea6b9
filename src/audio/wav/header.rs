//! The chunks of a WAV file, walked and checked before a sample is read.
//!
//! RIFF: 4 letters, a little-endian 32-bit length, that many bytes, and one more if the length is
//! odd (IBM and Microsoft, "Multimedia Programming Interface and Data Specifications 1.0", 1991).
//! The sample decoder takes the layout it is given on trust: it steps over no pad byte, and meets
//! a missing end only when it gets there. So the layout is settled here against the size of the
//! file, and the decoder gets a plain header made from it.

use std::fs::File;
use std::io::{self, Read, Seek, SeekFrom};
use std::path::Path;

use super::{AudioError, MAX_CHANNELS, RATES, SampleFormat, WavSpec};

const PCM: u16 = 1;
const IEEE_FLOAT: u16 = 3;
const EXTENSIBLE: u16 = 0xfffe;
/// What follows the two bytes of the coding in an extensible header's 16-byte format mark.
const SUBFORMAT_TAIL: [u8; 14] = [
    0x00, 0x00, 0x00, 0x00, 0x10, 0x00, 0x80, 0x00, 0x00, 0xaa, 0x00, 0x38, 0x9b, 0x71,
];

/// Where the sound lies in the file, and what it is.
#[derive(Debug)]
pub(super) struct Layout {
    pub spec: WavSpec,
    /// Bytes before the first sample.
    pub data_start: u64,
    /// Bytes of sound.
    pub data_length: u32,
}

impl Layout {
    /// Reads and checks every chunk up to the sound.
    pub fn read(file: &mut File, path: &Path) -> Result<Self, AudioError> {
        let size = file.metadata().map_err(|e| read_error(path, e))?.len();
        check_marks(file, path, size)?;
        let (format, data_start, data_length) = find_chunks(file, path, size)?;
        let spec = format.spec(path, data_length)?;
        Ok(Self {
            spec,
            data_start,
            data_length,
        })
    }

    /// A header that describes the same sound in the simplest terms.
    pub fn plain_header(&self) -> Vec<u8> {
        let spec = &self.spec;
        let coding = if spec.format.is_integer() {
            PCM
        } else {
            IEEE_FLOAT
        };
        let block = spec.format.bits() / 8 * spec.channels as u16;
        let mut header = Vec::with_capacity(44);
        header.extend(b"RIFF");
        header.extend(self.data_length.wrapping_add(36).to_le_bytes());
        header.extend(b"WAVEfmt ");
        header.extend(16_u32.to_le_bytes());
        header.extend(coding.to_le_bytes());
        header.extend((spec.channels as u16).to_le_bytes());
        header.extend(spec.rate.to_le_bytes());
        header.extend((spec.rate * u32::from(block)).to_le_bytes());
        header.extend(block.to_le_bytes());
        header.extend(spec.format.bits().to_le_bytes());
        header.extend(b"data");
        header.extend(self.data_length.to_le_bytes());
        header
    }
}

/// The fields of a `fmt ` chunk that are not redundant.
struct Format {
    coding: u16,
    channels: u16,
    rate: u32,
    block: u16,
    /// Bits a sample takes up, and of those the bits in use.
    bits: u16,
    used_bits: u16,
}

impl Format {
    fn parse(bytes: &[u8], path: &Path) -> Result<Self, AudioError> {
        let word = |at: usize| u16::from_le_bytes([bytes[at], bytes[at + 1]]);
        if bytes.len() < 16 {
            return Err(malformed(
                path,
                format!("its fmt chunk has {} bytes, 16 are needed", bytes.len()),
            ));
        }
        let (mut coding, mut used_bits) = (word(0), word(14));
        if coding == EXTENSIBLE {
            if bytes.len() < 40 {
                let found = bytes.len();
                let detail = format!("its extensible fmt chunk has {found} bytes, 40 are needed");
                return Err(malformed(path, detail));
            }
            if bytes[26..40] == SUBFORMAT_TAIL {
                coding = word(24);
            }
            // Zero is common and says nothing.
            used_bits = if word(18) == 0 { used_bits } else { word(18) };
        }
        Ok(Self {
            coding,
            channels: word(2),
            rate: u32::from_le_bytes([bytes[4], bytes[5], bytes[6], bytes[7]]),
            block: word(12),
            bits: word(14),
            used_bits,
        })
    }

    fn spec(&self, path: &Path, data_length: u32) -> Result<WavSpec, AudioError> {
        let format = self.sample_format().ok_or_else(|| self.unsupported(path))?;
        if !(1..=MAX_CHANNELS).contains(&self.channels) {
            return Err(self.unsupported(path));
        }
        self.check_container(path)?;
        if !RATES.contains(&self.rate) {
            return Err(AudioError::Rate {
                path: path.to_owned(),
                found: self.rate,
            });
        }
        if data_length == 0 {
            return Err(AudioError::NoSound {
                path: path.to_owned(),
            });
        }
        let block = u32::from(self.block);
        if !data_length.is_multiple_of(block) {
            let detail =
                format!("its {data_length} bytes of sound are not whole frames of {block} bytes");
            return Err(malformed(path, detail));
        }
        let frames = u64::from(data_length / block);
        Ok(WavSpec {
            rate: self.rate,
            channels: self.channels.into(),
            format,
            frames,
        })
    }

    fn sample_format(&self) -> Option<SampleFormat> {
        match (self.coding, self.bits) {
            (PCM, 16) => Some(SampleFormat::S16),
            (PCM, 24) => Some(SampleFormat::S24),
            (PCM, 32) => Some(SampleFormat::S32),
            (IEEE_FLOAT, 32) => Some(SampleFormat::F32),
            _ => None,
        }
    }

    /// A sample smaller than the room it takes stands at the top of it by the book and at the
    /// bottom in many a recorder's files: 48 dB apart, and nothing in the header tells.
    fn check_container(&self, path: &Path) -> Result<(), AudioError> {
        let room = self.block / self.channels * 8;
        if !self.block.is_multiple_of(self.channels) || room < self.bits {
            return Err(self.block_error(path));
        }
        if room != self.used_bits {
            let found = format!("{} bits in the room of {room}", self.used_bits);
            return Err(AudioError::Unsupported {
                path: path.to_owned(),
                found,
            });
        }
        Ok(())
    }

    fn unsupported(&self, path: &Path) -> AudioError {
        let coding = match self.coding {
            PCM => "integer".to_owned(),
            IEEE_FLOAT => "float".to_owned(),
            other => format!("coding {other:#06x}"),
        };
        let found = format!("{} channels of {}-bit {coding}", self.channels, self.bits);
        AudioError::Unsupported {
            path: path.to_owned(),
            found,
        }
    }

    fn block_error(&self, path: &Path) -> AudioError {
        let detail = format!(
            "a frame is said to take {} bytes, {} channels of {} bits take {}",
            self.block,
            self.channels,
            self.bits,
            self.channels * (self.bits / 8)
        );
        malformed(path, detail)
    }
}

fn check_marks(file: &mut File, path: &Path, size: u64) -> Result<(), AudioError> {
    if size == 0 {
        return Err(AudioError::Empty {
            path: path.to_owned(),
        });
    }
    let mut marks = Vec::new();
    file.take(12)
        .read_to_end(&mut marks)
        .map_err(|e| read_error(path, e))?;
    let whole = marks.len() == 12;
    if whole && &marks[..4] == b"RF64" {
        let found = "RF64 (WAV beyond 4 GiB)".to_owned();
        return Err(AudioError::Unsupported {
            path: path.to_owned(),
            found,
        });
    }
    let riff = b"RIFF".starts_with(&marks[..marks.len().min(4)]);
    if riff && !whole {
        let detail = format!(
            "it ends after {} bytes, inside the first 12 of its header",
            marks.len()
        );
        return Err(AudioError::Truncated {
            path: path.to_owned(),
            detail,
        });
    }
    if !riff || &marks[8..] != b"WAVE" {
        return Err(AudioError::NotWav {
            path: path.to_owned(),
            found: quoted(&marks),
        });
    }
    Ok(())
}

/// The first bytes as text where they are, else in hexadecimal.
fn quoted(bytes: &[u8]) -> String {
    if bytes.iter().all(|b| b.is_ascii_graphic() || *b == b' ') {
        return format!("\"{}\"", String::from_utf8_lossy(bytes));
    }
    let hex: Vec<String> = bytes.iter().take(4).map(|b| format!("{b:02x}")).collect();
    format!("the bytes {}", hex.join(" "))
}

/// The format, and start and length of the sound, which must lie within the file.
fn find_chunks(file: &mut File, path: &Path, size: u64) -> Result<(Format, u64, u32), AudioError> {
    let mut format = None;
    let mut at = 12;
    loop {
        if at + 8 > size {
            let detail = format!("it ends after {size} bytes, before its sound begins");
            return Err(AudioError::Truncated {
                path: path.to_owned(),
                detail,
            });
        }
        let mut head = [0; 8];
        read_at(file, at, &mut head).map_err(|e| read_error(path, e))?;
        let length = u32::from_le_bytes([head[4], head[5], head[6], head[7]]);
        at += 8;
        check_end(path, &head[..4], at, length, size)?;
        match &head[..4] {
            b"fmt " => {
                let mut bytes = vec![0; length.min(40) as usize];
                read_at(file, at, &mut bytes).map_err(|e| read_error(path, e))?;
                format = Some(Format::parse(&bytes, path)?);
            }
            b"data" => {
                let format = format
                    .ok_or_else(|| malformed(path, "no fmt chunk before the sound".to_owned()))?;
                return Ok((format, at, length));
            }
            _ => {}
        }
        at += u64::from(length) + u64::from(length % 2);
    }
}

fn check_end(
    path: &Path,
    name: &[u8],
    start: u64,
    length: u32,
    size: u64,
) -> Result<(), AudioError> {
    if start + u64::from(length) <= size {
        return Ok(());
    }
    let detail = format!(
        "its header promises {length} bytes of {}, the file ends after {}",
        if name == b"data" {
            "sound".to_owned()
        } else {
            quoted(name)
        },
        size - start
    );
    Err(AudioError::Truncated {
        path: path.to_owned(),
        detail,
    })
}

fn read_at(file: &mut File, at: u64, bytes: &mut [u8]) -> io::Result<()> {
    file.seek(SeekFrom::Start(at))?;
    file.read_exact(bytes)
}

fn malformed(path: &Path, detail: String) -> AudioError {
    AudioError::Malformed {
        path: path.to_owned(),
        detail,
    }
}

pub(super) fn read_error(path: &Path, source: io::Error) -> AudioError {
    AudioError::File {
        path: path.to_owned(),
        action: "read",
        source,
    }
}
