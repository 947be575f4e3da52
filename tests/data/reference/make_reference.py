#!/usr/bin/env python3
# This script makes every number in the CSV files beside it and needs Python 3.9 or later with
# mpmath 1.3.0.  Run `python3 tests/data/reference/make_reference.py` to write the files again,
# and `python3 tests/data/reference/make_reference.py --check` to make them in memory only,
# compare them byte for byte with the committed files, and leave with status 1 if any differs.
"""Reference values for the motion of a rigid line under a filed thrust plan.

Method
------
Everything starts from exact inputs: a position or an acceleration is the exact rational value of
its double, an array time is a whole number of attoseconds.

* Acceleration, rapidity, total rapidity (the integral of abs(alpha)/c), rate minus one, felt
  acceleration, horizon, redshift, clock offset, proper time and all columns of `pairs.csv` and
  `horizon.csv` are rational numbers.  They are computed with `fractions.Fraction`, so the residual
  rapidity after a burn and its brake is exact, and are rounded once, to 40 significant digits.
* Launch time and position come from a numerical integration of the reference node's worldline in
  the launch frame, dt = cosh(phi) dtau, dz = c sinh(phi) dtau: a Taylor method of unlimited order
  in fixed-point integers, the same for holds, ramps and coasts.  It uses no hyperbolic sine, no
  exponential and no closed form of a hyperbola.  A node then sits at ct + h sinh(phi),
  z + h cosh(phi).

Digits
------
A plan is worked with 50 + 0.87 abs(phi) + log10(c tau / 1 mm) digits, again with 40 more, and with
half as many again until the two runs agree to 42 digits in every launch value and scale.

Checks made before anything is written
--------------------------------------
* The integrated cosh and sinh of the rapidity agree with mpmath's exponential.
* The integrated worldline agrees with mpmath's `quad`, with `erfi`, and with the hyperbola of a
  hold.
* From the node's worldline alone, by numerical differentiation: the felt acceleration (rapidity
  per proper time) is alpha/N, and the integral of sqrt(dt^2 - dz^2/c^2) is tau + h phi/c.
* Two nodes keep their distance in the instantaneous rest frame of either (Born rigidity).
* Light sent from a node to the reference under held thrust, as null rays in the launch frame,
  arrives with wavelength ratio 1/N.

Files
-----
* `plans.csv`: one row a phase; the acceleration runs linearly between its two values.
* `cases.csv`: one row for each plan, node and moment.  A phase counts from its start up to, not
  including, its end; before the plan and from its end on the line coasts.  `kind` is `listed`,
  `edge`, `random` or `grid`.  Every node keeps N >= 1e-6 in the whole of its plan.  The two scale
  columns are abs(t) + abs(h sinh phi)/c and c * integral of abs(sinh phi) + abs(h) cosh phi.
  The horizon is empty without acceleration.  A launch value is empty, and so is its scale, when it
  exceeds the largest double; its scale alone may exceed that, where two huge terms cancel.
* `pairs.csv`: N_to/N_from - 1 and the difference of the two clock offsets.
* `horizon.csv`: whether the line is realisable with a node at that position, both one-sided limits
  of every boundary counted; if not, the first phase in which N <= 0 occurs (from 0) and the first
  moment at which N is zero or, where the thrust steps, below.

Coverage
--------
@COVERAGE@

Sources: Born, Ann. Phys. 335 (1909) 1; Rindler, Am. J. Phys. 34 (1966) 1174; Misner, Thorne &
Wheeler, Gravitation (1973), chapter 6.
"""

import math
import sys
from bisect import bisect_right
from fractions import Fraction
from pathlib import Path

from mpmath import mp, mpf

C = 299_792_458
C2 = C * C
ATTO = 10**18
YEAR_S = 31_557_600
LARGEST_DOUBLE = Fraction(sys.float_info.max)
SMALLEST_RATE = Fraction(1, 10**6)
LARGEST_RAPIDITY = 700
LONGEST_AS = 10**11 * ATTO


# Plans: exact arithmetic ---------------------------------------------------------------------


class Plan:
    """A thrust plan; `pieces` are (duration in attoseconds, first and last acceleration)."""

    def __init__(self, name, pieces):
        self.name, self.phases, self.prefix = name, [], []
        start, gained, total = 0, Fraction(0), Fraction(0)
        self.max_rapidity = Fraction(0)
        for duration, first, last in pieces:
            assert duration >= 1 and isinstance(duration, int), name
            first, last = float(first), float(last)
            assert all(a == 0.0 or 1e-12 <= abs(a) <= 1e6 for a in (first, last)), name
            self.phases.append((start, start + duration, first, last))
            # c*phi and c*Phi at the start of the phase.
            self.prefix.append((gained, total))
            start += duration
            piece = self._within(len(self.phases) - 1, Fraction(duration, ATTO))
            turn = self._turn(first, last, Fraction(duration, ATTO))
            if turn is not None:
                peak = gained + self._within(len(self.phases) - 1, turn)[0]
                self.max_rapidity = max(self.max_rapidity, abs(peak) / C)
            gained, total = gained + piece[0], total + piece[1]
            self.max_rapidity = max(self.max_rapidity, abs(gained) / C)
        self.prefix.append((gained, total))
        self.end_as = start
        assert self.end_as <= LONGEST_AS, name
        assert self.max_rapidity <= LARGEST_RAPIDITY, (name, float(self.max_rapidity))
        limits = [a for phase in self.phases for a in phase[2:]] + [0.0]
        self.highest, self.lowest = max(limits), min(limits)

    @staticmethod
    def _turn(first, last, duration):
        """The moment inside the phase at which the acceleration changes sign, if any."""
        first, last = Fraction(first), Fraction(last)
        return duration * first / (first - last) if first * last < 0 else None

    def _within(self, index, elapsed):
        """c*phi and c*Phi gained in the phase, `elapsed` seconds after its start."""
        start, end, first, last = self.phases[index]
        duration = Fraction(end - start, ATTO)
        slope = (Fraction(last) - Fraction(first)) / duration
        first = Fraction(first)
        gained = first * elapsed + slope * elapsed * elapsed / 2
        turn = self._turn(first, last, duration)
        if turn is None or elapsed <= turn:
            return gained, abs(gained)
        at_turn = first * turn / 2
        return gained, abs(at_turn) + abs(gained - at_turn)

    def phase_at(self, time):
        """The phase that counts at `time` (seconds); None before and after the plan."""
        time_as = time * ATTO
        if time_as < 0 or time_as >= self.end_as:
            return None
        return bisect_right([phase[0] for phase in self.phases], time_as) - 1

    def acceleration(self, time):
        index = self.phase_at(time)
        if index is None:
            return Fraction(0)
        start, end, first, last = self.phases[index]
        part = (time * ATTO - start) / (end - start)
        return Fraction(first) + (Fraction(last) - Fraction(first)) * part

    def slope(self, index):
        start, end, first, last = self.phases[index]
        return (Fraction(last) - Fraction(first)) * ATTO / (end - start)

    def rapidities(self, time):
        """phi and Phi at `time` seconds, exactly."""
        index = self.phase_at(time)
        if index is None:
            gained, total = self.prefix[-1] if time > 0 else (Fraction(0), Fraction(0))
        else:
            gained, total = self.prefix[index]
            piece = self._within(index, time - Fraction(self.phases[index][0], ATTO))
            gained, total = gained + piece[0], total + piece[1]
        return gained / C, total / C

    def smallest_rate(self, position):
        position = Fraction(position)
        return min(1 + Fraction(a) * position / C2 for a in (self.highest, self.lowest))

    def first_zero(self, position):
        """The first phase in which N <= 0 occurs and the first such moment; None if realisable."""
        position = Fraction(position)
        for index, (start, end, first, last) in enumerate(self.phases):
            rate_first = 1 + Fraction(first) * position / C2
            rate_last = 1 + Fraction(last) * position / C2
            if rate_first <= 0:
                return index, Fraction(start, ATTO)
            if rate_last <= 0:
                part = rate_first / (rate_first - rate_last)
                return index, (start + part * (end - start)) / ATTO
        return None

    def mirrored(self):
        pieces = [(end - start, -first, -last) for start, end, first, last in self.phases]
        return Plan(self.name + "_mirrored", pieces)


