//! Forces and loaded shape of a line that stands, or hangs, in gravity.

use super::LoadsFault;
use super::balance::{Balance, Ends, Weights};
use super::compliance::{Compliance, Range};
use super::march::{Field, Rods};
use super::structure::Structure;
use crate::model::constants::C2_M2_S2;
use crate::model::dd::{Dd, RunningSum};

/// Gravity at the reference node of a standing line, and how it changes with height.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Gravity {
    /// Local gravity at the reference, m/s², + when what holds the line up accelerates it
    /// towards the fore end: the fore end is up.
    pub gravity_m_s2: f64,
    /// Decrease of felt gravity per metre of height beyond `g²/c²`, 1/s².
    pub gradient_per_s2: f64,
}

/// How far the first-order form of the gradient holds.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct GradientWarning {
    /// The row concerned most.
    pub row: usize,
    /// `(Γ h / 2 g)²`, the relative error of the shift by the change of `Γ` with height.
    pub relative: f64,
    /// That part of the shift itself: above 1e-19 it may show.
    pub shift: f64,
}

/// Part of a shift above which the change of the gradient with height is warned of.
pub const GRADIENT_WARNING_SHIFT: f64 = 1.0e-19;

/// A standing line in equilibrium.
#[derive(Clone, Debug)]
pub(super) struct Standing {
    pub gravity: Gravity,
    pub positions_m: Vec<Dd>,
    /// `N T` at both ends of every gap, N.
    pub ends: Vec<Ends>,
    /// Forces below which a gap counts as unloaded, N.
    pub roundings: Vec<f64>,
    /// The whole weight `W = ∫ (g − Γ h) dm`, N.
    pub weight_n: Dd,
}

/// Node masses, unloaded span masses and thrust shares of a line, which a balance sums.
pub(super) struct Masses<'a> {
    pub nodes_kg: &'a [Dd],
    pub thrust: &'a [(Dd, Dd)],
}

impl Standing {
    /// Settles a line: forces follow from positions through the gradient, positions from
    /// forces through stretch; repeated until nothing moves. The change per round is the
    /// strain times `Γ h/g`, so three rounds serve.
    ///
    /// `N T = W_aft − S_aft W`, with `W` taken at loaded positions. Without a gradient the
    /// balance is that of masses, times `g`: the bits of a held thrust.
    pub fn settle(
        structure: &Structure,
        rods: &Rods,
        relaxed_m: &[Dd],
        masses: &Masses<'_>,
        gravity: Gravity,
    ) -> Result<Standing, LoadsFault> {
        let Gravity { gravity_m_s2, gradient_per_s2 } = gravity;
        for (row, position) in relaxed_m.iter().enumerate() {
            if (gradient_per_s2 * position.to_f64()).abs() > gravity_m_s2.abs() {
                return Err(LoadsFault::Gradient { row });
            }
        }
        if gradient_per_s2 == 0.0 {
            return Standing::as_held(structure, rods, relaxed_m, masses, gravity);
        }
        let mut positions_m = relaxed_m.to_vec();
        let gaps = rods.lengths_m.len();
        for round in 0.. {
            let local = |position: Dd| Dd::new(gravity_m_s2) - position * gradient_per_s2;
            let nodes: Vec<Dd> = masses
                .nodes_kg
                .iter()
                .zip(&positions_m)
                .map(|(mass, position)| *mass * local(*position))
                .collect();
            let spans: Vec<Dd> = (0..gaps)
                .map(|gap| {
                    let density = structure.members[gap].linear_density_kg_m;
                    let length = rods.lengths_m[gap];
                    let middle = (positions_m[gap] + positions_m[gap + 1]) * 0.5;
                    // The span's own weight strains it unevenly, which shifts its mean height.
                    let own = density * local(middle).hi * length.hi * length.hi;
                    let uneven = own * rods.compliances[gap] / 12.0;
                    length * local(middle - uneven) * density
                })
                .collect();
            let balance =
                Balance::new(&Weights { nodes: &nodes, spans: &spans, thrust: masses.thrust });
            let field =
                Field { acceleration_m_s2: Dd::new(gravity_m_s2), gradient_per_s2, drive: Dd::ONE };
            // Inside a span the weight per length changes with height: J″ = −μ Γ |dh/ds|.
            let slopes: Vec<f64> = (0..gaps)
                .map(|gap| {
                    let loaded = (positions_m[gap] - positions_m[gap + 1]).hi;
                    let length = rods.lengths_m[gap].hi;
                    if length > 0.0 { loaded / length } else { 1.0 }
                })
                .collect();
            let bend = |gap: usize| {
                let density = structure.members[gap].linear_density_kg_m;
                0.5 * density * gradient_per_s2 * slopes[gap]
            };
            let ends: Vec<Ends> = (0..gaps).map(|gap| balance.ends(gap, 0.0)).collect();
            let moved = rods.displacements(&field, relaxed_m, |gap| ends[gap], bend)?;
            let mut change = 0.0_f64;
            for (row, position) in positions_m.iter_mut().enumerate() {
                let next = relaxed_m[row] + moved[row];
                if next.hi != 0.0 {
                    change = change.max(((next - *position) / next).hi.abs());
                }
                *position = next;
            }
            if change < 1e-20 || round == 30 {
                let mut weight = RunningSum::default();
                for part in nodes.iter().chain(&spans) {
                    weight.add(*part);
                }
                let weight_n = weight.value();
                let roundings = (0..gaps).map(|gap| balance.rounding(gap)).collect();
                return Ok(Standing { gravity, positions_m, ends, roundings, weight_n });
            }
        }
        unreachable!("the loop returns in its last round")
    }

