//! The thrust plan as light sees it, and the walk of one ray along it.
//!
//! In seconds of light time, with `a = α/c` and `ψ` the rapidity gained since the moment
//! of emission, a ray towards the fore end that starts at `ℓ_e` is, later, at
//!
//! ```text
//! ℓ(s) = e^ψ (ℓ_e + ∫₀ˢ e^(−ψ) ds)
//! ```
//!
//! and meets a node at `ℓ_j` when `∫₀ˢ N_j e^(−ψ) ds = ℓ_j − ℓ_e` (the launch-frame null
//! coordinate `u` of both, by parts, divided by its factor at emission). The integrand is
//! positive, so the root is unique. A ray towards the aft end is the mirror image: `a` and
//! `ℓ` change sign. What is carried from piece to piece is the gap left between ray and
//! node, so nothing that has grown since launch is ever subtracted.
//!
//! Pieces are the phases of the plan, neighbours on one line joined and ramps cut where the
//! rapidity would change by more than a half. Blocks of 2, 4, 8 … pieces keep their whole
//! integrals: a ray that crosses `n` pieces takes about `2 log₂ n` steps.

use super::series::exp;
use super::way::{Drift, Way, advance};
use crate::model::array_time::ArrayTime;
use crate::model::constants::SPEED_OF_LIGHT_M_S;
use crate::model::dd::Dd;
use crate::model::motion::LAUNCH_SCALE;
use crate::model::plan::{Line, Phase, Plan};

/// Change of rapidity at which a ramp is cut, so that the series stay short.
const LARGEST_SWING: f64 = 0.5;

/// A block whose rapidity changes by more is not crossed whole: light between nodes of a
/// line with `N ≥ 10⁻⁶` never lives through such a change, and the exponentials stay finite.
const LARGEST_BLOCK_SWING: f64 = 300.0;

/// Jumps of the acceleration below this share of it are rounding of a plan that was cut in
/// the middle of a ramp, not steps of the thrust.
const SMALLEST_STEP: f64 = 1e-12;

/// Length of a stretch without end, s. Finite, because sums with infinity are not numbers.
pub(crate) const ENDLESS: Dd = Dd { hi: 1e300, lo: 0.0 };

/// Which way a signal runs along the line.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Ray {
    /// Towards the fore end.
    Fore,
    /// Towards the aft end.
    Aft,
}

impl Ray {
    /// +1 towards the fore end, −1 towards the aft end.
    #[inline]
    #[must_use]
    pub fn sign(self) -> f64 {
        match self {
            Ray::Fore => 1.0,
            Ray::Aft => -1.0,
        }
    }

    /// The way back.
    #[must_use]
    pub fn reversed(self) -> Ray {
        match self {
            Ray::Fore => Ray::Aft,
            Ray::Aft => Ray::Fore,
        }
    }
}

/// A stretch of array time over which the acceleration is one straight line.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Piece {
    /// First moment; for the rest before the plan, the start of the domain.
    pub start: ArrayTime,
    /// Length, s; [`ENDLESS`] for the coast after the plan.
    pub length: Dd,
    /// `α/c` at the start, 1/s.
    pub push: Dd,
    /// `α/c` at the end, 1/s. A zero of a ramp is at an end of a piece, so that values
    /// reckoned from the nearer end keep their digits beside it.
    pub end_push: Dd,
    /// Its derivative, 1/s².
    pub slope: Dd,
    /// Rapidity gained since array time zero, at the start.
    pub rapidity: Dd,
    /// Pieces with one number follow one line of the plan.
    pub line: u32,
    /// Steps of the thrust up to and at the start.
    pub steps: u32,
    /// `∫ e^(−φ) dτ` and `∫ e^(+φ) dτ` from array time zero to the start, s, times
    /// [`LAUNCH_SCALE`].
    pub null: [Dd; 2],
}

impl Piece {
    /// Rapidity gained over the whole piece.
    #[inline]
    pub fn swing(&self) -> Dd {
        (self.push + self.end_push).scale(0.5) * self.length
    }
}

/// The whole integrals of a block of pieces, reckoned from its start.
#[derive(Clone, Copy, Debug)]
struct Block {
    length: Dd,
    /// `∫ e^(∓ψ) ds`, s: first for rays towards the fore end, then aft.
    sums: [Dd; 2],
    /// `e^(∓ψ) − 1` at the end.
    changes: [Dd; 2],
    swing: Dd,
    is_usable: bool,
}

impl Block {
    fn of(piece: &Piece) -> Block {
        let swing = piece.swing();
        let is_usable = swing.hi.abs() <= LARGEST_BLOCK_SWING;
        let fore = advance(piece.push, piece.slope, piece.length);
        let aft = advance(-piece.push, -piece.slope, piece.length);
        Block {
            length: piece.length,
            sums: [fore.sum, aft.sum],
            changes: [fore.change, aft.change],
            swing,
            is_usable,
        }
    }

