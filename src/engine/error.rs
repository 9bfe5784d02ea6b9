//! Why a computation has no answer.

use crate::failure::FailureKind;
use std::fmt;

/// A computation that has no answer. Times in seconds, currents in A, voltages in V, frequencies in Hz.
#[derive(Clone, Debug, PartialEq)]
pub enum EngineError {
    /// Some node or branch current is not determined by the linear part.
    Undetermined,
    /// No fallback found an operating point.
    NoBias {
        /// Part where most is left over.
        part: String,
        /// What is left over there, V.
        residual: f64,
    },
    /// The operating point found is not stable.
    UnstableBias {
        /// Frequency of the growing oscillation; 0 for a plain runaway.
        frequency: f64,
        /// Time constant of the growth, s.
        time_constant: f64,
    },
    /// More than one stable operating point exists.
    TwoStableStates {
        /// Output node voltage of each, V.
        outputs: Vec<f64>,
        /// Collector current of every transistor in each state: name, A, A.
        transistors: Vec<(String, f64, f64)>,
    },
    /// The equations of one time step could not be solved.
    NoStep {
        /// Time, s.
        time: f64,
        /// Part where the last correction was largest.
        part: String,
    },
    /// The periodic steady state was not found.
    NoPeriod {
        /// Drive level, V peak.
        level: f64,
        /// Frequency, Hz.
        frequency: f64,
        /// What happened, in words.
        reason: String,
    },
    /// The periodic steady state found is not stable.
    UnstablePeriod {
        /// Drive level, V peak.
        level: f64,
        /// Frequency, Hz.
        frequency: f64,
        /// Largest Floquet multiplier.
        multiplier: f64,
    },
}

impl EngineError {
    /// Every engine error means that the computation has no answer.
    pub fn kind(&self) -> FailureKind {
        FailureKind::NoAnswer
    }
}

impl fmt::Display for EngineError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            EngineError::Undetermined => write!(
                f,
                "the network does not determine every node voltage; look for a node without a path to gnd or a loop of ideal sources"
            ),
            EngineError::NoBias { part, residual } => write!(
                f,
                "no operating point: every start and fallback left {residual:.3e} V over at {part}; check its supply and its path to gnd"
            ),
            EngineError::UnstableBias {
                frequency,
                time_constant,
            } if *frequency > 0.0 => write!(
                f,
                "the bias is unstable: it oscillates at {frequency:.4e} Hz, growing e-fold in {time_constant:.3e} s; look for feedback that is positive at that frequency"
            ),
            EngineError::UnstableBias { time_constant, .. } => write!(
                f,
                "the bias is unstable: it runs away e-fold in {time_constant:.3e} s; look for positive feedback at DC"
            ),
            EngineError::TwoStableStates {
                outputs,
                transistors,
            } => {
                let outputs: Vec<String> = outputs
                    .iter()
                    .map(|volts| format!("{volts:.4} V"))
                    .collect();
                write!(
                    f,
                    "two stable operating points: output at {}",
                    outputs.join(" or ")
                )?;
                for (name, first, second) in transistors {
                    write!(f, "; {name} at {first:.3e} A or {second:.3e} A")?;
                }
                write!(
                    f,
                    "; a stage for sound needs one, look for positive feedback at DC"
                )
            }
            EngineError::NoStep { time, part } => write!(
                f,
                "the step at {time:.9e} s could not be solved; the last correction was largest at {part}; try a lower level or a shorter step"
            ),
            EngineError::NoPeriod {
                level,
                frequency,
                reason,
            } => write!(
                f,
                "no periodic steady state at {level:.6e} V peak, {frequency:.6e} Hz: {reason}"
            ),
            EngineError::UnstablePeriod {
                level,
                frequency,
                multiplier,
            } => write!(
                f,
                "the periodic state at {level:.6e} V peak, {frequency:.6e} Hz is unstable: a disturbance grows {multiplier:.4} times a period, so the stage does not follow its input"
            ),
        }
    }
}

impl std::error::Error for EngineError {}
