//! One implicit step: Newton's method on the port voltages of all its stages.
//!
//! ```text
//! v = Vq·q0 + Ve·e − K·(j − g·v),   j_i = i(v_i) + Σ αij·Q(v_j) − βi·Q0
//! ```
//! The predictor's upward moves are clamped, since an extrapolated exponential runs away; a correction is accepted on
//! its own estimate of what it leaves behind, with current and charge linearised along it, so that a clean step costs
//! one evaluation of the devices.

use super::bank::{Evaluation, PortBank};
use crate::network::Reduction;
use crate::network::reduction::PORT_CONDUCTANCE;
use crate::numeric::{Factored, Lane, Matrix};

/// Most Newton iterations of one step: a junction driven volts too far comes back by one width an iteration.
const MOST_ITERATIONS: usize = 500;
/// A conducting junction moves up by at most this many widths (n·VT) in one iteration.
const CLAMP: f64 = 2.0;

/// What the step starts from and ends with: linear states (charges in C, fluxes in Wb), then port charges in C.
#[derive(Clone, Debug, PartialEq)]
pub struct State<L> {
    /// Capacitor charges, then inductor fluxes.
    pub linear: Vec<L>,
    /// Port charges.
    pub charge: Vec<L>,
}

impl<L: Lane> State<L> {
    /// The bias: everything zero, for `linear` linear states and `ports` ports.
    pub fn at_bias(linear: usize, ports: usize) -> Self {
        State {
            linear: vec![L::zero(); linear],
            charge: vec![L::zero(); ports],
        }
    }

    /// Number of states in all.
    pub fn len(&self) -> usize {
        self.linear.len() + self.charge.len()
    }

    /// Whether there are no states.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// All states, linear ones first.
    pub fn iter(&self) -> impl Iterator<Item = &L> {
        self.linear.iter().chain(&self.charge)
    }

    /// All states, to be changed.
    pub fn iter_mut(&mut self) -> impl Iterator<Item = &mut L> {
        self.linear.iter_mut().chain(&mut self.charge)
    }
}

/// When a Newton correction is good enough.
#[derive(Clone, Copy, Debug)]
pub struct Acceptance {
    /// Largest error left in a port voltage, V.
    pub leftover: f64,
}

/// Why a step was not solved: the port whose correction was largest.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct StepFailure {
    /// Port number.
    pub port: usize,
}

/// The work space of a step, reused from step to step.
#[derive(Clone, Debug)]
pub struct StepSolver<L> {
    /// Device state at each stage.
    stages: Vec<Evaluation<L>>,
    /// j − g·v, stage-major.
    current: Vec<L>,
    /// Port voltages without port currents, stage-major.
    open: Vec<L>,
    correction: Vec<L>,
    jacobian: Factored<L>,
    /// Newton iterations of the last step.
    pub iterations: usize,
}

impl<L: Lane> StepSolver<L> {
    /// Work space for steps of `stages` stages over `bank`.
    pub fn new(bank: &PortBank<L>, stages: usize) -> Self {
        let size = stages * bank.ports();
        StepSolver {
            stages: vec![Evaluation::for_bank(bank); stages],
            current: vec![L::zero(); size],
            open: vec![L::zero(); size],
            correction: vec![L::zero(); size],
            jacobian: Factored::with_size(size),
            iterations: 0,
        }
    }

    /// Solve one step from `start` under `drive` (V, one a stage). `v` holds the guess of the port voltages (deviations,
    /// stage-major) and receives the solution.
    ///
    /// # Errors
    /// Where Newton's method does not settle.
    pub fn solve(
        &mut self,
        bank: &PortBank<L>,
        reduction: &Reduction<L>,
        start: &State<L>,
        drive: &[L],
        v: &mut [L],
        acceptance: Acceptance,
    ) -> Result<(), StepFailure> {
        self.open.fill(L::zero());
        reduction
            .ports_from_state
            .multiply_add(&start.linear, &mut self.open);
        reduction
            .ports_from_drive
            .multiply_add(drive, &mut self.open);
        let ports = bank.ports();
        let mut worst = 0;
        for iteration in 1..=MOST_ITERATIONS {
            self.evaluate(bank, v);
            self.form_current(bank, reduction, start, v);
            self.correct(bank, reduction, v)
                .map_err(|_| StepFailure { port: worst })?;
            let mut leftover = 0.0f64;
            let mut clamped = false;
            for (k, value) in v.iter_mut().enumerate() {
                let limits = &bank.limits()[k % ports];
                let wanted = *value + self.correction[k];
                let next = clamp(*value, wanted, bank.anchor()[k % ports], limits);
                let moved = (next - *value).abs();
                clamped |= (next - wanted).abs().largest() > 0.0;
                // Newton leaves about the square of its correction over twice the width of the exponential
                let left = (moved * moved).largest() / (2.0 * limits.width);
                if left >= leftover || !left.is_finite() {
                    leftover = left;
                    worst = k % ports;
                }
                self.correction[k] = next - *value;
                *value = next;
            }
            if !leftover.is_finite() {
                return Err(StepFailure { port: worst });
            }
            if leftover <= acceptance.leftover && !clamped {
                self.iterations = iteration;
                self.follow_correction(bank, reduction, ports);
                return Ok(());
            }
        }
        Err(StepFailure { port: worst })
    }

