//! The thrust plan: proper acceleration of the reference node as a function of
//! array time, piecewise linear, with its integrals.

use std::fmt;

use super::array_time::ArrayTime;
use super::constants::{INVERSE_C_S_M, SPEED_OF_LIGHT_M_S};
use super::dd::{Dd, RunningSum, Wide};
use super::motion::{self, Launch};

/// A straight line of acceleration over array time: `from` at `origin`, `to` at
/// `origin + length`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Line {
    /// Where the line has the value `from_m_s2`.
    pub origin: ArrayTime,
    /// How long it takes to reach `to_m_s2`; above zero.
    pub length: ArrayTime,
    /// Acceleration at the origin, m/s².
    pub from_m_s2: f64,
    /// Acceleration at the far end, m/s².
    pub to_m_s2: f64,
}

/// A part of the plan over which the acceleration follows one line: a hold, a ramp,
/// or a piece of either. The interval is `[start, end)`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Phase {
    /// First moment of the phase.
    pub start: ArrayTime,
    /// First moment after it.
    pub end: ArrayTime,
    /// The line it follows. A piece cut from a ramp keeps the ramp's own line, so that
    /// cutting changes no value.
    pub line: Line,
}

impl Phase {
    /// The whole of a line: a hold when both ends agree, else a ramp.
    #[must_use]
    pub fn whole(start: ArrayTime, length: ArrayTime, from_m_s2: f64, to_m_s2: f64) -> Phase {
        let line = Line { origin: start, length, from_m_s2, to_m_s2 };
        let end = ArrayTime::from_attoseconds(start.attoseconds() + length.attoseconds());
        Phase { start, end, line }
    }

    /// Whether the acceleration is constant.
    #[must_use]
    pub fn is_hold(&self) -> bool {
        self.line.from_m_s2 == self.line.to_m_s2
    }

    /// Acceleration at a moment of the phase, its end included (there the limit from
    /// below), m/s².
    ///
    /// `(from · (L − s) + to · s) / L` with `s` and `L` counted in attoseconds: the
    /// numerator is summed exactly, so the value keeps its relative accuracy (2⁻¹⁰²)
    /// however close to a zero of the ramp the moment lies.
    #[must_use]
    pub fn acceleration(&self, at: ArrayTime) -> Dd {
        let Line { origin, length, from_m_s2, to_m_s2 } = self.line;
        if self.is_hold() {
            return Dd::new(from_m_s2);
        }
        let gone = at.attoseconds() - origin.attoseconds();
        let left = length.attoseconds() - gone;
        // The ends themselves are exact: the sign of a rate is decided there.
        if gone == 0 {
            return Dd::new(from_m_s2);
        }
        if left == 0 {
            return Dd::new(to_m_s2);
        }
        weighted(from_m_s2, left, to_m_s2, gone).to_dd() / Dd::from_i128(length.attoseconds())
    }

    /// `∫ α dτ` from the start of the phase to a moment of it, in m/s² · as, to 2⁻¹⁹⁰ of
    /// `∫ |α| dτ`: the trapezium, which is exact for a straight line. Counted in attoseconds
    /// it needs no division over a whole phase, and a logged history is made of those.
    #[must_use]
    fn gain(&self, until: ArrayTime) -> Wide {
        let Line { origin, length, from_m_s2, to_m_s2 } = self.line;
        let elapsed = Dd::from_i128(until.attoseconds() - self.start.attoseconds());
        if self.is_hold() {
            return elapsed.wide_product(Dd::new(from_m_s2));
        }
        if self.start == origin
            && until.attoseconds() - origin.attoseconds() == length.attoseconds()
        {
            return elapsed.wide_product(Dd::sum(from_m_s2, to_m_s2)).scale(0.5);
        }
        let gone = (self.start.attoseconds() - origin.attoseconds())
            + (until.attoseconds() - origin.attoseconds());
        let left = 2 * length.attoseconds() - gone;
        weighted(from_m_s2, left, to_m_s2, gone)
            .times(elapsed)
            .over(Dd::from_i128(2 * length.attoseconds()))
    }

