//! The extremes of shift, shift rate and delay of one link over a stretch of the plan, from
//! which a receiver's tuning range and a time-transfer gate are set.
//!
//! All three are smooth functions of the emission between the moments at which a boundary of
//! the plan meets the emission or the reception. These moments are found first; then every
//! interval between two of them is sampled at both one-sided ends and inside, and the best
//! samples are refined by golden section.

use super::one_way::{End, Flight, NoFlight, later};
use super::rays::{Piece, Rays};
use crate::model::array_time::ArrayTime;
use crate::model::dd::Dd;

/// One extreme value and where it occurs.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Extreme {
    /// The value, in the unit of its quantity.
    pub value: f64,
    /// Emission of the signal that has it.
    pub emitted: ArrayTime,
    /// Its reception; `None` after the domain of array time.
    pub received: Option<ArrayTime>,
    /// Whether the value is the limit for emissions before that moment, at which something
    /// jumps.
    pub is_limit: bool,
}

/// The least and the greatest value of one quantity; the first occurrence where a value lasts.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Range {
    /// The least value.
    pub least: Extreme,
    /// The greatest value.
    pub greatest: Extreme,
}

/// The extremes of one link in one direction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Extremes {
    /// Received over emitted frequency, minus one.
    pub received_shift: Range,
    /// Its derivative by the receiver's clock, 1/s.
    pub shift_rate_per_s: Range,
    /// Flight in array time, s.
    pub flight_array_s: Range,
    /// Whether emissions were left out because the thrust steps while their signal is under
    /// way on a line that stretches.
    pub is_partial: bool,
    /// Whether the plan has so many pieces that only those were looked at in which the thrust,
    /// its slope or a change of its slope is among the most extreme.
    pub is_screened: bool,
}

/// Samples inside an interval, as shares of it: the nodes of Chebyshev (DLMF 3.5(v)).
const SHARES: [f64; 6] = [
    0.017_037_086_855_465_84,
    0.146_446_609_406_726_24,
    0.370_590_477_448_739_6,
    0.629_409_522_551_260_4,
    0.853_553_390_593_273_7,
    0.982_962_913_144_534_2,
];

/// Intervals whose best sample is refined, for each extreme.
const REFINED: usize = 4;

/// Steps of a golden section: an interval shrinks by 10⁻¹⁰, the value's error by its square.
const GOLDEN_STEPS: usize = 48;

/// Pieces of a plan up to which all of it is looked through.
const MOST_SEARCHED: usize = 10_000;

/// Pieces that are looked at for each thing that makes a piece extreme, either way.
const SCREENED: usize = 48;

const ATTOSECOND: ArrayTime = ArrayTime::from_attoseconds(1);

impl Rays {
    /// The extremes over emissions from `first` to `last`, both included.
    ///
    /// Values are as accurate as [`Rays::one_way`]; moments of extremes inside a ramp are good
    /// to the width over which the value does not change in its last digit.
    ///
    /// # Errors
    ///
    /// [`NoFlight`] when no signal of the stretch has a flight, or a node meets the horizon.
    pub fn extremes(
        &self,
        from: End,
        to: End,
        first: ArrayTime,
        last: ArrayTime,
    ) -> Result<Extremes, NoFlight> {
        let search = Search { rays: self, from, to };
        let moments = search.moments(first, last)?;
        let mut found = Found::default();
        for pair in moments.windows(2) {
            search.interval(pair[0], pair[1], &mut found)?;
        }
        if let Some(sample) = search.sample(last, false, &mut found.is_partial)? {
            found.add(&[sample]);
        }
        search.refine(&mut found)?;
        found.extremes().ok_or(NoFlight::Step)
    }

    /// Whether the plan has so many pieces that [`Rays::extremes_over_plan`] looks only at
    /// those that may be extreme.
    #[must_use]
    pub fn is_screened(&self) -> bool {
        self.pieces().len() > MOST_SEARCHED
    }

    /// The extremes over the whole plan: emissions from the first whose signal is received in
    /// it to its end.
    ///
    /// # Errors
    ///
    /// As for [`Rays::extremes`].
    pub fn extremes_over_plan(&self, from: End, to: End) -> Result<Extremes, NoFlight> {
        let pieces = self.pieces();
        let Some(start) = pieces.get(1).map(|piece| piece.start) else {
            return self.extremes(from, to, ArrayTime::ZERO, ArrayTime::ZERO);
        };
        let search = Search { rays: self, from, to };
        let first = search.emission_received_at(start)?.unwrap_or(start);
        let end = pieces[pieces.len() - 1].start;
        let first = first.min(start);
        if pieces.len() <= MOST_SEARCHED {
            return self.extremes(from, to, first, end);
        }
        let mut found = Found { is_screened: true, ..Found::default() };
        for (begin, until) in search.runs(first, end)? {
            for pair in search.moments(begin, until)?.windows(2) {
                search.interval(pair[0], pair[1], &mut found)?;
            }
        }
        if let Some(sample) = search.sample(end, false, &mut found.is_partial)? {
            found.add(&[sample]);
        }
        search.refine(&mut found)?;
        found.extremes().ok_or(NoFlight::Step)
    }
}

