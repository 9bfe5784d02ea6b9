//! The operating point: capacitors open, inductors short, EMF zero.
//!
//! Newton's method on the port voltages of the reduced network, `v = p − K·(i(v) − g·v)`, with upward steps of a
//! conducting junction taken logarithmically, in current rather than in voltage (common practice). Several starts;
//! where plain Newton fails, the drives are raised from zero, then a shunt across every port is taken away step by
//! step, then a pseudo-transient damps every port. A bias must also be stable: all poles of the linearised network in
//! the left half plane.

use super::bank::{Evaluation, JunctionLimits, PortBank, limits_of};
use super::error::EngineError;
use super::linear::Linearised;
use crate::network::assembly::Assembly;
use crate::network::reduction::PORT_CONDUCTANCE;
use crate::network::{Network, Place};
use crate::numeric::{Factored, Matrix};
use nalgebra::{DMatrix, DVector};

/// Most Newton iterations of one attempt.
const MOST_ITERATIONS: usize = 200;
/// Relative size of the last correction at which Newton's quadratic convergence has reached rounding.
const CONVERGED: f64 = 1e-11;
/// Corrections after convergence, so that the result does not depend on where the test fell.
const POLISH: usize = 2;

/// A port voltage beyond this, V, is no solution: its rounding alone, through the port conductance, is a nanoampere, as
/// where a forced current finds blocking junctions only.
const FARTHEST: f64 = 1e12;
/// Transistors of which every combination of conducting and blocking is tried as a start.
const MOST_COMBINED: usize = 5;
/// Solutions whose currents differ by less than this share of the largest are one.
const SAME_CURRENT: f64 = 1e-6;
/// And so are those that differ by a leakage, A.
const LEAKAGE: f64 = 1e-10;

/// An operating point.
#[derive(Clone, Debug)]
pub struct OperatingPoint {
    /// Port voltages, V, in port order.
    pub ports: Vec<f64>,
    /// Node voltages, V, in node order (`gnd` first).
    pub nodes: Vec<f64>,
    /// Inductor currents, A.
    pub inductor_currents: Vec<f64>,
}

impl OperatingPoint {
    /// The one stable operating point of `network`.
    ///
    /// # Errors
    /// Where there is none, where it is not stable, or where there are two.
    pub fn of(network: &Network) -> Result<Self, EngineError> {
        let problem = DcProblem::of(network)?;
        let rest: Vec<f64> = network.drives.iter().map(|drive| drive.rest).collect();
        let found = problem.all_solutions(&rest)?;
        let mut stable = Vec::new();
        let mut unstable = None;
        for ports in found {
            let point = problem.complete(network, &rest, ports);
            match Linearised::at(network, &point).instability() {
                None => stable.push(point),
                Some(error) => unstable = Some(error),
            }
        }
        match (stable.len(), unstable) {
            (0, Some(error)) => Err(error),
            (1, _) => Ok(stable.remove(0)),
            (0, None) => Err(EngineError::Undetermined),
            _ => Err(two_states(network, &stable)),
        }
    }

    /// The static solution with the drives at `drives` (V or A, all of them), started from these port voltages.
    ///
    /// # Errors
    /// Where no fallback converges.
    pub fn with_drives(&self, network: &Network, drives: &[f64]) -> Result<Self, EngineError> {
        let problem = DcProblem::of(network)?;
        let ports = problem.solve_from(drives, &self.ports)?;
        Ok(problem.complete(network, drives, ports))
    }

    /// The port bank anchored here.
    pub fn bank(&self, network: &Network) -> PortBank<f64> {
        PortBank::anchored(network, &self.ports)
    }
}

fn two_states(network: &Network, stable: &[OperatingPoint]) -> EngineError {
    let current = |point: &OperatingPoint, k: usize| {
        let (currents, _) = point.bank(network).at_anchor();
        -network.transistors[k].polarity.sign() * currents[2 * k + 1]
    };
    EngineError::TwoStableStates {
        outputs: stable
            .iter()
            .map(|point| point.nodes[network.output])
            .collect(),
        transistors: network
            .transistors
            .iter()
            .enumerate()
            .map(|(k, element)| {
                (
                    element.name.clone(),
                    current(&stable[0], k),
                    current(&stable[1], k),
                )
            })
            .collect(),
    }
}

