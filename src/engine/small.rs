//! The uniform step for a handful of ports, with sizes known to the compiler.
//!
//! The same equations, predictor, clamp and acceptance as [`super::step`] with one stage; only the storage differs.
//! The general path stays the reference: a test holds this one to it.

// loops over a constant number of ports are unrolled by index; iterators over several arrays at once would hide that
#![allow(clippy::needless_range_loop)]

use super::bank::{Evaluation, PortBank};
use super::scheme::BDF3;
use super::step::clamp_prediction;
use crate::network::Reduction;
use crate::network::reduction::PORT_CONDUCTANCE;
use crate::numeric::Lane;

/// Most Newton iterations of one step: a junction driven volts too far comes back by one width an iteration.
const MOST_ITERATIONS: usize = 500;

/// A step that could not be solved: its number within the block and the port whose correction was largest.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct BlockFailure {
    /// Sample within the block.
    pub sample: usize,
    /// Port number.
    pub port: usize,
}

/// Advances a stage by whole blocks at a constant step.
pub trait Kernel<L>: Send + Sync {
    /// One step a sample of `drive` (V, at the end of the step), each output's deviation from bias into `output`.
    ///
    /// # Errors
    /// Where a step cannot be solved.
    fn advance_block(&mut self, drive: &[L], output: &mut [L]) -> Result<(), BlockFailure>;
    /// A copy with its state.
    fn duplicate(&self) -> Box<dyn Kernel<L>>;
}

/// The kernel for the bank's number of ports, where there is one.
pub fn kernel_for<L: Lane>(
    bank: &PortBank<L>,
    reduction: &Reduction<L>,
    leftover: f64,
) -> Option<Box<dyn Kernel<L>>> {
    Some(match bank.ports() {
        1 => Box::new(SmallKernel::<L, 1>::new(bank, reduction, leftover)),
        2 => Box::new(SmallKernel::<L, 2>::new(bank, reduction, leftover)),
        3 => Box::new(SmallKernel::<L, 3>::new(bank, reduction, leftover)),
        4 => Box::new(SmallKernel::<L, 4>::new(bank, reduction, leftover)),
        5 => Box::new(SmallKernel::<L, 5>::new(bank, reduction, leftover)),
        6 => Box::new(SmallKernel::<L, 6>::new(bank, reduction, leftover)),
        _ => return None,
    })
}

#[derive(Clone, Debug)]
struct SmallKernel<L, const P: usize> {
    bank: PortBank<L>,
    evaluation: Evaluation<L>,
    rate: L,
    leftover: f64,
    /// K and K·α, row by row.
    from_current: [[L; P]; P],
    from_charge: [[L; P]; P],
    /// Port voltages from the drive, and from each linear state.
    from_drive: [L; P],
    from_state: Vec<[L; P]>,
    /// Linear states and then the output: from the drive, the ports and (rows of) the states.
    rows: Vec<Row<L, P>>,
    /// Last three linear states, oldest replaced first; `newest` is the place of the last one.
    linear: [Vec<L>; 3],
    charge: [[L; P]; 3],
    voltage: [[L; P]; 3],
    newest: usize,
    weighted: Vec<L>,
}

#[derive(Clone, Debug)]
struct Row<L, const P: usize> {
    drive: L,
    ports: [L; P],
    states: Vec<L>,
}

impl<L: Lane, const P: usize> SmallKernel<L, P> {
    fn new(bank: &PortBank<L>, reduction: &Reduction<L>, leftover: f64) -> Self {
        let square = |matrix: &crate::numeric::Matrix<L>| {
            std::array::from_fn(|row| std::array::from_fn(|column| matrix[(row, column)]))
        };
        let states = reduction.state_from_state.rows();
        let row = |drive: L, ports: &[L], states: &[L]| Row {
            drive,
            ports: std::array::from_fn(|port| ports[port]),
            states: states.to_vec(),
        };
        let mut rows: Vec<Row<L, P>> = (0..states)
            .map(|k| {
                row(
                    reduction.state_from_drive[(k, 0)],
                    reduction.state_from_current.row(k),
                    reduction.state_from_state.row(k),
                )
            })
            .collect();
        rows.push(row(
            reduction.output_from_drive[(0, 0)],
            reduction.output_from_current.row(0),
            reduction.output_from_state.row(0),
        ));
        SmallKernel {
            evaluation: Evaluation::for_bank(bank),
            bank: bank.clone(),
            rate: reduction.rates[(0, 0)],
            leftover,
            from_current: square(&reduction.ports_from_current),
            from_charge: square(&reduction.ports_from_charge),
            from_drive: std::array::from_fn(|port| reduction.ports_from_drive[(port, 0)]),
            from_state: (0..states)
                .map(|k| std::array::from_fn(|port| reduction.ports_from_state[(port, k)]))
                .collect(),
            rows,
            linear: std::array::from_fn(|_| vec![L::zero(); states]),
            charge: [[L::zero(); P]; 3],
            voltage: [[L::zero(); P]; 3],
            newest: 0,
            weighted: vec![L::zero(); states],
        }
    }