    #[inline(always)]
    fn evaluate(&mut self, bank: &PortBank<L>, v: &[L]) {
        for (stage, evaluation) in self.stages.iter_mut().enumerate() {
            bank.evaluate(
                &v[stage * bank.ports()..(stage + 1) * bank.ports()],
                evaluation,
            );
        }
    }

    /// j − g·v at every stage.
    #[inline(always)]
    fn form_current(
        &mut self,
        bank: &PortBank<L>,
        reduction: &Reduction<L>,
        start: &State<L>,
        v: &[L],
    ) {
        let ports = bank.ports();
        let g = L::splat(PORT_CONDUCTANCE);
        for i in 0..reduction.stages {
            for port in 0..ports {
                self.current[i * ports + port] =
                    self.stages[i].current[port] - g * v[i * ports + port];
            }
            if bank.stores_charge() {
                let history = reduction.history_rates[i];
                for port in 0..ports {
                    // differences of the charge itself: balances to rounding over a period
                    let mut rate = L::zero();
                    for (j, stage) in self.stages.iter().enumerate() {
                        rate += reduction.rates[(i, j)] * stage.charge[port];
                    }
                    self.current[i * ports + port] += rate - history * start.charge[port];
                }
            }
        }
    }

    /// The Newton correction of v into `self.correction`.
    #[inline(always)]
    fn correct(&mut self, bank: &PortBank<L>, reduction: &Reduction<L>, v: &[L]) -> Result<(), ()> {
        let ports = bank.ports();
        let g = L::splat(PORT_CONDUCTANCE);
        let size = v.len();
        let matrix = self.jacobian.matrix_mut();
        for row in 0..size {
            let source = reduction.ports_from_current.row(row);
            for (entry, value) in matrix.row_mut(row).iter_mut().zip(source) {
                *entry = -g * *value;
            }
            matrix[(row, row)] += L::one();
        }
        for (stage, evaluation) in self.stages.iter().enumerate() {
            bank.add_times_blocks(
                &reduction.ports_from_current,
                &evaluation.conductance,
                stage * ports,
                matrix,
            );
            if bank.stores_charge() {
                bank.add_times_blocks(
                    &reduction.ports_from_charge,
                    &evaluation.capacitance,
                    stage * ports,
                    matrix,
                );
            }
        }
        self.jacobian.factor().map_err(|_| ())?;
        // −(v − open + K·current)
        for (row, value) in self.correction.iter_mut().enumerate() {
            let mut sum = self.open[row] - v[row];
            for (entry, current) in reduction
                .ports_from_current
                .row(row)
                .iter()
                .zip(&self.current)
            {
                sum -= *entry * *current;
            }
            *value = sum;
        }
        self.jacobian.solve(&mut self.correction);
        Ok(())
    }

    /// Current and charge along the accepted correction.
    #[inline(always)]
    fn follow_correction(&mut self, bank: &PortBank<L>, reduction: &Reduction<L>, ports: usize) {
        let g = L::splat(PORT_CONDUCTANCE);
        for (stage, evaluation) in self.stages.iter_mut().enumerate() {
            let step = &self.correction[stage * ports..(stage + 1) * ports];
            let current = &mut self.current[stage * ports..(stage + 1) * ports];
            bank.add_blocks_times(&evaluation.conductance, step, current);
            bank.add_blocks_times(&evaluation.conductance, step, &mut evaluation.current);
            for (value, moved) in current.iter_mut().zip(step) {
                *value -= g * *moved;
            }
        }
        if !bank.stores_charge() {
            return;
        }
        for stage in 0..reduction.stages {
            let step = &self.correction[stage * ports..(stage + 1) * ports];
            let mut moved = vec![L::zero(); ports];
            bank.add_blocks_times(&self.stages[stage].capacitance, step, &mut moved);
            for (port, moved) in moved.into_iter().enumerate() {
                self.stages[stage].charge[port] += moved;
                for i in 0..reduction.stages {
                    self.current[i * ports + port] += reduction.rates[(i, stage)] * moved;
                }
            }
        }
    }

    /// The state at the end of the step just solved, into `end`.
    #[inline(always)]
    pub fn end_state(
        &self,
        reduction: &Reduction<L>,
        start: &State<L>,
        drive: &[L],
        end: &mut State<L>,
    ) {
        end.linear.fill(L::zero());
        reduction
            .state_from_state
            .multiply_add(&start.linear, &mut end.linear);
        reduction
            .state_from_drive
            .multiply_add(drive, &mut end.linear);
        for (row, value) in end.linear.iter_mut().enumerate() {
            for (entry, current) in reduction
                .state_from_current
                .row(row)
                .iter()
                .zip(&self.current)
            {
                *value -= *entry * *current;
            }
        }
        end.charge
            .copy_from_slice(&self.stages[reduction.stages - 1].charge);
    }

