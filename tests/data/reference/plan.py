"""Thrust plans in exact arithmetic: every value is a rational number."""

from bisect import bisect_right
from fractions import Fraction

C = 299_792_458
C2 = C * C
ATTO = 10**18
YEAR_S = 31_557_600
SMALLEST_RATE = Fraction(1, 10**6)
LARGEST_RAPIDITY = 700
LONGEST_AS = 10**11 * ATTO


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
            turn = self.turn(first, last, Fraction(duration, ATTO))
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
    def turn(first, last, duration):
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
        turn = self.turn(first, last, duration)
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
