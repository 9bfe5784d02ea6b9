//! Round trips, and every way a file can be wrong.

use std::fs;
use std::path::{Path, PathBuf};

use super::*;
use crate::audio::dither::Dither;
use crate::failure::FailureKind;

const FORMATS: [SampleFormat; 4] = [
    SampleFormat::F32,
    SampleFormat::S16,
    SampleFormat::S24,
    SampleFormat::S32,
];

fn folder() -> tempfile::TempDir {
    tempfile::tempdir().unwrap()
}

fn plain(rate: u32, channels: usize, format: SampleFormat) -> WavOptions {
    WavOptions {
        dither: Dither::None,
        ..WavOptions::new(rate, channels, format)
    }
}

fn write(path: &Path, options: WavOptions, channels: &[Vec<f64>]) -> Result<Written, AudioError> {
    let mut writer = WavWriter::create(path, options)?;
    writer.write_block(channels)?;
    writer.finish()
}

/// Codes that reach both ends of the format, as ±1 full scale.
fn codes(format: SampleFormat, count: usize, offset: usize) -> Vec<f64> {
    let steps = if format.is_integer() {
        (1_u64 << (format.bits() - 1)) as f64
    } else {
        65536.0
    };
    let ends = [-1.0, 1.0 - 1.0 / steps, 0.0, 1.0 / steps, -1.0 / steps];
    (0..count)
        .map(|i| {
            if i < 5 {
                ends[i]
            } else {
                ((i * 977 + offset) % 4001) as f64 / steps - 1000.0 / steps
            }
        })
        .collect()
}

#[test]
fn every_format_and_channel_count_comes_back_exactly() {
    let folder = folder();
    for format in FORMATS {
        for channels in 1..=8 {
            let path = folder
                .path()
                .join(format!("{}-{channels}.wav", format.word()));
            let sound: Vec<Vec<f64>> = (0..channels).map(|c| codes(format, 333, c * 131)).collect();
            let written = write(&path, plain(44_100, channels, format), &sound).unwrap();
            assert_eq!(
                written,
                Written {
                    frames: 333,
                    clipped_samples: 0
                }
            );
            let mut reader = WavReader::open(&path).unwrap();
            assert_eq!(
                reader.spec(),
                WavSpec {
                    rate: 44_100,
                    channels,
                    format,
                    frames: 333
                }
            );
            assert_eq!(
                reader.read_all().unwrap(),
                sound,
                "{} with {channels} channels",
                format.word()
            );
        }
    }
}

#[test]
fn blocks_of_any_size_give_the_same_samples() {
    let folder = folder();
    let path = folder.path().join("a.wav");
    let sound = vec![
        codes(SampleFormat::S24, 1000, 0),
        codes(SampleFormat::S24, 1000, 9),
    ];
    write(&path, plain(48_000, 2, SampleFormat::S24), &sound).unwrap();
    for block in [1, 7, 999, 5000] {
        let mut reader = WavReader::open(&path).unwrap();
        let mut found = vec![Vec::new(); 2];
        let mut buffers = vec![Vec::new(); 2];
        while reader.read_block(&mut buffers, block).unwrap() > 0 {
            found
                .iter_mut()
                .zip(&buffers)
                .for_each(|(f, b)| f.extend_from_slice(b));
        }
        assert_eq!(found, sound, "block {block}");
    }
}

#[test]
fn clipped_samples_are_counted_in_integer_formats_only() {
    let folder = folder();
    let sound = [vec![0.5, 1.0, 1.5, -1.0, -1.001, 0.0]];
    for (format, clipped) in FORMATS.into_iter().zip([0, 2, 2, 2]) {
        let path = folder.path().join(format.word());
        let written = write(&path, plain(48_000, 1, format), &sound).unwrap();
        assert_eq!(written.clipped_samples, clipped, "{}", format.word());
    }
    let floats = WavReader::open(&folder.path().join("f32"))
        .unwrap()
        .read_all()
        .unwrap();
    assert_eq!(floats[0][2], 1.5);
}