    fn followed_by(&self, next: &Block) -> Block {
        let both = |index: usize| {
            let kept = self.changes[index] + 1.0;
            (
                self.sums[index] + kept * next.sums[index],
                self.changes[index] + kept * next.changes[index],
            )
        };
        let ((fore_sum, fore_change), (aft_sum, aft_change)) = (both(0), both(1));
        let swing = self.swing + next.swing;
        Block {
            length: self.length + next.length,
            sums: [fore_sum, aft_sum],
            changes: [fore_change, aft_change],
            swing,
            is_usable: self.is_usable && next.is_usable && swing.hi.abs() <= LARGEST_BLOCK_SWING,
        }
    }
}

/// A moment of array time that need not fall on a whole attosecond.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Place {
    /// Index of the piece.
    pub piece: usize,
    /// Seconds after the start of the piece.
    pub offset: Dd,
    /// Seconds left to the end of the piece, kept beside the offset because a difference of
    /// two long stretches would lose the digits of a short flight.
    pub room: Dd,
}

impl Place {
    /// The place some seconds later in the same piece.
    pub(crate) fn after(self, seconds: Dd) -> Place {
        let room = if self.room == ENDLESS { ENDLESS } else { self.room - seconds };
        Place { piece: self.piece, offset: self.offset + seconds, room }
    }
}

/// Where and when a ray meets its node.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Landing {
    /// The moment.
    pub place: Place,
    /// Seconds of array time since the start.
    pub elapsed: Dd,
    /// Rapidity gained since the start, + along the ray.
    pub swing: Dd,
    /// `e^(−swing) − 1`.
    pub change: Dd,
}

/// The thrust plan with the integrals that light needs.
///
/// Built once for a plan in a time proportional to its phases; every question asked of it
/// afterwards takes a time that grows with the logarithm of their number.
///
/// ```
/// use clockspar::model::array_time::ArrayTime;
/// use clockspar::model::links::{End, Rays};
/// use clockspar::model::plan::{Phase, Plan};
///
/// let hour = ArrayTime::from_seconds(3600);
/// let plan = Plan::new(vec![Phase::whole(ArrayTime::ZERO, hour, 9.80665, 9.80665)])?;
/// let rays = Rays::new(&plan);
/// let at = ArrayTime::from_seconds(60);
/// let flight = rays.one_way(End::fixed(0.0), End::fixed(1000.0), at).expect("it arrives");
/// assert_eq!(flight.received_shift, -1.0911369672197026e-13);
/// # Ok::<(), clockspar::model::plan::PlanFault>(())
/// ```
#[derive(Clone, Debug)]
pub struct Rays {
    pieces: Vec<Piece>,
    levels: Vec<Vec<Block>>,
}

impl Rays {
    /// Prepares a plan: at rest before it, coasting after it.
    #[must_use]
    pub fn new(plan: &Plan) -> Rays {
        let zero = Line {
            origin: ArrayTime::ZERO,
            length: ArrayTime::LIMIT,
            from_m_s2: 0.0,
            to_m_s2: 0.0,
        };
        let before = -ArrayTime::LIMIT.attoseconds();
        let mut stretches = vec![Phase {
            start: ArrayTime::from_attoseconds(before),
            end: ArrayTime::ZERO,
            line: zero,
        }];
        let far = ArrayTime::from_attoseconds(i128::MAX);
        let coast = Phase { start: plan.end(), end: far, line: zero };
        for phase in plan.phases().iter().chain([&coast]) {
            match stretches.last_mut() {
                Some(last) if is_one_line(&last.line, &phase.line) => last.end = phase.end,
                _ => stretches.push(*phase),
            }
        }
        Rays::from_stretches(&stretches, |at| plan.moment(at).rapidity)
    }

    /// One thrust, held from ever to ever: what a line would do if its thrust stayed.
    ///
    /// The rapidity is reckoned from array time zero.
    #[must_use]
    pub fn held(acceleration_m_s2: f64) -> Rays {
        let line = Line {
            origin: ArrayTime::ZERO,
            length: ArrayTime::LIMIT,
            from_m_s2: acceleration_m_s2,
            to_m_s2: acceleration_m_s2,
        };
        let stretch = Phase {
            start: ArrayTime::from_attoseconds(-ArrayTime::LIMIT.attoseconds()),
            end: ArrayTime::from_attoseconds(i128::MAX),
            line,
        };
        let push = Dd::new(acceleration_m_s2) / SPEED_OF_LIGHT_M_S;
        Rays::from_stretches(&[stretch], |at| push * at.seconds())
    }

