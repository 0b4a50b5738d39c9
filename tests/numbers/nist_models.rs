//! The models of the NIST nonlinear regression sets, with derivatives exact by forward differentiation.

use rackside::fit::{Evidence, RowOf, Rows, Scale};
use std::f64::consts::PI;
use std::ops::{Add, Div, Mul, Neg, Sub};

/// The most parameters of any set (ENSO).
pub const MOST: usize = 9;

/// A value with its derivatives by every parameter.
#[derive(Debug, Clone, Copy)]
pub struct Dual {
    pub value: f64,
    pub by: [f64; MOST],
}

impl Dual {
    /// Parameter `j`.
    pub fn parameter(value: f64, j: usize) -> Self {
        let mut by = [0.0; MOST];
        by[j] = 1.0;
        Dual { value, by }
    }

    /// A function's value here, given its derivative here.
    fn chain(self, value: f64, slope: f64) -> Self {
        Dual {
            value,
            by: self.by.map(|d| slope * d),
        }
    }

    /// A function's value of two, given its derivatives by each.
    fn join(self, o: Dual, value: f64, [by_self, by_other]: [f64; 2]) -> Self {
        let by = std::array::from_fn(|j| by_self * self.by[j] + by_other * o.by[j]);
        Dual { value, by }
    }

    fn exp(self) -> Self {
        let e = self.value.exp();
        self.chain(e, e)
    }

    fn ln(self) -> Self {
        self.chain(self.value.ln(), 1.0 / self.value)
    }

    fn sin(self) -> Self {
        self.chain(self.value.sin(), self.value.cos())
    }

    fn cos(self) -> Self {
        self.chain(self.value.cos(), -self.value.sin())
    }

    fn atan(self) -> Self {
        self.chain(self.value.atan(), 1.0 / (1.0 + self.value * self.value))
    }

    fn squared(self) -> Self {
        self * self
    }

    fn powf(self, n: f64) -> Self {
        self.chain(self.value.powf(n), n * self.value.powf(n - 1.0))
    }

    /// A power whose exponent has derivatives too.
    fn pow(self, n: Dual) -> Self {
        let mut out = (n * self.ln()).exp();
        out.value = self.value.powf(n.value);
        out
    }
}

impl Neg for Dual {
    type Output = Dual;
    fn neg(self) -> Dual {
        self.chain(-self.value, -1.0)
    }
}

impl Add for Dual {
    type Output = Dual;
    fn add(self, o: Dual) -> Dual {
        self.join(o, self.value + o.value, [1.0, 1.0])
    }
}

impl Sub for Dual {
    type Output = Dual;
    fn sub(self, o: Dual) -> Dual {
        self.join(o, self.value - o.value, [1.0, -1.0])
    }
}

impl Mul for Dual {
    type Output = Dual;
    fn mul(self, o: Dual) -> Dual {
        self.join(o, self.value * o.value, [o.value, self.value])
    }
}

impl Div for Dual {
    type Output = Dual;
    fn div(self, o: Dual) -> Dual {
        let value = self.value / o.value;
        self.join(o, value, [1.0 / o.value, -value / o.value])
    }
}

impl Add<f64> for Dual {
    type Output = Dual;
    fn add(self, o: f64) -> Dual {
        self.chain(self.value + o, 1.0)
    }
}

impl Sub<f64> for Dual {
    type Output = Dual;
    fn sub(self, o: f64) -> Dual {
        self + -o
    }
}

impl Mul<f64> for Dual {
    type Output = Dual;
    fn mul(self, o: f64) -> Dual {
        self.chain(self.value * o, o)
    }
}

impl Div<f64> for Dual {
    type Output = Dual;
    fn div(self, o: f64) -> Dual {
        self.chain(self.value / o, 1.0 / o)
    }
}

impl Add<Dual> for f64 {
    type Output = Dual;
    fn add(self, o: Dual) -> Dual {
        o + self
    }
}

impl Sub<Dual> for f64 {
    type Output = Dual;
    fn sub(self, o: Dual) -> Dual {
        -o + self
    }
}

