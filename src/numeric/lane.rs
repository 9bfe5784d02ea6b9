//! The number the engine computes with: one `f64`, or several side by side.
//!
//! Everything between the device laws and the time stepping is written once over [`Lane`], so that neighbouring
//! levels or units of a spread can later share one instruction stream. `f64` is the plain, readable reference.

use std::fmt::Debug;
use std::ops::{Add, AddAssign, Div, Mul, MulAssign, Neg, Sub, SubAssign};

/// A number, or several numbers in lock step.
pub trait Lane:
    Copy
    + Debug
    + Default
    + Send
    + Sync
    + 'static
    + Add<Output = Self>
    + Sub<Output = Self>
    + Mul<Output = Self>
    + Div<Output = Self>
    + Neg<Output = Self>
    + AddAssign
    + SubAssign
    + MulAssign
{
    /// The outcome of a comparison, lane by lane.
    type Mask: Copy;

    /// The same value in every lane.
    fn splat(value: f64) -> Self;
    /// e to the power of `self`.
    fn exp(self) -> Self;
    /// e to the power of `self`, minus one, accurate for small arguments.
    fn exp_m1(self) -> Self;
    /// Natural logarithm.
    fn ln(self) -> Self;
    /// ln(1 + `self`), accurate for small arguments.
    fn ln_1p(self) -> Self;
    /// Square root.
    fn sqrt(self) -> Self;
    /// Magnitude.
    fn abs(self) -> Self;
    /// The larger of two, lane by lane.
    fn max(self, other: Self) -> Self;
    /// The smaller of two, lane by lane.
    fn min(self, other: Self) -> Self;
    /// Where `self` is below `other`.
    fn below(self, other: Self) -> Self::Mask;
    /// `yes` where the mask holds, `no` elsewhere; a side no lane needs is not evaluated.
    fn choose(mask: Self::Mask, yes: impl FnOnce() -> Self, no: impl FnOnce() -> Self) -> Self;
    /// The largest lane.
    fn largest(self) -> f64;
    /// The smallest lane.
    fn smallest(self) -> f64;
    /// Whether every lane is finite.
    fn is_finite(self) -> bool;

    /// Zero in every lane.
    fn zero() -> Self {
        Self::splat(0.0)
    }
    /// One in every lane.
    fn one() -> Self {
        Self::splat(1.0)
    }
}

impl Lane for f64 {
    type Mask = bool;

    #[inline(always)]
    fn splat(value: f64) -> Self {
        value
    }
    #[inline(always)]
    fn exp(self) -> Self {
        f64::exp(self)
    }
    #[inline(always)]
    fn exp_m1(self) -> Self {
        f64::exp_m1(self)
    }
    #[inline(always)]
    fn ln(self) -> Self {
        f64::ln(self)
    }
    #[inline(always)]
    fn ln_1p(self) -> Self {
        f64::ln_1p(self)
    }
    #[inline(always)]
    fn sqrt(self) -> Self {
        f64::sqrt(self)
    }
    #[inline(always)]
    fn abs(self) -> Self {
        f64::abs(self)
    }
    #[inline(always)]
    fn max(self, other: Self) -> Self {
        if self > other { self } else { other }
    }
    #[inline(always)]
    fn min(self, other: Self) -> Self {
        if self < other { self } else { other }
    }
    #[inline(always)]
    fn below(self, other: Self) -> bool {
        self < other
    }
    #[inline(always)]
    fn choose(mask: bool, yes: impl FnOnce() -> Self, no: impl FnOnce() -> Self) -> Self {
        if mask { yes() } else { no() }
    }
    #[inline(always)]
    fn largest(self) -> f64 {
        self
    }
    #[inline(always)]
    fn smallest(self) -> f64 {
        self
    }
    #[inline(always)]
    fn is_finite(self) -> bool {
        f64::is_finite(self)
    }
}