    fn from_stretches(stretches: &[Phase], rapidity: impl Fn(ArrayTime) -> Dd) -> Rays {
        let mut pieces: Vec<Piece> = Vec::with_capacity(stretches.len());
        let mut steps = 0;
        for (index, stretch) in stretches.iter().enumerate() {
            if index > 0 {
                let before = &stretches[index - 1];
                let from = before.acceleration(before.end);
                let to = stretch.acceleration(stretch.start);
                let size = from.hi.abs().max(to.hi.abs());
                if (to - from).hi.abs() > SMALLEST_STEP * size {
                    steps += 1;
                }
            }
            let is_last = index + 1 == stretches.len();
            cut(stretch, is_last, index as u32, steps, &rapidity, &mut pieces);
        }
        add_null_coordinates(&mut pieces);
        let finite = pieces.len() - 1;
        let mut levels = vec![pieces[..finite].iter().map(Block::of).collect::<Vec<Block>>()];
        while let Some(last) = levels.last().filter(|level| level.len() >= 2) {
            let next = last.chunks_exact(2).map(|pair| pair[0].followed_by(&pair[1])).collect();
            levels.push(next);
        }
        Rays { pieces, levels }
    }

    pub(crate) fn pieces(&self) -> &[Piece] {
        &self.pieces
    }

    /// The place of a moment; before the domain, the negative offset from its start.
    #[inline]
    pub(crate) fn place(&self, at: ArrayTime) -> Place {
        let piece = self.pieces.partition_point(|piece| piece.start <= at).saturating_sub(1);
        let found = &self.pieces[piece];
        let room = self.pieces.get(piece + 1).map_or(ENDLESS, |next| next.start.seconds_since(at));
        Place { piece, offset: at.seconds_since(found.start), room }
    }

    pub(crate) fn start_of(&self, piece: usize) -> Place {
        Place { piece, offset: Dd::ZERO, room: self.pieces[piece].length }
    }

    /// The attosecond nearest to a place; `None` outside the domain.
    pub(crate) fn moment(&self, place: Place) -> Option<ArrayTime> {
        if place.piece == 0 && self.pieces.len() > 1 {
            // The start of the domain is 10¹¹ s away; the end of the rest is near.
            let next = self.pieces[1].start;
            return next.checked_sub(ArrayTime::nearest(place.room)?);
        }
        let start = self.pieces[place.piece].start;
        if place.piece == 0 {
            return ArrayTime::nearest(place.offset + start.seconds());
        }
        start.checked_add(ArrayTime::nearest(place.offset)?)
    }

    /// `α/c` at a place, 1/s.
    #[inline]
    pub(crate) fn push(&self, place: Place) -> Dd {
        let piece = &self.pieces[place.piece];
        if piece.slope.is_zero() {
            piece.push
        } else if place.offset < place.room {
            piece.push + piece.slope * place.offset
        } else {
            piece.end_push - piece.slope * place.room
        }
    }

    /// Rapidity gained since array time zero.
    pub(crate) fn rapidity(&self, place: Place) -> Dd {
        let piece = &self.pieces[place.piece];
        piece.rapidity + (piece.push + self.push(place)).scale(0.5) * place.offset
    }

    /// Follows a ray from a place until it meets a node that is `gap` seconds of light ahead
    /// of it and stands at `target` (both along the ray). `None` when it never does, which
    /// only a thrust without end can bring about.
    pub(crate) fn travel(
        &self,
        ray: Ray,
        from: Place,
        target: Dd,
        gap: Dd,
        drift: Option<Drift>,
    ) -> Option<Landing> {
        let sign = ray.sign();
        let mut index = from.piece;
        let first = &self.pieces[index];
        let push = self.push(from).scale(sign);
        let slope = first.slope.scale(sign);
        let room = from.room;
        let mut way = Way { target, gap, elapsed: Dd::ZERO, swing: Dd::ZERO, change: Dd::ZERO };
        if let Some(found) = way.finish(push, slope, room, drift) {
            return found.map(|last| way.landing(from, last));
        }
        let over = advance(push, slope, room);
        let swing = (push + first.end_push.scale(sign)).scale(0.5) * room;
        way.cross(room, swing, over.sum, over.change, Dd::ONE / (over.change + 1.0));
        index += 1;

        // Whole blocks, as large as the place allows, until the one that holds the end.
        let side = usize::from(ray == Ray::Aft);
        let mut level = 0;
        loop {
            let block = self.levels.get(level).and_then(|blocks| blocks.get(index >> level));
            let fits = index.trailing_zeros() as usize >= level;
            if let Some(block) = block.filter(|block| fits && block.is_usable) {
                let mut beyond = way;
                let growth = block.changes[1 - side] + 1.0;
                let swing = block.swing.scale(sign);
                beyond.cross(block.length, swing, block.sums[side], block.changes[side], growth);
                let moved = drift.map_or(0.0, |drift| drift(beyond.elapsed.hi).0);
                if !(beyond.gap + moved).is_negative() {
                    way = beyond;
                    index += 1 << level;
                    level += 1;
                    continue;
                }
            }
            if level > 0 {
                level -= 1;
                continue;
            }
            let piece = &self.pieces[index];
            let (push, slope) = (piece.push.scale(sign), piece.slope.scale(sign));
            match way.finish(push, slope, piece.length, drift) {
                Some(found) => return found.map(|last| way.landing(self.start_of(index), last)),
                // Rounding may disagree with the block by the last bit; the next piece has it.
                None => {
                    let over = advance(push, slope, piece.length);
                    let swing = piece.swing().scale(sign);
                    let growth = Dd::ONE / (over.change + 1.0);
                    way.cross(piece.length, swing, over.sum, over.change, growth);
                    index += 1;
                }
            }
        }
    }
}

