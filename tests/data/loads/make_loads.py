#!/usr/bin/env python3
# This script makes every number in the CSV files beside it and needs Python 3.9 or later with
# mpmath 1.3.0.  Run `python3 tests/data/loads/make_loads.py` to write the files again, and
# `python3 tests/data/loads/make_loads.py --check` to make them in memory only, compare them byte
# for byte with the committed files, and leave with status 1 if any differs.
"""Reference values for the loads of an accelerated or standing line.

Method
------
Inputs are the exact rational values of their doubles; everything is worked with 36 digits and
rounded once, to 22.

* **Statics.**  In the line's own frame, ds^2 = -N^2 c^2 dtau^2 + dh^2, the line is at rest and the
  divergence of its stress-energy tensor gives, per unloaded length s counted towards the fore end,

      dh/ds = 1 + kappa dT + T/EA,        dT/ds = a(h) (mu - (T/c^2) dh/ds),
      a(h) = c^2 (dN/dh)/N,               N = 1 + (g h - Gamma h^2/2)/c^2

  (g is the acceleration of the reference; Gamma = 0 under thrust).  At a node of mass m on which an
  engine pushes with the local force F, T grows by m a(h) - F.  The pair of equations is integrated
  from the aft end to the fore end by Taylor series.  Engines push in the ratio F_k N_k = lambda s_k;
  lambda and the position of the aft end are found by Newton's method from two conditions: the
  reference node is at h = 0, and T vanishes beyond the fore end.  No balance of whole masses, no
  first integral N T and no expansion in strain is used anywhere.
* **Burning.**  dm_k/dtau = -N_k F_k/w_k, with N_k F_k = s_k lambda and lambda = alpha M, is
  integrated along the plan by Taylor series in tau.  That the Newton solution gives lambda =
  alpha M is checked at every state, to 26 digits.
* **Clocks.**  The offset is the integral of (N - 1) dtau at the loaded position, by Gauss-Legendre
  quadrature over array time between all boundaries, moments and zeros of the thrust; every interval
  is done twice, whole and in halves, and must agree to 18 digits, which leaves the halves good to 23.  (Where neither thrust nor masses
  change the integrand is constant.)
* **Speeds** dh/dtau by central differences of the loaded position, extrapolated.

Files
-----
* `cases.csv`: the reference row; gravity and gradient where the line stands.
* `nodes.csv`, `spans.csv`, `engines.csv`, `phases.csv`: the lines, rows and gaps from fore to aft;
  an empty stiffness is rigid, an empty exhaust speed burns nothing, empty propellant weighs nothing.
* `forces.csv`: axial force at both ends of every gap, with the scale (abs(alpha)/N)(M_aft + S_aft M).
* `positions.csv`: loaded position, its speed, clock offset and the integral of abs(h alpha)/c^2.
* `thrust.csv`: local force of every engine and what it has used.

Sources: Misner, Thorne & Wheeler, Gravitation (1973), chapters 6 and 23; Rindler, Am. J. Phys. 34
(1966) 1174; Ackeret, Helv. Phys. Acta 19 (1946) 103.
"""

import random
import sys
from fractions import Fraction
from pathlib import Path

from mpmath import mp, mpf

mp.dps = 36
C2 = mpf(299_792_458) ** 2
ATTO = 10**18
G0 = 9.80665
TINY = mpf(10) ** -34


def exact(value):
    """A double as an exact multiprecision number."""
    fraction = Fraction(value)
    return mpf(fraction.numerator) / fraction.denominator


