//! The loaded shape of a line: strain summed outward from the reference node.

use super::LoadsFault;
use super::balance::Ends;
use super::structure::Structure;
use crate::model::constants::INVERSE_C2_S2_M2;
use crate::model::dd::{Dd, RunningSum};

/// Lengths, thermal strain and compliance of every gap, and which rows they join.
#[derive(Clone, Debug)]
pub(super) struct Rods {
    pub reference: usize,
    /// Lengths with no force on them, m.
    pub lengths_m: Vec<Dd>,
    /// `1 + κ ΔT`.
    pub expansions: Vec<Dd>,
    /// `1/EA`, 1/N; zero where rigid.
    pub compliances: Vec<f64>,
}

/// The field a line is marched through, and the drive its forces are given per unit of:
/// `J = N T = drive · ends`.
#[derive(Clone, Copy, Debug)]
pub(super) struct Field {
    /// Acceleration of the reference node, or gravity there, m/s².
    pub acceleration_m_s2: Dd,
    /// Decrease of felt gravity per metre of height, 1/s².
    pub gradient_per_s2: f64,
    /// What the displacements are per unit of: the acceleration itself under thrust, one
    /// where the ends are given as forces.
    pub drive: Dd,
}

impl Field {
    /// `N − 1` at a position.
    pub fn excess(&self, position_m: Dd) -> Dd {
        let potential = self.acceleration_m_s2 * position_m;
        if self.gradient_per_s2 == 0.0 {
            return potential * INVERSE_C2_S2_M2;
        }
        (potential - position_m * position_m * (0.5 * self.gradient_per_s2)) * INVERSE_C2_S2_M2
    }

    /// `N` at a position.
    pub fn rate(&self, position_m: Dd) -> Dd {
        self.excess(position_m) + 1.0
    }
}

/// Below this rate the line is taken to have reached the horizon: two decades beyond the
/// domain of the model.
const SMALLEST_RATE: f64 = 1.0e-8;

/// Largest relative change of the rate over one step inside a span.
const LARGEST_CHANGE: f64 = 0.01;

/// The 3-stage Gauss collocation of order 6 (Hairer, Nørsett & Wanner, *Solving Ordinary
/// Differential Equations I*, table II.7.4): abscissae, weights, and the integrals up to
/// each abscissa.
const STAGES: [f64; 3] = [0.1127016653792583, 0.5, 0.8872983346207417];
const WEIGHTS: [f64; 3] = [5.0 / 18.0, 4.0 / 9.0, 5.0 / 18.0];
const PARTIAL: [[f64; 3]; 3] = [
    [5.0 / 36.0, -0.035_976_667_524_938_91, 0.009_789_444_015_308_318],
    [0.300_263_194_980_864_6, 2.0 / 9.0, -0.022_485_417_203_086_817],
    [0.267_988_333_762_469_5, 0.480_421_111_969_383_3, 5.0 / 36.0],
];

impl Rods {
    /// Rods whose unloaded lengths are the given gaps.
    pub fn new(structure: &Structure) -> Rods {
        let lengths_m = structure
            .nodes
            .windows(2)
            .map(|pair| Dd::difference(pair[0].position_m, pair[1].position_m))
            .collect();
        let expansions =
            structure.members.iter().map(|member| Dd::sum(1.0, member.thermal_strain)).collect();
        let compliances = structure
            .members
            .iter()
            .map(|member| member.axial_stiffness_n.map_or(0.0, |stiffness| 1.0 / stiffness))
            .collect();
        Rods { reference: structure.reference, lengths_m, expansions, compliances }
    }

    /// Number of rows.
    pub fn rows(&self) -> usize {
        self.lengths_m.len() + 1
    }

    /// Whether any gap stretches under load.
    pub fn is_elastic(&self) -> bool {
        self.compliances.iter().zip(&self.lengths_m).any(|(c, l)| *c > 0.0 && l.hi > 0.0)
    }

    /// Gaps from the reference outward: gap, near row, far row and the direction (+1 fore).
    pub fn outward(&self) -> impl Iterator<Item = (usize, usize, usize, f64)> {
        let reference = self.reference;
        let fore = (0..reference).rev().map(|gap| (gap, gap + 1, gap, 1.0));
        let aft = (reference..self.lengths_m.len()).map(|gap| (gap, gap, gap + 1, -1.0));
        fore.chain(aft)
    }

    /// Positions of all rows when every gap has a given length.
    fn placed(&self, length_m: impl Fn(usize) -> Dd) -> Vec<Dd> {
        let mut positions = vec![Dd::ZERO; self.rows()];
        let mut sum = RunningSum::default();
        for (gap, near, far, direction) in self.outward() {
            if near == self.reference {
                sum = RunningSum::default();
            }
            sum.add(length_m(gap).scale(direction));
            positions[far] = sum.value();
        }
        positions
    }

    /// Positions with no force on the line and no change of temperature, m.
    pub fn unloaded_m(&self) -> Vec<Dd> {
        self.placed(|gap| self.lengths_m[gap])
    }

    /// Positions with no force on the line, thermal strain included, m.
    pub fn relaxed_m(&self) -> Vec<Dd> {
        self.placed(|gap| self.lengths_m[gap] * self.expansions[gap])
    }

