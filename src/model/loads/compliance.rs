//! The stretch of every node as a smooth function of the state of the line, tabulated once.

use super::LoadsFault;
use super::balance::Balance;
use super::march::{Field, Rods};
use crate::model::constants::INVERSE_C2_S2_M2;
use crate::model::dd::Dd;

/// Displacement from the relaxed position, per unit of acceleration, of every row:
///
/// ```text
/// C_k(α, x) = Σ_t c_kt T_p(ξ) T_q(η)        h_k = relaxed_k + α C_k,      x = 1 − M/M(0)
/// ```
///
/// Chebyshev series through marched shapes (Trefethen, *Approximation Theory and
/// Approximation Practice*, SIAM 2013, chapters 3 and 8). `C` is constant in `α` but for
/// the rates inside the line, so two or three terms serve any line of known materials;
/// the variable `ξ` is `ln(N_fore/N_aft)`, which keeps the number of terms small up to
/// the horizon too. Terms that cannot show in a double are dropped.
#[derive(Clone, Debug)]
pub(super) struct Compliance {
    /// Degrees `(p, q)` of each term.
    terms: Vec<(usize, usize)>,
    /// Coefficients, row by row, m per m/s².
    coefficients: Vec<Dd>,
    map: Map,
    /// Largest relative change of a loaded position by what was dropped.
    pub truncation: f64,
}

/// Where the state lies between its extremes: both variables from −1 to 1.
#[derive(Clone, Copy, Debug)]
struct Map {
    /// Extreme positions over c², s²/m.
    fore: f64,
    aft: f64,
    low: f64,
    high: f64,
    /// Largest burned fraction.
    burned: f64,
}

/// Values of all terms at one state, and their derivatives by acceleration and by burned
/// fraction.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct Basis {
    pub values: Vec<f64>,
    pub by_acceleration: Vec<f64>,
    pub by_burned: Vec<f64>,
}

/// The states a line passes through.
#[derive(Clone, Copy, Debug)]
pub(super) struct Range {
    pub lowest_m_s2: f64,
    pub highest_m_s2: f64,
    pub most_burned: f64,
}

impl Range {
    /// Whether two ranges are one to the bit.
    pub fn is_same(&self, other: &Range) -> bool {
        let bits = |range: &Range| {
            [range.lowest_m_s2, range.highest_m_s2, range.most_burned].map(f64::to_bits)
        };
        bits(self) == bits(other)
    }
}

const DEGREES: [usize; 8] = [1, 2, 3, 5, 9, 17, 33, 65];

/// Relative change of a loaded position that no double shows.
const INVISIBLE: f64 = 3.0e-18;

/// Rounding of the stretch itself: what lies below this share of it is noise.
const ROUNDING: f64 = 4.0e-16;

impl Map {
    fn new(rods: &Rods, range: &Range, relaxed_m: &[Dd]) -> Map {
        let fore = relaxed_m.first().map_or(0.0, |m| m.to_f64()) * INVERSE_C2_S2_M2.hi;
        let aft = relaxed_m.last().map_or(0.0, |m| m.to_f64()) * INVERSE_C2_S2_M2.hi;
        debug_assert!(relaxed_m.len() == rods.rows());
        let mut map = Map { fore, aft, low: 0.0, high: 0.0, burned: range.most_burned };
        map.low = map.stretch(range.lowest_m_s2);
        map.high = map.stretch(range.highest_m_s2);
        map
    }

    /// `ln(N_fore/N_aft)`, increasing in the acceleration.
    fn stretch(&self, acceleration_m_s2: f64) -> f64 {
        libm::log1p(acceleration_m_s2 * self.fore) - libm::log1p(acceleration_m_s2 * self.aft)
    }

    /// The acceleration at a value of `ξ` in [−1, 1].
    fn acceleration(&self, xi: f64) -> f64 {
        let value = self.low + (self.high - self.low) * (0.5 * (xi + 1.0));
        let grown = libm::expm1(value);
        // (e^v − 1) / (p − q e^v), with p and q the fore and aft positions over c².
        grown / (self.fore - self.aft * (grown + 1.0))
    }

