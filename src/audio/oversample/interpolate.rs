//! From the base rate to the high rate.

use super::design::StageDesign;
use super::kernel::dot;
use super::{AudioError, Oversampling};

/// Streaming interpolator for one channel; see the module text for the timing contract.
#[derive(Clone, Debug)]
pub struct Interpolator {
    design: Oversampling,
    stages: Vec<Vec<f64>>,
    received: u64,
    emitted: u64,
    spare: [Vec<f64>; 2],
}

impl Interpolator {
    /// An interpolator by `factor`, 1 to [`super::MAX_FACTOR`]; several channels better share one
    /// [`Oversampling`].
    pub fn new(factor: usize) -> Result<Self, AudioError> {
        Ok(Oversampling::new(factor)?.interpolator())
    }

    pub(super) fn from_design(design: &Oversampling) -> Self {
        let stages = design.stages.iter().map(zero_history).collect();
        Self {
            design: design.clone(),
            stages,
            received: 0,
            emitted: 0,
            spare: Default::default(),
        }
    }

    /// How many base samples the stream starts before the sound, and runs past it.
    pub fn lead(&self) -> usize {
        self.design.lead()
    }

    /// Takes base samples and appends to `out` the samples of the high-rate stream they settle.
    pub fn push(&mut self, input: &[f64], out: &mut Vec<f64>) {
        let before = out.len();
        if self.received == 0 && !input.is_empty() {
            out.resize(before + self.design.pad(), 0.0);
        }
        self.received += input.len() as u64;
        self.cascade(input, out);
        self.emitted += (out.len() - before) as u64;
    }

    /// Ends the sound: appends what is left of the stream, [`Oversampling::stream_length`] samples
    /// in all, and is then ready for another sound.
    pub fn finish(&mut self, out: &mut Vec<f64>) {
        let sound = self.received;
        let left = self.design.stream_length(sound) - self.emitted;
        let end = out.len() + left as usize;
        self.push(&vec![0.0; 2 * self.lead()], out);
        out.resize(end, 0.0);
        *self = Self::from_design(&self.design);
    }

    fn cascade(&mut self, input: &[f64], out: &mut Vec<f64>) {
        let Some((last, inner)) = self.design.stages.split_last() else {
            return out.extend_from_slice(input);
        };
        let [current, next] = &mut self.spare;
        current.clear();
        current.extend_from_slice(input);
        for (stage, history) in inner.iter().zip(&mut self.stages) {
            next.clear();
            run_stage(stage, history, current, next);
            std::mem::swap(current, next);
        }
        if let Some(history) = self.stages.last_mut() {
            run_stage(last, history, current, out);
        }
    }
}

/// The samples before the first: one less than a window.
fn zero_history(stage: &StageDesign) -> Vec<f64> {
    vec![0.0; 2 * stage.half - 1]
}

/// For every new sample one window further, and from each window one output a branch.
fn run_stage(stage: &StageDesign, history: &mut Vec<f64>, input: &[f64], out: &mut Vec<f64>) {
    history.extend_from_slice(input);
    out.reserve(input.len() * stage.factor);
    for window in history.windows(2 * stage.half) {
        let mut branches = stage.branches.iter();
        if stage.passes_samples {
            branches.next();
            out.push(window[stage.half - 1]);
        }
        out.extend(branches.map(|taps| dot(window, taps)));
    }
    history.drain(..input.len());
}
