//! One sweep over the period, element after element, on a given mesh or on one chosen on the way.

use super::element::{Element, FINEST, FINEST_LEVEL};
use super::{MOST_ELEMENTS, PeriodicSolver, UnitDrive};
use crate::engine::error::EngineError;
use crate::engine::step::{Acceptance, State, clamp_prediction};
use crate::numeric::Matrix;

/// Distance from the extrapolation allowed at a port, in widths of its exponential.
const PORT_ERROR: f64 = 0.3;

/// One sweep over the period.
pub(super) struct Pass {
    pub(super) mesh: Vec<Element>,
    /// Port voltages, stage-major, element after element.
    pub(super) ports: Vec<f64>,
    /// Outputs, stage after stage.
    pub(super) outputs: Vec<f64>,
    pub(super) end: State<f64>,
    /// ∂end/∂start, where asked for.
    pub(super) map: Option<Matrix<f64>>,
    /// States at phase zero and at the end of every element, one row each.
    pub(super) states: Vec<State<f64>>,
}

pub(super) enum Mesh<'m> {
    Fixed(&'m [Element]),
    Adaptive { local_error: f64 },
}

/// Values of an accepted element at its start and its stages.
struct Values {
    element: Element,
    /// Port voltages, port-minor.
    ports: Vec<f64>,
    outputs: Vec<f64>,
}

/// The state of one sweep.
pub(super) struct Sweep<'s, 'a> {
    solver: &'s mut PeriodicSolver<'a>,
    drive: UnitDrive<'s>,
    pub(super) state: State<f64>,
    pub(super) end: State<f64>,
    pass: Pass,
    /// The element before, by which the next one is guessed and judged; none at phase zero of a first sweep.
    previous: Option<Values>,
    pub(super) v: Vec<f64>,
    predicted: Vec<f64>,
    pub(super) y: Vec<f64>,
    y_predicted: Vec<f64>,
    forcing: Vec<f64>,
    v_scale: f64,
    y_scale: f64,
    /// Where Newton's method last failed.
    failed_port: usize,
}

impl<'s, 'a> Sweep<'s, 'a> {
    pub(super) fn new(
        solver: &'s mut PeriodicSolver<'a>,
        drive: UnitDrive<'s>,
        amplitude: f64,
        start: &State<f64>,
        sensitive: bool,
    ) -> Self {
        let stages = solver.radau.stages();
        let ports = solver.bank.ports();
        let v_scale = solver
            .phasors
            .ports
            .iter()
            .map(|phasor| phasor.norm())
            .fold(0.0, f64::max)
            * amplitude;
        // before any sweep has shown how large the output is, the running peak serves, from a small share of the
        // linear response
        let y_scale = solver
            .output_peak
            .unwrap_or(1e-3 * solver.phasors.output.norm() * amplitude);
        Sweep {
            pass: Pass {
                mesh: Vec::new(),
                ports: Vec::new(),
                outputs: Vec::new(),
                end: start.clone(),
                map: sensitive.then(|| Matrix::identity(start.len())),
                states: vec![start.clone()],
            },
            state: start.clone(),
            end: start.clone(),
            previous: None,
            failed_port: 0,
            v: vec![0.0; stages * ports],
            predicted: vec![0.0; stages * ports],
            y: vec![0.0; stages],
            y_predicted: vec![0.0; stages],
            forcing: vec![0.0; stages],
            // a drive into clipping takes the junctions further than the linear response; a few widths is where the
            // exponential saturates the scale that rounding is judged by
            v_scale: v_scale.min(0.1),
            y_scale,
            solver,
            drive,
        }
    }

