//! A forward-mode dual number in two variables (R. E. Wengert, "A simple automatic derivative evaluation program",
//! Comm. ACM 7, 1964) that also carries the magnitude of the terms its value and derivatives were summed from.
//!
//! A difference keeps the rounding of what it was formed from; `size` and `slope_size` are that scale, by which two
//! ways to the same number may be compared without a loose tolerance elsewhere.

use cleanswing::numeric::Lane;
use std::ops::{Add, AddAssign, Div, Mul, MulAssign, Neg, Sub, SubAssign};

/// A value with its derivatives against two variables.
#[derive(Clone, Copy, Debug, Default)]
pub struct Dual {
    /// Value.
    pub v: f64,
    /// Derivatives.
    pub d: [f64; 2],
    /// Sum of the magnitudes the value was formed from.
    pub size: f64,
    /// The same of each derivative.
    pub slope_size: [f64; 2],
}

impl Dual {
    /// The variable number `k` at `v`.
    pub fn variable(v: f64, k: usize) -> Self {
        let mut dual = Dual::splat(v);
        dual.d[k] = 1.0;
        dual.slope_size[k] = 1.0;
        dual
    }

    /// `v` with the slope `slope` against an inner value; `spread` is how far its own terms outweigh that inner value.
    fn chain(self, v: f64, size: f64, slope: f64, spread: f64) -> Self {
        Dual {
            v,
            size,
            d: self.d.map(|d| slope * d),
            slope_size: self.slope_size.map(|s| slope.abs() * spread * s),
        }
    }

    /// How far the terms of the value outweigh it.
    fn spread(self) -> f64 {
        self.size / self.v.abs()
    }
}

fn each(f: impl Fn(usize) -> f64) -> [f64; 2] {
    [f(0), f(1)]
}

impl Add for Dual {
    type Output = Self;
    fn add(self, b: Self) -> Self {
        Dual {
            v: self.v + b.v,
            d: each(|k| self.d[k] + b.d[k]),
            size: self.size + b.size,
            slope_size: each(|k| self.slope_size[k] + b.slope_size[k]),
        }
    }
}
impl Sub for Dual {
    type Output = Self;
    fn sub(self, b: Self) -> Self {
        self + -b
    }
}
impl Neg for Dual {
    type Output = Self;
    fn neg(self) -> Self {
        Dual {
            v: -self.v,
            d: self.d.map(|d| -d),
            ..self
        }
    }
}
impl Mul for Dual {
    type Output = Self;
    fn mul(self, b: Self) -> Self {
        Dual {
            v: self.v * b.v,
            d: each(|k| self.d[k] * b.v + self.v * b.d[k]),
            size: self.size * b.size,
            slope_size: each(|k| self.slope_size[k] * b.size + self.size * b.slope_size[k]),
        }
    }
}
impl Div for Dual {
    type Output = Self;
    fn div(self, b: Self) -> Self {
        let v = self.v / b.v;
        let size = self.size / b.v.abs() * b.spread();
        Dual {
            v,
            d: each(|k| (self.d[k] - v * b.d[k]) / b.v),
            size,
            slope_size: each(|k| {
                (self.slope_size[k] + size * b.slope_size[k]) / b.v.abs() * b.spread()
            }),
        }
    }
}
impl AddAssign for Dual {
    fn add_assign(&mut self, b: Self) {
        *self = *self + b;
    }
}
impl SubAssign for Dual {
    fn sub_assign(&mut self, b: Self) {
        *self = *self - b;
    }
}
impl MulAssign for Dual {
    fn mul_assign(&mut self, b: Self) {
        *self = *self * b;
    }
}

impl Lane for Dual {
    type Mask = bool;

    fn splat(v: f64) -> Self {
        Dual {
            v,
            size: v.abs(),
            ..Dual::default()
        }
    }
    fn exp(self) -> Self {
        let v = self.v.exp();
        self.chain(v, v, v, 1.0)
    }
    fn exp_m1(self) -> Self {
        let (v, slope) = (self.v.exp_m1(), self.v.exp());
        self.chain(v, v.abs() + slope * self.size.min(1.0), slope, 1.0)
    }
    fn ln(self) -> Self {
        let v = self.v.ln();
        self.chain(v, v.abs() + self.spread(), 1.0 / self.v, self.spread())
    }
    fn ln_1p(self) -> Self {
        let (v, whole) = (self.v.ln_1p(), 1.0 + self.v);
        let spread = (1.0 + self.size) / whole;
        self.chain(v, v.abs() + self.size / whole, 1.0 / whole, spread)
    }
    fn sqrt(self) -> Self {
        let v = self.v.sqrt();
        self.chain(v, v * self.spread(), 0.5 / v, self.spread())
    }
    fn abs(self) -> Self {
        if self.v < 0.0 { -self } else { self }
    }
    fn max(self, other: Self) -> Self {
        if self.v > other.v { self } else { other }
    }
    fn min(self, other: Self) -> Self {
        if self.v < other.v { self } else { other }
    }
    fn below(self, other: Self) -> bool {
        self.v < other.v
    }
    fn choose(mask: bool, yes: impl FnOnce() -> Self, no: impl FnOnce() -> Self) -> Self {
        if mask { yes() } else { no() }
    }
    fn largest(self) -> f64 {
        self.v
    }
    fn smallest(self) -> f64 {
        self.v
    }
    fn is_finite(self) -> bool {
        self.v.is_finite() && self.d.iter().all(|d| d.is_finite())
    }
}
