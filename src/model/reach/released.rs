//! A node that was let go: it coasts on the tangent of its worldline while the line goes on.
//!
//! In the frame in which the released node rests, with `ψ` the rapidity of the line in that
//! frame and times counted from the release, a node at `ℓ_j` (light time; the released one was
//! at `ℓ_h`) is at
//!
//! ```text
//! z_j = (ℓ_j − ℓ_h) + ∫ N_j sinh ψ dτ,      t_j = ∫ N_j cosh ψ dτ
//! ```
//!
//! so it meets the released node where `z_j` is zero, at own time `t_j`, with closing speed
//! `c tanh |ψ|`. Between zeros of `ψ`, `z_j` only rises or only falls, so no meeting is missed.
//! Light needs nothing new: a tick of own time `s` runs as if it had left the point `s` of light
//! time behind the node at the moment of the release.
//!
//! `release` frees one node alone; the others stand where they stood at the release, and the
//! recoil of a stretched tether is left out.

use super::station::Absent;
use crate::model::array_time::ArrayTime;
use crate::model::constants::SPEED_OF_LIGHT_M_S;
use crate::model::dd::Dd;
use crate::model::links::rays::{ENDLESS, Landing, Place, Ray, Rays};
use crate::model::links::series::exp;
use crate::model::links::way::{Drift, advance};
use crate::model::links::{End, NoFlight, later};

/// Rapidity between line and released node up to which meetings are looked for.
const LARGEST_RAPIDITY: f64 = 690.0;

/// The line and a released node meet.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Pass {
    /// Own time of the released node since the release, s.
    pub own_time_s: f64,
    /// Array time since the release, s.
    pub since_release_s: f64,
    /// Array time, to the nearest attosecond.
    pub array_time: Result<ArrayTime, Absent>,
    /// Relative speed, m/s: a collision hazard.
    pub closing_speed_m_s: f64,
}

/// All meetings with one node.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Passes {
    /// In order of time.
    pub passes: Vec<Pass>,
    /// Whether the search ended early because the relative rapidity passed 690.
    pub is_cut: bool,
}

/// A meeting while the thrust of the release is held, in closed form.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct HeldPass {
    /// Own time of the released node since the release, s: `sqrt(X² − X'²)/c`.
    pub own_time_s: f64,
    /// Array time since the release, s: `(c/|α|) arcosh(|X|/|X'|)`.
    pub since_release_s: f64,
    /// Relative speed, m/s: `c sqrt(X² − X'²)/|X|`.
    pub closing_speed_m_s: f64,
}

/// A tick of the released node as a node of the line hears it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Heard {
    /// Which way the signal runs.
    pub ray: Ray,
    /// Own time of the released node at the tick, s since the release.
    pub own_time_s: f64,
    /// Array time of reception since the release, s.
    pub since_release_s: f64,
    /// Array time of reception, to the nearest attosecond.
    pub received: Result<ArrayTime, Absent>,
    /// Logarithm of heard over own frequency.
    pub ln_ratio: f64,
    /// Heard over own frequency, minus one.
    pub received_shift: f64,
}

/// The line in the frame of the released node, at one place.
#[derive(Clone, Copy, Debug)]
struct Mark {
    place: Place,
    /// Array time since the release, s.
    since: Dd,
    /// `ψ`.
    rapidity: Dd,
    /// `∫ e^(∓ψ) dτ` since the release, s.
    sums: [Dd; 2],
}

/// A node released at a moment of the plan.
#[derive(Clone, Debug)]
pub struct Released<'r> {
    rays: &'r Rays,
    at: ArrayTime,
    place: Place,
    /// Position at the release, light time.
    position: Dd,
    /// `α/c` and `N` at the release.
    push: Dd,
    rate: Dd,
    /// Rapidity of the node along the line at the release.
    tilt: f64,
    /// The line at the release, at every start of a piece after it, and where `ψ` is zero.
    marks: Vec<Mark>,
    is_cut: bool,
}