    /// `∫ |α| dτ` from the start of the phase to a moment of it, m/s, to 2⁻¹⁰⁰ of itself.
    fn velocity_spent(&self, until: ArrayTime) -> Dd {
        let elapsed = until.seconds_since(self.start);
        let (first, last) = (self.acceleration(self.start), self.acceleration(until));
        let sizes = first.abs() + last.abs();
        if sizes.is_zero() {
            return Dd::ZERO;
        }
        if first.is_negative() == last.is_negative() || first.is_zero() || last.is_zero() {
            return sizes * elapsed * 0.5;
        }
        // Two triangles meet at the zero inside.
        (first / sizes * first + last / sizes * last) * elapsed * 0.5
    }

    /// The moment inside the phase at which the acceleration has a given value,
    /// in seconds after the start of the phase; `None` when it never has it.
    #[must_use]
    pub fn moment_of(&self, acceleration: Dd) -> Option<Dd> {
        let first = self.acceleration(self.start);
        let last = self.acceleration(self.end);
        if first == last {
            return (first == acceleration).then_some(Dd::ZERO);
        }
        let share = (acceleration - first) / (last - first);
        if share.is_negative() || share > Dd::ONE {
            return None;
        }
        Some(share * self.end.seconds_since(self.start))
    }
}

/// `first · first_weight + second · second_weight`, exactly.
fn weighted(first: f64, first_weight: i128, second: f64, second_weight: i128) -> Wide {
    let (a, b) = (Dd::from_i128(first_weight), Dd::from_i128(second_weight));
    let mut terms = [0.0; 8];
    for (index, (value, weight)) in
        [(first, a.lo), (second, b.lo), (first, a.hi), (second, b.hi)].into_iter().enumerate()
    {
        let product = Dd::product(value, weight);
        terms[2 * index] = product.lo;
        terms[2 * index + 1] = product.hi;
    }
    Wide::sum(&mut terms)
}

/// Why a list of phases is not a thrust plan.
#[derive(Clone, Debug, PartialEq)]
pub enum PlanFault {
    /// A phase has no length.
    Empty {
        /// Index of the phase, from 0.
        phase: usize,
    },
    /// A phase does not begin where the one before it ends (the first: at zero).
    Gap {
        /// Index of the phase, from 0.
        phase: usize,
    },
    /// A phase ends beyond the domain of array time.
    TooLong {
        /// Index of the phase, from 0.
        phase: usize,
    },
    /// An acceleration is not finite or above 10⁶ m/s².
    TooStrong {
        /// Index of the phase, from 0.
        phase: usize,
        /// The acceleration, m/s².
        acceleration_m_s2: f64,
    },
    /// The rapidity leaves ±700.
    TooFast {
        /// Index of the phase, from 0.
        phase: usize,
        /// The rapidity reached in it.
        rapidity: f64,
    },
}

impl fmt::Display for PlanFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            PlanFault::Empty { phase } => write!(f, "phase {} has no length", phase + 1),
            PlanFault::Gap { phase } => {
                write!(f, "phase {} does not begin where the one before it ends", phase + 1)
            }
            PlanFault::TooLong { phase } => {
                write!(f, "phase {} ends after 1e11 s of array time", phase + 1)
            }
            PlanFault::TooStrong { phase, acceleration_m_s2 } => write!(
                f,
                "phase {} holds {acceleration_m_s2:e} m/s^2, above the limit of 1e6 m/s^2",
                phase + 1
            ),
            PlanFault::TooFast { phase, rapidity } => write!(
                f,
                "the rapidity reaches {rapidity:.1} in phase {}, beyond the limit of 700",
                phase + 1
            ),
        }
    }
}

impl std::error::Error for PlanFault {}

/// Largest acceleration of the domain, m/s².
pub const LARGEST_ACCELERATION_M_S2: f64 = 1.0e6;

/// Largest rapidity of the domain, either sign.
pub const LARGEST_RAPIDITY: f64 = 700.0;

/// The thrust plan of the reference node.
///
/// A logged history is the same thing with more phases: every face of this type works
/// in a time that grows with the logarithm of their number, from stored integrals.
#[derive(Clone, Debug)]
pub struct Plan {
    phases: Vec<Phase>,
    /// Integrals up to the start of each phase, and one more for the end of the plan: as
    /// running sums, so that a plan can be cut and gone on with to the same bits.
    until: Vec<Integrals>,
}