#[test]
fn an_odd_data_chunk_is_padded_and_counted() {
    let folder = folder();
    let path = folder.path().join("odd.wav");
    write(
        &path,
        plain(48_000, 1, SampleFormat::S24),
        &[codes(SampleFormat::S24, 7, 0)],
    )
    .unwrap();
    let bytes = fs::read(&path).unwrap();
    assert_eq!(bytes.len() % 2, 0);
    assert_eq!(
        u32::from_le_bytes(bytes[4..8].try_into().unwrap()) as usize,
        bytes.len() - 8
    );
    assert_eq!(
        WavReader::open(&path).unwrap().read_all().unwrap()[0].len(),
        7
    );
}

#[test]
fn an_existing_target_is_kept_unless_told_otherwise() {
    let folder = folder();
    let path = folder.path().join("a.wav");
    fs::write(&path, "precious").unwrap();
    let options = plain(48_000, 1, SampleFormat::S16);
    let message = write(&path, options, &[vec![0.0]]).unwrap_err().to_string();
    assert!(
        message.contains("a.wav") && message.contains("--overwrite"),
        "{message}"
    );
    assert_eq!(fs::read(&path).unwrap(), b"precious");
    write(
        &path,
        WavOptions {
            overwrite: true,
            ..options
        },
        &[vec![0.0]],
    )
    .unwrap();
    assert_eq!(WavReader::open(&path).unwrap().spec().frames, 1);
}

#[test]
fn a_target_that_appears_during_the_run_is_kept() {
    let folder = folder();
    let path = folder.path().join("a.wav");
    let writer = WavWriter::create(&path, plain(48_000, 1, SampleFormat::S16)).unwrap();
    fs::write(&path, "precious").unwrap();
    assert!(matches!(writer.finish(), Err(AudioError::Exists { .. })));
    assert_eq!(names(&folder), ["a.wav"]);
    assert_eq!(fs::read(&path).unwrap(), b"precious");
}

fn names(folder: &tempfile::TempDir) -> Vec<String> {
    let mut names: Vec<String> = fs::read_dir(folder.path())
        .unwrap()
        .map(|e| e.unwrap().file_name().into_string().unwrap())
        .collect();
    names.sort();
    names
}

#[test]
fn a_failed_or_abandoned_run_leaves_the_target_and_nothing_else() {
    let folder = folder();
    let path = folder.path().join("a.wav");
    fs::write(&path, "precious").unwrap();
    let options = WavOptions {
        overwrite: true,
        ..plain(48_000, 1, SampleFormat::F32)
    };
    for bad in [f64::NAN, f64::INFINITY, 1e300] {
        let mut writer = WavWriter::create(&path, options).unwrap();
        let message = writer
            .write_block(&[vec![0.0, 0.0, bad]])
            .unwrap_err()
            .to_string();
        assert!(message.contains("frame 2, channel 1"), "{message}");
    }
    drop(WavWriter::create(&path, options).unwrap());
    assert_eq!(names(&folder), ["a.wav"]);
    assert_eq!(fs::read(&path).unwrap(), b"precious");
}

#[test]
fn directories_devices_and_missing_folders_are_refused_as_targets() {
    let folder = folder();
    let options = WavOptions {
        overwrite: true,
        ..plain(48_000, 1, SampleFormat::S16)
    };
    assert!(matches!(
        WavWriter::create(folder.path(), options),
        Err(AudioError::NotAFile { .. })
    ));
    let missing = folder.path().join("no/such/a.wav");
    assert!(matches!(
        WavWriter::create(&missing, options),
        Err(AudioError::File { .. })
    ));
    #[cfg(unix)]
    assert!(matches!(
        WavWriter::create(Path::new("/dev/null"), options),
        Err(AudioError::NotAFile { .. })
    ));
}