/// The static equations reduced to the ports.
pub struct DcProblem {
    bank: PortBank<f64>,
    limits: Vec<JunctionLimits>,
    /// Number of ports that belong to transistors; they come first.
    paired: usize,
    names: Vec<String>,
    /// Port voltages with no port current, per unit of each drive, ports × drives.
    from_drive: DMatrix<f64>,
    /// K, ports × ports.
    from_current: Matrix<f64>,
    /// Unknowns per unit of each drive, n × drives, and per unit of each port current, n × ports.
    unknowns_from_drive: DMatrix<f64>,
    unknowns_from_current: DMatrix<f64>,
}

/// What is changed about the equations to lead Newton to a solution.
#[derive(Clone, Copy)]
struct Aid {
    /// All drives scaled by this.
    drive: f64,
    /// Conductance across every port, S.
    shunt: f64,
    /// Conductance that holds every port at its last value, S.
    damping: f64,
}

const NO_AID: Aid = Aid {
    drive: 1.0,
    shunt: 0.0,
    damping: 0.0,
};

impl DcProblem {
    /// The static equations of `network`.
    ///
    /// # Errors
    /// Where they are singular.
    pub fn of(network: &Network) -> Result<Self, EngineError> {
        let assembly = Assembly::of(network, PORT_CONDUCTANCE);
        let probes = assembly.port_probes(network);
        let factored = assembly.conductance.clone().lu();
        let solve = |right: &DMatrix<f64>| match factored.solve(right) {
            Some(solution) if solution.iter().all(|value| value.is_finite()) => Ok(solution),
            _ => Err(EngineError::Undetermined),
        };
        let incidence = DMatrix::from_fn(assembly.size(), probes.len(), |row, port| {
            probes[port].unknowns[row]
        });
        let direct = DMatrix::from_fn(probes.len(), network.drives.len(), |port, drive| {
            probes[port].drives[drive]
        });
        let unknowns_from_drive = solve(&assembly.drive_conductance)?;
        let unknowns_from_current = solve(&incidence)?;
        let from_drive = incidence.transpose() * &unknowns_from_drive + direct;
        let reduced = incidence.transpose() * &unknowns_from_current;
        let mut from_current = Matrix::zero(probes.len(), probes.len());
        for row in 0..probes.len() {
            for column in 0..probes.len() {
                from_current[(row, column)] = reduced[(row, column)];
            }
        }
        Ok(DcProblem {
            bank: PortBank::anchored(network, &vec![0.0; probes.len()]),
            limits: limits_of(network),
            paired: 2 * network.transistors.len(),
            names: (0..probes.len())
                .map(|port| network.port_name(port).to_string())
                .collect(),
            from_drive,
            from_current,
            unknowns_from_drive,
            unknowns_from_current,
        })
    }

    fn ports(&self) -> usize {
        self.limits.len()
    }

    /// Distinct solutions reached from several starts; at least one.
    fn all_solutions(&self, drives: &[f64]) -> Result<Vec<Vec<f64>>, EngineError> {
        let starts = self.starts();
        let mut found: Vec<Vec<f64>> = Vec::new();
        for start in starts {
            if let Some(solution) = self.newton(drives, &start, NO_AID, MOST_ITERATIONS)
                && !found.iter().any(|known| self.same_state(known, &solution))
            {
                found.push(solution);
            }
        }
        if found.is_empty() {
            found.push(self.with_aids(drives, &vec![0.0; self.ports()])?);
        }
        Ok(found)
    }

    /// Where Newton's method begins: every transistor active, everything at rest, everything conducting, and every way
    /// of some transistors conducting fully while the others do not, in which a second stable state would show.
    fn starts(&self) -> Vec<Vec<f64>> {
        let forward = |port: usize| 0.6f64.min(0.9 * self.limits[port].knee);
        let active = |port: usize| {
            if port < self.paired && !port.is_multiple_of(2) {
                -3.0
            } else {
                forward(port)
            }
        };
        let transistors = self.paired / 2;
        let patterns: Vec<u32> = match transistors {
            0..=1 => Vec::new(),
            2..=MOST_COMBINED => (1..(1 << transistors) - 1).collect(),
            _ => (0..transistors.min(31)).map(|k| 1 << k).collect(),
        };
        let some = |pattern: u32, port: usize| {
            let on = port >= self.paired || pattern >> (port / 2) & 1 == 1;
            if on { forward(port) } else { -1.0 }
        };
        let ports = 0..self.ports();
        let mut starts = vec![
            ports.clone().map(active).collect(),
            vec![0.0; self.ports()],
            ports.clone().map(forward).collect(),
        ];
        starts.extend(
            patterns
                .into_iter()
                .map(|pattern| ports.clone().map(|port| some(pattern, port)).collect()),
        );
        starts
    }

