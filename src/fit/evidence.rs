//! Evidence as rows: the contract between what is known and the solver.

/// Whether the variance of the rows is known.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Scale {
    /// Rows have unit variance; the cost is a `-2 ln L` and may be negative.
    Known,
    /// Rows share one unknown variance; the cost is a sum of squares.
    Estimated,
}

/// Where a parameter may lie. A parameter that rests on an end leaves the matrix.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Limits {
    /// The lowest value.
    pub low: f64,
    /// The highest value.
    pub high: f64,
}

impl Limits {
    /// Anywhere.
    pub const NONE: Limits = Limits {
        low: f64::NEG_INFINITY,
        high: f64::INFINITY,
    };
}

/// Which piece of evidence a row is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum RowOf {
    /// The mean of the observation at this place.
    Mean(usize),
    /// Its variance.
    Variance(usize),
    /// The background vials.
    Background,
    /// What the lab knows of its tube CV.
    CvPrior,
    /// What is known of the noise of a reader.
    NoisePrior,
    /// The dilution step that made the level in this column.
    Dilution(usize),
    /// What is known of the error in this column, which all tubes share.
    Scale(usize),
}

/// Rows of a linear least-squares problem `A d = y`, with `A'A` the expected information and `A'y`
/// minus half the gradient of the cost.
#[derive(Debug, Clone, Default)]
pub struct Rows {
    dim: usize,
    /// Rows one after another, and zeros after the last of them.
    a: Vec<f64>,
    y: Vec<f64>,
    of: Vec<RowOf>,
}

/// For how many rows room is made at once.
const ROOM: usize = 64;

impl Rows {
    /// Forgets all rows and sets the number of columns; the memory is kept.
    pub fn clear(&mut self, dim: usize) {
        let used = self.y.len() * self.dim;
        self.a[..used].fill(0.0);
        self.dim = dim;
        self.y.clear();
        self.of.clear();
    }

    /// Adds a row of zeros with its right-hand side and gives it out to be filled.
    pub fn push(&mut self, of: RowOf, y: f64) -> &mut [f64] {
        let start = self.y.len() * self.dim;
        let end = start + self.dim;
        if end > self.a.len() {
            self.a.resize(end + ROOM * self.dim, 0.0);
            self.y.reserve(ROOM);
            self.of.reserve(ROOM);
        }
        self.y.push(y);
        self.of.push(of);
        &mut self.a[start..end]
    }

    /// How many rows there are.
    pub fn len(&self) -> usize {
        self.y.len()
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.y.is_empty()
    }

    /// The number of columns.
    pub fn dim(&self) -> usize {
        self.dim
    }

    /// One row of the matrix.
    pub fn row(&self, i: usize) -> &[f64] {
        &self.a[i * self.dim..(i + 1) * self.dim]
    }

    /// All rows, one after another.
    pub(super) fn matrix(&self) -> &[f64] {
        &self.a[..self.y.len() * self.dim]
    }

    /// The right-hand side.
    pub fn y(&self) -> &[f64] {
        &self.y
    }

    /// What each row is.
    pub fn of(&self) -> &[RowOf] {
        &self.of
    }

    /// `(A'y)_j`: minus half the derivative of the cost by parameter `j`.
    pub fn downhill(&self, j: usize) -> f64 {
        (0..self.len()).map(|i| self.row(i)[j] * self.y[i]).sum()
    }

    /// The norm of every column, and `A'y`.
    pub fn column_sums(&self) -> (Vec<f64>, Vec<f64>) {
        let (mut norms, mut downhill) = (vec![0.0; self.dim], vec![0.0; self.dim]);
        for (i, y) in self.y.iter().enumerate() {
            for ((v, n), d) in self.row(i).iter().zip(&mut norms).zip(&mut downhill) {
                *n += v * v;
                *d += v * y;
            }
        }
        norms.iter_mut().for_each(|n| *n = n.sqrt());
        (norms, downhill)
    }

    /// Whether every number is finite.
    pub fn finite(&self) -> bool {
        self.matrix().iter().chain(&self.y).all(|v| v.is_finite())
    }
}

/// Everything that is known about a set of parameters.
pub trait Evidence {
    /// The number of parameters.
    fn dim(&self) -> usize;

    /// `-2 ln L` with prior terms, or a sum of squares; lower is better. Not finite where the
    /// parameters cannot be.
    fn cost(&self, theta: &[f64]) -> f64;

    /// The rows at `theta`.
    fn rows(&self, theta: &[f64], rows: &mut Rows);

    /// The cost and, where it is finite, the rows at `theta`: the numbers that [`Evidence::cost`] and [`Evidence::rows`] give. The
    /// solver asks at every point that it looks at; an implementation may share between the two what is expensive.
    fn cost_and_rows(&self, theta: &[f64], rows: &mut Rows) -> f64 {
        let cost = self.cost(theta);
        if cost.is_finite() {
            self.rows(theta, rows);
        }
        cost
    }

    /// Whether the variance of the rows is known.
    fn scale(&self) -> Scale;

    /// Where parameter `j` may lie.
    fn limits(&self, _j: usize) -> Limits {
        Limits::NONE
    }
}