/// What has accumulated since array time zero.
#[derive(Clone, Copy, Debug, Default)]
struct Integrals {
    /// `∫ α dτ` in m/s² · as.
    gain: Wide,
    velocity_spent: RunningSum,
    launch_time_s: RunningSum,
    launch_position_m: RunningSum,
}

/// What was taken off a plan, to be put back.
#[derive(Clone, Debug)]
pub struct CutOff {
    /// How many phases of the plan were left as they were.
    pub unchanged: usize,
    /// The phases after them, as they were.
    phases: Vec<Phase>,
}

/// The plan at one moment of array time.
#[derive(Clone, Copy, Debug)]
pub struct Moment {
    /// The moment.
    pub at: ArrayTime,
    /// Index of the phase it falls in; `None` before and after the plan.
    pub phase: Option<usize>,
    /// Proper acceleration `α` of the reference node, m/s², + towards the fore end.
    /// At a boundary the later phase counts.
    pub acceleration_m_s2: Dd,
    /// Velocity gain `∫ α dτ = c φ` since array time zero, m/s.
    pub velocity_gain_m_s: Dd,
    /// Rapidity `φ = ∫ α dτ / c` gained since array time zero.
    pub rapidity: Dd,
    /// `Φ = ∫ |α| dτ / c`.
    pub total_rapidity: f64,
}

impl Moment {
    /// The moment of an acceleration that has always been held and always will be: gravity
    /// under a standing line. The steps are those of a hold, so the bits agree with one.
    #[must_use]
    pub fn held_always(at: ArrayTime, acceleration_m_s2: f64) -> Moment {
        let elapsed = Dd::from_i128(at.attoseconds());
        let gain = velocity(Wide::ZERO + elapsed.wide_product(Dd::new(acceleration_m_s2)));
        Moment {
            at,
            phase: None,
            acceleration_m_s2: Dd::new(acceleration_m_s2),
            velocity_gain_m_s: gain.to_dd(),
            rapidity: rapidity_of(gain),
            total_rapidity: rapidity_of(gain).abs().to_f64(),
        }
    }
}

impl Plan {
    /// A plan from its phases, which follow each other from array time zero.
    ///
    /// # Errors
    ///
    /// The first fault found, in the order of the phases.
    pub fn new(phases: Vec<Phase>) -> Result<Plan, PlanFault> {
        let mut plan = Plan::empty();
        plan.phases.reserve_exact(phases.len());
        plan.until.reserve_exact(phases.len());
        for phase in phases {
            plan.push(phase)?;
        }
        Ok(plan)
    }

    /// A plan without phases.
    #[must_use]
    pub fn empty() -> Plan {
        Plan { phases: Vec::new(), until: vec![Integrals::default()] }
    }

    /// Adds a phase at the end. A plan grown phase by phase has the bits of one made at
    /// once.
    ///
    /// # Errors
    ///
    /// What is wrong with the phase; the plan is then as it was.
    pub fn push(&mut self, phase: Phase) -> Result<(), PlanFault> {
        let index = self.phases.len();
        check_shape(index, &phase, self.end())?;
        let mut sum = self.until[index];
        let start_rapidity = if index == 0 { Dd::ZERO } else { near_rapidity_of(sum.gain) };
        sum.gain = sum.gain + phase.gain(phase.end);
        let end_rapidity = near_rapidity_of(sum.gain);
        check_rapidity(index, &phase, start_rapidity, end_rapidity)?;
        // It takes a time that grows with the rapidity, which is small by now.
        let launch = motion::launch_gain(&phase, start_rapidity, phase.end);
        sum.velocity_spent.add(phase.velocity_spent(phase.end));
        sum.launch_time_s.add(launch.time_s);
        sum.launch_position_m.add(launch.position_m);
        self.until.push(sum);
        self.phases.push(phase);
        Ok(())
    }

