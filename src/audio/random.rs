//! Repeatable noise: the SplitMix64 generator (G. L. Steele, D. Lea, C. H. Flood, "Fast Splittable
//! Pseudorandom Number Generators", OOPSLA 2014). Same seed, same bits, on every machine.

/// A stream of pseudo-random numbers.
#[derive(Clone, Debug)]
pub struct Random {
    state: u64,
}

impl Random {
    /// Stream number `stream` of `seed`; the streams of one seed are independent of each other.
    pub fn stream(seed: u64, stream: u64) -> Self {
        Self {
            state: mix(seed ^ mix(stream)),
        }
    }

    /// The next 64 bits.
    pub fn bits(&mut self) -> u64 {
        self.state = self.state.wrapping_add(0x9e37_79b9_7f4a_7c15);
        mix(self.state)
    }

    /// Uniform on [0, 1), all 53 bits of a double's fraction used.
    pub fn uniform(&mut self) -> f64 {
        (self.bits() >> 11) as f64 / (1_u64 << 53) as f64
    }
}

fn mix(mut z: u64) -> u64 {
    z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^ (z >> 31)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn bits_follow_the_published_generator() {
        // First outputs of SplitMix64 from state 1234567: check values from memory, as
        // reproduced wherever the generator is.
        let mut random = Random { state: 1_234_567 };
        let published = [
            6_457_827_717_110_365_317,
            3_203_168_211_198_807_973,
            9_817_491_932_198_370_423,
        ];
        assert_eq!([random.bits(), random.bits(), random.bits()], published);
    }

    #[test]
    fn uniform_numbers_stay_inside_and_average_one_half() {
        let mut random = Random::stream(3, 0);
        let numbers: Vec<f64> = (0..100_000).map(|_| random.uniform()).collect();
        assert!(numbers.iter().all(|u| (0.0..1.0).contains(u)));
        let mean = numbers.iter().sum::<f64>() / 100_000.0;
        // Five standard errors of 1/√12/√100000.
        assert!((mean - 0.5).abs() < 0.0046, "{mean}");
    }
}