    #[inline(always)]
    fn advance(&mut self, drive: L) -> Result<L, usize> {
        let [a, b, c] = [0, 1, 2].map(|age| (self.newest + age) % 3);
        let [wa, wb, wc] = [1, 2, 3].map(|k| L::splat(-BDF3[k] / BDF3[0]));
        for (k, weighted) in self.weighted.iter_mut().enumerate() {
            *weighted = wa * self.linear[a][k] + wb * self.linear[b][k] + wc * self.linear[c][k];
        }
        let history: [L; P] = std::array::from_fn(|p| {
            wa * self.charge[a][p] + wb * self.charge[b][p] + wc * self.charge[c][p]
        });
        let mut open: [L; P] = std::array::from_fn(|p| self.from_drive[p] * drive);
        for (column, weighted) in self.from_state.iter().zip(&self.weighted) {
            for p in 0..P {
                open[p] += column[p] * *weighted;
            }
        }
        let three = L::splat(3.0);
        let mut v: [L; P] = std::array::from_fn(|p| {
            let now = self.voltage[a][p];
            let predicted = three * (now - self.voltage[b][p]) + self.voltage[c][p];
            clamp_prediction(&self.bank, p, now, predicted)
        });
        let (current, charge) = self.newton(&open, &history, &mut v)?;
        let output = self.finish(drive, &current, c);
        self.charge[c] = charge;
        self.voltage[c] = v;
        self.newest = c;
        if output.is_finite() {
            Ok(output)
        } else {
            Err(0)
        }
    }

    /// Solve for the port voltages; returns j − g·v and the port charges.
    #[inline(always)]
    fn newton(
        &mut self,
        open: &[L; P],
        history: &[L; P],
        v: &mut [L; P],
    ) -> Result<([L; P], [L; P]), usize> {
        let g = L::splat(PORT_CONDUCTANCE);
        let charged = self.bank.stores_charge();
        let mut worst = 0;
        for _ in 0..MOST_ITERATIONS {
            self.bank.evaluate(&v[..], &mut self.evaluation);
            let mut current: [L; P] =
                std::array::from_fn(|p| self.evaluation.current[p] - g * v[p]);
            if charged {
                for p in 0..P {
                    current[p] += self.rate * (self.evaluation.charge[p] - history[p]);
                }
            }
            let mut step: [L; P] = std::array::from_fn(|row| {
                let mut sum = open[row] - v[row];
                for p in 0..P {
                    sum -= self.from_current[row][p] * current[p];
                }
                sum
            });
            let mut slopes = [[L::zero(); P]; P];
            self.bank
                .expand_blocks(&self.evaluation.conductance, &mut slopes);
            let mut matrix: [[L; P]; P] = std::array::from_fn(|row| {
                std::array::from_fn(|column| {
                    let own = -g * self.from_current[row][column];
                    if row == column { own + L::one() } else { own }
                })
            });
            self.bank.add_times_blocks_small(
                &self.from_current,
                &self.evaluation.conductance,
                &mut matrix,
            );
            if charged {
                self.bank.add_times_blocks_small(
                    &self.from_charge,
                    &self.evaluation.capacitance,
                    &mut matrix,
                );
            }
            solve_small(&mut matrix, &mut step).ok_or(worst)?;
            let mut leftover = 0.0f64;
            let mut clamped = false;
            for p in 0..P {
                let wanted = v[p] + step[p];
                let next = clamp_prediction(&self.bank, p, v[p], wanted);
                let moved = (next - v[p]).abs();
                clamped |= (next - wanted).abs().largest() > 0.0;
                let left = (moved * moved).largest() * self.bank.limits()[p].half_inverse_width();
                if left >= leftover || !left.is_finite() {
                    leftover = left;
                    worst = p;
                }
                step[p] = next - v[p];
                v[p] = next;
            }
            if !leftover.is_finite() {
                return Err(worst);
            }
            if leftover <= self.leftover && !clamped {
                return Ok(self.along(&slopes, &step, current));
            }
        }
        Err(worst)
    }