    fn xi(&self, acceleration_m_s2: f64) -> f64 {
        if self.high == self.low {
            return 0.0;
        }
        // The middle is subtracted before the division, so that both ends come out alike.
        let value = self.stretch(acceleration_m_s2);
        ((value - self.low) - (self.high - value)) / (self.high - self.low)
    }

    fn xi_slope(&self, acceleration_m_s2: f64) -> f64 {
        if self.high == self.low {
            return 0.0;
        }
        let fore = self.fore / (1.0 + acceleration_m_s2 * self.fore);
        let aft = self.aft / (1.0 + acceleration_m_s2 * self.aft);
        2.0 * (fore - aft) / (self.high - self.low)
    }

    fn eta(&self, burned: f64) -> f64 {
        if self.burned == 0.0 { 0.0 } else { 2.0 * (burned / self.burned) - 1.0 }
    }

    fn eta_slope(&self) -> f64 {
        if self.burned == 0.0 { 0.0 } else { 2.0 / self.burned }
    }
}

impl Compliance {
    /// Tabulates a line over the states it passes through.
    pub fn new(
        rods: &Rods,
        balance: &Balance,
        relaxed_m: &[Dd],
        range: &Range,
    ) -> Result<Compliance, LoadsFault> {
        let map = Map::new(rods, range, relaxed_m);
        if !rods.is_elastic() {
            // The extremes are still marched: they tell whether the horizon is reached.
            for acceleration in [range.lowest_m_s2, range.highest_m_s2] {
                shape(rods, balance, relaxed_m, acceleration, 0.0)?;
            }
            return Ok(Compliance { terms: vec![], coefficients: vec![], map, truncation: 0.0 });
        }
        for acceleration in [range.lowest_m_s2, range.highest_m_s2] {
            for burned in [0.0, range.most_burned] {
                shape(rods, balance, relaxed_m, acceleration, burned)?;
            }
        }
        let is_thrusting = map.high > map.low;
        let (mut across, mut along) = (usize::from(is_thrusting), usize::from(map.burned > 0.0));
        loop {
            let counts = [
                if is_thrusting { DEGREES[across] } else { 1 },
                if map.burned > 0.0 { DEGREES[along] } else { 1 },
            ];
            let table = Table::new(rods, balance, relaxed_m, &map, counts)?;
            let largest = range.lowest_m_s2.abs().max(range.highest_m_s2.abs());
            let sizes = table.sizes(relaxed_m, largest);
            let (tail_across, tail_along) = (table.tail(&sizes, 0), table.tail(&sizes, 1));
            let allowed = INVISIBLE.max(ROUNDING * sizes[0]);
            let mut is_done = true;
            if counts[0] > 1 && tail_across > allowed && across + 1 < DEGREES.len() {
                across += 1;
                is_done = false;
            }
            if counts[1] > 1 && tail_along > allowed && along + 1 < DEGREES.len() {
                along += 1;
                is_done = false;
            }
            if is_done {
                return Ok(table.kept(&sizes, allowed, map));
            }
        }
    }

    /// Number of terms.
    pub fn terms(&self) -> usize {
        self.terms.len()
    }

    /// For every term the row it moves most.
    pub fn largest_rows(&self) -> Vec<usize> {
        let count = self.terms.len();
        let mut rows: Vec<usize> = (0..count)
            .filter_map(|term| {
                let sizes = self.coefficients.iter().skip(term).step_by(count);
                let most = sizes.enumerate().max_by(|a, b| a.1.hi.abs().total_cmp(&b.1.hi.abs()));
                most.map(|(row, _)| row)
            })
            .collect();
        rows.sort_unstable();
        rows.dedup();
        rows
    }

    /// Largest degree in the acceleration and in the burned fraction.
    pub fn degrees(&self) -> (usize, usize) {
        self.terms.iter().fold((0, 0), |most, term| (most.0.max(term.0), most.1.max(term.1)))
    }