fn is_one_line(first: &Line, second: &Line) -> bool {
    let is_hold = |line: &Line| line.from_m_s2 == line.to_m_s2;
    if is_hold(first) || is_hold(second) {
        return is_hold(first) && is_hold(second) && first.from_m_s2 == second.from_m_s2;
    }
    first == second
}

/// Cuts a stretch into pieces and appends them.
fn cut(
    stretch: &Phase,
    is_last: bool,
    line: u32,
    steps: u32,
    rapidity: &impl Fn(ArrayTime) -> Dd,
    pieces: &mut Vec<Piece>,
) {
    let push = |at: ArrayTime| stretch.acceleration(at) / SPEED_OF_LIGHT_M_S;
    let mut slope = Dd::ZERO;
    let mut edges = vec![stretch.start];
    if !stretch.is_hold() {
        let rise = Dd::difference(stretch.line.to_m_s2, stretch.line.from_m_s2);
        slope = rise / SPEED_OF_LIGHT_M_S / stretch.line.length.seconds();
        let zero = stretch
            .moment_of(Dd::ZERO)
            .and_then(ArrayTime::nearest)
            .map(|after| {
                ArrayTime::from_attoseconds(stretch.start.attoseconds() + after.attoseconds())
            })
            .filter(|&at| at > stretch.start && at < stretch.end);
        for end in zero.into_iter().chain([stretch.end]) {
            let start = *edges.last().expect("the start");
            let size = push(start).hi.abs().max(push(end).hi.abs());
            let whole = end.attoseconds() - start.attoseconds();
            let swing = size * end.seconds_since(start).hi;
            let count = ((swing / LARGEST_SWING).ceil().max(1.0) as i128).min(whole);
            let (part, rest) = (whole / count, whole % count);
            edges.extend((1..=count).map(|index| {
                ArrayTime::from_attoseconds(
                    start.attoseconds() + part * index + rest * index / count,
                )
            }));
        }
    } else {
        edges.push(stretch.end);
    }
    for pair in edges.windows(2) {
        let (start, end) = (pair[0], pair[1]);
        pieces.push(Piece {
            start,
            length: if is_last { ENDLESS } else { end.seconds_since(start) },
            push: push(start),
            end_push: push(end),
            slope,
            rapidity: rapidity(start),
            line,
            steps,
            null: [Dd::ZERO; 2],
        });
    }
}

/// Sums the null coordinates of the reference node; every term is positive.
fn add_null_coordinates(pieces: &mut [Piece]) {
    // The rest before the plan ends at array time zero or later, with a rapidity of zero;
    // a line under one endless thrust is never asked for them.
    let mut sums = [pieces[0].start.seconds().scale(LAUNCH_SCALE); 2];
    for index in 0..pieces.len() {
        pieces[index].null = sums;
        if index + 1 == pieces.len() {
            break;
        }
        let piece = pieces[index];
        for (side, sign) in [1.0, -1.0].into_iter().enumerate() {
            let factor = exp(-piece.rapidity.scale(sign)).scale(LAUNCH_SCALE);
            let over = advance(piece.push.scale(sign), piece.slope.scale(sign), piece.length);
            if piece.swing().hi * sign < -600.0 {
                // e^(−ψ) of the end alone would overflow; reckon from the end instead.
                let end = piece.rapidity + piece.swing();
                let end_factor = exp(-end.scale(sign)).scale(LAUNCH_SCALE);
                sums[side] = sums[side] + (factor - end_factor) / piece.push.scale(sign);
            } else {
                sums[side] = sums[side] + factor * over.sum;
            }
        }
    }
}