# The worldline of the reference node in the launch frame ----------------------------------------


def taylor_step(linear, quadratic, bits):
    """exp(linear x + quadratic x^2) at x = 1 and its integral over 0..1, all scaled by 2^bits.

    The coefficients obey (n+1) e[n+1] = linear e[n] + 2 quadratic e[n-1], which is the equation of
    motion y' = (d phi/d x) y written for a power series.
    """
    before, term = 0, 1 << bits
    value = integral = term
    order = 0
    while True:
        following = ((linear * term + 2 * quadratic * before) >> bits) // (order + 1)
        before, term, order = term, following, order + 1
        value += term
        integral += term // (order + 1)
        if abs(term) <= 4 and abs(before) <= 4 and order > 80:
            return value, integral
        if term == 0 and before == 0:
            return value, integral


class Worldline:
    """t = (A+ + A-)/2 and z = c (A+ - A-)/2, with A+- the integrals of exp(+-phi) over tau.

    A state is (time, exp(+phi), exp(-phi), A+, A-, integral of abs(sinh phi)), scaled by 2^bits.
    """

    # The largest change of rapidity in one Taylor step.  Larger steps lose guard bits, smaller
    # ones cost time.
    STEP = 32

    def __init__(self, plan, digits):
        self.plan, self.digits = plan, digits
        self.bits = int(digits * 3.3220) + 192
        one = 1 << self.bits
        self.states = [(Fraction(0), one, one, 0, 0, 0)]
        self.times = [Fraction(0)]
        stops = {Fraction(end, ATTO) for _, end, _, _ in plan.phases}
        for index in range(len(plan.phases)):
            stops.update(self._rapidity_zeros(index))
        self.stops = sorted(stops)

    def _rapidity_zeros(self, index):
        """Where phi changes sign inside a phase, so that abs(sinh phi) is smooth between stops."""
        start, end, first, _ = self.plan.phases[index]
        gained, first, slope = self.plan.prefix[index][0], Fraction(first), self.plan.slope(index)
        if slope == 0:
            roots = [-gained / first] if first != 0 else []
        else:
            square = first * first - 2 * slope * gained
            if square < 0:
                return []
            shift = 2 * self.bits
            whole = (square.numerator << (2 * shift)) // square.denominator
            root = Fraction(math.isqrt(whole), 1 << shift)
            roots = [(-first - root) / slope, (-first + root) / slope]
        duration = Fraction(end - start, ATTO)
        grid = 1 << (2 * self.bits)
        roots = [Fraction(math.floor(root * grid), grid) for root in roots]
        return [Fraction(start, ATTO) + root for root in roots if 0 < root < duration]

    def state(self, time):
        """The state at any exact moment, integrated from the latest known state before it."""
        if time <= 0:
            whole = self._scaled(time)
            return (time, 1 << self.bits, 1 << self.bits, whole, whole, 0)
        place = bisect_right(self.times, time) - 1
        state = self.states[place]
        while state[0] < time:
            stop = bisect_right(self.stops, state[0])
            until = min(time, self.stops[stop]) if stop < len(self.stops) else time
            state = self._advance(state, until)
            place += 1
            self.times.insert(place, state[0])
            self.states.insert(place, state)
        return state

    def _scaled(self, value):
        return (value.numerator << self.bits) // value.denominator

    def _advance(self, state, until):
        """Integrate inside one phase (or coast) from a state to the moment `until`."""
        time, plus, minus, sum_plus, sum_minus, sum_abs = state
        index = self.plan.phase_at(time)
        first = self.plan.acceleration(time)
        slope = Fraction(0) if index is None else self.plan.slope(index)
        whole = until - time
        peak = max(abs(first), abs(first + slope * whole))
        count = max(1, math.ceil(peak * whole / (C * self.STEP)))
        length = whole / count
        # Two sums over 2^bits and the length of the step, in one division.
        scale = length.denominator << self.bits
        for number in range(count):
            here = first + slope * length * number
            linear = self._scaled(here * length / C)
            quadratic = self._scaled(slope * length * length / (2 * C))
            value, integral = taylor_step(linear, quadratic, self.bits)
            gain_plus = plus * integral * length.numerator // scale
            plus = plus * value >> self.bits
            value, integral = taylor_step(-linear, -quadratic, self.bits)
            gain_minus = minus * integral * length.numerator // scale
            minus = minus * value >> self.bits
            sum_plus += gain_plus
            sum_minus += gain_minus
            sum_abs += abs(gain_plus - gain_minus) >> 1
        return (until, plus, minus, sum_plus, sum_minus, sum_abs)

    def _number(self, whole):
        return mp.ldexp(mpf(whole), -self.bits)

    def hyperbolic(self, time):
        """cosh(phi) and sinh(phi) as integrated."""
        _, plus, minus, _, _, _ = self.state(time)
        with mp.workprec(self.bits + 64 + max(plus.bit_length(), minus.bit_length()) - self.bits):
            return self._number(plus + minus) / 2, self._number(plus - minus) / 2

    def event(self, time, position=0.0):
        """Launch time in seconds and launch position in metres of a node, with their scales."""
        _, plus, minus, sum_plus, sum_minus, sum_abs = self.state(time)
        # The sums can be long integers when the rapidity is high; keep all of their bits.
        longest = max(plus, minus, abs(sum_plus), abs(sum_minus)).bit_length()
        with mp.workprec(longest + 128):
            cosh, sinh = self._number(plus + minus) / 2, self._number(plus - minus) / 2
            h, t = mpf(position), self._number(sum_plus + sum_minus) / 2
            z = C * self._number(sum_plus - sum_minus) / 2
            lift = h * sinh / C
            return (
                t + lift,
                abs(t) + abs(lift),
                z + h * cosh,
                C * self._number(sum_abs) + abs(h) * cosh,
            )