    /// How far apart two states lie in the variable the series runs in; the whole range
    /// is 2.
    pub fn distance(&self, from_m_s2: f64, to_m_s2: f64) -> f64 {
        (self.map.xi(to_m_s2) - self.map.xi(from_m_s2)).abs()
    }

    /// All terms at a state.
    pub fn basis(&self, acceleration_m_s2: f64, burned: f64) -> Basis {
        if self.terms.is_empty() {
            return Basis::default();
        }
        let (p, q) = self.degrees();
        let (across, across_slope) = chebyshev(self.map.xi(acceleration_m_s2), p);
        let (along, along_slope) = chebyshev(self.map.eta(burned), q);
        let (xi_slope, eta_slope) = (self.map.xi_slope(acceleration_m_s2), self.map.eta_slope());
        let mut basis = Basis::default();
        for &(p, q) in &self.terms {
            basis.values.push(across[p] * along[q]);
            basis.by_acceleration.push(across_slope[p] * xi_slope * along[q]);
            basis.by_burned.push(across[p] * along_slope[q] * eta_slope);
        }
        basis
    }

    /// The values alone.
    pub fn values(&self, acceleration_m_s2: f64, burned: f64) -> Vec<f64> {
        if self.terms.is_empty() {
            return Vec::new();
        }
        let (p, q) = self.degrees();
        let (across, _) = chebyshev(self.map.xi(acceleration_m_s2), p);
        let (along, _) = chebyshev(self.map.eta(burned), q);
        self.terms.iter().map(|&(p, q)| across[p] * along[q]).collect()
    }

    /// The sum of a row's terms with given values, m per m/s² times the unit of the values.
    pub fn sum(&self, row: usize, values: &[f64]) -> Dd {
        let count = self.terms.len();
        let own = &self.coefficients[row * count..(row + 1) * count];
        own.iter().zip(values).fold(Dd::ZERO, |sum, (c, value)| sum + *c * *value)
    }

    /// `Σ c_t c_u v_tu` of a row's terms, for products of all pairs of terms.
    pub fn square(&self, row: usize, products: &[f64]) -> f64 {
        let count = self.terms.len();
        let own = &self.coefficients[row * count..(row + 1) * count];
        let rows = own.iter().zip(products.chunks(count));
        rows.map(|(c, products)| {
            let along: f64 = own.iter().zip(products).map(|(c, product)| c.hi * product).sum();
            c.hi * along
        })
        .sum()
    }

    /// The same for values that are double-doubles.
    pub fn sum_wide(&self, row: usize, values: &[Dd]) -> Dd {
        let count = self.terms.len();
        let own = &self.coefficients[row * count..(row + 1) * count];
        own.iter().zip(values).fold(Dd::ZERO, |sum, (c, value)| sum + *c * *value)
    }
}

/// The displacement per unit of acceleration at one state.
pub(super) fn shape(
    rods: &Rods,
    balance: &Balance,
    relaxed_m: &[Dd],
    acceleration_m_s2: f64,
    burned: f64,
) -> Result<Vec<Dd>, LoadsFault> {
    let acceleration = Dd::new(acceleration_m_s2);
    let field =
        Field { acceleration_m_s2: acceleration, gradient_per_s2: 0.0, drive: acceleration };
    rods.displacements(&field, relaxed_m, |gap| balance.ends(gap, burned), |_| 0.0)
}

/// Marched shapes at the Chebyshev points of both variables, turned into coefficients.
struct Table {
    counts: [usize; 2],
    rows: usize,
    coefficients: Vec<Dd>,
}