impl Mul<Dual> for f64 {
    type Output = Dual;
    fn mul(self, o: Dual) -> Dual {
        o * self
    }
}

impl Div<Dual> for f64 {
    type Output = Dual;
    fn div(self, o: Dual) -> Dual {
        let value = self / o.value;
        o.chain(value, -value / o.value)
    }
}

/// A model: the response expected at the predictors `x`, by the parameters `b` counted from 1 as in the files.
pub type Model = fn(b: &[Dual], x: &[f64]) -> Dual;

/// `b1 (1 - exp(-b2 x))`: Misra1a, BoxBOD.
pub fn saturation(b: &[Dual], x: &[f64]) -> Dual {
    b[0] * (1.0 - (-b[1] * x[0]).exp())
}

/// `b1 (1 - (1 + b2 x / 2)^-2)`.
pub fn misra1b(b: &[Dual], x: &[f64]) -> Dual {
    b[0] * (1.0 - 1.0 / (1.0 + b[1] * x[0] / 2.0).squared())
}

/// `b1 (1 - (1 + 2 b2 x)^-1/2)`.
pub fn misra1c(b: &[Dual], x: &[f64]) -> Dual {
    b[0] * (1.0 - (1.0 + 2.0 * b[1] * x[0]).powf(-0.5))
}

/// `b1 b2 x / (1 + b2 x)`.
pub fn misra1d(b: &[Dual], x: &[f64]) -> Dual {
    b[0] * b[1] * x[0] / (1.0 + b[1] * x[0])
}

/// `exp(-b1 x) / (b2 + b3 x)`.
pub fn chwirut(b: &[Dual], x: &[f64]) -> Dual {
    (-b[0] * x[0]).exp() / (b[1] + b[2] * x[0])
}

/// `b1 exp(-b2 x) + b3 exp(-b4 x) + b5 exp(-b6 x)`.
pub fn lanczos(b: &[Dual], x: &[f64]) -> Dual {
    let term = |i: usize| b[i] * (-b[i + 1] * x[0]).exp();
    term(0) + term(2) + term(4)
}

/// `b1 exp(-b2 x) + b3 exp(-(x - b4)^2 / b5^2) + b6 exp(-(x - b7)^2 / b8^2)`.
pub fn gauss(b: &[Dual], x: &[f64]) -> Dual {
    let peak = |i: usize| b[i] * (-((x[0] - b[i + 1]) / b[i + 2]).squared()).exp();
    b[0] * (-b[1] * x[0]).exp() + peak(2) + peak(5)
}

/// `b1 x^b2`.
pub fn danwood(b: &[Dual], x: &[f64]) -> Dual {
    b[0] * (b[1] * x[0].ln()).exp()
}

/// `(b1 + b2 x + b3 x^2) / (1 + b4 x + b5 x^2)`.
pub fn kirby(b: &[Dual], x: &[f64]) -> Dual {
    let x = x[0];
    (b[0] + (b[1] + b[2] * x) * x) / (1.0 + (b[3] + b[4] * x) * x)
}

/// `(b1 + b2 x + b3 x^2 + b4 x^3) / (1 + b5 x + b6 x^2 + b7 x^3)`: Hahn1, Thurber.
pub fn cubics(b: &[Dual], x: &[f64]) -> Dual {
    let x = x[0];
    (b[0] + (b[1] + (b[2] + b[3] * x) * x) * x) / (1.0 + (b[4] + (b[5] + b[6] * x) * x) * x)
}

/// `b1 - b2 x1 exp(-b3 x2)`, for the logarithm of the response.
pub fn nelson(b: &[Dual], x: &[f64]) -> Dual {
    b[0] - b[1] * x[0] * (-b[2] * x[1]).exp()
}

/// `b1 + b2 exp(-x b4) + b3 exp(-x b5)`.
pub fn mgh17(b: &[Dual], x: &[f64]) -> Dual {
    b[0] + b[1] * (-b[3] * x[0]).exp() + b[2] * (-b[4] * x[0]).exp()
}