    /// Whether two solutions carry the same currents. Voltages do not decide: between two blocking junctions a node may
    /// lie anywhere, within rounding of the currents.
    fn same_state(&self, a: &[f64], b: &[f64]) -> bool {
        let currents = |v: &[f64]| {
            let mut evaluation = Evaluation::for_bank(&self.bank);
            self.bank.evaluate(v, &mut evaluation);
            evaluation.current
        };
        let (a, b) = (currents(a), currents(b));
        let largest = a
            .iter()
            .chain(&b)
            .fold(0.0f64, |largest, current| largest.max(current.abs()));
        a.iter()
            .zip(&b)
            .all(|(a, b)| (a - b).abs() < SAME_CURRENT * largest + LEAKAGE)
    }

    /// The solution reached from `start`, with every fallback.
    ///
    /// # Errors
    /// Where no fallback converges.
    pub fn solve_from(&self, drives: &[f64], start: &[f64]) -> Result<Vec<f64>, EngineError> {
        match self.newton(drives, start, NO_AID, MOST_ITERATIONS) {
            Some(solution) => Ok(solution),
            None => self.with_aids(drives, start),
        }
    }

    fn with_aids(&self, drives: &[f64], start: &[f64]) -> Result<Vec<f64>, EngineError> {
        self.raise_drives(drives)
            .or_else(|| self.remove_shunt(drives))
            .or_else(|| self.pseudo_transient(drives, start))
            .ok_or_else(|| self.failure(drives, start))
    }

    /// Raise all drives from zero, halving the stride where a step fails.
    fn raise_drives(&self, drives: &[f64]) -> Option<Vec<f64>> {
        let mut v = vec![0.0; self.ports()];
        let (mut done, mut stride) = (0.0, 0.1);
        while done < 1.0 {
            let next = f64::min(1.0, done + stride);
            match self.newton(
                drives,
                &v,
                Aid {
                    drive: next,
                    ..NO_AID
                },
                60,
            ) {
                Some(solution) => {
                    (v, done) = (solution, next);
                    stride *= 2.0;
                }
                None if stride > 1e-5 => stride *= 0.25,
                None => return None,
            }
        }
        Some(v)
    }

    /// Put a large conductance across every port and take it away by decades.
    fn remove_shunt(&self, drives: &[f64]) -> Option<Vec<f64>> {
        let mut v = vec![0.0; self.ports()];
        for decade in -4..=30 {
            let aid = Aid {
                shunt: 10f64.powf(-0.5 * decade as f64),
                ..NO_AID
            };
            v = self.newton(drives, &v, aid, 100)?;
        }
        self.newton(drives, &v, NO_AID, MOST_ITERATIONS)
    }

    /// Hold every port back by a conductance that shrinks as the solution settles.
    fn pseudo_transient(&self, drives: &[f64], start: &[f64]) -> Option<Vec<f64>> {
        let mut v = start.to_vec();
        let mut damping = 10.0;
        for _ in 0..2000 {
            match self.newton(drives, &v, Aid { damping, ..NO_AID }, 30) {
                Some(next) => {
                    v = next;
                    damping *= 0.7;
                }
                None => damping *= 8.0,
            }
            if damping < 1e-13 {
                return self.newton(drives, &v, NO_AID, MOST_ITERATIONS);
            }
            if damping > 1e9 {
                return None;
            }
        }
        None
    }

    fn failure(&self, drives: &[f64], v: &[f64]) -> EngineError {
        let mut evaluation = Evaluation::for_bank(&self.bank);
        let left = self.residual(drives, v, v, NO_AID, &mut evaluation);
        let worst = (0..left.len()).max_by(|a, b| left[*a].abs().total_cmp(&left[*b].abs()));
        EngineError::NoBias {
            part: worst.map_or_else(String::new, |port| self.names[port].clone()),
            residual: worst.map_or(0.0, |port| left[port].abs()),
        }
    }