impl Table {
    fn new(
        rods: &Rods,
        balance: &Balance,
        relaxed_m: &[Dd],
        map: &Map,
        counts: [usize; 2],
    ) -> Result<Table, LoadsFault> {
        let rows = rods.rows();
        let terms = counts[0] * counts[1];
        let mut coefficients = vec![Dd::ZERO; rows * terms];
        for i in 0..counts[0] {
            let xi = point(i, counts[0]);
            let acceleration = if map.high == map.low { 0.0 } else { map.acceleration(xi) };
            for j in 0..counts[1] {
                let eta = point(j, counts[1]);
                let burned = map.burned * (0.5 * (eta + 1.0));
                let shape = shape(rods, balance, relaxed_m, acceleration, burned)?;
                let across = chebyshev(xi, counts[0] - 1).0;
                let along = chebyshev(eta, counts[1] - 1).0;
                for p in 0..counts[0] {
                    for q in 0..counts[1] {
                        let halves = f64::from(u8::from(p == 0) + u8::from(q == 0));
                        let weight =
                            across[p] * along[q] * libm::exp2(2.0 - halves) / (terms as f64);
                        for (row, value) in shape.iter().enumerate() {
                            let cell = &mut coefficients[row * terms + p * counts[1] + q];
                            *cell = *cell + *value * weight;
                        }
                    }
                }
            }
        }
        Ok(Table { counts, rows, coefficients })
    }

    /// Largest relative change of a loaded position by each term.
    fn sizes(&self, relaxed_m: &[Dd], largest_m_s2: f64) -> Vec<f64> {
        let terms = self.counts[0] * self.counts[1];
        let mut sizes = vec![0.0_f64; terms];
        for (row, relaxed) in relaxed_m.iter().enumerate().take(self.rows) {
            let position = relaxed.hi.abs();
            if position == 0.0 {
                continue;
            }
            for (size, c) in sizes.iter_mut().zip(&self.coefficients[row * terms..]) {
                *size = size.max(largest_m_s2 * c.hi.abs() / position);
            }
        }
        sizes
    }

    /// Largest of the last terms in one of the variables.
    fn tail(&self, sizes: &[f64], variable: usize) -> f64 {
        let count = self.counts[variable];
        if count == 1 {
            return 0.0;
        }
        let from = if count > 3 { count - 2 } else { count - 1 };
        let mut tail = 0.0_f64;
        for (index, size) in sizes.iter().enumerate() {
            let degree =
                if variable == 0 { index / self.counts[1] } else { index % self.counts[1] };
            if degree >= from {
                tail = tail.max(*size);
            }
        }
        tail
    }

    /// The terms that can show.
    fn kept(&self, sizes: &[f64], allowed: f64, map: Map) -> Compliance {
        let mut terms = Vec::new();
        let mut kept = Vec::new();
        for (index, size) in sizes.iter().enumerate() {
            if *size > allowed * 0.1 || index == 0 {
                terms.push((index / self.counts[1], index % self.counts[1]));
                kept.push(index);
            }
        }
        let all = sizes.len();
        let coefficients = (0..self.rows)
            .flat_map(|row| kept.iter().map(move |index| row * all + index))
            .map(|index| self.coefficients[index])
            .collect();
        let truncation = self.tail(sizes, 0).max(self.tail(sizes, 1)).max(allowed);
        Compliance { terms, coefficients, map, truncation }
    }
}

/// A root of `T_count`, the `index`-th from the right; exactly antisymmetric.
fn point(index: usize, count: usize) -> f64 {
    let halves = count as f64 - 1.0 - 2.0 * index as f64;
    libm::sin(std::f64::consts::FRAC_PI_2 * halves / count as f64)
}

/// `T_0 … T_degree` and their derivatives, by the three-term recurrence.
fn chebyshev(x: f64, degree: usize) -> (Vec<f64>, Vec<f64>) {
    let mut values = vec![1.0, x];
    let mut slopes = vec![0.0, 1.0];
    for k in 2..=degree {
        values.push(2.0 * x * values[k - 1] - values[k - 2]);
        slopes.push(2.0 * values[k - 1] + 2.0 * x * slopes[k - 1] - slopes[k - 2]);
    }
    values.truncate(degree + 1);
    slopes.truncate(degree + 1);
    (values, slopes)
}
