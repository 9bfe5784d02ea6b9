//! From the high rate back to the base rate.

use super::design::StageDesign;
use super::kernel::dot;
use super::{AudioError, Oversampling};

/// Streaming decimator for one channel. It expects the stream an [`super::Interpolator`] of the
/// same factor yields, lead included, and returns sample for sample the sound in it: fed
/// [`Oversampling::stream_length`] samples of N it has returned exactly N, without any flush.
#[derive(Clone, Debug)]
pub struct Decimator {
    design: Oversampling,
    stages: Vec<StageState>,
    received: u64,
    emitted: u64,
    /// Outputs worked out before the stream has settled that they belong to the sound.
    ready: Vec<f64>,
    spare: [Vec<f64>; 2],
}

/// One stage's input, dealt out to its phases, so that each phase is a plain inner product.
#[derive(Clone, Debug)]
struct StageState {
    taps: Vec<Vec<f64>>,
    phases: Vec<Vec<f64>>,
    next_phase: usize,
    half: usize,
    passes_samples: bool,
}

impl Decimator {
    /// A decimator by `factor`, 1 to [`super::MAX_FACTOR`]; several channels better share one
    /// [`Oversampling`].
    pub fn new(factor: usize) -> Result<Self, AudioError> {
        Ok(Oversampling::new(factor)?.decimator())
    }

    pub(super) fn from_design(design: &Oversampling) -> Self {
        let stages = design.stages.iter().rev().map(StageState::new).collect();
        Self {
            design: design.clone(),
            stages,
            received: 0,
            emitted: 0,
            ready: Vec::new(),
            spare: Default::default(),
        }
    }

    /// How many base samples the stream it expects starts before the sound, and runs past it.
    pub fn lead(&self) -> usize {
        self.design.lead()
    }

    /// Takes samples of the high-rate stream and appends to `out` the base samples they settle.
    pub fn push(&mut self, input: &[f64], out: &mut Vec<f64>) {
        // The first `pad` samples lie beyond the reach of the filters.
        let unread_pad = (self.design.pad() as u64).saturating_sub(self.received);
        let skip = unread_pad.min(input.len() as u64) as usize;
        self.received += input.len() as u64;
        self.cascade(&input[skip..]);
        let settled = self.received / self.design.factor as u64;
        let due = settled.saturating_sub(2 * self.lead() as u64) - self.emitted;
        let due = (due as usize).min(self.ready.len());
        out.extend(self.ready.drain(..due));
        self.emitted += due as u64;
    }

    /// Forgets the stream: ready for another sound.
    pub fn reset(&mut self) {
        *self = Self::from_design(&self.design);
    }

    fn cascade(&mut self, input: &[f64]) {
        let [current, next] = &mut self.spare;
        current.clear();
        current.extend_from_slice(input);
        for stage in &mut self.stages {
            next.clear();
            stage.run(current, next);
            std::mem::swap(current, next);
        }
        self.ready.extend_from_slice(current);
    }
}

impl StageState {
    fn new(stage: &StageDesign) -> Self {
        let scale = 1.0 / stage.factor as f64;
        let taps = stage
            .branches
            .iter()
            .map(|branch| branch.iter().rev().map(|h| h * scale).collect());
        Self {
            taps: taps.collect(),
            phases: vec![Vec::new(); stage.factor],
            next_phase: 0,
            half: stage.half,
            passes_samples: stage.passes_samples,
        }
    }

    fn run(&mut self, input: &[f64], out: &mut Vec<f64>) {
        self.deal(input);
        let window = 2 * self.half;
        let complete = self.phases.last().map_or(0, Vec::len);
        let count = (complete + 1).saturating_sub(window);
        out.extend((0..count).map(|i| self.output(i)));
        for phase in &mut self.phases {
            phase.drain(..count);
        }
    }

    fn deal(&mut self, input: &[f64]) {
        for &sample in input {
            self.phases[self.next_phase].push(sample);
            self.next_phase += 1;
            if self.next_phase == self.phases.len() {
                self.next_phase = 0;
            }
        }
    }

    fn output(&self, i: usize) -> f64 {
        let window = i..i + 2 * self.half;
        let mut branches = self.phases.iter().zip(&self.taps);
        let mut sum = 0.0;
        if self.passes_samples {
            branches.next();
            sum = self.phases[0][i + self.half] * self.taps[0][self.half];
        }
        for (phase, taps) in branches {
            sum += dot(&phase[window.clone()], taps);
        }
        sum
    }
}