def digits_for(plan, longest_as):
    ratio = Fraction(C) * max(abs(longest_as), ATTO) / ATTO * 1000
    return 50 + math.ceil(0.87 * float(plan.max_rapidity)) + len(str(int(ratio)))


def launch_values(plan, positions, moments):
    """Launch values of every node at every moment, at two precisions that agree."""
    digits = digits_for(plan, max(abs(moment) for moment in moments))
    while True:
        coarse, fine = Worldline(plan, digits), Worldline(plan, digits + 40)
        values, agreed = {}, True
        for moment in sorted(moments):
            time = Fraction(moment, ATTO)
            for position in positions:
                low, high = coarse.event(time, position), fine.event(time, position)
                with mp.workdps(60):
                    agreed &= all(abs(a - b) <= abs(b) * mpf(10) ** -42 for a, b in zip(low, high))
                values[position, moment] = high
        if agreed:
            break
        digits += digits // 2
        assert digits < 20_000, plan.name
    check_exponential(fine, [Fraction(moment, ATTO) for moment in moments])
    return values


# Checks from first principles ---------------------------------------------------------------------


def close(wanted, got, digits, what, least_scale=0):
    scale = max(abs(wanted), abs(got), least_scale)
    if scale != 0 and abs(wanted - got) > scale * mpf(10) ** -digits:
        raise AssertionError(f"{what}: {mp.nstr(wanted, 30)} against {mp.nstr(got, 30)}")


def number(fraction):
    return mpf(fraction.numerator) / fraction.denominator


def check_exponential(line, times):
    """The integrated cosh and sinh agree with those of the exact rapidity."""
    for time in times:
        cosh, sinh = line.hyperbolic(time)
        with mp.workdps(80):
            phi = number(line.plan.rapidities(time)[0])
            close(mp.cosh(phi), cosh, 42, f"{line.plan.name}: cosh of the rapidity")
            # The least scale lets a plan return to a rapidity of exactly zero.
            what = f"{line.plan.name}: sinh of the rapidity"
            close(mp.sinh(phi), sinh, 42, what, mpf(10) ** -60)


def chord(line, position, time, half):
    """c dt and dz of a node between two array times either side of `time`."""
    t_after, _, z_after, _ = line.event(time + half, position)
    t_before, _, z_before, _ = line.event(time - half, position)
    return C * (t_after - t_before), z_after - z_before


def rapidity_of(chord_ct, chord_z):
    return mp.log((chord_ct + chord_z) / (chord_ct - chord_z)) / 2


def interval(chord_ct, chord_z):
    """Proper length in metres of a timelike chord."""
    return mp.sqrt((chord_ct - chord_z) * (chord_ct + chord_z))


def check_felt(plan, position, moment):
    """The felt acceleration is c d(rapidity)/d(proper time) of the node's own worldline."""
    time, index = Fraction(moment, ATTO), plan.phase_at(Fraction(moment, ATTO))
    if index is None or moment == plan.phases[index][0]:
        return 0
    start, end, _, _ = plan.phases[index]
    room = Fraction(min(moment - start, end - moment), ATTO)
    wide, narrow = room / 10**25, room / 10**60
    line = Worldline(plan, digits_for(plan, moment) + 200)
    with mp.workdps(line.digits):
        after = rapidity_of(*chord(line, position, time + wide, narrow))
        before = rapidity_of(*chord(line, position, time - wide, narrow))
        felt = C2 * (after - before) / interval(*chord(line, position, time, wide))
        alpha = plan.acceleration(time)
        wanted = number(alpha / (1 + alpha * Fraction(position) / C2))
        # The scale keeps a coast, and a moment at which the thrust crosses zero, comparable.
        what = f"{plan.name}: felt acceleration at {position!r} m, {moment} as"
        close(wanted, felt, 20, what, mpf(10) ** -40)
    return 1


def check_proper_time(plan, position, moment):
    """The integral of sqrt(dt^2 - dz^2/c^2) along the node's worldline is tau + h phi/c."""
    time = Fraction(moment, ATTO)
    line = Worldline(plan, digits_for(plan, moment) + 120)
    root = Fraction(math.isqrt(6 * 10**159), 10**80)
    bounds = [Fraction(phase[0], ATTO) for phase in plan.phases] + [Fraction(plan.end_as, ATTO)]
    bounds = [bound for bound in bounds if bound < time] + [time]
    with mp.workdps(line.digits):
        total = mpf(0)
        for low, high in zip(bounds, bounds[1:]):
            half, middle = (high - low) / 2, (high + low) / 2
            narrow = half / 10**40
            # Three-point Gauss-Legendre: more than enough, the integrand is smooth in a phase.
            for place, weight in ((-root, 5), (Fraction(0), 8), (root, 5)):
                length = interval(*chord(line, position, middle + place * half, narrow))
                total += weight * number(half) * length / (9 * 2 * C * number(narrow))
        wanted = number(time + Fraction(position) * plan.rapidities(time)[0] / C)
        close(wanted, total, 30, f"{plan.name}: proper time at {position!r} m, {moment} as")
    return 1