/// `b1 (x^2 + x b2) / (x^2 + x b3 + b4)`.
pub fn mgh09(b: &[Dual], x: &[f64]) -> Dual {
    let x = x[0];
    b[0] * (x * x + x * b[1]) / (x * x + x * b[2] + b[3])
}

/// `b1 exp(b2 / (x + b3))`.
pub fn mgh10(b: &[Dual], x: &[f64]) -> Dual {
    b[0] * (b[1] / (x[0] + b[2])).exp()
}

/// `b1 - b2 x - arctan(b3 / (x - b4)) / pi`.
pub fn roszman(b: &[Dual], x: &[f64]) -> Dual {
    b[0] - b[1] * x[0] - (b[2] / (x[0] - b[3])).atan() / PI
}

/// A mean, a yearly cycle, and two cycles of periods `b4` and `b7` months.
pub fn enso(b: &[Dual], x: &[f64]) -> Dual {
    let turn = 2.0 * PI * x[0];
    let cycle = |period: Dual, c: Dual, s: Dual| {
        let angle = turn / period;
        c * angle.cos() + s * angle.sin()
    };
    let year = turn / 12.0;
    b[0] + b[1] * year.cos() + b[2] * year.sin() + cycle(b[3], b[4], b[5]) + cycle(b[6], b[7], b[8])
}

/// `b1 / b2 exp(-((x - b3) / b2)^2 / 2)`.
pub fn eckerle(b: &[Dual], x: &[f64]) -> Dual {
    b[0] / b[1] * (-0.5 * ((x[0] - b[2]) / b[1]).squared()).exp()
}

/// `b1 / (1 + exp(b2 - b3 x))`.
pub fn rat42(b: &[Dual], x: &[f64]) -> Dual {
    b[0] / (1.0 + (b[1] - b[2] * x[0]).exp())
}

/// `b1 / (1 + exp(b2 - b3 x))^(1 / b4)`.
pub fn rat43(b: &[Dual], x: &[f64]) -> Dual {
    b[0] / (1.0 + (b[1] - b[2] * x[0]).exp()).pow(1.0 / b[3])
}

/// `b1 (b2 + x)^(-1 / b3)`.
pub fn bennett(b: &[Dual], x: &[f64]) -> Dual {
    b[0] * (b[1] + x[0]).pow(-1.0 / b[2])
}

/// `b1 / (1 + (b2 / x)^b3)`, the isotherm of Hill; of no set.
pub fn hill(b: &[Dual], x: &[f64]) -> Dual {
    b[0] / (1.0 + (b[1] / x[0]).pow(b[2]))
}

/// A model beside its data, with one variance for all observations and natural parameters.
pub struct Regression<'d> {
    pub y: &'d [f64],
    pub x: &'d [Vec<f64>],
    pub dim: usize,
    pub model: Model,
}

impl Regression<'_> {
    /// Residual and expectation of every observation.
    fn residuals(&self, theta: &[f64]) -> impl Iterator<Item = (f64, Dual)> {
        let b: Vec<Dual> = theta
            .iter()
            .enumerate()
            .map(|(j, t)| Dual::parameter(*t, j))
            .collect();
        self.y.iter().zip(self.x).map(move |(y, x)| {
            let expected = (self.model)(&b, x);
            (y - expected.value, expected)
        })
    }
}

impl Evidence for Regression<'_> {
    fn dim(&self) -> usize {
        self.dim
    }

    fn cost(&self, theta: &[f64]) -> f64 {
        self.residuals(theta).map(|(r, _)| r * r).sum()
    }

    fn rows(&self, theta: &[f64], rows: &mut Rows) {
        rows.clear(self.dim);
        for (i, (r, expected)) in self.residuals(theta).enumerate() {
            rows.push(RowOf::Mean(i), r)
                .copy_from_slice(&expected.by[..self.dim]);
        }
    }

    fn scale(&self) -> Scale {
        Scale::Estimated
    }
}