    /// Current and charge along the accepted correction.
    #[inline(always)]
    fn along(&self, slopes: &[[L; P]; P], step: &[L; P], mut current: [L; P]) -> ([L; P], [L; P]) {
        let g = L::splat(PORT_CONDUCTANCE);
        let mut charge: [L; P] = std::array::from_fn(|p| self.evaluation.charge[p]);
        for p in 0..P {
            for other in 0..P {
                current[p] += slopes[p][other] * step[other];
            }
            current[p] -= g * step[p];
        }
        if self.bank.stores_charge() {
            let mut capacitance = [[L::zero(); P]; P];
            self.bank
                .expand_blocks(&self.evaluation.capacitance, &mut capacitance);
            for p in 0..P {
                let mut moved = L::zero();
                for other in 0..P {
                    moved += capacitance[p][other] * step[other];
                }
                charge[p] += moved;
                current[p] += self.rate * moved;
            }
        }
        (current, charge)
    }

    /// The new linear states into place `into` and the output.
    #[inline(always)]
    fn finish(&mut self, drive: L, current: &[L; P], into: usize) -> L {
        let value = |row: &Row<L, P>, weighted: &[L]| {
            let mut sum = row.drive * drive;
            for p in 0..P {
                sum -= row.ports[p] * current[p];
            }
            for (entry, state) in row.states.iter().zip(weighted) {
                sum += *entry * *state;
            }
            sum
        };
        let states = self.weighted.len();
        for k in 0..states {
            self.linear[into][k] = value(&self.rows[k], &self.weighted);
        }
        value(&self.rows[states], &self.weighted)
    }
}

impl<L: Lane, const P: usize> Kernel<L> for SmallKernel<L, P> {
    fn advance_block(&mut self, drive: &[L], output: &mut [L]) -> Result<(), BlockFailure> {
        for (sample, (drive, output)) in drive.iter().zip(output).enumerate() {
            *output = self
                .advance(*drive)
                .map_err(|port| BlockFailure { sample, port })?;
        }
        Ok(())
    }

    fn duplicate(&self) -> Box<dyn Kernel<L>> {
        Box::new(self.clone())
    }
}

/// Replace `x` by the solution of `matrix`·x = `x`, eliminating in place; `None` where a pivot is zero or not finite.
#[inline(always)]
fn solve_small<L: Lane, const P: usize>(matrix: &mut [[L; P]; P], x: &mut [L; P]) -> Option<()> {
    if P == 2 {
        let [[a, b], [c, d]] = [[matrix[0][0], matrix[0][1]], [matrix[1][0], matrix[1][1]]];
        let reciprocal = L::one() / (a * d - b * c);
        (x[0], x[1]) = (
            (d * x[0] - b * x[1]) * reciprocal,
            (a * x[1] - c * x[0]) * reciprocal,
        );
        return reciprocal.is_finite().then_some(());
    }
    for column in 0..P {
        let mut pivot = column;
        let mut weight = matrix[column][column].abs().smallest();
        for row in column + 1..P {
            let other = matrix[row][column].abs().smallest();
            if other > weight {
                (pivot, weight) = (row, other);
            }
        }
        if weight == 0.0 || !weight.is_finite() {
            return None;
        }
        matrix.swap(column, pivot);
        x.swap(column, pivot);
        let reciprocal = L::one() / matrix[column][column];
        for row in column + 1..P {
            let factor = matrix[row][column] * reciprocal;
            for k in column + 1..P {
                let above = matrix[column][k];
                matrix[row][k] -= factor * above;
            }
            let above = x[column];
            x[row] -= factor * above;
        }
    }
    for row in (0..P).rev() {
        let mut value = x[row];
        for k in row + 1..P {
            value -= matrix[row][k] * x[k];
        }
        x[row] = value / matrix[row][row];
    }
    Some(())
}