#[cfg(unix)]
#[test]
fn a_written_file_has_the_rights_of_an_ordinary_one() {
    use std::os::unix::fs::PermissionsExt;
    let folder = folder();
    let (ours, plain_file) = (folder.path().join("a.wav"), folder.path().join("b"));
    write(&ours, plain(48_000, 1, SampleFormat::S16), &[vec![0.0]]).unwrap();
    fs::write(&plain_file, "").unwrap();
    let mode = |path: &Path| fs::metadata(path).unwrap().permissions().mode();
    assert_eq!(mode(&ours), mode(&plain_file));
}

#[test]
fn blocks_of_the_wrong_shape_are_refused() {
    let folder = folder();
    let path = folder.path().join("a.wav");
    let mut writer = WavWriter::create(&path, plain(48_000, 2, SampleFormat::S16)).unwrap();
    assert!(matches!(
        writer.write_block(&[vec![0.0]]),
        Err(AudioError::Shape { .. })
    ));
    assert!(matches!(
        writer.write_block(&[vec![0.0], vec![]]),
        Err(AudioError::Shape { .. })
    ));
    writer.write_block(&[[0.0], [0.0]]).unwrap();
    writer.finish().unwrap();
    let mut reader = WavReader::open(&path).unwrap();
    assert!(matches!(
        reader.read_block(&mut [Vec::new()], 1),
        Err(AudioError::Shape { .. })
    ));
}

// ---- files that are wrong, or merely unusual

fn chunk(name: &[u8; 4], content: &[u8]) -> Vec<u8> {
    let mut bytes = name.to_vec();
    bytes.extend((content.len() as u32).to_le_bytes());
    bytes.extend(content);
    bytes.extend(&[0][..content.len() % 2]);
    bytes
}

fn fmt(coding: u16, channels: u16, rate: u32, bits: u16) -> Vec<u8> {
    let block = channels * (bits / 8);
    let mut bytes = [coding.to_le_bytes(), channels.to_le_bytes()].concat();
    bytes.extend(rate.to_le_bytes());
    bytes.extend((rate * u32::from(block)).to_le_bytes());
    bytes.extend([block.to_le_bytes(), bits.to_le_bytes()].concat());
    bytes
}

fn riff(chunks: &[Vec<u8>]) -> Vec<u8> {
    let body = [b"WAVE".to_vec(), chunks.concat()].concat();
    chunk(b"RIFF", &body)
}

fn put(folder: &tempfile::TempDir, name: &str, bytes: &[u8]) -> PathBuf {
    let path = folder.path().join(name);
    fs::write(&path, bytes).unwrap();
    path
}

fn refusal(bytes: &[u8]) -> AudioError {
    let folder = folder();
    let path = put(&folder, "wrong.wav", bytes);
    let error = WavReader::open(&path).err().expect("must be refused");
    assert!(error.to_string().contains("wrong.wav"), "{error}");
    assert_eq!(error.kind(), FailureKind::BadRequest);
    error
}

#[test]
fn a_file_cut_anywhere_is_refused_before_a_sample_is_read() {
    let whole = riff(&[
        chunk(b"fmt ", &fmt(1, 1, 48_000, 16)),
        chunk(b"LIST", b"abc"),
        chunk(b"data", &[7; 20]),
    ]);
    for length in 0..whole.len() {
        let error = refusal(&whole[..length]);
        match length {
            0 => assert!(matches!(error, AudioError::Empty { .. })),
            _ => assert!(
                matches!(error, AudioError::Truncated { .. }),
                "{length} bytes: {error}"
            ),
        }
    }
}

#[test]
fn the_message_of_a_truncated_file_names_both_lengths() {
    let mut whole = riff(&[
        chunk(b"fmt ", &fmt(1, 1, 48_000, 16)),
        chunk(b"data", &[7; 400]),
    ]);
    whole.truncate(whole.len() - 150);
    let message = refusal(&whole).to_string();
    assert!(
        message.contains("promises 400 bytes of sound") && message.contains("after 250"),
        "{message}"
    );
}

