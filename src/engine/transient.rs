//! Stepping in time from the bias.
//!
//! [`UniformTransient`]: third-order backward differences at a constant step, the rule for sound: one solve a step,
//! three states of history kept across blocks, started from the bias. It is A(86°)-stable only, so a lightly damped
//! resonance is stepped with [`RadauTransient`] instead (two-stage Radau IIA, L-stable).

use super::bank::PortBank;
use super::bias::OperatingPoint;
use super::error::EngineError;
use super::linear::Linearised;
use super::scheme::{BDF3, Radau, backward_difference};
use super::small::{Kernel, kernel_for};
use super::step::{Acceptance, State, StepSolver, clamp_prediction};
use crate::network::elements::EMF;
use crate::network::{Network, Reduction};
use crate::numeric::Lane;
use std::f64::consts::TAU;

/// Error left in a port voltage by an accepted Newton correction, V: 1e-6 of a width, −127 dB of it in the worst step.
const LEFTOVER: f64 = 2.5e-10;
/// A resonance with a quality above this leaves the region where backward differences of third order are stable.
const HIGHEST_QUALITY: f64 = 7.0;

/// Steps a turn beyond which any resonance is followed well enough.
const MANY_STEPS: f64 = 5000.0;

/// Third-order backward differences at a constant step, from the bias, in every lane.
pub struct UniformTransient<L> {
    /// The same step with sizes known to the compiler, where there is one; then the rest below stays untouched.
    kernel: Option<Box<dyn Kernel<L>>>,
    bank: PortBank<L>,
    reduction: Reduction<L>,
    stepper: StepSolver<L>,
    /// States at the last three steps, newest first.
    history: [State<L>; 3],
    /// Port voltages at the last three steps, newest first.
    voltages: [Vec<L>; 3],
    weighted: State<L>,
    v: Vec<L>,
    names: Vec<String>,
    step: f64,
    steps: u64,
}

impl<L: Lane> std::fmt::Debug for UniformTransient<L> {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("UniformTransient")
            .field("ports", &self.bank.ports())
            .field("step", &self.step)
            .field("steps", &self.steps)
            .finish_non_exhaustive()
    }
}

impl<L: Lane> Clone for UniformTransient<L> {
    fn clone(&self) -> Self {
        UniformTransient {
            kernel: self.kernel.as_ref().map(|kernel| kernel.duplicate()),
            bank: self.bank.clone(),
            reduction: self.reduction.clone(),
            stepper: self.stepper.clone(),
            history: self.history.clone(),
            voltages: self.voltages.clone(),
            weighted: self.weighted.clone(),
            v: self.v.clone(),
            names: self.names.clone(),
            step: self.step,
            steps: self.steps,
        }
    }
}

impl UniformTransient<f64> {
    /// Steps of `step` seconds for `network` from `point`.
    ///
    /// # Errors
    /// Where the linear part is singular at this step.
    pub fn new(network: &Network, point: &OperatingPoint, step: f64) -> Result<Self, EngineError> {
        let bank = point.bank(network);
        let scheme = backward_difference(BDF3[0], step);
        let reduction =
            Reduction::of(network, EMF, &scheme).map_err(|_| EngineError::Undetermined)?;
        let rest = State::at_bias(network.linear_states(), bank.ports());
        Ok(UniformTransient {
            kernel: kernel_for(&bank, &reduction, LEFTOVER),
            stepper: StepSolver::new(&bank, 1),
            history: [rest.clone(), rest.clone(), rest.clone()],
            voltages: std::array::from_fn(|_| vec![0.0; bank.ports()]),
            weighted: rest,
            v: vec![0.0; bank.ports()],
            names: (0..bank.ports())
                .map(|port| network.port_name(port).to_string())
                .collect(),
            bank,
            reduction,
            step,
            steps: 0,
        })
    }
}

impl<L: Lane> UniformTransient<L> {
    /// Advance one step under the EMF `drive` (V, at the end of the step); the output's deviation from bias at its end.
    ///
    /// # Errors
    /// Where the step cannot be solved.
    pub fn advance(&mut self, drive: L) -> Result<L, EngineError> {
        if self.kernel.is_some() {
            let mut output = [L::zero()];
            self.advance_block(&[drive], &mut output)?;
            return Ok(output[0]);
        }
        self.advance_generally(drive)
    }