/// The pieces in which something is most extreme, either way, in order: the thrust, its slope,
/// a change of its slope, and the speed at which ends that move part, in a piece and across
/// its start.
fn screened(pieces: &[Piece], from: &End<'_>, to: &End<'_>) -> Vec<usize> {
    let slope = |index: usize| pieces[index].slope.hi;
    let before = |index: usize| index.checked_sub(1).map_or(0.0, slope);
    let mut chosen = Vec::new();
    let mut choose = |score: &dyn Fn(usize) -> f64| {
        let scores: Vec<f64> = (0..pieces.len()).map(score).collect();
        for sign in SENSES {
            let mut order: Vec<u32> = (0..pieces.len() as u32).collect();
            let first = |a: &u32, b: &u32| {
                (sign * scores[*b as usize]).total_cmp(&(sign * scores[*a as usize]))
            };
            if order.len() > SCREENED {
                order.select_nth_unstable_by(SCREENED, first);
                order.truncate(SCREENED);
            }
            chosen.extend(order.into_iter().map(|index| index as usize));
        }
    };
    choose(&|index| pieces[index].push.hi);
    choose(&|index| pieces[index].end_push.hi);
    choose(&slope);
    choose(&|index| slope(index) - before(index));
    if from.moved.is_some() || to.moved.is_some() {
        choose(&|index| {
            let start = pieces[index].start;
            to.placed_at(start).1 - from.placed_at(start).1
        });
        choose(&|index| {
            let start = pieces[index].start;
            let left = start.checked_sub(ATTOSECOND).unwrap_or(start);
            to.placed_at(start).1 - from.placed_at(left).1
        });
    }
    chosen.sort_unstable();
    chosen.dedup();
    chosen
}

/// One emission and what became of it.
#[derive(Clone, Copy)]
struct Sample {
    emitted: ArrayTime,
    is_limit: bool,
    flight: Flight,
}

impl Sample {
    fn values(&self) -> [Dd; 3] {
        [
            Dd::new(self.flight.received_shift),
            Dd::new(self.flight.shift_rate_per_s),
            self.flight.course.elapsed,
        ]
    }
}

/// A sample that beats its neighbours, with the moments of both.
#[derive(Clone, Copy)]
struct Candidate {
    value: Dd,
    low: ArrayTime,
    high: ArrayTime,
}

/// The best samples so far: for each quantity the least and the greatest, and candidates.
#[derive(Default)]
struct Found {
    best: [[Option<Sample>; 2]; 3],
    candidates: [[Vec<Candidate>; 2]; 3],
    is_partial: bool,
    is_screened: bool,
}

/// −1 for the least value, +1 for the greatest.
const SENSES: [f64; 2] = [-1.0, 1.0];

impl Found {
    fn add(&mut self, samples: &[Sample]) {
        for (quantity, best) in self.best.iter_mut().enumerate() {
            for (sense, best) in SENSES.into_iter().zip(best) {
                for sample in samples {
                    let value = sample.values()[quantity].scale(sense);
                    if best.is_none_or(|best| value > best.values()[quantity].scale(sense)) {
                        *best = Some(*sample);
                    }
                }
            }
        }
    }

    /// Remembers the best sample of an interval, with its neighbours.
    fn propose(&mut self, samples: &[Sample]) {
        for quantity in 0..3 {
            for (index, sense) in SENSES.into_iter().enumerate() {
                let value = |sample: &Sample| sample.values()[quantity].scale(sense);
                let mut at = 0;
                for (place, sample) in samples.iter().enumerate() {
                    if value(sample) > value(&samples[at]) {
                        at = place;
                    }
                }
                let candidate = Candidate {
                    value: value(&samples[at]),
                    low: samples[at.saturating_sub(1)].emitted,
                    high: samples[(at + 1).min(samples.len() - 1)].emitted,
                };
                // The best few are kept, the first of equals before the later ones: a history
                // has a million intervals.
                let kept = &mut self.candidates[quantity][index];
                let place = kept.partition_point(|other| other.value >= candidate.value);
                if place < REFINED {
                    kept.truncate(REFINED - 1);
                    kept.insert(place, candidate);
                }
            }
        }
    }