    /// v − p + K·(i(v) − g·v + shunt·v + damping·(v − held)).
    fn residual(
        &self,
        drives: &[f64],
        v: &[f64],
        held: &[f64],
        aid: Aid,
        evaluation: &mut Evaluation<f64>,
    ) -> Vec<f64> {
        self.bank.evaluate(v, evaluation);
        let (rest, _) = self.bank.at_anchor();
        let current: Vec<f64> = (0..v.len())
            .map(|port| {
                evaluation.current[port]
                    + rest[port]
                    + (aid.shunt - PORT_CONDUCTANCE) * v[port]
                    + aid.damping * (v[port] - held[port])
            })
            .collect();
        let mut left: Vec<f64> = (0..v.len())
            .map(|port| {
                let open: f64 = drives
                    .iter()
                    .enumerate()
                    .map(|(k, u)| self.from_drive[(port, k)] * u)
                    .sum();
                v[port] - aid.drive * open
            })
            .collect();
        self.from_current.multiply_add(&current, &mut left);
        left
    }

    fn newton(&self, drives: &[f64], start: &[f64], aid: Aid, most: usize) -> Option<Vec<f64>> {
        let mut evaluation = Evaluation::for_bank(&self.bank);
        let mut v = start.to_vec();
        let mut factored = Factored::with_size(self.ports());
        let mut remaining = None;
        for _ in 0..most {
            let mut step = self.residual(drives, &v, start, aid, &mut evaluation);
            let matrix = factored.matrix_mut();
            matrix.clear();
            for port in 0..self.ports() {
                for other in 0..self.ports() {
                    matrix[(port, other)] = self.from_current[(port, other)]
                        * (aid.shunt + aid.damping - PORT_CONDUCTANCE);
                }
                matrix[(port, port)] += 1.0;
            }
            self.bank
                .add_times_blocks(&self.from_current, &evaluation.conductance, 0, matrix);
            factored.factor().ok()?;
            factored.solve(&mut step);
            let mut largest = 0.0f64;
            for port in 0..self.ports() {
                let wanted = v[port] - step[port];
                if !wanted.is_finite() || wanted.abs() > FARTHEST {
                    return None;
                }
                let next = limited(v[port], wanted, &self.limits[port]);
                largest = largest.max((next - v[port]).abs() / (1.0 + next.abs()));
                if next != wanted {
                    largest = largest.max(1.0);
                }
                v[port] = next;
            }
            match remaining {
                None if largest < CONVERGED => remaining = Some(POLISH),
                Some(0) => return Some(v),
                Some(left) => remaining = Some(left - 1),
                None => {}
            }
        }
        None
    }

    /// Node voltages and inductor currents that belong to port voltages `ports`.
    fn complete(&self, network: &Network, drives: &[f64], ports: Vec<f64>) -> OperatingPoint {
        let mut evaluation = Evaluation::for_bank(&self.bank);
        self.bank.evaluate(&ports, &mut evaluation);
        let (rest, _) = self.bank.at_anchor();
        let current = DVector::from_fn(ports.len(), |port, _| {
            evaluation.current[port] + rest[port] - PORT_CONDUCTANCE * ports[port]
        });
        let unknowns = &self.unknowns_from_drive * DVector::from_column_slice(drives)
            - &self.unknowns_from_current * current;
        let nodes = network
            .places
            .iter()
            .map(|place| match place {
                Place::Ground => 0.0,
                Place::Known(drive) => drives[*drive],
                Place::Unknown(unknown) => unknowns[*unknown],
            })
            .collect();
        OperatingPoint {
            ports,
            nodes,
            inductor_currents: unknowns.iter().skip(network.unknowns).copied().collect(),
        }
    }
}

/// Where a junction may go from `now` when Newton asks for `wanted`.
fn limited(now: f64, wanted: f64, limits: &JunctionLimits) -> f64 {
    let up = limited_upward(now, wanted, limits.knee, limits.width);
    if limits.breakdown.is_finite() && up < -limits.breakdown {
        -limits.breakdown
            - limited_upward(
                -now - limits.breakdown,
                -up - limits.breakdown,
                0.0,
                limits.breakdown_width,
            )
    } else {
        up
    }
}

/// Steps of an exponential of slope 1/`width` beyond `knee` are taken in current rather than in voltage.
fn limited_upward(now: f64, wanted: f64, knee: f64, width: f64) -> f64 {
    if wanted <= knee || wanted <= now + 2.0 * width {
        wanted
    } else if now > knee {
        now + width * ((wanted - now) / width).ln_1p()
    } else {
        knee + width * ((wanted - knee) / width).ln_1p()
    }
}