    /// The same steps by the general path, whatever the number of ports.
    pub fn general(mut self) -> Self {
        self.kernel = None;
        self
    }

    fn failure(&self, port: usize) -> EngineError {
        EngineError::NoStep {
            time: self.steps as f64 * self.step,
            part: self.names.get(port).cloned().unwrap_or_default(),
        }
    }

    fn advance_generally(&mut self, drive: L) -> Result<L, EngineError> {
        self.weigh_history();
        self.predict();
        let solved = self.stepper.solve(
            &self.bank,
            &self.reduction,
            &self.weighted,
            &[drive],
            &mut self.v,
            Acceptance { leftover: LEFTOVER },
        );
        if let Err(failure) = solved {
            return Err(EngineError::NoStep {
                time: self.steps as f64 * self.step,
                part: self.names.get(failure.port).cloned().unwrap_or_default(),
            });
        }
        let mut output = [L::zero()];
        self.stepper
            .outputs(&self.reduction, &self.weighted, &[drive], &mut output);
        self.history.rotate_right(1);
        self.stepper.end_state(
            &self.reduction,
            &self.weighted,
            &[drive],
            &mut self.history[0],
        );
        self.voltages.rotate_right(1);
        self.voltages[0].copy_from_slice(&self.v);
        self.steps += 1;
        if !output[0].is_finite() {
            return Err(self.failure(0));
        }
        Ok(output[0])
    }

    /// Advance one step a sample of `drive`, each output into the same place of `output`.
    ///
    /// # Errors
    /// Where a step cannot be solved.
    pub fn advance_block(&mut self, drive: &[L], output: &mut [L]) -> Result<(), EngineError> {
        if let Some(kernel) = &mut self.kernel {
            let solved = kernel.advance_block(drive, output);
            let done = solved.map_or_else(|failure| failure.sample, |()| drive.len());
            self.steps += done as u64;
            return solved.map_err(|failure| self.failure(failure.port));
        }
        for (drive, output) in drive.iter().zip(output) {
            *output = self.advance_generally(*drive)?;
        }
        Ok(())
    }

    /// Newton iterations of the last step.
    pub fn iterations(&self) -> usize {
        self.stepper.iterations
    }

    /// The charge whose difference the formula takes: q0 = −Σ ck·qk/c0 over the last three.
    #[inline(always)]
    fn weigh_history(&mut self) {
        let weights = [1, 2, 3].map(|k| L::splat(-BDF3[k] / BDF3[0]));
        let [a, b, c] = &self.history;
        let parts = [
            (&mut self.weighted.linear, &a.linear, &b.linear, &c.linear),
            (&mut self.weighted.charge, &a.charge, &b.charge, &c.charge),
        ];
        for (into, a, b, c) in parts {
            for (((into, a), b), c) in into.iter_mut().zip(a).zip(b).zip(c) {
                *into = weights[0] * *a + weights[1] * *b + weights[2] * *c;
            }
        }
    }

    /// Quadratic extrapolation of the port voltages, clamped.
    #[inline(always)]
    fn predict(&mut self) {
        let three = L::splat(3.0);
        for port in 0..self.v.len() {
            let [a, b, c] = [0, 1, 2].map(|k| self.voltages[k][port]);
            let predicted = three * (a - b) + c;
            self.v[port] = clamp_prediction(&self.bank, port, a, predicted);
        }
    }
}

/// Radau IIA at a constant step, from the bias.
#[derive(Clone, Debug)]
pub struct RadauTransient {
    bank: PortBank<f64>,
    radau: Radau,
    reduction: Reduction<f64>,
    stepper: StepSolver<f64>,
    state: State<f64>,
    next: State<f64>,
    v: Vec<f64>,
    last: Vec<f64>,
    output: Vec<f64>,
    names: Vec<String>,
    step: f64,
    steps: u64,
}

impl RadauTransient {
    /// Steps of `step` seconds with `stages` stages for `network` from `point`.
    ///
    /// # Errors
    /// Where the linear part is singular at this step.
    pub fn new(
        network: &Network,
        point: &OperatingPoint,
        step: f64,
        stages: usize,
    ) -> Result<Self, EngineError> {
        let bank = point.bank(network);
        let radau = Radau::new(stages);
        let reduction = Reduction::of(network, EMF, &radau.scheme(step))
            .map_err(|_| EngineError::Undetermined)?;
        let state = State::at_bias(network.linear_states(), bank.ports());
        Ok(RadauTransient {
            stepper: StepSolver::new(&bank, stages),
            next: state.clone(),
            v: vec![0.0; stages * bank.ports()],
            last: vec![0.0; bank.ports()],
            output: vec![0.0; stages],
            names: (0..bank.ports())
                .map(|port| network.port_name(port).to_string())
                .collect(),
            bank,
            radau,
            reduction,
            state,
            step,
            steps: 0,
        })
    }