class Line:
    """One case: a line, what moves it, and when it is looked at."""

    def __init__(self, name, reference, nodes, spans, engines, phases=(), moments=(),
                 gravity=None, gradient=0.0):
        self.name, self.reference = name, reference
        self.nodes, self.spans, self.engines = nodes, spans, engines
        self.phases = []
        start = 0
        for seconds, first, last in phases:
            length = int(seconds * ATTO)
            self.phases.append((start, length, first, last))
            start += length
        self.end = start
        self.moments = [int(moment * ATTO) for moment in moments]
        self.gravity, self.gradient = gravity, gradient
        self.guess = exact(nodes[-1][0])

    # -- statics

    def solve(self, g, masses):
        """Loaded positions, forces at both ends of every gap, and lambda."""
        gamma = exact(self.gradient)
        lengths = [exact(a[0]) - exact(b[0]) for a, b in zip(self.nodes, self.nodes[1:])]
        total = sum(masses) + sum(exact(span[0]) * length
                                  for span, length in zip(self.spans, lengths))
        aft, push = self.guess, g * total
        for attempt in range(2):
            # The pair of conditions is nearly linear: one matrix of differences serves for all
            # corrections, unless it turns out not to.
            base = self.integrate(g, gamma, masses, lengths, aft, push)
            da = max(abs(aft), mpf(1)) * mpf(10) ** -12
            dp = max(abs(push), mpf(1)) * mpf(10) ** -12
            by_aft = self.integrate(g, gamma, masses, lengths, aft + da, push)
            by_push = self.integrate(g, gamma, masses, lengths, aft, push + dp)
            here = self.reference
            a = ((by_aft[0][here] - base[0][here]) / da, (by_push[0][here] - base[0][here]) / dp)
            b = ((by_aft[2] - base[2]) / da, (by_push[2] - base[2]) / dp)
            det = a[0] * b[1] - a[1] * b[0]
            for _ in range(12):
                r = (base[0][here], base[2])
                step_aft = (r[0] * b[1] - r[1] * a[1]) / det
                step_push = (a[0] * r[1] - b[0] * r[0]) / det
                aft, push = aft - step_aft, push - step_push
                base = self.integrate(g, gamma, masses, lengths, aft, push)
                if (abs(step_aft) < mpf(10) ** -24 * max(abs(aft), mpf(1))
                        and abs(step_push) <= mpf(10) ** -24 * max(abs(push), mpf(10) ** -20)):
                    self.guess = aft
                    base[0][here] = mpf(0)
                    return base[0], base[1], push
        raise ArithmeticError(f"{self.name}: Newton's method does not settle")

    def integrate(self, g, gamma, masses, lengths, aft, push):
        """From the aft end to the fore end: positions, forces and what is left beyond."""
        thrust = [mpf(0)] * len(self.nodes)
        shares = sum(exact(engine[1]) for engine in self.engines)
        for row, share, _, _ in self.engines:
            thrust[row] += exact(share) / shares
        h, t = aft, mpf(0)
        positions = [None] * len(self.nodes)
        forces = [None] * len(self.spans)
        for row in range(len(self.nodes) - 1, -1, -1):
            positions[row] = h
            rate = 1 + (g * h - gamma * h * h / 2) / C2
            t += (masses[row] * (g - gamma * h) - push * thrust[row]) / rate
            if row > 0:
                low = t
                h, t = self.cross(row - 1, lengths[row - 1], g, gamma, h, t)
                forces[row - 1] = (t, low)
        return positions, forces, t

    def cross(self, gap, length, g, gamma, h, t):
        """Integrates one span from its aft to its fore end by Taylor series."""
        mu, stiffness, strain = self.spans[gap]
        mu, theta = exact(mu), 1 + exact(strain)
        soft = mpf(0) if stiffness is None else 1 / exact(stiffness)
        done = mpf(0)
        while done < length:
            rate = 1 + (g * h - gamma * h * h / 2) / C2
            slope = abs(g - gamma * h) / C2 * (theta + abs(t) * soft)
            step = length - done
            if slope > 0:
                step = min(step, rate / slope / 8)
            # Coefficients in powers of s: hs of h, ts of T, ns of N, qs of N a, ds of h', grown of T'.
            hs, ts, ns, qs, ds, weight, grown = [h], [t], [rate], [g - gamma * h], [], [], []
            k = 0
            power = mpf(1)
            quiet = 0
            while quiet < 2:
                ds.append((theta if k == 0 else 0) + ts[k] * soft)
                hs.append(ds[k] / (k + 1))
                square = mp.fdot(hs, reversed(hs)) if gamma else 0
                ns.append((g * hs[k + 1] - gamma * square / 2) / C2)
                qs.append(-gamma * hs[k + 1])
                # N T' = q (mu - T h'/c^2), with q = N a.
                weight.append((mu if k == 0 else 0) - mp.fdot(ts, reversed(ds)) / C2)
                right = mp.fdot(weight, reversed(qs[:k + 1])) if gamma else g * weight[k]
                right -= mp.fdot(ns[1:k + 1], reversed(grown))
                grown.append(right / ns[0])
                ts.append(grown[k] / (k + 1))
                k += 1
                power *= step
                small_h = abs(hs[k]) * power <= TINY * max(abs(hs[1]) * step, abs(h))
                small_t = abs(ts[k]) * power <= TINY * (abs(t) + abs(g) * mu * step)
                quiet = quiet + 1 if small_h and small_t else 0
            h = sum(c * step**i for i, c in enumerate(hs))
            t = sum(c * step**i for i, c in enumerate(ts))
            done = length if step >= length - done else done + step
        return h, t

    # -- along the plan

    def start_masses(self):
        masses = [exact(node[1]) for node in self.nodes]
        for row, _, _, propellant in self.engines:
            masses[row] += exact(propellant) if propellant is not None else 0
        return masses

    def whole(self, masses):
        return sum(masses) + sum(
            exact(span[0]) * (exact(a[0]) - exact(b[0]))
            for span, a, b in zip(self.spans, self.nodes, self.nodes[1:]))

    def falls(self):
        return any(speed is not None and propellant is not None
                   for _, _, speed, propellant in self.engines)

    def thrust_at(self, phase, at):
        start, length, first, last = phase
        share = mpf(at - start) / length if isinstance(at, int) else (at * ATTO - start) / length
        return exact(first) + (exact(last) - exact(first)) * share

    def burn(self, state, phase, begin, end):
        """Masses and use after flying from begin to end (seconds) inside one phase and sign."""
        masses, used = list(state[0]), list(state[1])
        shares = sum(exact(engine[1]) for engine in self.engines)
        rates = []
        for _, share, speed, _ in self.engines:
            rates.append(exact(share) / shares / exact(speed) if speed is not None else mpf(0))
        falling = sum(rate for rate, engine in zip(rates, self.engines) if engine[3] is not None)
        whole = self.whole(masses)
        first = self.thrust_at(phase, begin)
        last = self.thrust_at(phase, end)
        sign = 1 if first + last >= 0 else -1
        length = end - begin
        slope = (last - first) / length if length else mpf(0)
        # Taylor steps of M' = -|alpha| M sum(s/w); flows are |alpha| M s/w.
        reach = max(abs(first), abs(last)) * falling
        steps = int(reach * length * 2) + 1
        for index in range(steps):
            step = length / steps
            a = sign * (first + slope * (index * step))
            b = sign * slope
            ms, flow = [whole], [mpf(0)]
            k, power, quiet = 0, mpf(1), 0
            # A ramp from rest has even powers only, so two small terms in a row are asked for.
            while quiet < 2:
                product = a * ms[k] + (b * ms[k - 1] if k else 0)
                ms.append(-falling * product / (k + 1))
                flow.append(product / (k + 1))
                k += 1
                power *= step
                is_small = abs(ms[k]) * power <= TINY * whole and abs(flow[k]) * power <= TINY * whole
                quiet = quiet + 1 if is_small else 0
            delivered = sum(c * step**i for i, c in enumerate(flow))
            whole = sum(c * step**i for i, c in enumerate(ms))
            for engine, (row, _, _, propellant) in enumerate(self.engines):
                used[engine] += rates[engine] * delivered
                if propellant is not None:
                    masses[row] -= rates[engine] * delivered
        return masses, used

    def fly(self):
        """Rows of forces, positions and thrust at every moment."""
        marks = {0, self.end, *self.moments}
        for start, length, first, last in self.phases:
            marks.add(start)
            if first * last < 0:
                crossing = Fraction(length) * Fraction(first) / (Fraction(first) - Fraction(last))
                marks.add(start + round(crossing))
        marks = sorted(marks)
        state = (self.start_masses(), [mpf(0)] * len(self.engines))
        offsets = [mpf(0)] * len(self.nodes)
        scales = [mpf(0)] * len(self.nodes)
        rows = []

        def shape(phase, at, masses):
            alpha = self.thrust_at(phase, at)
            h, forces, push = self.solve(alpha, masses)
            whole = self.whole(masses)
            assert abs(push - alpha * whole) <= mpf(10) ** -26 * abs(alpha) * whole, self.name
            return alpha, h, forces, push

        def offset_between(phase, masses_at, begin, end):
            def once(a, b):
                sums = [mpf(0)] * len(self.nodes)
                sizes = [mpf(0)] * len(self.nodes)
                previous = a
                carried = masses_at
                for x, weight in GAUSS:
                    at = a + (b - a) * x
                    carried = self.burn(carried, phase, previous, at)
                    previous = at
                    alpha, h, _, _ = shape(phase, at, carried[0])
                    for row, position in enumerate(h):
                        sums[row] += weight * (b - a) * alpha * position / C2
                        sizes[row] += weight * (b - a) * abs(alpha * position) / C2
                return sums, sizes

            if phase[2] == phase[3] and not self.falls():
                alpha, h, _, _ = shape(phase, begin, masses_at[0])
                gains = [alpha * position / C2 * (end - begin) for position in h]
                return gains, [abs(gain) for gain in gains]
            whole = once(begin, end)
            middle = (begin + end) / 2
            left = once(begin, middle)
            masses_kept = masses_at
            masses_at = self.burn(masses_at, phase, begin, middle)
            right = once(middle, end)
            masses_at = masses_kept
            halves = [[p + q for p, q in zip(left[i], right[i])] for i in range(2)]
            for row in range(len(self.nodes)):
                error = abs(whole[0][row] - halves[0][row])
                assert error <= mpf(10) ** -18 * halves[1][row], (self.name, row, begin, end, error, halves[1][row])
            return halves

        for begin, end in zip(marks, marks[1:] + [None]):
            phase = next((p for p in self.phases if p[0] <= begin < p[0] + p[1]), None)
            if begin in self.moments:
                still = (begin, 1, 0.0, 0.0)
                alpha, h, forces, push = shape(phase or still, begin, state[0])
                speeds = self.speeds(phase, begin, state, shape)
                rows.append((begin, h, speeds, list(offsets), list(scales), forces, push,
                             list(state[0]), list(state[1]), (alpha, mpf(0))))
            if end is None or phase is None:
                continue
            a, b = mpf(begin) / ATTO, mpf(end) / ATTO
            gains = offset_between(phase, state, a, b)
            offsets = [x + y for x, y in zip(offsets, gains[0])]
            scales = [x + y for x, y in zip(scales, gains[1])]
            state = self.burn(state, phase, a, b)
        return rows

    def speeds(self, phase, at, state, shape):
        """dh/dtau by central differences, extrapolated twice; the future counts at a start."""
        if phase is None:
            return [mpf(0)] * len(self.nodes)
        moment = mpf(at) / ATTO
        found = []
        for width in (mpf(10) ** -7, mpf(10) ** -7 / 2):
            ends = []
            for side in (-1, 1):
                there = moment + side * width * phase[1] / ATTO
                masses = self.burn(state, phase, moment, there)
                ends.append(shape(phase, there, masses[0])[1])
            found.append([(b - a) / (2 * width * phase[1] / ATTO) for a, b in zip(*ends)])
        speeds = [(4 * fine - coarse) / 3 for coarse, fine in zip(*found)]
        # What a rigid span leaves is the rounding of two positions over the width.
        noise = mpf(10) ** -26 * ATTO / phase[1]
        places = [abs(exact(node[0])) for node in self.nodes]
        return [v if abs(v) > noise * h else mpf(0) for v, h in zip(speeds, places)]


