"""The worldline of the reference node in the launch frame, by numerical integration."""

import math
from bisect import bisect_right
from fractions import Fraction

from mpmath import mp, mpf

from plan import ATTO, C


def number(fraction):
    return mpf(fraction.numerator) / fraction.denominator


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
        if abs(term) <= 4 and abs(before) <= 4 and order > 100:
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
            stops.update(self.rapidity_zeros(index))
        self.stops = sorted(stops)

    def rapidity_zeros(self, index):
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
        with mp.workprec(max(plus, minus).bit_length() + 64):
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