    /// Where the stages of a step lie, as shares of it.
    pub fn nodes(&self) -> &[f64] {
        &self.radau.nodes
    }

    /// Advance one step under the EMF at its stages, V; the output's deviation from bias at its end.
    ///
    /// # Errors
    /// Where the step cannot be solved.
    pub fn advance(&mut self, drive: &[f64]) -> Result<f64, EngineError> {
        let ports = self.bank.ports();
        for (k, value) in self.v.iter_mut().enumerate() {
            *value = self.last[k % ports.max(1)];
        }
        let acceptance = Acceptance {
            leftover: LEFTOVER * 1e-4,
        };
        let solved = self.stepper.solve(
            &self.bank,
            &self.reduction,
            &self.state,
            drive,
            &mut self.v,
            acceptance,
        );
        if let Err(failure) = solved {
            return Err(EngineError::NoStep {
                time: self.steps as f64 * self.step,
                part: self.names.get(failure.port).cloned().unwrap_or_default(),
            });
        }
        self.stepper
            .outputs(&self.reduction, &self.state, drive, &mut self.output);
        self.stepper
            .end_state(&self.reduction, &self.state, drive, &mut self.next);
        std::mem::swap(&mut self.state, &mut self.next);
        let stages = self.radau.stages();
        self.last.copy_from_slice(&self.v[(stages - 1) * ports..]);
        self.steps += 1;
        Ok(self.output[stages - 1])
    }
}

/// Which rule steps a stage through sound at a constant step.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum StepRule {
    /// Third-order backward differences.
    BackwardDifference,
    /// Two-stage Radau IIA.
    Radau,
}

/// The rule for `network` at `point` with steps of `step` seconds, from the poles of the linearised network: backward
/// differences unless a pole pair is so lightly damped that they would amplify it.
pub fn step_rule(network: &Network, point: &OperatingPoint, step: f64) -> StepRule {
    let rings = Linearised::at(network, point)
        .poles()
        .into_iter()
        .any(|pole| {
            let quality = pole.norm() / (2.0 * pole.re.abs());
            // with thousands of steps a turn the formula's damping error is of no account
            quality > HIGHEST_QUALITY && pole.norm() * step > TAU / MANY_STEPS
        });
    if rings {
        StepRule::Radau
    } else {
        StepRule::BackwardDifference
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stage::Stage;

    #[test]
    fn the_kernel_of_known_size_steps_as_the_general_path_does() {
        let rate = 384e3;
        // one transistor, a pair, and a transistor with two diodes: 2, 4 and 4 ports
        for (name, peak) in [
            ("c_collector_feedback", 0.3),
            ("e_series_feedback_pair", 0.3),
            ("h_diode_clipper", 0.1),
        ] {
            let path = format!(
                "{}/tests/expected/open/{name}.toml",
                env!("CARGO_MANIFEST_DIR")
            );
            let network = Network::of(&Stage::read(path.as_ref()).unwrap().0);
            let point = OperatingPoint::of(&network).unwrap();
            let drive: Vec<f64> = (0..3000)
                .map(|k| peak * (TAU * 1234.0 * k as f64 / rate).sin())
                .collect();
            let mut outputs = [vec![0.0; drive.len()], vec![0.0; drive.len()]];
            let fast = UniformTransient::new(&network, &point, 1.0 / rate).unwrap();
            let plain = fast.clone().general();
            for (mut transient, output) in [fast, plain].into_iter().zip(&mut outputs) {
                transient.advance_block(&drive, output).unwrap();
            }
            let largest = outputs[1]
                .iter()
                .fold(0.0f64, |largest, y| largest.max(y.abs()));
            let worst = outputs[0]
                .iter()
                .zip(&outputs[1])
                .map(|(a, b)| (a - b).abs())
                .fold(0.0, f64::max);
            // the same equations in another order of summation: rounding, amplified in the corners of hard clipping
            assert!(worst < 1e-9 * largest, "{name}: {worst:e} of {largest}");
        }
    }
}
