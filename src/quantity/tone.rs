//! Tones: `60Hz@20mV,7kHz@5mV`.

use std::str::FromStr;

use super::{Element, Frequency, Level, ValueError};

/// A sine of a stated frequency and level.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tone {
    /// Its frequency.
    pub frequency: Frequency,
    /// Its level, rms of its EMF unless said otherwise.
    pub level: Level,
}

/// A list of tones, in the order typed.
#[derive(Clone, Debug, PartialEq)]
pub struct Tones(pub Vec<Tone>);

impl FromStr for Tone {
    type Err = ValueError;

    fn from_str(text: &str) -> Result<Self, ValueError> {
        let (frequency, level) = text.split_once('@').ok_or_else(|| ValueError::NotANumber {
            found: text.trim().to_owned(),
            wanted: "a tone such as 60Hz@20mV",
        })?;
        Ok(Tone {
            frequency: Frequency::parse(frequency)?,
            level: Level::parse(level)?,
        })
    }
}

impl FromStr for Tones {
    type Err = ValueError;

    fn from_str(text: &str) -> Result<Self, ValueError> {
        text.split(',')
            .map(Tone::from_str)
            .collect::<Result<_, _>>()
            .map(Tones)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tones_read_in_order() {
        let tones: Tones = "60Hz@20mV,7kHz@-46dBV".parse().unwrap();
        assert_eq!(
            tones.0[0],
            Tone {
                frequency: Frequency { hertz: 60.0 },
                level: Level { rms: 0.02 }
            }
        );
        assert_eq!(tones.0[1].frequency.hertz, 7000.0);
    }

    #[test]
    fn a_tone_without_level_is_refused() {
        assert_eq!(
            "60Hz".parse::<Tones>().unwrap_err().to_string(),
            "\"60Hz\" is not a tone such as 60Hz@20mV"
        );
    }
}