def gauss_legendre(count):
    """Nodes on [0, 1] and weights, by Newton's method on the Legendre polynomial."""
    found = []
    for index in range(count):
        x = mp.cos(mp.pi * (mpf(index) + mpf(3) / 4) / (count + mpf(1) / 2))
        for _ in range(12):
            p, q = mpf(1), x
            for k in range(2, count + 1):
                p, q = q, ((2 * k - 1) * x * q - (k - 1) * p) / k
            slope = count * (x * q - p) / (x * x - 1)
            x -= q / slope
        found.append(((1 - x) / 2, 1 / ((1 - x * x) * slope * slope)))
    return found


GAUSS = gauss_legendre(10)


# Cases -----------------------------------------------------------------------------------------

LY = 9_460_730_472_580_800.0
C = 299_792_458.0


def cases():
    ramp_hold = [(600, 0.0, 0.02 * G0), (43200, 0.02 * G0, 0.02 * G0)]
    moments = [-5, 300, 600, 43800, 50000]
    tow_nodes = [(120.0, 60.0), (0.0, 1800.0), (-5000.0, 35.0), (-10000.0, 35.0), (-40000.0, 35.0)]
    tether = (0.012, 1.2e6, -8e-5)
    tow_spans = [tether] * 4
    yield Line("towed", 1, tow_nodes, tow_spans, [(0, 1.0, 30e3, 900.0)], ramp_hold, moments)
    yield Line("towed weightless propellant", 1, tow_nodes, tow_spans, [(0, 1.0, 30e3, None)],
               ramp_hold, moments)
    yield Line("ideal engine at the reference", 1, tow_nodes, tow_spans, [(1, 1.0, None, None)],
               ramp_hold, [300, 43800])
    turn = [(400, 0.0, 0.3 * G0), (1000, 0.3 * G0, 0.3 * G0), (900, 0.3 * G0, -0.25 * G0),
            (2000, -0.25 * G0, -0.25 * G0), (0.5, -0.25 * G0, 0.0)]
    yield Line("thrust reversed on booms", 2,
               [(800.0, 500.0), (35.5, 20.0), (0.0, 1200.0), (-900.25, 80.0), (-2000.0, 0.0)],
               [(1.5, 4e7, 1e-5), (0.0, None, 0.0), (2.25, 8e6, -3e-5), (0.5, 5e6, 0.0)],
               [(0, 0.25, 4500.0, 300.0), (3, 0.75, 20e3, 40.0)], turn,
               [200, 1800, 2000, 4300])
    yield Line("three engines, one without propellant, one ideal", 0,
               [(0.0, 90.0), (-100.0, 400.0), (-250.0, 10.0), (-900.0, 250.0)],
               [(0.3, 2e6, 0.0), (0.3, 2e6, 1e-4), (0.1, 9e5, 1e-4)],
               [(1, 0.5, 3000.0, 500.0), (3, 0.2, 9000.0, None), (0, 0.3, None, None)],
               [(100, 0.0, 8.0), (400, 8.0, 8.0), (150, 8.0, 2.0)], [50, 500, 620, 650])
    yield Line("soft span", 1, [(10.0, 5.0), (0.0, 50.0), (-1000.0, 20.0)],
               [(0.01, 500.0, 0.0), (0.02, 400.0, 0.0)], [(1, 1.0, None, None)],
               [(200, -1.0, 2.0), (300, 2.0, 2.0)], [20, 100, 350, 500])
    # Strongly relativistic: each node carries its own engine, spans carry what is left over.
    far = [(0.25 * LY, 1000.0), (0.0, 1000.0), (-0.3 * LY, 1100.0), (-0.5 * LY, 700.0)]
    yield Line("light-years", 1, far,
               [(0.0, 40e3, 1e-6), (0.0, 50e3, 0.0), (0.0, 30e3, 2e-6)],
               [(row, share, None, None) for row, share in enumerate([0.26, 0.27, 0.29, 0.18])],
               [(3e6, 0.0, G0), (3e7, G0, G0)], [1.5e6, 2e7])
    yield Line("light-years burning light", 1, far[:3], [(0.0, 60e3, 0.0), (0.0, 50e3, 0.0)],
               [(0, 0.31, C, 500.0), (1, 0.33, C, 300.0), (2, 0.36, C, 400.0)],
               [(2e6, 0.0, -0.4 * G0), (1e7, -0.4 * G0, -0.4 * G0)], [1e6, 1.2e7])
    yield Line("tower", 2, [(450.0, 20.0), (200.0, 30.0), (0.0, 100.0)],
               [(8.0, 2e7, 1.2e-5), (12.0, 4e7, 1.2e-5)], [(2, 1.0, None, None)],
               moments=[0, 86400], gravity=9.8012, gradient=3.086e-6)
    yield Line("shaft", 0, [(0.0, 50.0), (-700.0, 12.0), (-1200.0, 40.0)],
               [(0.9, 3e6, 1e-5), (0.9, 3e6, 2e-5)], [(0, 1.0, None, None)],
               moments=[86400], gravity=9.81, gradient=0.85e-6)
    yield Line("rack held in the middle", 1, [(2.0, 10.0), (0.0, 10.0), (-1.0, 5.0)],
               [(3.0, 5e6, 0.0), (3.0, 5e6, 0.0)], [(0, 0.4, None, None), (1, 0.6, None, None)],
               moments=[86400], gravity=9.80665, gradient=0.0)
    rng = random.Random(20260301)
    for index in range(7):
        count = rng.randint(2, 6)
        reference = rng.randrange(count)
        places = sorted((rng.uniform(-1, 1) * 10 ** rng.uniform(0, 5) for _ in range(count)),
                        reverse=True)
        places = [place - places[reference] for place in places]
        nodes = [(place, rng.choice([0.0, 10 ** rng.uniform(0, 4)])) for place in places]
        nodes[reference] = (0.0, 10 ** rng.uniform(1, 4))
        spans = []
        whole = sum(node[1] for node in nodes)
        for _ in range(count - 1):
            density = rng.choice([0.0, 10 ** rng.uniform(-3, 0)])
            whole += density * 1e5
            spans.append([density, None, rng.choice([0.0, rng.uniform(-1e-4, 1e-4)])])
        for span in spans:
            if rng.random() < 0.8:
                span[1] = whole * 10 ** rng.uniform(2, 5)
        engines = []
        rows = rng.sample(range(count), rng.randint(1, min(3, count)))
        for row in rows:
            speed = rng.choice([None, 10 ** rng.uniform(3.5, 6)])
            propellant = None
            if speed is not None and rng.random() < 0.7:
                propellant = 10 ** rng.uniform(1, 4)
            engines.append((row, rng.uniform(0.1, 1.0), speed, propellant))
        phases, last = [], 0.0
        for _ in range(rng.randint(1, 4)):
            target = last if rng.random() < 0.4 else rng.uniform(-8, 8)
            phases.append((rng.randint(10, 400), last, target))
            last = target
        end = sum(phase[0] for phase in phases)
        moments = sorted(rng.randint(0, end + 20) for _ in range(3))
        yield Line(f"random {index + 1}", reference, nodes, [tuple(span) for span in spans],
                   engines, phases, sorted(set(moments)))