impl Rays {
    /// Lets a node go at a moment of array time.
    ///
    /// # Errors
    ///
    /// [`NoFlight::Horizon`] when the node is at or behind the horizon.
    pub fn release<'r>(&'r self, node: End, at: ArrayTime) -> Result<Released<'r>, NoFlight> {
        let place = self.place(at);
        let moved = node.moved_at(at);
        let position = node.light_time(&moved);
        let push = self.push(place);
        let rate = push * position + 1.0;
        if rate.is_negative() || rate.is_zero() {
            return Err(NoFlight::Horizon);
        }
        let tilt = self.tilt(node, place, &moved);
        let mut released = Released {
            rays: self,
            at,
            place,
            position,
            push,
            rate,
            tilt,
            marks: Vec::new(),
            is_cut: false,
        };
        released.mark();
        Ok(released)
    }
}

impl Released<'_> {
    /// Fills in the marks.
    fn mark(&mut self) {
        let mut here = Mark {
            place: self.place,
            since: Dd::ZERO,
            rapidity: Dd::new(-self.tilt),
            sums: [Dd::ZERO; 2],
        };
        self.marks.push(here);
        let rays = self.rays;
        let last = rays.pieces().len() - 1;
        for (index, piece) in rays.pieces().iter().enumerate().take(last).skip(self.place.piece) {
            let room = here.place.room;
            let turn = zero_of(here.rapidity, rays.push(here.place), piece.slope, room);
            if let Some(seconds) = turn {
                let mut mark = self.later(&here, seconds);
                mark.rapidity = Dd::ZERO;
                self.marks.push(mark);
            }
            let mut next = self.later(&here, room);
            next.place = rays.start_of(index + 1);
            if next.rapidity.hi.abs() > LARGEST_RAPIDITY {
                self.is_cut = true;
                return;
            }
            self.marks.push(next);
            here = next;
        }
        // In the endless stretch the line can come to rest once more only under a thrust.
        let push = rays.push(here.place);
        if let Some(seconds) = zero_of(here.rapidity, push, Dd::ZERO, ENDLESS) {
            let mut mark = self.later(&here, seconds);
            mark.rapidity = Dd::ZERO;
            self.marks.push(mark);
        }
    }

    /// The line some seconds after a mark, in the same piece.
    fn later(&self, mark: &Mark, seconds: Dd) -> Mark {
        let piece = &self.rays.pieces()[mark.place.piece];
        let push = self.rays.push(mark.place);
        let mut sums = mark.sums;
        for (side, sign) in [1.0, -1.0].into_iter().enumerate() {
            let over = advance(push.scale(sign), piece.slope.scale(sign), seconds);
            sums[side] = sums[side] + exp(-mark.rapidity.scale(sign)) * over.sum;
        }
        let gained = (push + piece.slope * seconds.scale(0.5)) * seconds;
        Mark {
            place: mark.place.after(seconds),
            since: mark.since + seconds,
            rapidity: mark.rapidity + gained,
            sums,
        }
    }

    /// Position of a node in the frame of the released one, light time, and own time there.
    fn event(&self, mark: &Mark, position: Dd) -> (Dd, Dd) {
        let [u, v] = mark.sums;
        let apart = position - self.position;
        let (grow, fall) = (exp(mark.rapidity), exp(-mark.rapidity));
        let sinh = sinh(mark.rapidity, grow, fall);
        let tilt = self.tilt;
        let (tilt_cosh, tilt_sinh) = (libm::cosh(tilt), libm::sinh(tilt));
        // cosh ψ − cosh η without its cancellation.
        let spread = (sinh_half(mark.rapidity + tilt) * sinh_half(mark.rapidity - tilt)).scale(2.0);
        let z = apart * tilt_cosh + (v - u).scale(0.5) + position * spread;
        let t = (u + v).scale(0.5) + position * (sinh + tilt_sinh) - apart * tilt_sinh;
        (z, t)
    }

    /// Own time of the last tick that the line can hear while the thrust of the release is
    /// held, s: `|X|/c`; `None` without thrust, when every tick is heard. Within 4 u of itself.
    #[must_use]
    pub fn last_tick_s(&self) -> Option<f64> {
        (!self.push.is_zero()).then(|| (self.rate / self.push.abs()).to_f64())
    }

    /// The meeting with a node at a fixed position while the thrust of the release is held;
    /// `None` for nodes it does not fall past. Within 8 u of themselves.
    #[must_use]
    pub fn held_pass(&self, node_m: impl Into<Dd>) -> Option<HeldPass> {
        let position = node_m.into() / SPEED_OF_LIGHT_M_S;
        // It falls aft under thrust towards fore.
        let size = self.push.abs();
        let fall = if self.push.is_negative() {
            position - self.position
        } else {
            self.position - position
        };
        if self.push.is_zero() || fall.is_negative() || fall.is_zero() {
            return None;
        }
        let node_rate = self.push * position + 1.0;
        if node_rate.is_negative() || node_rate.is_zero() {
            return None;
        }
        // (X − X')(X + X') times (α/c²)².
        let product = fall * size * (self.rate + node_rate);
        let root = libm::sqrt(product.to_f64());
        Some(HeldPass {
            own_time_s: root / size.to_f64(),
            since_release_s: libm::asinh(root / node_rate.to_f64()) / size.to_f64(),
            closing_speed_m_s: SPEED_OF_LIGHT_M_S * (root / self.rate.to_f64()),
        })
    }

    /// Heard over own frequency, minus one, of the tick at an own time, at a node at a fixed
    /// position while the thrust of the release is held: `(|X| ∓ c s)/|X_j| − 1`. `None` when
    /// the tick is never heard.
    #[must_use]
    pub fn held_shift(&self, own_time_s: f64, node_m: impl Into<Dd>) -> Option<f64> {
        let node_m = node_m.into();
        let position = node_m / SPEED_OF_LIGHT_M_S;
        let node_rate = self.push * position + 1.0;
        if own_time_s < 0.0 || node_rate.is_negative() || node_rate.is_zero() {
            return None;
        }
        let lag = self.push.abs() * own_time_s;
        let lead = self.push * (self.position - position);
        // A node that it has not passed yet is approached, every other one is left.
        let is_ahead = self.held_pass(node_m).is_some_and(|pass| own_time_s < pass.own_time_s);
        if is_ahead {
            return Some(((lead + lag) / node_rate).to_f64());
        }
        let rest = self.rate - lag;
        if rest.is_negative() || rest.is_zero() {
            return None;
        }
        Some(((lead - lag) / node_rate).to_f64())
    }

    /// The meetings with a node through the plan as filed and the coast after it.
    ///
    /// Own and array times are good to 1e-14 of the sum of the moduli of the terms of `z_j`
    /// over its slope. A node that stood beside the released one is met again only if the line
    /// comes back.
    #[must_use]
    pub fn passes(&self, node: End) -> Passes {
        let position = |mark: &Mark| node.light_time(&node.moved_at(later(self.at, mark.since.hi)));
        let mut found = Passes { passes: Vec::new(), is_cut: self.is_cut };
        let mut before = self.event(&self.marks[0], position(&self.marks[0])).0;
        for (index, mark) in self.marks.iter().enumerate() {
            let next = self.marks.get(index + 1);
            let after = match next {
                Some(next) => self.event(next, position(next)).0,
                None if self.is_cut => break,
                None => match self.far_position(mark, position(mark)) {
                    Some(far) => far,
                    None => break,
                },
            };
            let is_crossed =
                (before.hi < 0.0 && after.hi >= 0.0) || (before.hi > 0.0 && after.hi <= 0.0);
            if is_crossed {
                let room = next.map_or(f64::INFINITY, |next| (next.since - mark.since).hi);
                found.passes.push(self.meeting(mark, room, node));
            }
            if !after.is_zero() {
                before = after;
            }
        }
        found
    }

    /// The sign of `z_j` in the far future, as a number; `None` when it tends to a constant.
    fn far_position(&self, mark: &Mark, position: Dd) -> Option<Dd> {
        let push = self.rays.push(mark.place);
        let trend = if push.is_zero() { mark.rapidity } else { push };
        if trend.is_zero() {
            return None;
        }
        let rate = push * position + 1.0;
        (!rate.is_negative()).then(|| Dd::new(trend.hi.signum()))
    }

    /// The one meeting between a mark and a number of seconds later.
    fn meeting(&self, mark: &Mark, room: f64, node: End) -> Pass {
        let push = self.rays.push(mark.place);
        let slope = self.rays.pieces()[mark.place.piece].slope;
        let moved = |mark: &Mark| node.moved_at(later(self.at, mark.since.hi));
        let position = node.light_time(&moved(mark));
        let at_start = self.event(mark, position).0;
        let is_rising = at_start.is_negative();
        let (mut low, mut high) = (0.0, room);
        let rate = (push * position + 1.0).hi;
        // As if the acceleration stayed and nothing moved fast: z + N (ψ t + a t²/2) = 0.
        let (linear, gap) = (mark.rapidity.hi.abs(), at_start.hi.abs() / rate);
        let bend = push.hi.abs();
        let mut seconds =
            2.0 * gap / (libm::sinh(linear) + libm::sqrt(linear * linear + 2.0 * bend * gap));
        if !(seconds > 0.0 && seconds < high) {
            seconds = if high.is_finite() { 0.5 * high } else { 1.0 };
        }
        let mut reached = *mark;
        for _ in 0..400 {
            reached = self.later(mark, Dd::new(seconds));
            let position = node.light_time(&moved(&reached));
            let z = self.event(&reached, position).0;
            if z.hi.is_nan() {
                high = seconds;
                seconds = 0.5 * (low + high);
                continue;
            }
            if z.is_negative() == is_rising {
                low = seconds
            } else {
                high = seconds
            }
            let here = push.hi + slope.hi * seconds;
            let speed = (1.0 + here * position.hi) * libm::sinh(reached.rapidity.hi);
            let mut next = seconds - z.hi / speed;
            if !(next > low && next < high) {
                next = if high.is_finite() { 0.5 * (low + high) } else { 4.0 * seconds };
            }
            let moved = (next - seconds).abs();
            seconds = next;
            if moved <= 4e-16 * seconds || z.is_zero() {
                reached = self.later(mark, Dd::new(seconds));
                break;
            }
        }
        let now = moved(&reached);
        let own_time = self.event(&reached, node.light_time(&now)).1;
        let rapidity = reached.rapidity.to_f64() + self.rays.tilt(node, reached.place, &now);
        Pass {
            own_time_s: own_time.to_f64(),
            since_release_s: reached.since.to_f64(),
            array_time: self.moment(reached.since),
            closing_speed_m_s: SPEED_OF_LIGHT_M_S * libm::tanh(rapidity.abs()),
        }
    }

    fn moment(&self, since: Dd) -> Result<ArrayTime, Absent> {
        ArrayTime::nearest(since)
            .and_then(|since| self.at.checked_add(since))
            .ok_or(Absent::OutsideDomain)
    }

    /// The tick at an own time as a node hears it through the plan as filed.
    ///
    /// The reception is good to 1e-14 of itself, the shift to 1e-14 of `expm1 ∫|α|dτ/c`.
    ///
    /// # Errors
    ///
    /// [`NoFlight::Outrun`] when the thrust never ends and the tick is never heard,
    /// [`NoFlight::Horizon`] for a node behind the horizon.
    pub fn heard(&self, own_time_s: f64, node: End) -> Result<Heard, NoFlight> {
        let moved = node.moved_at(self.at);
        let position = node.light_time(&moved);
        let rate = self.push * position + 1.0;
        if rate.is_negative() || rate.is_zero() {
            return Err(NoFlight::Horizon);
        }
        let fore = self.tick(Ray::Fore, own_time_s, node);
        let aft = self.tick(Ray::Aft, own_time_s, node);
        // Of the two rays through the tick that meet the node, the later one was sent by it.
        let (ray, landing) = match (fore, aft) {
            (Tick::Never, _) => return Err(NoFlight::Outrun),
            (_, Tick::Never) => return Err(NoFlight::Outrun),
            (Tick::At(fore), Tick::At(aft)) if aft.elapsed > fore.elapsed => (Ray::Aft, aft),
            (Tick::Before, Tick::At(aft)) => (Ray::Aft, aft),
            (Tick::At(fore), _) => (Ray::Fore, fore),
            (Tick::Before, Tick::Before) => return Err(NoFlight::Outrun),
        };
        let now = node.moved_at(later(self.at, landing.elapsed.hi));
        let turn = ray.sign() * (self.rays.tilt(node, landing.place, &now) - self.tilt);
        let (ln_ratio, received_shift) = if turn == 0.0 {
            (-landing.swing.to_f64(), landing.change.to_f64())
        } else {
            let ln_ratio = -(landing.swing + turn).to_f64();
            (ln_ratio, libm::expm1(ln_ratio))
        };
        Ok(Heard {
            ray,
            own_time_s,
            since_release_s: landing.elapsed.to_f64(),
            received: self.moment(landing.elapsed),
            ln_ratio,
            received_shift,
        })
    }

    /// Where one of the two rays through a tick meets a node.
    fn tick(&self, ray: Ray, own_time_s: f64, node: End) -> Tick {
        let sign = ray.sign();
        let origin = node.moved_at(self.at);
        let position = node.light_time(&origin);
        let apart = (position - self.position).scale(sign);
        // The node's own rapidity along the line tilts the clock against the line's.
        let behind = if self.tilt == 0.0 {
            Dd::new(own_time_s)
        } else {
            exp(Dd::new(-sign * self.tilt)) * own_time_s
        };
        let gap = apart + behind;
        if gap.is_negative() {
            return Tick::Before;
        }
        let drift = |elapsed: f64| {
            let now = node.moved_at(later(self.at, elapsed));
            let moved = now.displacement_m - origin.displacement_m;
            (sign * moved / SPEED_OF_LIGHT_M_S, sign * now.velocity_m_s / SPEED_OF_LIGHT_M_S)
        };
        let drift: Option<Drift> = if node.moved.is_some() { Some(&drift) } else { None };
        match self.rays.travel(ray, self.place, position.scale(sign), gap, drift) {
            Some(landing) => Tick::At(landing),
            None => Tick::Never,
        }
    }

    /// The own time of the tick that a node hears at an array time, s since the release; `None`
    /// while it still hears ticks from before the release.
    #[must_use]
    pub fn tick_heard_at(&self, node: End, at: ArrayTime) -> Option<f64> {
        if at < self.at {
            return None;
        }
        let since = at.seconds_since(self.at);
        let index = self.marks.partition_point(|mark| mark.since <= since) - 1;
        let mark = self.later(&self.marks[index], since - self.marks[index].since);
        let position = node.light_time(&node.moved_at(at));
        let (z, t) = self.event(&mark, position);
        // The past light cone of the event meets the rest node at t − |z|.
        let own_time = t - z.abs();
        (!own_time.is_negative()).then(|| own_time.to_f64())
    }
}