    /// The output at every stage of the step just solved, V, into `output`.
    #[inline(always)]
    pub fn outputs(
        &self,
        reduction: &Reduction<L>,
        start: &State<L>,
        drive: &[L],
        output: &mut [L],
    ) {
        output.fill(L::zero());
        reduction
            .output_from_state
            .multiply_add(&start.linear, output);
        reduction.output_from_drive.multiply_add(drive, output);
        for (row, value) in output.iter_mut().enumerate() {
            for (entry, current) in reduction
                .output_from_current
                .row(row)
                .iter()
                .zip(&self.current)
            {
                *value -= *entry * *current;
            }
        }
    }

    /// Carry sensitivities over the step just solved: `map` holds ∂(start)/∂(something), one column a something and
    /// one row a state, and receives ∂(end)/∂(the same). `outputs`, where given, receives ∂(output at each stage).
    pub fn carry_sensitivity(
        &mut self,
        bank: &PortBank<L>,
        reduction: &Reduction<L>,
        map: &mut Matrix<L>,
        mut outputs: Option<&mut Matrix<L>>,
    ) {
        let ports = bank.ports();
        let stages = reduction.stages;
        let size = stages * ports;
        let linear = reduction.state_from_state.rows();
        let g = L::splat(PORT_CONDUCTANCE);
        let mut start = vec![L::zero(); map.rows()];
        let mut injected = vec![L::zero(); size];
        let mut dv = vec![L::zero(); size];
        for column in 0..map.columns() {
            for (row, value) in start.iter_mut().enumerate() {
                *value = map[(row, column)];
            }
            // port currents moved by the starting charges alone
            for i in 0..stages {
                for port in 0..ports {
                    injected[i * ports + port] = -reduction.history_rates[i] * start[linear + port];
                }
            }
            dv.fill(L::zero());
            reduction
                .ports_from_state
                .multiply_add(&start[..linear], &mut dv);
            for (row, value) in dv.iter_mut().enumerate() {
                for (entry, current) in reduction.ports_from_current.row(row).iter().zip(&injected)
                {
                    *value -= *entry * *current;
                }
            }
            self.jacobian.solve(&mut dv);
            for (stage, evaluation) in self.stages.iter().enumerate() {
                let step = &dv[stage * ports..(stage + 1) * ports];
                bank.add_blocks_times(
                    &evaluation.conductance,
                    step,
                    &mut injected[stage * ports..(stage + 1) * ports],
                );
                for (value, moved) in injected[stage * ports..].iter_mut().zip(step) {
                    *value -= g * *moved;
                }
                let mut moved = vec![L::zero(); ports];
                bank.add_blocks_times(&evaluation.capacitance, step, &mut moved);
                for i in 0..stages {
                    for port in 0..ports {
                        injected[i * ports + port] += reduction.rates[(i, stage)] * moved[port];
                    }
                }
                if stage + 1 == stages {
                    for (port, value) in moved.into_iter().enumerate() {
                        map[(linear + port, column)] = value;
                    }
                }
            }
            if let Some(outputs) = &mut outputs {
                for stage in 0..stages {
                    let mut value = L::zero();
                    for (entry, state) in reduction.output_from_state.row(stage).iter().zip(&start)
                    {
                        value += *entry * *state;
                    }
                    for (entry, current) in reduction
                        .output_from_current
                        .row(stage)
                        .iter()
                        .zip(&injected)
                    {
                        value -= *entry * *current;
                    }
                    outputs[(stage, column)] = value;
                }
            }
            for row in 0..linear {
                let mut value = L::zero();
                for (entry, state) in reduction.state_from_state.row(row).iter().zip(&start) {
                    value += *entry * *state;
                }
                for (entry, current) in reduction.state_from_current.row(row).iter().zip(&injected)
                {
                    value -= *entry * *current;
                }
                map[(row, column)] = value;
            }
        }
    }
}

/// Where a junction may go in one iteration: a conducting one rises by at most a few widths, and likewise into
/// breakdown.
#[inline(always)]
fn clamp<L: Lane>(now: L, wanted: L, anchor: L, limits: &super::bank::JunctionLimits) -> L {
    let margin = L::splat(CLAMP * limits.width);
    let ceiling = (now + anchor).max(L::splat(limits.knee)) + margin - anchor;
    let next = wanted.min(ceiling);
    if limits.breakdown.is_finite() {
        let margin = L::splat(CLAMP * limits.breakdown_width);
        let floor = (now + anchor).min(L::splat(-limits.breakdown)) - margin - anchor;
        next.max(floor)
    } else {
        next
    }
}

/// Clamp a predicted port voltage as an iteration from `now` would be.
#[inline(always)]
pub fn clamp_prediction<L: Lane>(bank: &PortBank<L>, port: usize, now: L, predicted: L) -> L {
    clamp(now, predicted, bank.anchor()[port], &bank.limits()[port])
}