    /// Cuts the plan off at a moment: what has been flown up to it is left. A moment after
    /// the end adds a coast up to it; one before array time zero leaves nothing.
    ///
    /// # Errors
    ///
    /// What is wrong with the last phase when it ends there; the plan is then as it was.
    pub fn cut_at(&mut self, at: ArrayTime) -> Result<CutOff, PlanFault> {
        let begun = self.phases.partition_point(|phase| phase.start < at);
        let last = begun.checked_sub(1).map(|index| self.phases[index]);
        let running = last.filter(|last| last.end > at);
        let unchanged = begun - usize::from(running.is_some());
        let cut = CutOff { unchanged, phases: self.phases.split_off(unchanged) };
        self.until.truncate(unchanged + 1);
        let piece = match running {
            Some(last) => Some(Phase { end: at, ..last }),
            None => {
                let end = self.end();
                let length = ArrayTime::from_attoseconds(at.attoseconds() - end.attoseconds());
                (at > end).then(|| Phase::whole(end, length, 0.0, 0.0))
            }
        };
        match piece.map_or(Ok(()), |piece| self.push(piece)) {
            Ok(()) => Ok(cut),
            Err(fault) => {
                self.put_back(cut);
                Err(fault)
            }
        }
    }

    /// Takes away what has been added since a cut, and puts back what was cut off.
    pub fn put_back(&mut self, cut: CutOff) {
        self.phases.truncate(cut.unchanged);
        self.until.truncate(cut.unchanged + 1);
        for phase in cut.phases {
            let is_back = self.push(phase).is_ok();
            debug_assert!(is_back, "what was part of the plan can be again");
        }
    }

    /// The phases, in order.
    #[must_use]
    pub fn phases(&self) -> &[Phase] {
        &self.phases
    }

    /// The end of the last phase; zero for an empty plan.
    #[must_use]
    pub fn end(&self) -> ArrayTime {
        self.phases.last().map_or(ArrayTime::ZERO, |phase| phase.end)
    }

    /// The rapidity at the start of a phase, by its index; one past the last phase: at the
    /// end of the plan.
    ///
    /// # Panics
    ///
    /// If there is no such phase.
    #[must_use]
    pub fn rapidity_at_start(&self, phase: usize) -> Dd {
        rapidity_of(velocity(self.until[phase].gain))
    }

    /// The phase a moment falls in: at a boundary the later one; `None` before array
    /// time zero and from the end of the plan on.
    #[must_use]
    pub fn phase_at(&self, at: ArrayTime) -> Option<usize> {
        if at < ArrayTime::ZERO || at >= self.end() {
            return None;
        }
        Some(self.phases.partition_point(|phase| phase.end <= at))
    }

    /// Acceleration, rapidity and total rapidity at a moment.
    #[must_use]
    pub fn moment(&self, at: ArrayTime) -> Moment {
        let phase = self.phase_at(at);
        let (acceleration_m_s2, gain, spent) = match phase {
            Some(index) => {
                let (phase, before) = (&self.phases[index], &self.until[index]);
                (
                    phase.acceleration(at),
                    velocity(before.gain + phase.gain(at)),
                    before.velocity_spent.value() + phase.velocity_spent(at),
                )
            }
            None => {
                let reached = self.reached_outside(at);
                (Dd::ZERO, velocity(reached.gain), reached.velocity_spent.value())
            }
        };
        Moment {
            at,
            phase,
            acceleration_m_s2,
            velocity_gain_m_s: gain.to_dd(),
            rapidity: rapidity_of(gain),
            total_rapidity: (spent / SPEED_OF_LIGHT_M_S).to_f64(),
        }
    }

    /// `∫ |α| dτ` from array time zero to a moment, m/s, to 2⁻¹⁰⁰ of itself: what engines
    /// have to deliver. Zero before the plan, constant after it.
    #[must_use]
    pub fn velocity_spent_m_s(&self, at: ArrayTime) -> Dd {
        match self.phase_at(at) {
            Some(index) => {
                let before = self.until[index].velocity_spent.value();
                before + self.phases[index].velocity_spent(at)
            }
            None => self.reached_outside(at).velocity_spent.value(),
        }
    }

