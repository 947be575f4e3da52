//! The balance of masses and thrust shares from which every axial force follows.
//!
//! ```text
//! N(h) T(h) = α [ M_aft(h) − S_aft(h) M ],        N_k F_k = s_k α M
//! ```
//!
//! `T` is the local axial force (+ tension), `M_aft` and `S_aft` the mass and the thrust
//! share aft of `h`, `M` the whole mass, all masses meaning rest energy / c². From
//! `∇_μ T^{μν} = 0` of a line at rest in `ds² = −N² c² dτ² + dh²`: the weight of the
//! tension itself turns `dT/dh` into `d(N T)/dh`, and the right side needs only mass per
//! length, whatever `α(τ)` does. Elastic energy, below 1e-11 of the mass for any known
//! material, is left out.

use super::structure::Structure;
use crate::model::dd::{Dd, RunningSum};

/// Share of the stated accuracy below which a balance counts as zero: two inputs that
/// cancel on paper differ by their roundings.
const ROUNDING: f64 = 1.0e-14;

/// `M_aft − S_aft M` at both ends of every gap, as a function of what has been burned.
#[derive(Clone, Debug)]
pub(super) struct Balance {
    /// Fore and aft end of each gap, with nothing burned.
    starts: Vec<[Dd; 2]>,
    /// What each loses per burned fraction of the whole: `M(0) (b_aft − S_aft)`.
    slopes: Vec<Dd>,
    /// `M_aft + S_aft M` or the same from the fore side, the smaller of the two, at the aft
    /// end: the scale of rounding.
    scales: Vec<f64>,
}

/// The balance at both ends of a gap at one moment, per unit of acceleration, kg; for a
/// standing line the force times the rate itself, N.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Ends {
    pub fore: Dd,
    pub aft: Dd,
}

/// Weights by row and by gap, and engines by row: everything the balance sums.
pub(super) struct Weights<'a> {
    /// Weight of each node, propellant included: mass, or force for a standing line.
    pub nodes: &'a [Dd],
    /// Weight of each span.
    pub spans: &'a [Dd],
    /// Share of the thrust and share of the burning, by row.
    pub thrust: &'a [(Dd, Dd)],
}

impl Balance {
    /// Sums once from the aft end and once from the fore end and keeps, gap by gap, the
    /// sum with less to cancel: so a free end carries exactly nothing on either side.
    pub(super) fn new(weights: &Weights<'_>) -> Balance {
        let gaps = weights.spans.len();
        let total = total(weights);
        let mut starts = vec![[Dd::ZERO; 2]; gaps];
        let mut slopes = vec![Dd::ZERO; gaps];
        let mut scales = vec![f64::INFINITY; gaps];
        for from_aft in [true, false] {
            let sign = if from_aft { 1.0 } else { -1.0 };
            let mut weight = RunningSum::default();
            let mut share = RunningSum::default();
            let mut burning = RunningSum::default();
            for step in 0..gaps {
                let (gap, row) =
                    if from_aft { (gaps - 1 - step, gaps - step) } else { (step, step) };
                weight.add(weights.nodes[row]);
                share.add(weights.thrust[row].0);
                burning.add(weights.thrust[row].1);
                let held = share.value() * total;
                let near = (weight.value() - held).scale(sign);
                let scale = weight.value().hi + held.hi;
                weight.add(weights.spans[gap]);
                let far = (weight.value() - held).scale(sign);
                if scale < scales[gap] {
                    starts[gap] = if from_aft { [far, near] } else { [near, far] };
                    slopes[gap] = ((burning.value() - share.value()) * total).scale(sign);
                    scales[gap] = scale;
                }
            }
        }
        Balance { starts, slopes, scales }
    }

    /// The balance at both ends of a gap when the fraction `burned` of the whole mass at
    /// array time zero is gone.
    pub(super) fn ends(&self, gap: usize, burned: f64) -> Ends {
        let [fore, aft] = self.starts[gap];
        if burned == 0.0 || self.slopes[gap].is_zero() {
            return Ends { fore, aft };
        }
        let lost = self.slopes[gap] * burned;
        Ends { fore: fore - lost, aft: aft - lost }
    }

    /// What a gap's balance loses per burned fraction, kg.
    pub(super) fn slope(&self, gap: usize) -> Dd {
        self.slopes[gap]
    }

    /// The balance below which a gap counts as unloaded, kg.
    pub(super) fn rounding(&self, gap: usize) -> f64 {
        let [fore, aft] = self.starts[gap];
        ROUNDING * (self.scales[gap] + (fore - aft).hi.abs())
    }
}

fn total(weights: &Weights<'_>) -> Dd {
    let mut sum = RunningSum::default();
    for weight in weights.nodes.iter().chain(weights.spans) {
        sum.add(*weight);
    }
    sum.value()
}

/// Shares of the thrust divided by their sum, in the order of the engines.
pub(super) fn normalised_shares(structure: &Structure) -> Vec<Dd> {
    let engines = structure.engines_or_ideal();
    let mut sum = RunningSum::default();
    for engine in &engines {
        sum.add(Dd::new(engine.share));
    }
    engines.iter().map(|engine| Dd::new(engine.share) / sum.value()).collect()
}