    fn extremes(&self) -> Option<Extremes> {
        let range = |quantity: usize| {
            let extreme = |index: usize| {
                self.best[quantity][index].map(|sample| Extreme {
                    value: sample.values()[quantity].to_f64(),
                    emitted: sample.emitted,
                    received: sample.flight.received,
                    is_limit: sample.is_limit,
                })
            };
            Some(Range { least: extreme(0)?, greatest: extreme(1)? })
        };
        Some(Extremes {
            received_shift: range(0)?,
            shift_rate_per_s: range(1)?,
            flight_array_s: range(2)?,
            is_partial: self.is_partial,
            is_screened: self.is_screened,
        })
    }
}

struct Search<'a> {
    rays: &'a Rays,
    from: End<'a>,
    to: End<'a>,
}

impl Search<'_> {
    /// The stretches of emissions that leave or arrive in pieces in which something is most
    /// extreme, from the start of the plan to its end.
    fn runs(
        &self,
        first: ArrayTime,
        last: ArrayTime,
    ) -> Result<Vec<(ArrayTime, ArrayTime)>, NoFlight> {
        let pieces = self.rays.pieces();
        let start = |index: usize| pieces.get(index).map_or(last, |piece| piece.start);
        let mut runs: Vec<(ArrayTime, ArrayTime)> = Vec::new();
        let ends = [1, pieces.len() - 1];
        for index in screened(pieces, &self.from, &self.to).into_iter().chain(ends) {
            let arrives = match index {
                0 => None,
                _ => self.emission_received_at(start(index))?,
            };
            // Where that cannot be told, from the piece before.
            let begin = arrives.unwrap_or(start(index.saturating_sub(1)));
            let begin = begin.min(start(index)).max(first);
            let until = start(index + 1).min(last);
            if begin < until {
                runs.push((begin, until));
            }
        }
        runs.sort_unstable();
        let mut joined: Vec<(ArrayTime, ArrayTime)> = Vec::new();
        for run in runs {
            match joined.last_mut() {
                Some(last) if run.0 <= last.1 => last.1 = last.1.max(run.1),
                _ => joined.push(run),
            }
        }
        Ok(joined)
    }

    /// The moments between which everything is smooth, with both ends of the stretch.
    fn moments(&self, first: ArrayTime, last: ArrayTime) -> Result<Vec<ArrayTime>, NoFlight> {
        let mut moments = vec![first, last];
        let pieces = self.rays.pieces();
        // Nothing sent before the first moment or after the last is of interest, and what is
        // sent at the last arrives at a moment that bounds the boundaries.
        let from = pieces.partition_point(|piece| piece.start < first).saturating_sub(1);
        let arrival = match self.rays.one_way(self.from, self.to, last) {
            Ok(flight) => flight.received.unwrap_or(ArrayTime::LIMIT),
            Err(NoFlight::Step) => ArrayTime::LIMIT,
            Err(why) => return Err(why),
        };
        let beyond = pieces.partition_point(|piece| piece.start <= arrival.max(last));
        for pair in pieces[from..beyond.max(from)].windows(2) {
            if pair[0].line == pair[1].line {
                continue;
            }
            let boundary = pair[1].start;
            moments.push(boundary);
            moments.extend(self.emission_received_at(boundary)?);
        }
        moments.retain(|&at| at >= first && at <= last);
        moments.sort_unstable();
        moments.dedup();
        Ok(moments)
    }

    /// The first emission, to the attosecond, that is received at a moment or after it; `None`
    /// when it cannot be told.
    ///
    /// Reception rises with emission, at the rate `N_i/(N_j (1 + shift))`.
    fn emission_received_at(&self, moment: ArrayTime) -> Result<Option<ArrayTime>, NoFlight> {
        let late = |emitted: ArrayTime| -> Result<Option<Dd>, NoFlight> {
            match self.rays.one_way(self.from, self.to, emitted) {
                Ok(flight) => Ok(Some(flight.course.elapsed - moment.seconds_since(emitted))),
                Err(NoFlight::Step) => Ok(None),
                Err(why) => Err(why),
            }
        };
        // A bracket: at the moment itself the signal arrives late; go back until it does not.
        let mut high = moment;
        let Some(mut flight_s) = late(high)? else {
            return Ok(None);
        };
        let mut low = loop {
            let Some(step) = ArrayTime::nearest(flight_s.scale(1.5) + 1e-18) else {
                return Ok(None);
            };
            let Some(low) = high.checked_sub(step) else {
                return Ok(None);
            };
            match late(low)? {
                Some(lateness) if !lateness.is_negative() && !lateness.is_zero() => {
                    high = low;
                    flight_s = flight_s.scale(2.0);
                }
                Some(_) => break low,
                None => return Ok(None),
            }
        };
        let mut guess = None;
        while high.attoseconds() - low.attoseconds() > 1 {
            let middle = low.attoseconds() + (high.attoseconds() - low.attoseconds()) / 2;
            let at = guess.take().filter(|&at| at > low && at < high);
            let at = at.unwrap_or(ArrayTime::from_attoseconds(middle));
            let Some(lateness) = late(at)? else {
                return Ok(None);
            };
            if lateness.is_negative() {
                low = at
            } else {
                high = at
            }
            // The lateness itself is nearly the step, since receptions run almost with the
            // emissions; one attosecond to the far side closes the bracket.
            let step = ArrayTime::nearest(lateness).unwrap_or_default().attoseconds();
            let width = high.attoseconds() - low.attoseconds();
            if step.abs() * 2 < width {
                let aside = if lateness.is_negative() { 1 } else { -1 };
                guess = Some(ArrayTime::from_attoseconds(at.attoseconds() - step + aside));
            }
        }
        Ok(Some(high))
    }

    fn sample(
        &self,
        emitted: ArrayTime,
        is_limit: bool,
        is_partial: &mut bool,
    ) -> Result<Option<Sample>, NoFlight> {
        match self.rays.one_way(self.from, self.to, emitted) {
            Ok(flight) => {
                // A limit is taken one attosecond before its moment and told as that moment.
                let shown = if is_limit {
                    ArrayTime::from_attoseconds(emitted.attoseconds() + 1)
                } else {
                    emitted
                };
                Ok(Some(Sample { emitted: shown, is_limit, flight }))
            }
            Err(NoFlight::Step) => {
                *is_partial = true;
                Ok(None)
            }
            Err(why) => Err(why),
        }
    }

    /// Samples the emissions from one moment up to, not including, the next.
    fn interval(
        &self,
        start: ArrayTime,
        end: ArrayTime,
        found: &mut Found,
    ) -> Result<(), NoFlight> {
        let is_partial = &mut found.is_partial;
        let first = self.sample(start, false, is_partial)?;
        let before = ArrayTime::from_attoseconds(end.attoseconds() - ATTOSECOND.attoseconds());
        let last = if before > start { self.sample(before, true, is_partial)? } else { None };
        let piece = |sample: &Option<Sample>| {
            let course = sample.as_ref()?.flight.course;
            let piece = course.departure.piece;
            let is_hold = self.rays.pieces()[piece].slope.is_zero();
            (piece == course.arrival.piece && is_hold).then_some(piece)
        };
        let is_moving = self.from.moved.is_some() || self.to.moved.is_some();
        if !is_moving && piece(&first).is_some() && piece(&first) == piece(&last) {
            found.add(&first.into_iter().collect::<Vec<_>>());
            return Ok(());
        }
        let width = end.seconds_since(start);
        let mut samples: Vec<Sample> = first.into_iter().collect();
        for share in SHARES {
            let at = later(start, (width * share).hi);
            if at > start && at < before {
                samples.extend(self.sample(at, false, is_partial)?);
            }
        }
        samples.extend(last);
        if !samples.is_empty() {
            found.add(&samples);
            found.propose(&samples);
        }
        Ok(())
    }

    /// Golden section around the most promising samples.
    fn refine(&self, found: &mut Found) -> Result<(), NoFlight> {
        let ratio = 0.5 * (libm::sqrt(5.0) - 1.0);
        for quantity in 0..3 {
            for (index, sense) in SENSES.into_iter().enumerate() {
                let candidates = std::mem::take(&mut found.candidates[quantity][index]);
                for candidate in &candidates {
                    let origin = candidate.low;
                    let (mut low, mut high) = (0.0, candidate.high.seconds_since(origin).hi);
                    for _ in 0..GOLDEN_STEPS {
                        let width = high - low;
                        let inner = [high - ratio * width, low + ratio * width];
                        let mut values = [None; 2];
                        for (at, value) in inner.into_iter().zip(&mut values) {
                            let at = later(origin, at);
                            if at <= candidate.low || at >= candidate.high {
                                continue;
                            }
                            let partial = &mut found.is_partial;
                            if let Some(sample) = self.sample(at, false, partial)? {
                                *value = Some(sample.values()[quantity].scale(sense));
                                found.add(&[sample]);
                            }
                        }
                        match values {
                            [Some(left), Some(right)] if left > right => high = inner[1],
                            [Some(_), Some(_)] => low = inner[0],
                            _ => break,
                        }
                    }
                }
            }
        }
        Ok(())
    }
}