#[test]
fn files_that_are_not_wav_are_refused_with_what_they_begin_with() {
    for (bytes, shown) in [
        (&b"ID3\x04 some other sound"[..], "49 44 33 04"),
        (b"# notes for Monday\n", "\"# notes for \""),
    ] {
        let error = refusal(bytes);
        assert!(matches!(error, AudioError::NotWav { .. }));
        assert!(error.to_string().contains(shown), "{error}");
    }
    assert!(matches!(
        refusal(b"RIFF\x04\0\0\0AVI LIST"),
        AudioError::NotWav { .. }
    ));
    assert!(matches!(
        refusal(b"RF64\xff\xff\xff\xffWAVEds64"),
        AudioError::Unsupported { .. }
    ));
}

#[test]
fn missing_files_and_folders_are_refused() {
    let folder = folder();
    let error = WavReader::open(&folder.path().join("none.wav"))
        .err()
        .unwrap();
    assert!(
        matches!(error, AudioError::File { .. }) && error.to_string().contains("none.wav"),
        "{error}"
    );
    assert!(matches!(
        WavReader::open(folder.path()),
        Err(AudioError::NotAFile { .. } | AudioError::File { .. })
    ));
}

#[test]
fn unsupported_formats_are_refused_with_what_was_found() {
    let cases = [
        (1, 1, 8, "8-bit integer"),
        (3, 1, 64, "64-bit float"),
        (2, 1, 16, "0x0002"),
        (1, 9, 16, "9 channels"),
    ];
    for (coding, channels, bits, shown) in cases {
        let data = chunk(b"data", &vec![0; usize::from(channels * bits)]);
        let error = refusal(&riff(&[
            chunk(b"fmt ", &fmt(coding, channels, 48_000, bits)),
            data,
        ]));
        assert!(
            matches!(error, AudioError::Unsupported { .. }) && error.to_string().contains(shown),
            "{error}"
        );
    }
}

#[test]
fn rates_are_accepted_at_both_limits_and_refused_beyond() {
    let folder = folder();
    let file = |rate| {
        riff(&[
            chunk(b"fmt ", &fmt(1, 1, rate, 16)),
            chunk(b"data", &[0; 4]),
        ])
    };
    for rate in [8_000, 192_000] {
        assert_eq!(
            WavReader::open(&put(&folder, "a.wav", &file(rate)))
                .unwrap()
                .spec()
                .rate,
            rate
        );
    }
    for rate in [0, 7_999, 192_001] {
        let error = refusal(&file(rate));
        assert!(
            matches!(error, AudioError::Rate { found, .. } if found == rate),
            "{error}"
        );
    }
}

#[test]
fn contradictory_headers_are_refused() {
    let format = chunk(b"fmt ", &fmt(1, 2, 48_000, 16));
    assert!(matches!(
        refusal(&riff(&[format.clone(), chunk(b"data", &[0; 6])])),
        AudioError::Malformed { .. }
    ));
    assert!(matches!(
        refusal(&riff(&[format.clone(), chunk(b"data", &[])])),
        AudioError::NoSound { .. }
    ));
    assert!(matches!(
        refusal(&riff(&[chunk(b"data", &[0; 4]), format])),
        AudioError::Malformed { .. }
    ));
    assert!(matches!(
        refusal(&riff(&[chunk(b"fmt ", &[1; 10]), chunk(b"data", &[0; 4])])),
        AudioError::Malformed { .. }
    ));
    let mut wide = fmt(1, 1, 48_000, 16);
    wide[12] = 1;
    assert!(matches!(
        refusal(&riff(&[chunk(b"fmt ", &wide), chunk(b"data", &[0; 4])])),
        AudioError::Malformed { .. }
    ));
    assert!(matches!(
        refusal(&riff(&[chunk(b"fmt ", &fmt(1, 0, 48_000, 16))])),
        AudioError::Truncated { .. }
    ));
}