def secant(function, low, high):
    """The root of a smooth function of an exact moment."""
    grid = 1 << 1200
    at_low, at_high = function(low), function(high)
    for _ in range(60):
        if at_high == at_low or at_high == 0:
            break
        ratio = at_high / (at_high - at_low)
        with mp.workprec(1200):
            step = Fraction(int(mp.floor(mp.ldexp(ratio, 1200))), grid) * (high - low)
        low, at_low = high, at_high
        high = Fraction(math.floor((high - step) * grid), grid)
        at_high = function(high)
        if abs(high - low) < Fraction(1, 10**90):
            break
    return high


def check_rigidity(plan, position, other, moment):
    """The distance to another node, in the instantaneous rest frame of the first, is constant."""
    time, index = Fraction(moment, ATTO), plan.phase_at(Fraction(moment, ATTO))
    start, end, _, _ = plan.phases[index]
    room = Fraction(min(moment - start, end - moment), ATTO)
    line = Worldline(plan, digits_for(plan, moment) + 200)
    with mp.workdps(line.digits):
        run_ct, run_z = chord(line, position, time, room / 10**60)
        t, _, z, _ = line.event(time, position)

        def lag(when):
            t_other, _, z_other, _ = line.event(when, other)
            return run_ct * C * (t_other - t) - run_z * (z_other - z)

        # Start the search well away from the array time it must come back to.
        when = secant(lag, time + room / 1000, time + room / 1300)
        t_other, _, z_other, _ = line.event(when, other)
        away, later = z_other - z, C * (t_other - t)
        distance = mp.sqrt((away - later) * (away + later))
        wanted = number(abs(Fraction(other) - Fraction(position)))
        close(wanted, distance, 30, f"{plan.name}: rest-frame distance")
    return 1


def check_redshift(plan, position, moment):
    """Rays sent to the reference under one hold arrive 1/N times as far apart as they were sent.

    This is the wavelength ratio, so that a node on the aft side under forward thrust has a positive
    redshift; the frequency ratio is N.
    """
    time = Fraction(moment, ATTO)
    line = Worldline(plan, digits_for(plan, plan.end_as) + 200)
    side = 1 if position < 0 else -1
    with mp.workdps(line.digits):

        def null_coordinate(when, place):
            t, _, z, _ = line.event(when, place)
            return C * t - side * z

        def received(sent):
            sent_coordinate = null_coordinate(sent, position)
            guess = Fraction(abs(position)) / C
            return secant(
                lambda when: null_coordinate(when, 0.0) - sent_coordinate,
                sent + guess,
                sent + guess * 5 / 4,
            )

        narrow = Fraction(1, 10**30)
        heard = received(time + narrow) - received(time - narrow)
        sent = interval(*chord(line, position, time, narrow)) / C
        rate = 1 + plan.acceleration(time) * Fraction(position) / C2
        close(number(1 / rate), number(heard) / sent, 30, f"{plan.name}: redshift by null rays")
    return 1


def check_integrator():
    """The worldline agrees with mpmath's quadrature, erfi and the hyperbola of a hold."""
    second = ATTO
    ramp = Plan("ramp", [(300_000 * second, -900.0, 2_500.0)])
    end = Fraction(300_000)
    t, _, z, _ = Worldline(ramp, 90).event(end)
    with mp.workdps(60):
        first, slope = mpf(-900), mpf(3400) / 300_000

        def phi(s):
            return (first * s + slope * s * s / 2) / C

        close(mp.quad(lambda s: mp.cosh(phi(s)), [0, 300_000]), t, 45, "quadrature of a ramp, t")
        close(C * mp.quad(lambda s: mp.sinh(phi(s)), [0, 300_000]), z, 45, "quadrature, z")
    steep = Plan("steep", [(390_000 * second, 0.0, 1e6)])
    end = Fraction(390_000)
    t, _, z, _ = Worldline(steep, 800).event(end)
    with mp.workdps(700):
        width = mp.sqrt(mpf(1e6) / 390_000 / (2 * C))
        plus = mp.erfi(width * 390_000) * mp.sqrt(mp.pi) / (2 * width)
        minus = mp.erf(width * 390_000) * mp.sqrt(mp.pi) / (2 * width)
        close((plus + minus) / 2, t, 60, "error function of a ramp, t")
        close(C * (plus - minus) / 2, z, 60, "error function of a ramp, z")
    hold = Plan("hold", [(200_000 * second, -1e6, -1e6)])
    t, _, z, _ = Worldline(hold, 800).event(Fraction(200_000))
    with mp.workdps(700):
        phi_end = -mpf(1e6) * 200_000 / C
        close(-C * mp.sinh(phi_end) / mpf(1e6), t, 60, "hyperbola of a hold, t")
        close(-C2 * 2 * mp.sinh(phi_end / 2) ** 2 / mpf(1e6), z, 60, "hyperbola of a hold, z")


# Inputs ---------------------------------------------------------------------------------------