# Output ----------------------------------------------------------------------------------------

def digits(value):
    return "0" if value == 0 else mp.nstr(value, 22, min_fixed=0, max_fixed=0, strip_zeros=False)


def maybe(value):
    return "" if value is None else repr(value)


def tables():
    out = {
        "cases.csv": ["case,reference,gravity_m_s2,gradient_per_s2"],
        "nodes.csv": ["case,row,position_m,mass_kg"],
        "spans.csv": ["case,gap,linear_density_kg_m,axial_stiffness_n,thermal_strain"],
        "engines.csv": ["case,engine,row,share,exhaust_speed_m_s,propellant_kg"],
        "phases.csv": ["case,start_as,length_as,from_m_s2,to_m_s2"],
        "forces.csv": ["case,at_as,gap,force_fore_n,force_aft_n,scale_fore_n,scale_aft_n"],
        "positions.csv": ["case,at_as,row,loaded_m,speed_m_s,clock_offset_s,offset_scale_s"],
        "thrust.csv": ["case,at_as,engine,force_n,used_kg"],
    }
    for line in cases():
        name = '"' + line.name + '"' if "," in line.name else line.name
        gravity = maybe(line.gravity)
        gradient = maybe(line.gradient) if line.gravity is not None else ""
        out["cases.csv"].append(f"{name},{line.reference},{gravity},{gradient}")
        for row, (position, mass) in enumerate(line.nodes):
            out["nodes.csv"].append(f"{name},{row},{position!r},{mass!r}")
        for gap, (density, stiffness, strain) in enumerate(line.spans):
            out["spans.csv"].append(f"{name},{gap},{density!r},{maybe(stiffness)},{strain!r}")
        for index, (row, share, speed, propellant) in enumerate(line.engines):
            out["engines.csv"].append(
                f"{name},{index},{row},{share!r},{maybe(speed)},{maybe(propellant)}")
        for start, length, first, last in line.phases:
            out["phases.csv"].append(f"{name},{start},{length},{first!r},{last!r}")
        rows = line.fly() if line.gravity is None else stand(line)
        for at, h, speeds, offsets, scales, forces, push, masses, used, drive in rows:
            g, gamma = drive
            rates = [1 + (g * x - gamma * x * x / 2) / C2 for x in h]
            sizes = force_scales(line, masses, abs(g))
            for gap, (fore, aft) in enumerate(forces):
                out["forces.csv"].append(
                    f"{name},{at},{gap},{digits(fore)},{digits(aft)},"
                    f"{digits(sizes[gap][0] / rates[gap])},{digits(sizes[gap][1] / rates[gap + 1])}")
            for row, position in enumerate(h):
                out["positions.csv"].append(
                    f"{name},{at},{row},{digits(position)},{digits(speeds[row])},"
                    f"{digits(offsets[row])},{digits(scales[row])}")
            shares = sum(exact(engine[1]) for engine in line.engines)
            for index, (row, share, _, _) in enumerate(line.engines):
                force = push * exact(share) / shares / rates[row]
                out["thrust.csv"].append(f"{name},{at},{index},{digits(force)},{digits(used[index])}")
    return {name: "\n".join(rows) + "\n" for name, rows in out.items()}