    /// A line in uniform gravity, by the path of a held thrust.
    fn as_held(
        structure: &Structure,
        rods: &Rods,
        relaxed_m: &[Dd],
        masses: &Masses<'_>,
        gravity: Gravity,
    ) -> Result<Standing, LoadsFault> {
        let g = gravity.gravity_m_s2;
        let (balance, mass) = mass_balance(structure, rods, masses);
        let range = Range { lowest_m_s2: g.min(0.0), highest_m_s2: g.max(0.0), most_burned: 0.0 };
        let compliance = Compliance::new(rods, &balance, relaxed_m, &range)?;
        let basis = compliance.basis(g, 0.0);
        let positions_m = relaxed_m
            .iter()
            .enumerate()
            .map(|(row, relaxed)| {
                if compliance.terms() == 0 {
                    return *relaxed;
                }
                *relaxed + Dd::new(g) * compliance.sum(row, &basis.values)
            })
            .collect();
        let ends = (0..rods.lengths_m.len())
            .map(|gap| {
                let ends = balance.ends(gap, 0.0);
                Ends { fore: ends.fore * g, aft: ends.aft * g }
            })
            .collect();
        let roundings =
            (0..rods.lengths_m.len()).map(|gap| balance.rounding(gap) * g.abs()).collect();
        Ok(Standing { gravity, positions_m, ends, roundings, weight_n: mass * g })
    }

    /// The warning of section 2, when the change of the gradient with height may show.
    pub fn gradient_warning(&self) -> Option<GradientWarning> {
        let Gravity { gravity_m_s2, gradient_per_s2 } = self.gravity;
        if gravity_m_s2 == 0.0 || gradient_per_s2 == 0.0 {
            return None;
        }
        let mut worst = GradientWarning { row: 0, relative: 0.0, shift: 0.0 };
        for (row, position) in self.positions_m.iter().enumerate() {
            let half = gradient_per_s2 * position.hi / (2.0 * gravity_m_s2);
            let relative = half * half;
            let shift = relative * (gravity_m_s2 * position.hi / C2_M2_S2.hi).abs();
            if shift > worst.shift {
                worst = GradientWarning { row, relative, shift };
            }
        }
        (worst.shift > GRADIENT_WARNING_SHIFT).then_some(worst)
    }
}

/// The balance of masses, and the whole mass.
pub(super) fn mass_balance(
    structure: &Structure,
    rods: &Rods,
    masses: &Masses<'_>,
) -> (Balance, Dd) {
    let spans: Vec<Dd> = structure
        .members
        .iter()
        .zip(&rods.lengths_m)
        .map(|(member, length)| *length * member.linear_density_kg_m)
        .collect();
    let mut whole = RunningSum::default();
    for mass in masses.nodes_kg.iter().chain(&spans) {
        whole.add(*mass);
    }
    let weights = Weights { nodes: masses.nodes_kg, spans: &spans, thrust: masses.thrust };
    (Balance::new(&weights), whole.value())
}