class Generator:
    """SplitMix64, so that the draws do not depend on the version of Python."""

    def __init__(self, seed):
        self.word = seed

    def draw(self):
        mask = (1 << 64) - 1
        self.word = (self.word + 0x9E3779B97F4A7C15) & mask
        z = self.word
        z = ((z ^ (z >> 30)) * 0xBF58476D1CE4E5B9) & mask
        z = ((z ^ (z >> 27)) * 0x94D049BB133111EB) & mask
        return z ^ (z >> 31)

    def below(self, count):
        """A whole number in 0..count; the draw is long enough that its bias is of no interest."""
        wide = 0
        for _ in range(count.bit_length() // 64 + 2):
            wide = wide << 64 | self.draw()
        return wide % count

    def pick(self, things):
        return things[self.below(len(things))]

    def sign(self):
        return self.pick((1.0, -1.0))

    def scaled(self, lowest, highest):
        """A double with a decimal exponent in lowest..highest, through its decimal text.

        Text is rounded correctly everywhere; a power function is not.
        """
        leading, rest = 1 + self.below(9), self.below(10**16)
        return float(f"{leading}.{rest:016d}e{lowest + self.below(highest - lowest)}")


def seconds(text):
    whole = Fraction(text) * ATTO
    assert whole.denominator == 1, text
    return int(whole)


def gees(text):
    """The double nearest to a multiple of standard gravity."""
    return float(Fraction(text) * Fraction("9.80665"))


def node_at_rate(plan, side, rate):
    """The node whose smallest rate in the plan is `rate` or just above, on the given side."""
    peak = plan.highest if side < 0 else -plan.lowest
    if peak == 0:
        return side * 1e19
    position = side * float(min(C2 * (1 - rate) / Fraction(peak), Fraction(10**19)))
    while plan.smallest_rate(position) < rate:
        position = math.nextafter(position, 0.0)
    return position


def edge_nodes(plan):
    nodes = [node_at_rate(plan, side, SMALLEST_RATE) for side in (-1, 1)]
    return nodes + [node_at_rate(plan, side, Fraction(37, 1000)) for side in (-1, 1)]


def around(moment):
    return [moment - 1, moment, moment + 1]


def boundary_moments(plan, every=1):
    ends = [phase[1] for phase in plan.phases]
    return [moment for end in ends[::every] for moment in around(end)]


def turn_moments(plan):
    """Moments about each zero of the acceleration and of the rapidity inside a phase."""
    moments = []
    line = Worldline(plan, 60)
    for index, (start, end, first, last) in enumerate(plan.phases):
        turn = Plan._turn(first, last, Fraction(end - start))
        zeros = [] if turn is None else [start + turn]
        zeros += [zero * ATTO for zero in line._rapidity_zeros(index)]
        for zero in zeros:
            near = math.floor(zero)
            for moment in (near - 1000, near - 1, near, near + 1, near + 1000):
                if 0 <= moment <= plan.end_as:
                    moments.append(moment)
    return moments


class Cases:
    """The groups (plan, kind, positions, moments) in the order in which they are written."""

    def __init__(self):
        self.groups, self.plans = [], {}

    def plan(self, plan):
        assert plan.name not in self.plans, plan.name
        self.plans[plan.name] = plan
        return plan

    def add(self, plan, kind, positions, moments):
        self.plan(plan)
        moments = sorted(set(moments))
        assert all(abs(moment) <= LONGEST_AS for moment in moments), plan.name
        kept = []
        for position in dict.fromkeys(positions):
            assert position == 0.0 or 1e-3 <= abs(position) <= 1e19, (plan.name, position)
            if plan.smallest_rate(position) >= SMALLEST_RATE:
                kept.append(position)
        assert kept, plan.name
        self.groups.append((plan, kind, kept, moments))


def add_listed(cases):
    """Plans an engineer would file."""
    tether = [0.0, 0.001, 1.0, -1.0, 1000.0, -40_000.0, 1e7, -3e11]
    day, year = 86_400 * ATTO, YEAR_S * ATTO
    one = gees("1")
    cases.add(Plan("idle", [(ATTO, 0, 0)]), "listed", tether, [-ATTO, 0, ATTO // 3, 2 * ATTO])
    cases.add(
        Plan("hold_1g_day", [(day, one, one)]), "listed", tether, [-ATTO, 0, ATTO, day // 2, day]
    )
    plan = Plan("hold_1g_year", [(year, one, one)])
    nodes = tether + [-9e15, 9e15, 1e19]
    cases.add(plan, "listed", nodes, [1, year // 3, year - 1, year, 2 * year])
    top, ten, six = gees("0.3"), seconds("600"), seconds("21600")
    cargo = [(ten, 0, top), (six, top, top), (ten, top, 0), (3 * day, 0, 0)]
    cargo += [(ten, 0, -top), (six, -top, -top), (ten, -top, 0)]
    plan = Plan("cargo_03g", cargo)
    moments = [ten // 2, ten, seconds("5000.25"), six + ten, day, plan.end_as - six, plan.end_as]
    cases.add(plan, "listed", tether, moments)
    cases.add(plan.mirrored(), "listed", tether[3:], moments[2:])
    journey = [(year * 21 // 4, one, one), (year * 3 // 2, 0, 0), (year * 21 // 4, -one, -one)]
    plan = Plan("interstellar_1g", journey)
    moments = [year, year * 6, year * 8, plan.end_as - 1, plan.end_as, plan.end_as + year]
    cases.add(plan, "listed", [0.0, 1000.0, -1000.0, 3e12, -9.1e15], moments)
    # The doubles of these accelerations do not cancel: a residual rapidity near 1e-17 of the
    # total is left, and it alone makes the clock offset.
    hour = seconds("3600")
    brakes = [("0.03", 3, "0.09", 1), ("0.05", 3, "0.15", 1), ("0.1", 3, "0.3", 1)]
    brakes += [("0.01", 7, "0.07", 1), ("1.1", 3, "3.3", 1), ("0.7", 5, "3.5", 1)]
    for number_of, (burn, burn_hours, brake, brake_hours) in enumerate(brakes):
        pieces = [(burn_hours * hour, gees(burn), gees(burn))]
        pieces += [(brake_hours * hour, -gees(brake), -gees(brake))]
        plan = Plan(f"brake_hold_{number_of}", pieces)
        moments = [plan.phases[0][1], plan.end_as - 1, plan.end_as, plan.end_as + day]
        cases.add(plan, "listed", [0.0, 450.0, -40_000.0, 2e12], moments)
    for number_of, (burn, brake) in enumerate((("0.1", "0.3"), ("0.06", "0.18"))):
        up, down = gees(burn), -gees(brake)
        pieces = [(3 * hour, 0, up), (3 * hour, up, 0), (hour, 0, down), (hour, down, 0)]
        plan = Plan(f"brake_ramp_{number_of}", pieces)
        moments = [plan.phases[1][1], plan.end_as - 1, plan.end_as, plan.end_as + day]
        cases.add(plan, "listed", [0.0, 450.0, -40_000.0, 2e12], moments)
    steps = [(hour, 0.1, 0.1)] * 10 + [(hour, -0.7, -0.7), (hour, -0.3, -0.3)]
    plan = Plan("brake_in_steps", steps)
    cases.add(plan, "listed", [0.0, 450.0, -2e12], around(plan.end_as) + [11 * hour])
    plan = Plan("thirds", [(hour, 1 / 3, 2 / 3), (hour, -2 / 3, -1 / 3), (1, 0.1, 0.1)])
    cases.add(plan, "listed", [0.0, 450.0, -2e12], around(2 * hour) + around(plan.end_as))


def add_edges(cases):
    """The corners of the domain."""
    shortest = [(1, 1e6, 1e6), (1, -1e6, 1e6), (1, 0, 0), (1, 1e-12, -1e-12), (2, -1e6, 1e6)]
    plan = Plan("attosecond_phases", shortest)
    nodes = edge_nodes(plan) + [0.0, 0.001, 1e10, -89_000_000_000.0]
    cases.add(plan, "edge", nodes, list(range(-1, 8)) + [LONGEST_AS])
    plan = Plan(
        "short_and_long",
        [(1, -0.5, -0.5), (5 * 10**28 + 1, 1e-3, -2e-3), (1, 1e6, 1e6), (10**26 + 7, 2.0, 0)],
    )
    moments = boundary_moments(plan) + [1, 10**28 + 3, plan.end_as + 10**27, -LONGEST_AS]
    cases.add(plan, "edge", edge_nodes(plan) + [0.0], moments)

    ramps = [
        ("zero_on_a_tick", [(3 * ATTO, -1.0, 2.0)]),
        ("zero_between_ticks", [(10**21 + 7, gees("0.3"), -gees("0.7"))]),
        ("zero_in_a_steep_ramp", [(977, 1e6, -9.7e5), (10**22, -9.7e5, -9.7e5)]),
        ("zero_in_a_slow_ramp", [(10**29 - 1, -1e-12, 1.3e-12)]),
        ("zero_after_a_burn", [(10**22, 4.0, 4.0), (10**23 + 1, 4.0, -3.0), (10**22, -3.0, 1e-12)]),
        ("zero_at_high_rapidity", [(78 * 10**22, 1e6, -1e6), (10**22, -1e6, 1e6)]),
        ("there_and_back_in_one_ramp", [(10**27, 7.3, -7.3), (10**27, -7.3, 7.3)]),
        ("rapidity_through_zero", [(10**25, 1.0, 0.7), (4 * 10**25, -0.1, -1.3), (10**25, 2.0, 0)]),
    ]
    for name, pieces in ramps:
        plan = Plan(name, pieces)
        moments = turn_moments(plan) + [plan.end_as - 1, plan.end_as, plan.end_as // 7]
        cases.add(plan, "edge", edge_nodes(plan)[:2] + [0.0, 1.5e6], moments)

    for acceleration in (gees("1"), -gees("1"), 1e6, -1e6, 2.09, 1234.5):
        # One moment for each rapidity of interest; launch values leave the doubles on the way.
        whole = Fraction(C * ATTO) / abs(Fraction(acceleration))
        length = min(math.floor(whole * Fraction(6999, 10)), LONGEST_AS - 10**22)
        plan = Plan(f"rapidity_700_at_{acceleration!r}", [(length, acceleration, acceleration)])
        moments = [math.floor(whole * phi) for phi in (20, 300, 600, 640, 664, 666, 670, 674, 684)]
        moments += [math.floor(whole * phi) for phi in (688, 693, 697)]
        moments += [length - 1, length, length + 10**21]
        moments = [moment for moment in moments if moment <= plan.end_as + 10**21]
        cases.add(plan, "edge", edge_nodes(plan)[:2] + [0.0, -0.001], moments)
    plan = Plan("rapidity_ramp_to_650", [(389_730 * ATTO + 1, 1e-12, 1e6)])
    cases.add(plan, "edge", edge_nodes(plan)[:2] + [1.0], boundary_moments(plan) + [10**23])
    plan = Plan("rapidity_ramp_to_690", [(3 * 10**28 + 9, 0, 13.79), (10**25, 13.79, 0)])
    cases.add(plan, "edge", edge_nodes(plan)[:2] + [1.0], boundary_moments(plan) + [10**28])
    back = [(190_000 * ATTO, 1e6, 1e6), (380_000 * ATTO, -1e6, -1e6), (190_000 * ATTO, 1e6, 1e6)]
    plan = Plan("rapidity_there_and_back", back)
    moments = turn_moments(plan) + boundary_moments(plan) + [10**22, plan.end_as + 10**22]
    cases.add(plan, "edge", edge_nodes(plan)[:2] + [0.0], moments)
    thirds = [(3 * 10**24, 60_000.1, 60_000.1), (10**24, -180_000.3, -180_000.3)]
    plan = Plan("rapidity_600_braked", thirds + [(10**20, 0.3, -0.1)])
    moments = boundary_moments(plan) + [10**24, plan.end_as + 10**23]
    cases.add(plan, "edge", edge_nodes(plan)[:2] + [0.0, 450.0], moments)

    cases.add(
        Plan("faintest_and_longest", [(LONGEST_AS, 1e-12, 1e-12)]),
        "edge",
        [0.0, 0.001, -0.001, 1e19, -1e19],
        [-LONGEST_AS, -1, 0, 1, ATTO + 1, LONGEST_AS - 1, LONGEST_AS],
    )
    plan = Plan("farthest_node", [(10**28 + 1, 0, 0.008987), (10**28, 0.008987, -0.008987)])
    moments = boundary_moments(plan) + turn_moments(plan) + [10**27]
    cases.add(plan, "edge", edge_nodes(plan) + [1e19, -1e19, 0.0], moments)
    jumps = [(10**19 + 3, 1e3, 1e3), (10**20 + 1, -1e3, -1e3), (7, 1e-12, 1e-12), (10**25, 0, 0)]
    jumps += [(10**20 - 1, -999.5, 1e3), (3, 1e3, -1e3), (10**21, 1e-12, 1e6), (10**19, -1e6, 0)]
    plan = Plan("jumps_and_coasts", jumps)
    nodes = edge_nodes(plan) + [0.0, 1e-3, 1e5]
    cases.add(plan, "edge", nodes, boundary_moments(plan) + [10**20, LONGEST_AS])


def random_plan(generator, name, count, most_rapidity):
    """Phases of all shapes, mostly of one scale so that a node near a horizon sees it often."""
    exponent = generator.below(18) - 12
    pieces, last = [], 0.0
    for _ in range(count):
        lowest = exponent if generator.below(10) < 7 else generator.below(18) - 12
        draw = [generator.sign() * generator.scaled(lowest, lowest + 1) for _ in range(2)]
        shape = generator.pick(("hold", "ramp", "joined", "through", "coast", "ramp", "joined"))
        first, then = {
            "hold": (draw[0], draw[0]),
            "ramp": (draw[0], draw[1]),
            "joined": (last, draw[1]),
            "through": (draw[0], math.copysign(draw[1], -draw[0])),
            "coast": (0.0, 0.0),
        }[shape]
        last = then
        peak = max(abs(first), abs(then), 1e-12)
        limit = min(Fraction(LONGEST_AS, 2 * count), most_rapidity * C * ATTO / Fraction(peak))
        shorter = 10 ** generator.pick((0, 0, 0, 0, 1, 1, 2, 3, 6, 10))
        duration = math.floor(limit * (1 + generator.below(10**20)) / 10**20 / shorter) | 1
        pieces.append((duration, first, then))
    return Plan(name, pieces)


def random_node(generator, plan):
    kind = generator.below(4)
    side = int(generator.sign())
    if kind == 0:
        return node_at_rate(plan, side, Fraction(10 + generator.below(90), 10**7))
    if kind == 1:
        return node_at_rate(plan, side, Fraction(1 + generator.below(999), 1000))
    position = side * generator.scaled(-3, 19)
    if plan.smallest_rate(position) < SMALLEST_RATE:
        position = node_at_rate(plan, side, Fraction(1, 10 ** (1 + generator.below(5))))
    return position


def random_moments(generator, plan, count):
    moments = []
    for _ in range(count):
        start, end, _, _ = generator.pick(plan.phases)
        moments.append(start + generator.below(end - start))
    moments.append(generator.pick(around(generator.pick(plan.phases)[1])))
    room = LONGEST_AS - plan.end_as
    moments.append(plan.end_as + generator.below(room) // 10 ** generator.below(12))
    return moments


def add_random(cases, generator):
    for index in range(90):
        count = 1 + generator.below(8)
        most = Fraction(690, count) if index % 15 == 7 else Fraction(25, count)
        plan = random_plan(generator, f"random_{index:02d}", count, most)
        nodes = [random_node(generator, plan) for _ in range(2)]
        moments = random_moments(generator, plan, 3)
        cases.add(plan, "random", nodes + [0.0] * (index % 5 == 0), moments)
    plan = random_plan(generator, "random_200_phases", 200, Fraction(1, 4))
    nodes = [random_node(generator, plan) for _ in range(2)] + [1000.0]
    cases.add(plan, "random", nodes, random_moments(generator, plan, 20))
    pieces, last = [], 0.0
    for _ in range(200):
        first, last = last, generator.sign() * generator.scaled(-1, 1)
        pieces.append((generator.below(10**24) + 1, first, last))
    plan = Plan("random_200_joined_ramps", pieces)
    nodes = [node_at_rate(plan, -1, SMALLEST_RATE), 1000.0, random_node(generator, plan)]
    cases.add(plan, "random", nodes, random_moments(generator, plan, 20))


def add_grid(cases):
    """Decades of acceleration, position and time, both signs, holds and ramps."""
    positions = [sign * float(f"1e{k}") for k in (-3, 2, 6, 10, 15, 19) for sign in (1, -1)]
    for exponent in range(-12, 7, 3):
        for sign in (1, -1):
            top = sign * float(f"1e{exponent}")
            limit = min(math.floor(Fraction(C * ATTO * 30) / abs(Fraction(top))), LONGEST_AS // 3)
            first = top if (exponent + 12) // 3 % 2 == 0 else 0.0
            plan = Plan(f"grid_{top!r}", [(limit, first, top), (limit // 2, top, -top)])
            moments = [limit // 10**k for k in (0, 4, 11)] + [limit * 6 // 5]
            cases.add(plan, "grid", positions, moments)


# Tables ---------------------------------------------------------------------------------------


def forty(value):
    """Forty significant digits of an exact or high-precision number."""
    with mp.workdps(80):
        return mp.nstr(number(value) if isinstance(value, Fraction) else +value, 40)


def plan_rows(plans):
    yield "plan,phase,start_as,end_as,from_m_s2,to_m_s2"
    for plan in plans.values():
        for index, (start, end, first, last) in enumerate(plan.phases):
            yield f"{plan.name},{index},{start},{end},{first!r},{last!r}"


CASE_COLUMNS = (
    "plan,kind,position_m,at_as,acceleration_m_s2,rapidity,total_rapidity,rate_minus_one,"
    "felt_acceleration_m_s2,horizon_m,redshift,clock_offset_s,proper_time_s,launch_time_s,"
    "launch_time_scale_s,launch_position_m,launch_position_scale_m"
)


def launch_columns(value, scale):
    """The value and its scale, or two empty fields beyond the doubles."""
    with mp.workdps(60):
        room = abs(value) / number(LARGEST_DOUBLE)
        # A value this close to the largest double would make a test of the limit a test of luck.
        assert abs(room - 1) > mpf(10) ** -12 * max(1, scale / number(LARGEST_DOUBLE))
    return ["", ""] if room > 1 else [forty(value), forty(scale)]


def case_rows(groups):
    yield CASE_COLUMNS
    for plan, kind, positions, moments in groups:
        launch = launch_values(plan, positions, moments)
        for moment in moments:
            time = Fraction(moment, ATTO)
            alpha = plan.acceleration(time)
            phi, total = plan.rapidities(time)
            for position in positions:
                h = Fraction(position)
                rate = 1 + alpha * h / C2
                assert rate >= SMALLEST_RATE
                felt, offset = alpha / rate, h * phi / C
                exact = [alpha, phi, total, rate - 1, felt]
                fields = [plan.name, kind, repr(position), str(moment)] + [forty(x) for x in exact]
                fields.append(forty(C2 / abs(felt)) if alpha != 0 else "")
                fields += [forty(1 / rate - 1), forty(offset), forty(time + offset)]
                t, t_scale, z, z_scale = launch[position, moment]
                fields += launch_columns(t, t_scale) + launch_columns(z, z_scale)
                yield ",".join(fields)


def pair_rows(groups, generator):
    yield "plan,from_position_m,to_position_m,at_as,rate_difference,clock_offset_s"
    for plan, _, positions, moments in groups:
        for _ in range(4):
            start, moment = generator.pick(positions), generator.pick(moments)
            end = generator.pick(positions)
            if start == end:
                # The closest pair there is: two neighbouring doubles.
                end = math.nextafter(start, 0.0) if start != 0.0 else 0.001
                if plan.smallest_rate(end) < SMALLEST_RATE:
                    continue
            time = Fraction(moment, ATTO)
            alpha, phi = plan.acceleration(time), plan.rapidities(time)[0]
            apart = Fraction(end) - Fraction(start)
            difference = alpha * apart / (C2 + alpha * Fraction(start))
            values = f"{forty(difference)},{forty(apart * phi / C)}"
            yield f"{plan.name},{start!r},{end!r},{moment},{values}"


def horizon_inputs(cases, generator):
    """Plans with positions on, a few doubles from, and well off the nearest position allowed."""
    inputs = []

    def near(plan, peaks):
        positions = []
        for peak in peaks:
            exact = -float(C2 / Fraction(peak))
            if not 1e-3 <= abs(exact) < 1e19:
                continue
            low = high = exact
            positions.append(exact)
            for _ in range(2):
                low, high = math.nextafter(low, 0.0), math.nextafter(high, 2 * high)
                positions += [low, high]
            positions += [exact * 0.5, exact * 1.25, exact * 40.0, -exact]
        positions = [p for p in positions if 1e-3 <= abs(p) <= 1e19]
        inputs.append((plan, list(dict.fromkeys(positions))))

    # c^2 = (2 * 7 * 73 * 293339)^2 has factors that are accelerations in range, with quotients
    # that are doubles: N is exactly zero there.
    for peak in (1022.0, -1022.0, 293_339.0, 14.0, -1.0):
        slow = seconds("1e6") if abs(peak) < 1e3 else seconds("1e4")
        last = [(slow, peak, peak), (slow, 0.0, 0.0)]
        near(cases.plan(Plan(f"horizon_exact_hold_{peak!r}", last)), [peak])
        tent = [(slow + 1, 0.0, peak), (slow + 3, peak, -peak / 3)]
        near(cases.plan(Plan(f"horizon_exact_tent_{peak!r}", tent)), [peak])
        end = [(slow, peak / 2, 0.0), (slow + 1, -peak / 3, peak)]
        near(cases.plan(Plan(f"horizon_exact_end_{peak!r}", end)), [peak])
    for index in range(24):
        count = 1 + generator.below(6)
        plan = None
        while plan is None or max(plan.highest, -plan.lowest) < 0.1:
            plan = random_plan(generator, f"horizon_random_{index:02d}", count, Fraction(20, count))
        cases.plan(plan)
        near(plan, [peak for peak in (plan.highest, plan.lowest) if peak != 0.0])
    steps = [(ATTO, gees(text), gees(text)) for text in ("1", "2", "3")]
    plan = cases.plan(Plan("horizon_1g_steps", steps))
    near(plan, [gees("1"), gees("2"), gees("3")])
    return inputs


def horizon_rows(inputs):
    yield "plan,position_m,realisable,phase,zero_at_s"
    for plan, positions in inputs:
        for position in positions:
            zero = plan.first_zero(position)
            fields = "1,," if zero is None else f"0,{zero[0]},{forty(zero[1])}"
            yield f"{plan.name},{position!r},{fields}"


def check_sample(groups):
    """The checks from first principles, on nodes and moments spread over all plans."""
    done = {"felt": 0, "proper time": 0, "rigidity": 0, "redshift": 0}
    for count, (plan, _, positions, moments) in enumerate(groups):
        inside = [m for m in moments if plan.phase_at(Fraction(m, ATTO)) is not None and m > 0]
        inside = [m for m in inside if m not in {phase[0] for phase in plan.phases}]
        if not inside or len(plan.phases) > 20:
            continue
        moment = inside[count % len(inside)]
        position = positions[count % len(positions)]
        done["felt"] += check_felt(plan, position, moment)
        if plan.max_rapidity > 100:
            continue
        if count % 2 == 0:
            done["proper time"] += check_proper_time(plan, position, moment)
        other = positions[(count + 1) % len(positions)]
        if count % 4 == 1 and other != position:
            done["rigidity"] += check_rigidity(plan, position, other, moment)
    one = gees("1")
    year = Plan("year", [(YEAR_S * ATTO, one, one)])
    for position in (-1e15, -4e15, 1e15, 4e15):
        done["redshift"] += check_redshift(year, position, YEAR_S * ATTO // 5)
        done["redshift"] += check_redshift(year.mirrored(), -position, YEAR_S * ATTO // 5)
    assert min(done.values()) >= 8, done
    return done


def make():
    """All files as bytes by name, and a summary."""
    check_integrator()
    cases = Cases()
    add_listed(cases)
    add_edges(cases)
    add_random(cases, Generator(0x5EED0001))
    add_grid(cases)
    done = check_sample(cases.groups)
    tables = {
        "cases.csv": list(case_rows(cases.groups)),
        "pairs.csv": list(pair_rows(cases.groups, Generator(0x5EED0002))),
        "horizon.csv": list(horizon_rows(horizon_inputs(cases, Generator(0x5EED0003)))),
    }
    tables["plans.csv"] = list(plan_rows(cases.plans))
    kinds = {}
    for row in tables["cases.csv"][1:]:
        kind = row.split(",")[1]
        kinds[kind] = kinds.get(kind, 0) + 1
    rows = {name: len(table) - 1 for name, table in tables.items()}
    summary = f"plans {len(cases.plans)}, rows {rows}, cases by kind {kinds}, checks {done}"
    files = {name: ("\n".join(table) + "\n").encode("ascii") for name, table in tables.items()}
    return files, summary


def main(arguments):
    if arguments not in ([], ["--check"]):
        print("usage: make_reference.py [--check]", file=sys.stderr)
        return 2
    here = Path(__file__).resolve().parent
    files, summary = make()
    print(summary)
    different = 0
    for name, made in sorted(files.items()):
        path = here / name
        if not arguments:
            path.write_bytes(made)
            continue
        found = path.read_bytes() if path.exists() else b""
        if found != made:
            different += 1
            pairs = enumerate(zip(found.split(b"\n"), made.split(b"\n")), 1)
            line = next((n for n, (a, b) in pairs if a != b), "at its end")
            print(f"{name} differs from what this script makes; first at line {line}.")
            print("If the change is meant, run this script without --check and commit the file.")
    return 1 if different else 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