    pub(super) fn run(mut self, mesh: Mesh) -> Result<Pass, EngineError> {
        match mesh {
            Mesh::Fixed(elements) => {
                for element in elements {
                    if !self.attempt(*element)? {
                        return Err(self.no_step(*element));
                    }
                    self.accept(*element);
                }
            }
            Mesh::Adaptive { local_error } => self.run_adaptively(local_error)?,
        }
        let peak = self
            .pass
            .outputs
            .iter()
            .fold(0.0, |peak: f64, y| peak.max(y.abs()));
        self.solver.output_peak = Some(peak.max(f64::MIN_POSITIVE));
        self.pass.end = self.state;
        Ok(self.pass)
    }

    fn run_adaptively(&mut self, local_error: f64) -> Result<(), EngineError> {
        let coarsest = self.solver.options.coarsest;
        let growth = 0.95 * 0.5f64.powi(self.solver.radau.stages() as i32 + 1);
        // with nothing before it, the first element has no estimate of its error: a first sweep, which may start far
        // from the period, begins with short ones, and a later one leaves it to the refinement
        let caution = if self.solver.output_peak.is_none() {
            2
        } else {
            0
        };
        let mut element = Element {
            start: 0,
            level: coarsest + caution,
        };
        while element.start < 1 << FINEST {
            let error = if self.attempt(element)? {
                self.local_error(local_error)
            } else {
                f64::INFINITY
            };
            if error > 1.0 && element.level < FINEST_LEVEL {
                element.level += if error > 256.0 { 2 } else { 1 };
                element.level = element.level.min(FINEST_LEVEL);
                continue;
            }
            if error == f64::INFINITY {
                return Err(self.no_step(element));
            }
            if self.pass.mesh.len() >= MOST_ELEMENTS {
                return Err(self
                    .solver
                    .no_period(self.y_scale, "the mesh grew beyond bounds"));
            }
            self.accept(element);
            let mut next = Element {
                start: element.end(),
                level: element.level,
            };
            if error < growth
                && next.level > coarsest
                && next.start.is_multiple_of(2 * next.length())
            {
                next.level -= 1;
            }
            element = next;
        }
        Ok(())
    }

    pub(super) fn no_step(&self, element: Element) -> EngineError {
        EngineError::NoStep {
            time: element.phase(0.0) / self.solver.frequency,
            part: match self.solver.bank.ports() {
                0 => String::new(),
                _ => self.solver.network.port_name(self.failed_port).to_string(),
            },
        }
    }

    /// Solve one element; false where Newton's method fails.
    fn attempt(&mut self, element: Element) -> Result<bool, EngineError> {
        self.predict(element);
        self.solve(element)
    }

    /// Solve one element from the guess in `self.v`; false where Newton's method fails.
    pub(super) fn solve(&mut self, element: Element) -> Result<bool, EngineError> {
        self.solver.reduction(element.level)?;
        for (stage, value) in self.forcing.iter_mut().enumerate() {
            *value = (self.drive)(element.phase(self.solver.radau.nodes[stage]));
        }
        let acceptance = Acceptance {
            leftover: 1e-15 * self.v_scale,
        };
        let reduction = &self.solver.reductions[&element.level];
        let solved = self.solver.stepper.solve(
            &self.solver.bank,
            reduction,
            &self.state,
            &self.forcing,
            &mut self.v,
            acceptance,
        );
        if let Err(failure) = solved {
            self.failed_port = failure.port;
            return Ok(false);
        }
        self.solver
            .stepper
            .outputs(reduction, &self.state, &self.forcing, &mut self.y);
        Ok(true)
    }

    /// Guess the element's port voltages and outputs by the polynomial of the element before.
    fn predict(&mut self, element: Element) {
        let ports = self.solver.bank.ports();
        let stages = self.solver.radau.stages();
        let Some(Values {
            element: last,
            ports: values,
            outputs,
        }) = &self.previous
        else {
            self.v.fill(0.0);
            return;
        };
        let ratio = last.level as i32 - element.level as i32;
        let reading = self.solver.reading(ratio).to_vec();
        for (stage, weights) in reading.iter().enumerate() {
            for port in 0..ports {
                let value: f64 = weights
                    .iter()
                    .enumerate()
                    .map(|(k, w)| w * values[k * ports + port])
                    .sum();
                self.predicted[stage * ports + port] = value;
                let now = values[stages * ports + port];
                self.v[stage * ports + port] =
                    clamp_prediction(&self.solver.bank, port, now, value);
            }
            self.y_predicted[stage] = weights.iter().zip(outputs).map(|(w, y)| w * y).sum();
        }
    }

