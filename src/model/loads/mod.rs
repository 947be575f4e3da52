//! Loads of a line: axial forces, stretch, propellant, its own period; under thrust or
//! standing in gravity.
//!
//! [`Loads`] is built once from a [`Structure`] and a course, then asked about moments:
//!
//! ```
//! use clockspar::model::array_time::ArrayTime;
//! use clockspar::model::loads::{Engine, Joint, Loads, Member, Structure};
//! use clockspar::model::plan::{Phase, Plan};
//!
//! let tether = Member {
//!     is_tether: true,
//!     linear_density_kg_m: 0.012,
//!     axial_stiffness_n: Some(1.2e6),
//!     ..Member::default()
//! };
//! let structure = Structure {
//!     reference: 0,
//!     nodes: vec![
//!         Joint { mass_kg: 1800.0, ..Joint::default() },
//!         Joint { position_m: -5000.0, mass_kg: 35.0, rating_m_s2: None },
//!     ],
//!     members: vec![tether],
//!     engines: vec![Engine {
//!         row: 0,
//!         share: 1.0,
//!         exhaust_speed_m_s: Some(30e3),
//!         propellant_kg: Some(900.0),
//!     }],
//!     flown_at_m_s2: None,
//! };
//! let ramp = Phase::whole(ArrayTime::ZERO, ArrayTime::from_seconds(600), 0.0, 2.0);
//! let loads = Loads::under_thrust(structure, &Plan::new(vec![ramp])?)?;
//!
//! let state = loads.state(ArrayTime::from_seconds(300));
//! let [fore_n, aft_n] = loads.span_force_n(&state, 0);
//! assert!(fore_n > aft_n && aft_n > 0.0);
//! assert!(loads.position_m(&state, 1).to_f64() < -5000.0);
//! assert!(loads.clock_offset(&state, 1).stretch_s.to_f64() < 0.0);
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```
//!
//! Left out: dynamics beyond the ringing of [`Ringing`], buckling, sag, transverse motion,
//! elastic energy (below 1e-11 of the mass) and the line's own gravity. The figures are
//! for planning and do not replace a structural review.

mod balance;
mod compliance;
mod fault;
mod flight;
mod grown;
mod march;
mod peaks;
mod period;
mod propellant;
mod report;
mod slack;
mod standing;
mod structure;

pub use fault::LoadsFault;
pub use grown::Stretch;
pub use peaks::{ForcePeaks, Margin, Peak};
pub use period::{Period, Ringing, lowest_period};
pub use propellant::{Propulsion, RunsDry, Use};
pub use report::Strength;
pub use slack::{Mend, Slack};
pub use standing::{GRADIENT_WARNING_SHIFT, GradientWarning, Gravity};
pub use structure::{Engine, Joint, Member, Structure, StructureFault};

use std::sync::{Arc, OnceLock};

use self::balance::{Balance, Ends, normalised_shares};
use self::compliance::{Basis, Compliance, shape};
use self::flight::Flight;
use self::grown::Settled;
use self::march::Rods;
use self::peaks::Corners;
use self::standing::{Masses, Standing, mass_balance};
use super::array_time::ArrayTime;
use super::constants::INVERSE_C2_S2_M2;
use super::dd::Dd;
use super::horizon::Records;
use super::plan::{Moment, Plan};
use super::rates::Instant;
use crate::layout::{self, Layout};

/// A line and what moves or holds it, ready to be asked about any moment.
#[derive(Clone, Debug)]
pub struct Loads {
    structure: Arc<Structure>,
    rods: Arc<Rods>,
    unloaded_m: Arc<[Dd]>,
    relaxed_m: Arc<[Dd]>,
    masses_kg: Arc<[f64]>,
    propulsion: Arc<Propulsion>,
    course: Course,
}

/// What moves or holds the line.
#[derive(Clone, Debug)]
enum Course {
    Thrust(Box<Thrust>),
    Standing(Box<Standing>),
}

#[derive(Clone, Debug)]
struct Thrust {
    flight: Flight,
    balance: Arc<Balance>,
    stretch: Stretch,
    /// What is known of the first phases, whatever plan goes on from them.
    settled: Settled,
    found: Found,
}

/// What is found out about a plan when it is first asked for.
#[derive(Clone, Debug, Default)]
struct Found {
    /// The extremes over the plan.
    corners: OnceLock<Corners>,
    /// When the first engine runs dry, when one does: beyond that the line has not the masses
    /// that its forces are reckoned with.
    dry: OnceLock<Option<ArrayTime>>,
    /// The extremes up to then.
    corners_until_dry: OnceLock<Corners>,
    records: OnceLock<Records>,
}

impl Thrust {
    /// The extremes over the plan.
    fn corners(&self, propulsion: &Propulsion) -> &Corners {
        let find = || Corners::new(&self.flight, propulsion, &self.settled.sampled);
        self.found.corners.get_or_init(find)
    }

    /// The extremes as far as forces mean something.
    fn forced_corners(&self, propulsion: &Propulsion) -> &Corners {
        match self.runs_dry(propulsion) {
            Some(at) => {
                let find = || Corners::until(&self.flight, propulsion, at);
                self.found.corners_until_dry.get_or_init(find)
            }
            None => self.corners(propulsion),
        }
    }

    /// When the first engine runs dry.
    fn runs_dry(&self, propulsion: &Propulsion) -> Option<ArrayTime> {
        let find = || propulsion.running_dry(&self.flight.plan).first().map(|dry| dry.at);
        *self.found.dry.get_or_init(find)
    }

    /// From when the masses mean nothing: the end of the plan, or when an engine runs dry.
    fn masses_hold_until(&self, propulsion: &Propulsion) -> ArrayTime {
        self.runs_dry(propulsion).unwrap_or(self.flight.plan.end())
    }

    /// The moments at which the acceleration reaches further than ever before.
    fn records(&self) -> &Records {
        self.found.records.get_or_init(|| Records::of(&self.flight.plan))
    }
}

/// The line at one moment, from which every quantity of it follows.
#[derive(Clone, Debug)]
pub struct State {
    /// The reference node's moment and the gradient: rates of loaded positions come from
    /// here.
    pub instant: Instant,
    /// `dα/dτ`, m/s³; zero in a hold, outside the plan and on a standing line.
    pub acceleration_slope_m_s3: f64,
    /// Mass of the line, kg.
    pub mass_kg: f64,
    /// The fraction of the mass at array time zero that has burned.
    pub burned_fraction: f64,
    /// `∫ |α| dτ` since array time zero, m/s.
    pub velocity_spent_m_s: Dd,
    burning_per_s: f64,
    basis: Basis,
    integrals: Vec<Dd>,
}

/// A clock offset `τ_h − τ` and its parts.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Offset {
    /// The whole, s: `(1/c²) ∫ h α dτ` with `h` the loaded position.
    pub total_s: Dd,
    /// What it would be with no force on the line and no change of temperature, s.
    pub unloaded_s: Dd,
    /// What stretch and thermal strain add, s.
    pub stretch_s: Dd,
}

/// What the motion of stretching nodes takes from their clocks up to a moment.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct NeglectedMotion {
    /// `∫ v_t v_u/(2c²) dτ` of every pair of terms of the stretch.
    products: Vec<f64>,
}

impl Loads {
    /// The line of a checked layout, over its plan as filed or in its gravity.
    ///
    /// # Errors
    ///
    /// As [`Loads::under_thrust`] and [`Loads::standing`].
    pub fn of_layout(layout: &Layout) -> Result<Loads, LoadsFault> {
        let structure = Structure::from_layout(layout);
        match &layout.course {
            layout::Course::Thrust(plan) => Loads::under_thrust(structure, plan),
            layout::Course::Standing(standing) => {
                let (gravity_m_s2, gradient_per_s2) =
                    (standing.gravity_m_s2, standing.gradient_per_s2);
                Loads::standing(structure, Gravity { gravity_m_s2, gradient_per_s2 })
            }
        }
    }

    /// A line under a thrust plan.
    ///
    /// # Errors
    ///
    /// [`LoadsFault`]: the structure is none, a node reaches the horizon at its loaded
    /// position, a span is pushed shorter than nothing, or positions "as flown" have no
    /// unloaded lengths.
    pub fn under_thrust(structure: Structure, plan: &Plan) -> Result<Loads, LoadsFault> {
        structure.check()?;
        let masses = masses(&structure);
        let mut rods = Rods::new(&structure);
        if let Some(design_m_s2) = structure.flown_at_m_s2 {
            relax(&structure, &mut rods, |rods, relaxed_m| {
                let (balance, _) = mass_balance(&structure, rods, &masses.as_weights());
                let moved = shape(rods, &balance, relaxed_m, design_m_s2, 0.0)?;
                Ok(moved.iter().map(|c| Dd::new(design_m_s2) * *c).collect())
            })?;
        }
        let relaxed_m = rods.relaxed_m();
        let (balance, mass_kg) = mass_balance(&structure, &rods, &masses.as_weights());
        let propulsion = Propulsion::new(&structure, mass_kg);
        let settled = Settled::default();
        let range = settled.range(plan, &propulsion);
        let compliance = Arc::new(Compliance::new(&rods, &balance, &relaxed_m, &range)?);
        let flight = Flight::new(Arc::new(plan.clone()), Arc::clone(&compliance), Vec::new());
        let thrust = Thrust {
            flight,
            balance: Arc::new(balance),
            stretch: Stretch { range, compliance },
            settled,
            found: Found::default(),
        };
        Ok(Loads {
            unloaded_m: rods.unloaded_m().into(),
            masses_kg: masses.nodes_kg.iter().map(|mass| mass.to_f64()).collect(),
            course: Course::Thrust(Box::new(thrust)),
            structure: Arc::new(structure),
            rods: Arc::new(rods),
            relaxed_m: relaxed_m.into(),
            propulsion: Arc::new(propulsion),
        })
    }

    /// A line that stands in gravity. Engines are its supports, each carrying its share
    /// whether or not it has an exhaust speed, and nothing burns; without any the reference
    /// carries all. Positions "as flown" are those of the line as it stands.
    ///
    /// # Errors
    ///
    /// As [`Loads::under_thrust`], and where `|Γ h| > g`.
    pub fn standing(structure: Structure, gravity: Gravity) -> Result<Loads, LoadsFault> {
        structure.check()?;
        let masses = masses(&structure);
        let mut rods = Rods::new(&structure);
        if structure.flown_at_m_s2.is_some() {
            relax(&structure, &mut rods, |rods, relaxed_m| {
                let settled =
                    Standing::settle(&structure, rods, relaxed_m, &masses.as_weights(), gravity)?;
                Ok(settled.positions_m.iter().zip(relaxed_m).map(|(a, b)| *a - *b).collect())
            })?;
        }
        let relaxed_m = rods.relaxed_m();
        let standing =
            Standing::settle(&structure, &rods, &relaxed_m, &masses.as_weights(), gravity)?;
        let (_, mass_kg) = mass_balance(&structure, &rods, &masses.as_weights());
        Ok(Loads {
            unloaded_m: rods.unloaded_m().into(),
            masses_kg: masses.nodes_kg.iter().map(|mass| mass.to_f64()).collect(),
            course: Course::Standing(Box::new(standing)),
            propulsion: Arc::new(Propulsion::new(&structure, mass_kg)),
            structure: Arc::new(structure),
            rods: Arc::new(rods),
            relaxed_m: relaxed_m.into(),
        })
    }

    /// The line at a moment; at a boundary the later phase counts.
    #[must_use]
    pub fn state(&self, at: ArrayTime) -> State {
        match &self.course {
            Course::Thrust(thrust) => self.state_of(thrust, thrust.flight.plan.phase_at(at), at),
            Course::Standing(standing) => self.state_standing(standing.gravity, at),
        }
    }

    /// The line at an instant of the same course, which says itself on which side of a
    /// boundary it stands.
    #[must_use]
    pub fn state_of_instant(&self, instant: Instant) -> State {
        let Instant { moment, gradient_per_s2 } = instant;
        let mut state = match &self.course {
            Course::Thrust(thrust) => self.state_of(thrust, moment.phase, moment.at),
            Course::Standing(standing) => {
                debug_assert_eq!(standing.gravity.gradient_per_s2, gradient_per_s2);
                self.state_standing(standing.gravity, moment.at)
            }
        };
        state.instant = instant;
        state
    }

    /// The line at the end of a phase, as the limit from below; `None` when there is no
    /// such phase.
    #[must_use]
    pub fn state_before_end_of(&self, phase: usize) -> Option<State> {
        let Course::Thrust(thrust) = &self.course else { return None };
        let end = thrust.flight.plan.phases().get(phase)?.end;
        Some(self.state_of(thrust, Some(phase), end))
    }

    fn state_of(&self, thrust: &Thrust, phase: Option<usize>, at: ArrayTime) -> State {
        let flight = &thrust.flight;
        let drive = flight.drive(&self.propulsion, phase, at);
        let mut moment = flight.plan.moment(at);
        moment.phase = phase;
        moment.acceleration_m_s2 = drive.acceleration_m_s2;
        let velocity_spent_m_s = flight.plan.velocity_spent_m_s(at);
        let left = self.propulsion.mass_fraction(velocity_spent_m_s);
        State {
            instant: Instant { moment, gradient_per_s2: 0.0 },
            acceleration_slope_m_s3: drive.slope_m_s3,
            mass_kg: (self.propulsion.mass_at_start_kg() * left).to_f64(),
            burned_fraction: drive.burned,
            velocity_spent_m_s,
            burning_per_s: drive.burning_per_s,
            basis: flight.compliance.basis(drive.acceleration_m_s2.to_f64(), drive.burned),
            integrals: flight.integrals(&self.propulsion, at),
        }
    }

    fn state_standing(&self, gravity: Gravity, at: ArrayTime) -> State {
        let moment = Moment::held_always(at, gravity.gravity_m_s2);
        State {
            instant: Instant { moment, gradient_per_s2: gravity.gradient_per_s2 },
            acceleration_slope_m_s3: 0.0,
            mass_kg: self.propulsion.mass_at_start_kg().to_f64(),
            burned_fraction: 0.0,
            velocity_spent_m_s: Dd::ZERO,
            burning_per_s: 0.0,
            basis: Basis::default(),
            integrals: Vec::new(),
        }
    }

    /// Position of a row under load, thermal strain included, m: within 2 units of 2⁻⁵³ of
    /// itself, and differences of neighbours likewise.
    #[must_use]
    pub fn position_m(&self, state: &State, row: usize) -> Dd {
        match &self.course {
            Course::Thrust(thrust) if thrust.flight.compliance.terms() > 0 => {
                let compliance = thrust.flight.compliance.sum(row, &state.basis.values);
                self.relaxed_m[row] + state.instant.moment.acceleration_m_s2 * compliance
            }
            Course::Thrust(_) => self.relaxed_m[row],
            Course::Standing(standing) => standing.positions_m[row],
        }
    }

    /// Position of a row with no force on the line and no change of temperature, m.
    #[must_use]
    pub fn unloaded_position_m(&self, row: usize) -> Dd {
        self.unloaded_m[row]
    }

    /// How fast a row moves along the line, `ḣ = dh/dτ`, m per second of array time, + when
    /// fore: to 1e-12 of the largest of its parts.
    #[must_use]
    pub fn speed_m_s(&self, state: &State, row: usize) -> f64 {
        match &self.course {
            Course::Thrust(thrust) => flight::speed(
                &thrust.flight.compliance,
                row,
                &state.basis,
                state.instant.moment.acceleration_m_s2.to_f64(),
                state.acceleration_slope_m_s3,
                state.burning_per_s,
            ),
            Course::Standing(_) => 0.0,
        }
    }

    /// Loaded position of a row and its speed at a moment of a phase (`None` outside the
    /// plan), the end of the phase meaning the limit from below: what the end of a link
    /// needs, without the cost of a whole [`State`].
    #[must_use]
    pub fn end_motion(&self, phase: Option<usize>, at: ArrayTime, row: usize) -> (Dd, f64) {
        match &self.course {
            Course::Standing(standing) => (standing.positions_m[row], 0.0),
            Course::Thrust(thrust) if thrust.flight.compliance.terms() == 0 => {
                (self.relaxed_m[row], 0.0)
            }
            Course::Thrust(thrust) => {
                let flight = &thrust.flight;
                let drive = flight.drive(&self.propulsion, phase, at);
                let (alpha, slope) = (drive.acceleration_m_s2, drive.slope_m_s3);
                let basis = flight.compliance.basis(alpha.to_f64(), drive.burned);
                let position =
                    self.relaxed_m[row] + alpha * flight.compliance.sum(row, &basis.values);
                let speed = flight::speed(
                    &flight.compliance,
                    row,
                    &basis,
                    alpha.to_f64(),
                    slope,
                    drive.burning_per_s,
                );
                (position, speed)
            }
        }
    }

    /// Clock offset of a row: within 1e-14 of `(1/c²) ∫ |h α| dτ`.
    ///
    /// With `h = relaxed + α C(α, x)` the offset is `relaxed φ/c + (1/c²) ∫ α² C dτ`; the
    /// integrals of the terms of `C` up to each phase are stored, so the cost of a moment
    /// grows with the logarithm of the number of phases only. What is left out is
    /// [`Loads::neglected_motion_s`].
    #[must_use]
    pub fn clock_offset(&self, state: &State, row: usize) -> Offset {
        let unloaded_s = state.instant.clock_offset_s(self.unloaded_m[row]);
        match &self.course {
            Course::Thrust(thrust) => {
                let thermal =
                    state.instant.clock_offset_s(self.relaxed_m[row] - self.unloaded_m[row]);
                let compliance = &thrust.flight.compliance;
                let stretch_s = if compliance.terms() == 0 {
                    thermal
                } else {
                    thermal + compliance.sum_wide(row, &state.integrals) * INVERSE_C2_S2_M2
                };
                Offset { total_s: unloaded_s + stretch_s, unloaded_s, stretch_s }
            }
            Course::Standing(standing) => {
                let total_s = state.instant.clock_offset_s(standing.positions_m[row]);
                Offset { total_s, unloaded_s, stretch_s: total_s - unloaded_s }
            }
        }
    }

    /// What the clock offset of a row leaves out, `∫ ḣ²/(2 c² N) dτ` up to a moment, s: the
    /// row's motion along the line slows its clock by this. To about 1e-10 of itself.
    #[must_use]
    pub fn neglected_motion_s(&self, row: usize, at: ArrayTime) -> f64 {
        match &self.course {
            Course::Thrust(thrust) => flight::neglected_motion_s(
                &thrust.flight,
                &self.propulsion,
                row,
                self.relaxed_m[row].to_f64(),
                at,
            ),
            Course::Standing(_) => 0.0,
        }
    }

    /// The same for any row of the line, found once for a moment: the size of what is left
    /// out, to `|N − 1|` of itself.
    #[must_use]
    pub fn neglected_motion(&self, at: ArrayTime) -> NeglectedMotion {
        NeglectedMotion {
            products: match &self.course {
                Course::Thrust(thrust) => {
                    flight::motion_products(&thrust.flight, &self.propulsion, at)
                }
                Course::Standing(_) => Vec::new(),
            },
        }
    }

    /// What the clock offset of a row leaves out, s, from what was found for the moment.
    #[must_use]
    pub fn neglected_of_row_s(&self, motion: &NeglectedMotion, row: usize) -> f64 {
        match &self.course {
            Course::Thrust(thrust) if !motion.products.is_empty() => {
                thrust.flight.compliance.square(row, &motion.products)
            }
            _ => 0.0,
        }
    }

    /// Axial force at the fore and the aft end of the span between a row and the next, N,
    /// + tension: within 1e-14 of `(|α|/N) (M_aft + S_aft M)`.
    #[must_use]
    pub fn span_force_n(&self, state: &State, gap: usize) -> [f64; 2] {
        let ends = self.drawn(state, gap);
        let force = |pull: Dd, row: usize| {
            (pull / state.instant.rate(self.position_m(state, row))).to_f64()
        };
        [force(ends.fore, gap), force(ends.aft, gap + 1)]
    }

    /// `N T` at both ends of a gap, N.
    fn drawn(&self, state: &State, gap: usize) -> Ends {
        match &self.course {
            Course::Thrust(thrust) => {
                let ends = thrust.balance.ends(gap, state.burned_fraction);
                let alpha = state.instant.moment.acceleration_m_s2;
                Ends { fore: alpha * ends.fore, aft: alpha * ends.aft }
            }
            Course::Standing(standing) => standing.ends[gap],
        }
    }

    /// Length a span has gained under load, thermal strain included, m.
    #[must_use]
    pub fn span_stretch_m(&self, state: &State, gap: usize) -> f64 {
        let loaded = self.position_m(state, gap) - self.position_m(state, gap + 1);
        (loaded - self.rods.lengths_m[gap]).to_f64()
    }

    /// Force of an engine on its node, N, + towards the fore end: `F_k = s_k α M / N_k`; of
    /// a support `s_k W / N_k`.
    #[must_use]
    pub fn engine_force_n(&self, state: &State, engine: usize) -> f64 {
        let row = self.propulsion.engines()[engine].row;
        let rate = state.instant.rate(self.position_m(state, row));
        let whole = match &self.course {
            Course::Thrust(_) => {
                let left = self.propulsion.mass_fraction(state.velocity_spent_m_s);
                state.instant.moment.acceleration_m_s2 * self.propulsion.mass_at_start_kg() * left
            }
            Course::Standing(standing) => standing.weight_n,
        };
        (whole * self.propulsion.shares()[engine] / rate).to_f64()
    }

    /// The mechanical side of the line as it was given.
    #[must_use]
    pub fn structure(&self) -> &Structure {
        &self.structure
    }

    /// Engines, burning and mass ratios.
    #[must_use]
    pub fn propulsion(&self) -> &Propulsion {
        &self.propulsion
    }

    /// Whether stretch or temperature moves any node at all.
    #[must_use]
    pub fn is_rigid(&self) -> bool {
        !self.rods.is_elastic()
            && self.structure.members.iter().all(|member| member.thermal_strain == 0.0)
    }

    /// Whether a change of thrust would move nodes: some span has a stiffness.
    #[must_use]
    pub fn is_elastic(&self) -> bool {
        self.rods.is_elastic()
    }
}

/// Node masses with propellant, and thrust and burning shares by row.
struct OwnedMasses {
    nodes_kg: Vec<Dd>,
    thrust: Vec<(Dd, Dd)>,
}

impl OwnedMasses {
    fn as_weights(&self) -> Masses<'_> {
        Masses { nodes_kg: &self.nodes_kg, thrust: &self.thrust }
    }
}

fn masses(structure: &Structure) -> OwnedMasses {
    let mut nodes_kg: Vec<Dd> = structure.nodes.iter().map(|node| Dd::new(node.mass_kg)).collect();
    let mut thrust = vec![(Dd::ZERO, Dd::ZERO); structure.nodes.len()];
    let engines = structure.engines_or_ideal();
    let shares = normalised_shares(structure);
    // The burning shares do not depend on the mass, so any will do here.
    let burning = Propulsion::new(structure, Dd::ONE);
    for (index, engine) in engines.iter().enumerate() {
        nodes_kg[engine.row] = nodes_kg[engine.row] + engine.propellant_kg.unwrap_or(0.0);
        let here = &mut thrust[engine.row];
        here.0 = here.0 + shares[index];
        here.1 = here.1 + burning.burning_share(index);
    }
    OwnedMasses { nodes_kg, thrust }
}

/// Finds the unloaded lengths under which the loaded positions are those given.
///
/// Each round moves every length by what its loaded gap lacks, divided by its stretch; the
/// remainder shrinks by the strain times the share of the line's mass in its spans.
fn relax(
    structure: &Structure,
    rods: &mut Rods,
    moved_m: impl Fn(&Rods, &[Dd]) -> Result<Vec<Dd>, LoadsFault>,
) -> Result<(), LoadsFault> {
    let wanted = rods.lengths_m.clone();
    for (length, expansion) in rods.lengths_m.iter_mut().zip(&rods.expansions) {
        *length = *length / *expansion;
    }
    let mut best = f64::INFINITY;
    for _ in 0..200 {
        let relaxed_m = rods.relaxed_m();
        let moved = moved_m(rods, &relaxed_m)?;
        let mut worst = 0.0_f64;
        for (gap, wanted) in wanted.iter().enumerate() {
            if wanted.is_zero() {
                continue;
            }
            let loaded = relaxed_m[gap] + moved[gap] - relaxed_m[gap + 1] - moved[gap + 1];
            let lacking = *wanted - loaded;
            worst = worst.max((lacking / *wanted).hi.abs());
            rods.lengths_m[gap] = rods.lengths_m[gap] + lacking / (loaded / rods.lengths_m[gap]);
        }
        // The march itself rounds at a few 1e-17 of the stretch, so it may stop above 1e-24.
        if worst < 1e-24 || (worst < 1e-17 && worst >= best * 0.5) {
            return Ok(());
        }
        best = best.min(worst);
    }
    debug_assert!(structure.flown_at_m_s2.is_some());
    Err(LoadsFault::NotInvertible)
}
