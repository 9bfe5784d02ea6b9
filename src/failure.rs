//! What kind of failure an error is, from which the exit code comes.

/// The class of an error; every layer's error type answers `kind()` with one of these.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum FailureKind {
    /// A stated target is not met (exit code 1).
    TargetMissed,
    /// The request, a file or its input/output is wrong (exit code 2).
    BadRequest,
    /// The computation has no answer: no convergence, two stable states, unstable bias (exit code 3).
    NoAnswer,
    /// Stopped by the user (exit code 130).
    Interrupted,
}

impl FailureKind {
    /// The process exit code of this kind.
    pub fn exit_code(self) -> u8 {
        match self {
            FailureKind::TargetMissed => 1,
            FailureKind::BadRequest => 2,
            FailureKind::NoAnswer => 3,
            FailureKind::Interrupted => 130,
        }
    }
}