    /// How far the element's values lie from the extrapolation, in units of what is allowed: the interpolation error
    /// of the element is a small, nearly constant share of that distance.
    fn local_error(&self, allowed: f64) -> f64 {
        if self.previous.is_none() {
            return 0.5;
        }
        let output = self
            .y
            .iter()
            .zip(&self.y_predicted)
            .map(|(y, predicted)| (y - predicted).abs())
            .fold(0.0, f64::max);
        let ports = self.solver.bank.ports();
        let limits = self.solver.bank.limits();
        let port_error = self
            .v
            .iter()
            .zip(&self.predicted)
            .enumerate()
            .map(|(k, (v, predicted))| (v - predicted).abs() / limits[k % ports].width)
            .fold(0.0, f64::max);
        (output / (allowed * self.y_scale)).max(port_error / PORT_ERROR)
    }

    /// Move the state to the end of the element just solved.
    fn advance(&mut self, element: Element) {
        let map = self.pass.map.take();
        match map {
            Some(mut map) => {
                self.advance_carrying(element, &mut map, None);
                self.pass.map = Some(map);
            }
            None => self.move_state(element),
        }
    }

    /// The same, with `map` carried along and the outputs' sensitivities written.
    pub(super) fn advance_carrying(
        &mut self,
        element: Element,
        map: &mut Matrix<f64>,
        outputs: Option<&mut Matrix<f64>>,
    ) {
        let solver = &mut *self.solver;
        let reduction = &solver.reductions[&element.level];
        solver
            .stepper
            .carry_sensitivity(&solver.bank, reduction, map, outputs);
        self.move_state(element);
    }

    fn move_state(&mut self, element: Element) {
        let reduction = &self.solver.reductions[&element.level];
        self.solver
            .stepper
            .end_state(reduction, &self.state, &self.forcing, &mut self.end);
        std::mem::swap(&mut self.state, &mut self.end);
    }

    fn accept(&mut self, element: Element) {
        let ports = self.solver.bank.ports();
        let stages = self.solver.radau.stages();
        self.advance(element);
        self.pass.states.push(self.state.clone());
        let mut values = Vec::with_capacity((stages + 1) * ports);
        let mut outputs = Vec::with_capacity(stages + 1);
        match &self.previous {
            Some(before) => {
                values.extend(&before.ports[stages * ports..]);
                outputs.push(before.outputs[stages]);
            }
            None => {
                // nothing is known at phase zero: continue the stages' own polynomial back to it
                let back = lagrange_to_zero(&self.solver.radau.nodes);
                for port in 0..ports {
                    values.push(
                        back.iter()
                            .enumerate()
                            .map(|(k, w)| w * self.v[k * ports + port])
                            .sum(),
                    );
                }
                outputs.push(back.iter().zip(&self.y).map(|(w, y)| w * y).sum());
            }
        }
        values.extend(&self.v);
        outputs.extend(&self.y);
        self.y_scale = self
            .y
            .iter()
            .fold(self.y_scale, |scale, y| scale.max(y.abs()));
        self.pass.mesh.push(element);
        self.pass.ports.extend(&self.v);
        self.pass.outputs.extend(&self.y);
        self.previous = Some(Values {
            element,
            ports: values,
            outputs,
        });
    }
}

fn lagrange_to_zero(nodes: &[f64]) -> Vec<f64> {
    (0..nodes.len())
        .map(|j| {
            (0..nodes.len())
                .filter(|&k| k != j)
                .map(|k| (0.0 - nodes[k]) / (nodes[j] - nodes[k]))
                .product()
        })
        .collect()
}
