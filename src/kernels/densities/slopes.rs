//! Numbers that carry their derivatives with respect to two shapes.

use std::ops::{Add, Div, Mul, Neg, Sub};

/// A value and its derivatives; arithmetic follows the rules of differentiation, so that what an
/// algorithm returns is the derivative of what it returns.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Slopes {
    /// The value.
    pub value: f64,
    /// Derivatives with respect to the first and second shape.
    pub by: [f64; 2],
}

impl Slopes {
    /// A number that depends on neither shape.
    pub const fn constant(value: f64) -> Self {
        Self {
            value,
            by: [0.0, 0.0],
        }
    }

    /// The shape with number `which` itself.
    pub fn shape(value: f64, which: usize) -> Self {
        let mut by = [0.0, 0.0];
        by[which] = 1.0;
        Self { value, by }
    }

    /// Applies a function whose value and derivative are given.
    pub fn through(self, value: f64, derivative: f64) -> Self {
        Self {
            value,
            by: self.by.map(|slope| slope * derivative),
        }
    }

    /// `log self`.
    pub fn log(self) -> Self {
        self.through(libm::log(self.value), 1.0 / self.value)
    }

    /// Applies a function of two numbers whose value and derivatives are given.
    fn joined(self, other: Self, value: f64, derivatives: [f64; 2]) -> Self {
        let [first, second] = derivatives;
        let slope = |which: usize| self.by[which] * first + other.by[which] * second;
        Self {
            value,
            by: [slope(0), slope(1)],
        }
    }

    /// Whether a factor of this size leaves a product as it is, slopes included.
    pub fn is_one(self) -> bool {
        (self.value - 1.0).abs() <= f64::EPSILON
            && self.by.iter().all(|slope| slope.abs() <= f64::EPSILON)
    }
}

impl Add for Slopes {
    type Output = Self;

    fn add(self, other: Self) -> Self {
        self.joined(other, self.value + other.value, [1.0, 1.0])
    }
}

impl Sub for Slopes {
    type Output = Self;

    fn sub(self, other: Self) -> Self {
        self.joined(other, self.value - other.value, [1.0, -1.0])
    }
}

impl Neg for Slopes {
    type Output = Self;

    fn neg(self) -> Self {
        self.through(-self.value, -1.0)
    }
}

impl Mul for Slopes {
    type Output = Self;

    fn mul(self, other: Self) -> Self {
        self.joined(other, self.value * other.value, [other.value, self.value])
    }
}

impl Div for Slopes {
    type Output = Self;

    fn div(self, other: Self) -> Self {
        let (value, inverse) = (self.value / other.value, other.value.recip());
        self.joined(other, value, [inverse, -value * inverse])
    }
}

impl Mul<f64> for Slopes {
    type Output = Self;

    fn mul(self, other: f64) -> Self {
        self.through(self.value * other, other)
    }
}

impl Add<f64> for Slopes {
    type Output = Self;

    fn add(self, other: f64) -> Self {
        self.through(self.value + other, 1.0)
    }
}