#[test]
fn a_float_that_is_no_number_is_refused_with_its_place() {
    let folder = folder();
    for bad in [f32::NAN, f32::NEG_INFINITY] {
        let data: Vec<u8> = [0.1, 0.2, 0.3, bad]
            .iter()
            .flat_map(|x: &f32| x.to_le_bytes())
            .collect();
        let path = put(
            &folder,
            "a.wav",
            &riff(&[
                chunk(b"fmt ", &fmt(3, 2, 48_000, 32)),
                chunk(b"data", &data),
            ]),
        );
        let message = WavReader::open(&path)
            .unwrap()
            .read_all()
            .unwrap_err()
            .to_string();
        assert!(message.contains("frame 1, channel 2"), "{message}");
    }
}

#[test]
fn extra_chunks_of_odd_length_and_trailing_ones_are_stepped_over() {
    let folder = folder();
    let data = chunk(b"data", &[0x00, 0x40]);
    let file = riff(&[
        chunk(b"LIST", b"abc"),
        chunk(b"fmt ", &fmt(1, 1, 48_000, 16)),
        chunk(b"fact", b"x"),
        data,
        chunk(b"id3 ", b"tail"),
    ]);
    assert_eq!(
        WavReader::open(&put(&folder, "a.wav", &file))
            .unwrap()
            .read_all()
            .unwrap(),
        [[0.5]]
    );
}

fn extensible(bits: u16, used_bits: u8, coding: u8) -> Vec<u8> {
    let mut format = fmt(EXTENSIBLE_MARK, 1, 48_000, bits);
    format.extend([22, 0, used_bits, 0, 4, 0, 0, 0, coding, 0]);
    format.extend([
        0x00, 0x00, 0x00, 0x00, 0x10, 0x00, 0x80, 0x00, 0x00, 0xaa, 0x00, 0x38, 0x9b, 0x71,
    ]);
    chunk(b"fmt ", &format)
}

#[test]
fn extensible_headers_are_read() {
    let folder = folder();
    let half = [(24, 24, 1), (24, 0, 1), (32, 32, 1), (32, 32, 3)];
    for (bits, used_bits, coding) in half {
        let data = match (bits, coding) {
            (24, _) => vec![0x00, 0x00, 0xc0],
            (_, 1) => (-0x4000_0000_i32).to_le_bytes().to_vec(),
            _ => (-0.5_f32).to_le_bytes().to_vec(),
        };
        let file = riff(&[extensible(bits, used_bits, coding), chunk(b"data", &data)]);
        let found = WavReader::open(&put(&folder, "a.wav", &file))
            .unwrap()
            .read_all()
            .unwrap();
        assert_eq!(found, [[-0.5]], "{bits} bits, coding {coding}");
    }
    let mut foreign = extensible(16, 16, 1);
    *foreign.last_mut().unwrap() = 0;
    let data = chunk(b"data", &[0; 4]);
    assert!(matches!(
        refusal(&riff(&[foreign, data])),
        AudioError::Unsupported { .. }
    ));
}

#[test]
fn samples_smaller_than_their_room_are_refused_not_guessed() {
    let data = chunk(b"data", &[0; 8]);
    let mut plain = fmt(1, 1, 48_000, 24);
    plain[12] = 4;
    for format in [extensible(32, 24, 1), chunk(b"fmt ", &plain)] {
        let error = refusal(&riff(&[format, data.clone()]));
        assert!(matches!(error, AudioError::Unsupported { .. }), "{error}");
        assert!(
            error.to_string().contains("24 bits in the room of 32"),
            "{error}"
        );
    }
}

const EXTENSIBLE_MARK: u16 = 0xfffe;

#[test]
fn format_and_dither_words_are_read_and_others_refused() {
    for format in FORMATS {
        assert_eq!(format.word().parse::<SampleFormat>().unwrap(), format);
    }
    assert_eq!("none".parse::<Dither>().unwrap(), Dither::None);
    assert_eq!("tpdf".parse::<Dither>().unwrap(), Dither::Tpdf);
    let message = "s20".parse::<SampleFormat>().unwrap_err().to_string();
    assert!(
        message.contains("\"s20\"") && message.contains("f32, s16, s24 or s32"),
        "{message}"
    );
    assert!("shaped".parse::<Dither>().is_err());
}