    /// Displacement of every row from its relaxed position, per unit of the field's drive.
    ///
    /// Inside a span `N(h) dh/ds = N(h) (1 + κΔT) + J(s)/EA`, with `s` the unloaded length
    /// and `J = N T` linear in it (plus `bend · s (L − s)` where gravity has a gradient).
    /// The part with `N = 1` is summed exactly; the rest is integrated with the loaded
    /// position in `N`, so nothing is left out but what section 5 leaves out.
    pub fn displacements(
        &self,
        field: &Field,
        relaxed_m: &[Dd],
        ends: impl Fn(usize) -> Ends,
        bend: impl Fn(usize) -> f64,
    ) -> Result<Vec<Dd>, LoadsFault> {
        let mut out = vec![Dd::ZERO; self.rows()];
        let mut sum = RunningSum::default();
        for (gap, near, far, direction) in self.outward() {
            if near == self.reference {
                sum = RunningSum::default();
            }
            let from_m = relaxed_m[near] + out[near] * field.drive;
            if self.compliances[gap] > 0.0 && self.lengths_m[gap].hi > 0.0 {
                let Ends { fore, aft } = ends(gap);
                let (at_near, at_far) = if direction > 0.0 { (aft, fore) } else { (fore, aft) };
                let span = Loading { gap, direction, from_m, at_near, at_far, bend: bend(gap) };
                sum.add(self.gain(field, &span)?);
            }
            out[far] = sum.value();
            let to_m = relaxed_m[far] + out[far] * field.drive;
            if field.rate(to_m).hi < SMALLEST_RATE {
                return Err(LoadsFault::Horizon {
                    row: far,
                    acceleration_m_s2: field.acceleration_m_s2.to_f64(),
                });
            }
            let grown = (to_m - from_m).scale(direction);
            if self.lengths_m[gap].hi > 0.0 && grown.hi <= 0.0 {
                return Err(crushed(gap, field));
            }
        }
        Ok(out)
    }

    /// What one span adds to the displacement of its far end, per unit of the drive:
    /// `± (1/EA) [∫ j ds − ∫ j (N − 1)/N ds]`.
    fn gain(&self, field: &Field, span: &Loading) -> Result<Dd, LoadsFault> {
        let length = self.lengths_m[span.gap];
        let whole = length.hi;
        let expansion = self.expansions[span.gap].hi;
        let compliance = self.compliances[span.gap];
        let (near, far) = (span.at_near.to_f64(), span.at_far.to_f64());
        let drive = field.drive.to_f64();
        let force = |s: f64| near + (far - near) * (s / whole) + span.bend * s * (whole - s);
        let mut here_m = span.from_m;
        let (mut done, mut correction) = (0.0, 0.0);
        while done < whole {
            let excess = field.excess(here_m);
            let rate = (excess + 1.0).to_f64();
            let local = (field.acceleration_m_s2 - here_m * field.gradient_per_s2).to_f64();
            if rate < SMALLEST_RATE {
                return Err(LoadsFault::Horizon {
                    row: span.gap + usize::from(span.direction < 0.0),
                    acceleration_m_s2: field.acceleration_m_s2.to_f64(),
                });
            }
            let slope = local * INVERSE_C2_S2_M2.hi;
            if expansion + compliance * drive * force(done) / rate <= 0.0 {
                return Err(crushed(span.gap, field));
            }
            let steepness = (slope * expansion).abs() / rate;
            let step = (LARGEST_CHANGE / steepness).min(whole - done);
            let forces = STAGES.map(|c| force(done + c * step));
            // The rate is followed as a difference from the start of the step: near a horizon
            // it is small and must keep its own digits.
            let mut shifts = [0.0; 3];
            let mut quotients = [0.0; 3];
            for _ in 0..12 {
                let before = shifts;
                for stage in 0..3 {
                    quotients[stage] = forces[stage] / (rate + shifts[stage]);
                }
                for stage in 0..3 {
                    let sum: f64 = (0..3).map(|k| PARTIAL[stage][k] * quotients[k]).sum();
                    let apart = span.direction
                        * step
                        * (STAGES[stage] * expansion + drive * compliance * sum);
                    let curve = 0.5 * field.gradient_per_s2 * apart * apart * INVERSE_C2_S2_M2.hi;
                    shifts[stage] = slope * apart - curve;
                }
                let change = (0..3).map(|k| (shifts[k] - before[k]).abs()).fold(0.0, f64::max);
                if change <= 1e-17 * rate {
                    break;
                }
            }
            let mut quotient = 0.0;
            for stage in 0..3 {
                let now = forces[stage] / (rate + shifts[stage]);
                correction += step * WEIGHTS[stage] * now * (excess.to_f64() + shifts[stage]);
                quotient += WEIGHTS[stage] * now;
            }
            let grown =
                Dd::new(step) * self.expansions[span.gap] + drive * compliance * step * quotient;
            here_m = here_m + grown.scale(span.direction);
            // The last step ends the span whatever the rounding of its length.
            done = if step >= whole - done { whole } else { done + step };
        }
        let mean = (span.at_near + span.at_far) * length * 0.5;
        let bent = span.bend * whole * whole * whole / 6.0;
        Ok((mean + (bent - correction)).scale(span.direction) * compliance)
    }
}

fn crushed(gap: usize, field: &Field) -> LoadsFault {
    LoadsFault::Crushed { gap, acceleration_m_s2: field.acceleration_m_s2.to_f64() }
}

/// A span under load, seen from the reference outward.
struct Loading {
    gap: usize,
    direction: f64,
    from_m: Dd,
    at_near: Dd,
    at_far: Dd,
    bend: f64,
}