/// What becomes of one ray through a tick.
#[derive(Clone, Copy)]
enum Tick {
    At(Landing),
    Before,
    Never,
}

/// The seconds, above zero and below `room`, at which `ψ + a t + a' t²/2` is zero; between two
/// ends of a piece it has one zero at most.
fn zero_of(rapidity: Dd, push: Dd, slope: Dd, room: Dd) -> Option<Dd> {
    if rapidity.is_zero() {
        return None;
    }
    let at = |t: Dd| rapidity + (push + slope * t.scale(0.5)) * t;
    if slope.is_zero() {
        if push.is_zero() {
            return None;
        }
        let t = -rapidity / push;
        return (!t.is_negative() && t < room).then_some(t);
    }
    let end = at(room);
    if end.is_zero() || end.is_negative() == rapidity.is_negative() {
        return None;
    }
    let (mut low, mut high) = (0.0, room.hi);
    let mut t = Dd::new(0.5 * high);
    for _ in 0..200 {
        let value = at(t);
        if value.is_negative() == rapidity.is_negative() {
            low = t.hi
        } else {
            high = t.hi
        }
        let mut next = t - value.hi / (push + slope * t).hi;
        if !(next.hi > low && next.hi < high) {
            next = Dd::new(0.5 * (low + high));
        }
        let moved = (next - t).hi.abs();
        t = next;
        if moved <= 1e-16 * t.hi {
            break;
        }
    }
    Some(t)
}

/// `sinh x` from both exponentials, without their cancellation near zero.
fn sinh(x: Dd, grow: Dd, fall: Dd) -> Dd {
    if x.hi.abs() > 0.5 {
        return (grow - fall).scale(0.5);
    }
    let change = crate::model::links::series::exp_m1(x);
    (change + change / (change + 1.0)).scale(0.5)
}

/// `sinh(x/2)`.
fn sinh_half(x: Dd) -> Dd {
    let half = x.scale(0.5);
    sinh(half, exp(half), exp(-half))
}