def force_scales(line, masses, g):
    """g (M_aft + S_aft M) at the fore and aft end of every gap: a scale, not a result."""
    whole = line.whole(masses)
    shares = sum(exact(engine[1]) for engine in line.engines)
    found = []
    for gap in range(len(line.spans)):
        mass = sum(masses[gap + 1:]) + sum(
            exact(line.spans[k][0]) * (exact(line.nodes[k][0]) - exact(line.nodes[k + 1][0]))
            for k in range(gap + 1, len(line.spans)))
        own = exact(line.spans[gap][0]) * (
            exact(line.nodes[gap][0]) - exact(line.nodes[gap + 1][0]))
        share = sum(exact(s) for row, s, _, _ in line.engines if row > gap) / shares
        found.append((g * (mass + own + share * whole), g * (mass + share * whole)))
    return found


def stand(line):
    g, gamma = exact(line.gravity), exact(line.gradient)
    masses = line.start_masses()
    h, forces, push = line.solve(g, masses)
    zeros = [mpf(0)] * len(line.nodes)
    rows = []
    for at in line.moments:
        offsets = [(g * x - gamma * x * x / 2) / C2 * at / ATTO for x in h]
        rows.append((at, h, zeros, offsets, [abs(x) for x in offsets], forces, push, masses,
                     [mpf(0)] * len(line.engines), (g, gamma)))
    return rows


def main():
    here = Path(__file__).resolve().parent
    made = tables()
    if "--check" in sys.argv[1:]:
        wrong = [name for name, text in made.items()
                 if not (here / name).exists() or (here / name).read_text() != text]
        for name in wrong:
            print(f"tests/data/loads/{name} differs from what make_loads.py makes", file=sys.stderr)
        sys.exit(1 if wrong else 0)
    for name, text in made.items():
        (here / name).write_text(text)


if __name__ == "__main__":
    main()