    /// The reference node's event in the launch frame at a moment: launch time and
    /// position, scaled as [`Launch`] says.
    #[must_use]
    pub fn launch(&self, at: ArrayTime) -> Launch {
        let (start, before, piece) = match self.phase_at(at) {
            Some(index) => {
                let phase = self.phases[index];
                (phase.start, self.until[index], phase)
            }
            None => {
                // Before the plan the line rests in the launch frame; after it the line coasts.
                let start = if at < ArrayTime::ZERO { ArrayTime::ZERO } else { self.end() };
                let coast = Phase::whole(start, ArrayTime::LIMIT, 0.0, 0.0);
                (start, self.reached_outside(at), coast)
            }
        };
        let rapidity = near_rapidity_of(before.gain);
        debug_assert!(piece.start == start);
        let gain = motion::launch_gain(&piece, rapidity, at);
        Launch {
            time_s: before.launch_time_s.value() + gain.time_s,
            position_m: before.launch_position_m.value() + gain.position_m,
        }
    }

    /// What has accumulated at a moment before or after the plan.
    fn reached_outside(&self, at: ArrayTime) -> Integrals {
        if at < ArrayTime::ZERO { self.until[0] } else { self.until[self.phases.len()] }
    }

    /// What has been flown up to a moment, as [`Plan::cut_at`] leaves it.
    #[must_use]
    pub fn phases_until(&self, at: ArrayTime) -> Vec<Phase> {
        let mut flown: Vec<Phase> =
            self.phases.iter().copied().take_while(|phase| phase.start < at).collect();
        match flown.last_mut() {
            Some(last) if last.end > at => last.end = at,
            _ => {
                let end = flown.last().map_or(ArrayTime::ZERO, |last| last.end);
                if at > end {
                    let length = ArrayTime::from_attoseconds(at.attoseconds() - end.attoseconds());
                    flown.push(Phase::whole(end, length, 0.0, 0.0));
                }
            }
        }
        flown
    }

    /// What the plan has left from a moment on; the first phase may be a piece of one.
    #[must_use]
    pub fn phases_from(&self, at: ArrayTime) -> Vec<Phase> {
        let ended = self.phases.partition_point(|phase| phase.end <= at);
        let mut left = self.phases[ended..].to_vec();
        if let Some(first) = left.first_mut() {
            first.start = first.start.max(at);
        }
        left
    }
}

/// A gain in m/s² · as as a velocity, m/s.
fn velocity(gain: Wide) -> Wide {
    gain.over(Dd::new(1.0e18))
}

/// `φ` of a gain in m/s² · as, to a few units of 2⁻¹⁰⁶ of itself: enough for launch
/// coordinates, which are carried to the accuracy of a double.
fn near_rapidity_of(gain: Wide) -> Dd {
    gain.to_dd() / Dd::product(SPEED_OF_LIGHT_M_S, 1.0e18)
}

/// `φ` of a velocity gain.
fn rapidity_of(velocity_gain: Wide) -> Dd {
    velocity_gain.to_dd() * INVERSE_C_S_M
}

fn check_shape(index: usize, phase: &Phase, expected: ArrayTime) -> Result<(), PlanFault> {
    if phase.start != expected {
        return Err(PlanFault::Gap { phase: index });
    }
    if phase.end <= phase.start || phase.line.length <= ArrayTime::ZERO {
        return Err(PlanFault::Empty { phase: index });
    }
    if phase.end.in_domain().is_none() {
        return Err(PlanFault::TooLong { phase: index });
    }
    for acceleration_m_s2 in [phase.line.from_m_s2, phase.line.to_m_s2] {
        if acceleration_m_s2.is_nan() || acceleration_m_s2.abs() > LARGEST_ACCELERATION_M_S2 {
            return Err(PlanFault::TooStrong { phase: index, acceleration_m_s2 });
        }
    }
    Ok(())
}

/// The rapidity is extreme at the ends of a phase and where a ramp passes through zero.
fn check_rapidity(index: usize, phase: &Phase, start: Dd, end: Dd) -> Result<(), PlanFault> {
    let (first, last) = (phase.acceleration(phase.start), phase.acceleration(phase.end));
    let turning = if first.is_negative() != last.is_negative() {
        phase
            .moment_of(Dd::ZERO)
            .map_or(start, |after| start + first * after / (2.0 * SPEED_OF_LIGHT_M_S))
    } else {
        start
    };
    for rapidity in [turning, end] {
        if rapidity.abs() > Dd::new(LARGEST_RAPIDITY) {
            return Err(PlanFault::TooFast { phase: index, rapidity: rapidity.to_f64() });
        }
    }
    Ok(())
}
