#!/usr/bin/env python3
# This script makes the CSV files beside it and needs Python 3.9 or later with mpmath 1.3.0.
# Run `python3 tests/data/links/make_links.py` to write them again, and
# `python3 tests/data/links/make_links.py --check` to make them in memory only, compare them
# byte for byte with the committed files, and leave with status 1 if any differs.
"""Reference values for light on, to and from a line under a filed thrust plan.

Method
------
Everything happens in the launch frame.  The reference node's worldline is integrated there,
dt = cosh(phi) dtau, dz = c sinh(phi) dtau, by a Taylor method of unlimited order in fixed-point
integers, the same for holds, ramps and coasts.  A node is at ct + h sinh(phi), z + h cosh(phi);
a station stands still; a released node runs straight on.  A ray is a straight line at the speed
of light; it is intersected with the other worldline by a bracketed Newton iteration on
c (t2 - t1) = +-(z2 - z1).  No integral weighted with a node's rate is ever formed.

Frequencies are products of wave vector and four-velocity at the two events.  Times on a clock are
integrals of dtau alpha-weighted as polynomials, h phi / c for a fixed node.

Digits
------
A plan is worked with 85 + 0.87 abs(phi) + log10(c tau / L) digits, then with 40 more; a case is
written when both agree to 36 digits (the two-way error to 12) and worked with still more until
they do.

Files
-----
* `plans.csv`: one row a phase; the acceleration runs linearly between its two values.
* `flights.csv`: one row for a link and an emission.  `kind` says how the case was drawn: `hold`
  and `ramp` mean that the whole round trip lies inside one phase.  Positions of moving ends are
  h + k alpha(tau); `from_k_s2` and `to_k_s2` are empty for fixed ends.  The two-way error is that
  of from -> to -> from, and empty for moving ends.
* `stations.csv`: a station's signal to a node and a node's to a station.
* `released.csv`: what is heard from a released node, and `passes.csv`: the nodes it meets.
"""

import math
import random
import sys
from bisect import bisect_right
from fractions import Fraction
from pathlib import Path

from mpmath import mp, mpf

C = 299_792_458
C2 = C * C
ATTO = 10**18
mp.dps = 60


# The worldline of the reference node -----------------------------------------------------------


class Plan:
    """Phases are (start, end, first and last acceleration), times in attoseconds."""

    def __init__(self, name, pieces):
        self.name, self.phases = name, []
        start = 0
        gained, self.largest = Fraction(0), Fraction(0)
        for duration, first, last in pieces:
            duration = int(duration)
            assert duration >= 1
            self.phases.append((start, start + duration, float(first), float(last)))
            start += duration
            length, a, b = Fraction(duration, ATTO), Fraction(first), Fraction(last)
            if a * b < 0:
                turn = gained + a / 2 * length * a / (a - b)
                self.largest = max(self.largest, abs(turn) / C)
            gained += (a + b) / 2 * length
            self.largest = max(self.largest, abs(gained) / C)
        self.end = start
        values = [a for phase in self.phases for a in phase[2:]] + [0.0]
        self.highest, self.lowest = max(values), min(values)
        self.worlds = {}

    def is_fit(self):
        return self.end <= 10**29 and self.largest <= 600

    def world(self, digits):
        if digits not in self.worlds:
            self.worlds[digits] = World(self, digits)
        return self.worlds[digits]


class World:
    """The plan's worldline in the launch frame; all numbers are integers over 2**bits, in s."""

    def __init__(self, plan, digits):
        self.plan = plan
        # Accelerations over c may be as small as 1e-22 per second.
        self.bits = int((digits + 2 * 0.87 * float(plan.largest)) * 3.3220) + 120
        self.one = 1 << self.bits
        self.starts, self.pieces = [], []
        time = position = phi = total = 0
        cosh, sinh = self.one, 0
        for start, end, first, last in plan.phases:
            swing = max(abs(first), abs(last)) / C * (end - start) / ATTO
            count = min(max(1, math.ceil(swing / 0.5)), end - start)
            for index in range(count):
                here = start + (end - start) * index // count
                there = start + (end - start) * (index + 1) // count
                f, l = Fraction(first), Fraction(last)
                slope = (l - f) / Fraction(end - start, ATTO) / C
                push = f / C + slope * Fraction(here - start, ATTO)
                piece = (here, self.fix(push), self.fix(slope), time, position, cosh, sinh, phi, total)
                self.starts.append(self.fix(Fraction(here, ATTO)))
                self.pieces.append(piece)
                length = self.fix(Fraction(there - here, ATTO))
                time, position, cosh, sinh, phi, total, _ = self.step(piece, length)
        self.starts.append(self.fix(Fraction(plan.end, ATTO)))
        self.pieces.append((plan.end, 0, 0, time, position, cosh, sinh, phi, total))

    def fix(self, value):
        return (value.numerator << self.bits) // value.denominator

    def mul(self, a, b):
        return (a * b) >> self.bits

    def real(self, value):
        return mpf(value) / self.one

    def step(self, piece, s):
        """Time, position, cosh, sinh, rapidity, total rapidity and push `s` into a piece."""
        _, push, slope, time, position, cosh, sinh, phi, total = piece
        bits = self.bits
        linear = (push * s) >> bits
        square = (((slope * s) >> bits) * s) >> bits
        c, d, c_old, d_old = cosh, sinh, 0, 0
        cosh_sum, sinh_sum, cosh_mean, sinh_mean = c, d, c, d
        n = 0
        while True:
            n += 1
            c_new = ((linear * d + square * d_old) >> bits) // n
            d_new = ((linear * c + square * c_old) >> bits) // n
            c_old, d_old, c, d = c, d, c_new, d_new
            if abs(c) + abs(d) + abs(c_old) + abs(d_old) <= 8:
                break
            cosh_sum += c
            sinh_sum += d
            cosh_mean += c // (n + 1)
            sinh_mean += d // (n + 1)
        now = push + ((slope * s) >> bits)
        swing = ((push + now) * s >> bits) >> 1
        if (push < 0) != (now < 0) and push and now:
            turn = abs(push) * (push * push + now * now) // (abs(push) + abs(now)) // abs(push)
            spent = ((turn * s) >> bits) >> 1
        else:
            spent = abs(swing)
        return (
            time + ((cosh_mean * s) >> bits),
            position + ((sinh_mean * s) >> bits),
            cosh_sum,
            sinh_sum,
            phi + swing,
            total + spent,
            now,
        )

    def at(self, tau):
        """The same at an array time; before the plan the line rests."""
        if tau < 0:
            return (tau, 0, self.one, 0, 0, 0, 0)
        low = bisect_right(self.starts, tau) - 1
        return self.step(self.pieces[low], tau - self.starts[low])

    def slope(self, tau):
        if tau < 0:
            return 0
        return self.pieces[bisect_right(self.starts, tau) - 1][2]


class Node:
    """A node at h + k alpha, as light time; k only for lines that stretch."""

    def __init__(self, world, h, k=None):
        self.world, self.h = world, world.fix(Fraction(h) / C)
        # k alpha / c = k * push, in seconds.
        self.k = None if k is None else world.fix(Fraction(k))

    def place(self, state):
        if self.k is None:
            return self.h
        return self.h + self.world.mul(self.k, state[6])

    def event(self, state):
        h = self.place(state)
        mul = self.world.mul
        return state[0] + mul(h, state[3]), state[1] + mul(h, state[2])

    def velocity(self, state, tau):
        """Derivative of the event by array time."""
        mul, one = self.world.mul, self.world.one
        rate = one + mul(self.place(state), state[6])
        t, z = mul(rate, state[2]), mul(rate, state[3])
        if self.k is not None:
            speed = mul(self.k, self.world.slope(tau))
            t, z = t + mul(speed, state[3]), z + mul(speed, state[2])
        return t, z

    def clock(self, start, end):
        """Time on the node's clock without the square of its speed, between array times."""
        world = self.world
        first, last = world.at(start), world.at(end)
        elapsed = end - start + world.mul(self.h, last[4] - first[4])
        if self.k is None:
            return elapsed
        edges = [start] + [s for s in world.starts if start < s < end] + [end]
        for a, b in zip(edges, edges[1:]):
            p, q = world.at(a)[6], world.at(b - 1)[6]
            cubic = world.mul(p, p) + world.mul(p, q) + world.mul(q, q)
            elapsed += world.mul(self.k, world.mul(cubic, b - a)) // 3
        return elapsed


def solve(function, low, high, guess):
    """Root of a rising function given with its derivative, by Newton inside a bracket."""
    # Positions of 1e19 m turn the last bit of the rapidity into 2**35 of the time.
    noise = 1 << 60
    x = guess
    for count in range(5000):
        value, slope, one = function(x)
        if value == 0 or high - low <= noise:
            return x
        if value < 0:
            low = max(low, x)
        else:
            high = min(high, x)
        nearer = (low + high) // 2
        if slope > 0 and count % 6 != 5:
            nearer = x - (value * one) // slope
            # A step out of the bracket lands just inside it.
            nearer = max(min(nearer, high - noise // 2), low + noise // 2)
        if abs(nearer - x) <= noise:
            return nearer
        x = nearer
    raise ArithmeticError("no convergence")


def meet(node, event, sign, tau, guess):
    """Array time at which a ray from an event meets a node; `tau` is a moment before it."""
    world = node.world

    def ahead(at):
        state = world.at(at)
        t, z = node.event(state)
        dt, dz = node.velocity(state, at)
        return (t - event[0]) - sign * (z - event[1]), dt - sign * dz, world.one

    if ahead(tau)[0] >= 0:
        return tau
    return solve_along(world, ahead, tau, guess)


def solve_along(world, function, low, guess):
    """Root of a rising function of array time, negative at `low`; piece by piece first."""
    first, last = bisect_right(world.starts, low), len(world.starts)
    while first < last:
        middle = (first + last) // 2
        if function(world.starts[middle])[0] < 0:
            low, first = world.starts[middle], middle + 1
        else:
            last = middle
    if first < len(world.starts):
        high = world.starts[first]
    else:
        # The line coasts, so the function is a straight line.
        value, slope, one = function(low)
        high = low - value * one // slope + (1 << 70)
        if high > world.one * 10**12:
            return None
    return solve(function, low, high, min(max(guess, low), high))


def gamma(world, dt, dz):
    """Interval along a velocity, per array time; an integer square root."""
    return math.isqrt(dt * dt - dz * dz)


def frequency(node, tau, sign):
    state = node.world.at(tau)
    dt, dz = node.velocity(state, tau)
    world = node.world
    return world.real(dt - sign * dz) / world.real(gamma(world, dt, dz))


# One link --------------------------------------------------------------------------------------


def felt(node, tau):
    """Proper acceleration over c along the line, with the end's own motion."""
    world = node.world
    state = world.at(tau)
    push, slope = world.real(state[6]), world.real(world.slope(tau))
    h = world.real(node.place(state))
    rate = 1 + push * h
    if node.k is None:
        return push / rate
    k = world.real(node.k)
    speed = k * slope
    beta = speed / rate
    rate_speed = slope * h + push * speed
    tilt_speed = -speed * rate_speed / rate**2 / (1 - beta**2)
    return (push + tilt_speed) / rate


def tilt(node, tau):
    world = node.world
    if node.k is None:
        return mpf(0)
    state = world.at(tau)
    rate = 1 + world.real(state[6]) * world.real(node.place(state))
    return mp.atanh(world.real(node.k) * world.real(world.slope(tau)) / rate)


def flight(world, sender, receiver, start):
    state = world.at(start)
    event = sender.event(state)
    apart = receiver.place(state) - sender.place(state)
    sign = 1 if apart > 0 else -1
    end = meet(receiver, event, sign, start, start + abs(apart))
    return sign, end


def link(plan, case, digits):
    world = plan.world(digits)
    sender = Node(world, case["from"], case.get("from_k"))
    receiver = Node(world, case["to"], case.get("to_k"))
    start = world.fix(Fraction(case["at"], ATTO))
    sign, end = flight(world, sender, receiver, start)
    ratio = frequency(receiver, end, sign) / frequency(sender, start, sign)
    a_from, a_to = felt(sender, start), felt(receiver, end)
    first, last = world.at(start), world.at(end)
    spent = world.real(last[5] - first[5]) + abs(tilt(sender, start)) + abs(tilt(receiver, end))
    back_sign, back = flight(world, receiver, sender, end)
    out = {
        "flight_array_s": world.real(end - start),
        "flight_emitter_s": world.real(sender.clock(start, end)),
        "flight_receiver_s": world.real(receiver.clock(start, end)),
        "received_shift": ratio - 1,
        "shift_scale": mp.expm1(spent),
        "shift_rate_per_s": -sign * ratio * (a_to - a_from * ratio),
        "shift_rate_scale": (abs(a_to) + abs(a_from)) * ratio,
        "round_trip_s": world.real(sender.clock(start, back)),
        "two_way_error_s": None,
    }
    if case.get("from_k") is None and case.get("to_k") is None:
        half = sender.clock(start, back)
        wanted = half // 2

        def reached(at):
            state = world.at(at)
            rate = world.one + world.mul(sender.h, state[6])
            return sender.clock(start, at) - wanted, rate, world.one

        middle = solve(reached, start, back, end)
        out["two_way_error_s"] = world.real(middle - end)
        if abs(out["two_way_error_s"]) < mpf(10) ** (-75) * out["round_trip_s"]:
            out["two_way_error_s"] = mpf(0)
    out["_until"] = back
    return out, world


def until_agreed(work, digits):
    """Works a case with two precisions until they agree."""
    first, _ = work(digits)
    while first is not None:
        digits += 40
        second, world = work(digits)
        agreed = True
        for key, value in second.items():
            if key.startswith("_") or value is None:
                continue
            other = first[key]
            exact = {"shift_rate_per_s": "shift_rate_scale", "received_shift": "shift_scale"}
            scale = abs(second[exact[key]]) if key in exact else abs(value)
            bound = mpf(10) ** (-36)
            if key == "two_way_error_s":
                bound, scale = mpf(10) ** (-12), scale + mpf(10) ** (-75) * second["round_trip_s"]
            if other is None or abs(other - value) > bound * scale:
                agreed = False
        if agreed:
            return second, world
        first = second
    return None, None


# Plans and cases drawn at random ---------------------------------------------------------------


class Draw:
    """A seeded generator that uses `random.random` alone, which is the same everywhere."""

    def __init__(self, seed):
        self.random = random.Random(seed).random

    def between(self, low, high):
        return low + (high - low) * self.random()

    def log(self, low, high):
        return 10 ** self.between(math.log10(low), math.log10(high))

    def sign(self):
        return 1.0 if self.random() < 0.5 else -1.0

    def pick(self, values):
        return values[int(self.random() * len(values)) % len(values)]


def limits(plan):
    """Positions between which N stays above 1e-6."""
    keep = 1 - 1e-6
    aft = -C2 / plan.highest * keep if plan.highest > 0 else -1e19
    fore = -C2 / plan.lowest * keep if plan.lowest < 0 else 1e19
    return max(aft, -1e19) * (1 - 1e-15), min(fore, 1e19) * (1 - 1e-15)


def position(draw, plan):
    aft, fore = limits(plan)
    if draw.random() < 0.35 and (aft > -1e19 or fore < 1e19):
        near = 1 - draw.log(1e-6, 1)
        if fore >= 1e19 or (aft > -1e19 and draw.random() < 0.5):
            return aft * near
        return fore * near
    value = draw.log(1e-3, 1e19 if draw.random() < 0.2 else 1e8) * draw.sign()
    return min(max(value, aft), fore)


def pair(draw, plan):
    aft, fore = limits(plan)
    while True:
        first = position(draw, plan)
        if draw.random() < 0.5:
            # Positions far out are spaced by more than a millimetre.
            span = draw.log(max(1e-3, abs(first) * 1e-12), 1e8)
            second = first + span * draw.sign()
        else:
            second = position(draw, plan)
        if aft <= second <= fore and abs(second - first) >= 1e-3:
            return (first, second) if draw.random() < 0.5 else (second, first)


def time_scale(plan_scale, span):
    """Roughly the flight time over a span at the plan's acceleration."""
    return min(abs(span) / C, 30 * C / plan_scale) + 1e-15


def random_plan(draw, name, kind):
    scale = draw.log(1e-6, 1e6)
    if kind == "everyday":
        scale = draw.log(1e-3, 30)
    natural = C / scale
    if kind in ("hold", "ramp", "everyday"):
        unit = draw.log(1e-9 * natural, 0.5 * natural)
        if kind == "everyday":
            unit = draw.log(1, 1e6)
    elif kind == "many":
        unit = draw.log(1e-6 * natural, 0.05 * natural)
    else:
        unit = draw.log(1e-10 * natural, 2 * natural)
    count = {"many": 200}.get(kind, 1 + int(draw.random() * 7))
    pieces, last = [], 0.0
    for index in range(count):
        duration = max(1, int(draw.log(0.1, 3) * unit * ATTO))
        size = draw.pick([1.0, -1.0, 0.0, draw.between(-1, 1), draw.between(-1, 1)]) * scale
        roll = draw.random()
        if kind == "hold":
            roll = 0.0
        if kind == "ramp":
            roll = 0.9
        if kind == "reversal":
            size = scale * draw.between(0.2, 1) * (-1.0) ** index
        if roll < 0.35:
            pieces.append((duration, size, size))
        elif roll < 0.85:
            pieces.append((duration, last, size))
        else:
            pieces.append((duration, size, draw.between(-1, 1) * scale))
        last = pieces[-1][2]
    return Plan(name, pieces)


def emission(draw, plan, pair_s):
    """A moment whose flight is likely to be interesting."""
    end = plan.end
    roll = draw.random()
    if roll < 0.55:
        return int(draw.random() * end)
    boundary = draw.pick([0, end] + [phase[0] for phase in plan.phases])
    before = int(draw.between(-0.3, 1.2) * pair_s * ATTO)
    if roll < 0.9:
        return boundary - before
    return boundary


def inside_one_phase(plan, start, end_fixed, world):
    for first, last, a, b in plan.phases:
        if first <= start and end_fixed < world.fix(Fraction(last, ATTO)):
            if start < last:
                return "hold" if a == b else "ramp"
    if start >= plan.end or end_fixed < 0:
        return "hold"
    return "across"


def digits_for(plan, spans, moments):
    longest = max([1.0] + [abs(m) / ATTO for m in moments])
    # In steps, so that the worldlines of a plan can be used again.
    return 85 + 20 * math.ceil(max(0, math.log10(C * longest / min(spans))) / 20)


FLIGHT_KEYS = [
    "flight_array_s", "flight_emitter_s", "flight_receiver_s", "received_shift", "shift_scale",
    "shift_rate_per_s", "shift_rate_scale", "round_trip_s", "two_way_error_s",
]


def text(value, digits=34):
    if value is None:
        return ""
    if value == 0:
        return "0"
    return mp.nstr(value, digits, min_fixed=1, max_fixed=0)


def flights(plans_out):
    draw = Draw(20260105)
    rows = []
    kinds = ["hold"] * 22 + ["ramp"] * 34 + ["everyday"] * 22 + ["mixed"] * 70 + ["reversal"] * 34
    kinds += ["many"] * 3
    for number, kind in enumerate(kinds):
        while True:
            plan = random_plan(draw, f"{kind}{number}", kind)
            if plan.is_fit():
                break
        plans_out.append(plan)
        for index in range(14):
            a, b = pair(draw, plan)
            scale = max(abs(plan.highest), abs(plan.lowest), 1e-9)
            at = emission(draw, plan, time_scale(scale, b - a))
            at = max(at, -10**28)
            case = {"from": a, "to": b, "at": at}
            add_flight(rows, plan, case)
    # Ends that move with the thrust: never across a step.
    for number in range(24):
        while True:
            plan = smooth_plan(draw, f"stretch{number}")
            if plan.is_fit():
                break
        plans_out.append(plan)
        for index in range(10):
            a, b = pair(draw, plan)
            if abs(b - a) < 1 or abs(a) + abs(b) > 1e9:
                continue
            at = max(emission(draw, plan, abs(b - a) / C), -10**28)
            size = max(abs(plan.highest), abs(plan.lowest))
            strain = draw.log(1e-7, 1e-3) * abs(b - a) / size
            case = {"from": a, "to": b, "at": at}
            case["from_k"], case["to_k"] = -strain * draw.random(), strain * draw.random()
            add_flight(rows, plan, case)
    return rows


def smooth_plan(draw, name):
    scale = draw.log(1e-3, 100)
    pieces, last = [], 0.0
    unit = draw.log(1e-4, 1e4)
    for index in range(2 + int(draw.random() * 5)):
        size = scale * draw.between(-1, 1)
        duration = max(1, int(draw.log(0.1, 3) * unit * ATTO))
        pieces.append((duration, last, size))
        last = size
    pieces.append((max(1, int(unit * ATTO)), last, 0.0))
    return Plan(name, pieces)


def add_flight(rows, plan, case):
    digits = digits_for(plan, [abs(case["to"] - case["from"])], [plan.end, case["at"]])
    out, world = until_agreed(lambda d: link(plan, case, d), digits)
    kind = inside_one_phase(plan, case["at"], out["_until"], world)
    if "from_k" in case:
        kind = "moving"
    cells = [plan.name, kind, str(case["at"]), repr(case["from"]), repr(case["to"])]
    cells += [repr(case["from_k"]) if "from_k" in case else "",
              repr(case["to_k"]) if "to_k" in case else ""]
    for key in FLIGHT_KEYS:
        digits = 17 if key.endswith("scale") else 20 if key == "two_way_error_s" else 34
        cells.append(text(out[key], digits))
    rows.append(",".join(cells))


# Stations --------------------------------------------------------------------------------------


STATION_KEYS = [
    "node_array_s", "node_scale_s", "sent_launch_s", "arrives_launch_s", "age_launch_s",
    "launch_scale_s", "ln_ratio", "ln_scale", "received_shift", "last_call_s", "last_scale_s",
]


def node_moment_at_launch(node, launch):
    """Array time at which a node has a launch time."""
    world = node.world

    def ahead(at):
        state = world.at(at)
        t, _ = node.event(state)
        dt, _ = node.velocity(state, at)
        return t - launch, dt, world.one

    low, width = -world.one, world.one
    while ahead(low)[0] >= 0:
        low, width = low - width, 4 * width
    return solve_along(world, ahead, low, launch)


def scales(world, node, tau, station, sign):
    """Sums of moduli at the node's event: over the slope, and of its launch time."""
    state = world.at(tau)
    real = world.real
    null = abs(real(state[0] - sign * state[1]))
    factor = real(state[2] - sign * state[3])
    h = abs(real(node.h))
    rate = 1 + real(world.mul(node.h, state[6]))
    moduli = null + h * factor
    launch = abs(real(state[0])) + abs(real(state[1])) + h * real(state[2]) + abs(station)
    return moduli, rate * factor, launch


def contact(plan, case, digits):
    world = plan.world(digits)
    node = Node(world, case["node"])
    station = world.fix(Fraction(case["station"]) / C)
    out = dict.fromkeys(STATION_KEYS)
    if case["direction"] == "to line":
        sent = world.fix(Fraction(case["sent"]))
        start = node_moment_at_launch(node, sent)
        if start is None:
            return None, world
        _, z = node.event(world.at(start))
        sign = 1 if z > station else -1
        tau = meet(node, (sent, station), sign, start, start + abs(z - station))
        if tau is None:
            return None, world
        arrives, _ = node.event(world.at(tau))
        ratio_sign = -sign
        moduli, slope, launch = scales(world, node, tau, world.real(station), sign)
        moduli += abs(world.real(sent)) + abs(world.real(station))
        out["node_array_s"] = world.real(tau)
        out["node_scale_s"] = moduli / slope
        push = world.real(world.at(tau)[6])
        extra = abs(push) * moduli / slope
    else:
        tau = world.fix(Fraction(case["sent"], ATTO))
        sent, z = node.event(world.at(tau))
        sign = -1 if z > station else 1
        arrives = sent + abs(z - station)
        ratio_sign = sign
        _, _, launch = scales(world, node, tau, world.real(station), sign)
        extra = 0
    state = world.at(tau)
    out["sent_launch_s"] = world.real(sent)
    out["arrives_launch_s"] = world.real(arrives)
    out["age_launch_s"] = world.real(arrives - sent)
    out["launch_scale_s"] = launch + abs(world.real(sent))
    # From the four-velocity in the launch frame, not from the rapidity.
    out["ln_ratio"] = ratio_sign * mp.log(world.real(state[2] + state[3]))
    out["ln_scale"] = world.real(state[5]) + extra
    out["received_shift"] = mp.expm1(out["ln_ratio"])
    if case["direction"] == "to station" and state[6] != 0:
        push, one = world.real(state[6]), world.one
        side = 1 if push > 0 else -1
        # The centre of the hyperbola; t - z of it loses the digits of exp(2 phi).
        with mp.workdps(60 + int(1.8 * plan.largest)):
            push = world.real(state[6])
            centre_t = world.real(state[0]) - world.real(state[3]) / push
            centre_z = world.real(state[1]) - world.real(state[2]) / push
            out["last_call_s"] = centre_t + side * (world.real(station) - centre_z)
        null = abs(world.real(state[0] - side * state[1]))
        factor = world.real(state[2] - side * state[3])
        out["last_scale_s"] = abs(world.real(station)) + null + factor / abs(push)
    return out, world


def contact_agreed(plan, case, digits):
    first, _ = contact(plan, case, digits)
    while first is not None:
        digits += 40
        second, _ = contact(plan, case, digits)
        agreed = all(
            value is None or abs(value - first[key]) <= mpf(10) ** (-33) * abs(value)
            or abs(value) < mpf(10) ** (-70)
            for key, value in second.items()
        )
        if agreed:
            return second
        first = second
    return None


def stations(plans_out):
    draw = Draw(20260106)
    rows = []
    for number in range(60):
        while True:
            plan = random_plan(draw, f"reach{number}", "mixed")
            if number % 3 == 0:
                plan = fast_plan(draw, f"reach{number}", 250 if number % 6 == 0 else 20)
            if plan.is_fit():
                break
        plans_out.append(plan)
        for index in range(12):
            case = {"node": position(draw, plan), "direction": ["to line", "to station"][index % 2]}
            natural = C2 / max(abs(plan.highest), abs(plan.lowest), 1e-6)
            case["station"] = draw.sign() * draw.log(1e-4, 1e3) * natural
            if index % 12 == 2:
                case["station"] = case["node"]
            if case["direction"] == "to line":
                case["sent"] = draw.sign() * draw.log(1e-4, 1e3) * natural / C
            else:
                case["sent"] = int(draw.between(-0.1, 1.2) * plan.end)
            longest = max(abs(case["station"]), abs(case["node"]), 1.0)
            digits = digits_for(plan, [1e-3 / longest], [plan.end])
            out = contact_agreed(plan, case, digits)
            if out is None or abs(out["node_array_s"] or 0) > 9e10:
                continue
            sent = repr(case["sent"]) if isinstance(case["sent"], float) else str(case["sent"])
            cells = [plan.name, case["direction"], repr(case["station"]), repr(case["node"]), sent]
            for key in STATION_KEYS:
                value = out[key]
                if value is not None and abs(value) > sys.float_info.max:
                    value = None
                cells.append(text(value, 17 if "scale" in key else 34))
            rows.append(",".join(cells))
    return rows


def fast_plan(draw, name, most):
    """Holds and ramps that gain rapidities of tens and hundreds."""
    scale = draw.log(1e-2, 1e4)
    pieces, last = [], 0.0
    for index in range(1 + int(draw.random() * 4)):
        size = draw.sign() * scale * draw.between(0.1, 1)
        duration = max(1, int(min(draw.between(0.05, 1) * most * C / scale, 2e10) * ATTO))
        if draw.random() < 0.6:
            pieces.append((duration, size, size))
        else:
            pieces.append((duration, last, size))
        last = size
    return Plan(name, pieces)


# Released nodes --------------------------------------------------------------------------------


def release_frame(world, node, tau):
    state = world.at(tau)
    return node.event(state), state[2], state[3]


def seen_from(world, frame, event):
    """An event in the rest frame of the released node, counted from its release."""
    (t0, z0), cosh, sinh = frame
    t, z = event[0] - t0, event[1] - z0
    mul = world.mul
    return mul(t, cosh) - mul(z, sinh), mul(z, cosh) - mul(t, sinh)


def heard(plan, case, digits):
    world = plan.world(digits)
    node, other = Node(world, case["released"]), Node(world, case["node"])
    tau = world.fix(Fraction(case["at"], ATTO))
    frame = release_frame(world, node, tau)
    s = world.fix(Fraction(case["own"]))
    event = (
        frame[0][0] + world.mul(s, frame[1]),
        frame[0][1] + world.mul(s, frame[2]),
    )
    # Whichever way the node lies at the launch time of the tick.
    launch = node_moment_at_launch(other, event[0])
    if launch is None:
        return None, world
    _, z = other.event(world.at(launch))
    sign = 1 if z > event[1] else -1
    received = meet(other, event, sign, launch, max(launch, tau) + abs(z - event[1]))
    if received is None:
        return None, world
    state = world.at(received)
    own = world.real(frame[1] - sign * frame[2])
    ratio = world.real(state[2] - sign * state[3]) / own
    spent = world.real(abs(state[5] - world.at(tau)[5]))
    return {
        "since_release_s": world.real(received - tau),
        "received_shift": ratio - 1,
        "shift_scale": mp.expm1(spent),
    }, world


def passes(plan, case, digits):
    world = plan.world(digits)
    node, other = Node(world, case["released"]), Node(world, case["node"])
    tau = world.fix(Fraction(case["at"], ATTO))
    frame = release_frame(world, node, tau)
    until = world.fix(Fraction(case["until"], ATTO))

    def away(at):
        return seen_from(world, frame, other.event(world.at(at)))[1]

    edges = [tau] + [s for s in world.starts if tau < s < until] + [until]
    found = []
    for first, last in zip(edges, edges[1:]):
        grid = [first + (last - first) * k // 12 for k in range(13)]
        values = [away(at) for at in grid]
        for a, b, p, q in zip(grid, grid[1:], values, values[1:]):
            if (p < 0) == (q < 0) or p == 0:
                continue
            low, high = a, b
            rising = p < 0
            for _ in range(200):
                # Regula falsi with the Illinois weight, then halving.
                middle = (low + high) // 2
                value = away(middle)
                if (value < 0) == rising:
                    low = middle
                else:
                    high = middle
            found.append(low)
    out = []
    for at in found:
        state = world.at(at)
        own, _ = seen_from(world, frame, other.event(state))
        cosh = world.mul(state[2], frame[1]) - world.mul(state[3], frame[2])
        sinh = world.mul(state[3], frame[1]) - world.mul(state[2], frame[2])
        rate = world.one + world.mul(other.h, state[6])
        apart = abs(world.real(node.h - other.h))
        bulge = abs(world.real(other.h)) * (world.real(cosh) - 1)
        moduli = apart + bulge + abs(apart - bulge)
        slope = world.real(rate) * abs(world.real(sinh))
        out.append(
            (
                world.real(own),
                world.real(at - tau),
                abs(world.real(sinh) / world.real(cosh)) * C,
                moduli / slope,
            )
        )
    return out


def released(plans_out):
    draw = Draw(20260107)
    heard_rows, pass_rows = [], []
    for number in range(40):
        while True:
            kind = ["mixed", "reversal", "hold", "ramp"][number % 4]
            plan = random_plan(draw, f"release{number}", kind)
            if number % 5 == 0:
                plan = fast_plan(draw, f"release{number}", 6)
            if plan.is_fit() and plan.largest < 20:
                break
        plans_out.append(plan)
        natural = C / max(abs(plan.highest), abs(plan.lowest), 1e-6)
        for index in range(6):
            node, other = pair(draw, plan)
            at = int(draw.between(-0.05, 1.0) * plan.end)
            case = {"released": node, "node": other, "at": at}
            case["own"] = draw.log(1e-6, 30) * natural
            digits = digits_for(plan, [1e-3], [plan.end]) + 20
            out, _ = until_agreed(lambda d: heard(plan, case, d), digits)
            if out is None or out["since_release_s"] * ATTO + at > 9e28:
                continue
            cells = [plan.name, str(at), repr(node), repr(other), repr(case["own"])]
            cells += [text(out["since_release_s"]), text(out["received_shift"])]
            cells.append(text(out["shift_scale"], 17))
            heard_rows.append(",".join(cells))
        for index in range(3):
            node, other = pair(draw, plan)
            # Near enough to be met.
            aft, fore = limits(plan)
            reach = draw.log(1e-8, 1) * C * natural
            other = min(max(node + draw.sign() * reach, aft), fore)
            if abs(other - node) < 1e-3:
                continue
            at = int(draw.between(-0.05, 1.0) * plan.end)
            case = {"released": node, "node": other, "at": at, "until": 3 * plan.end + 1}
            digits = digits_for(plan, [1e-3], [plan.end]) + 40
            found = passes(plan, case, digits)
            cells = [plan.name, str(at), repr(node), repr(other), str(case["until"])]
            if not found:
                pass_rows.append(",".join(cells + ["", "", "", "", "0"]))
            for row in found:
                values = [text(value) for value in row[:3]] + [text(row[3], 17)]
                pass_rows.append(",".join(cells + values + [str(len(found))]))
    return heard_rows, pass_rows


def write_plans(plans):
    lines = ["plan,start_as,end_as,from_m_s2,to_m_s2"]
    for plan in plans:
        for start, end, first, last in plan.phases:
            lines.append(f"{plan.name},{start},{end},{first!r},{last!r}")
    return "\n".join(lines) + "\n"


def make():
    plans = []
    head = "plan,kind,emitted_as,from_m,to_m,from_k_s2,to_k_s2," + ",".join(FLIGHT_KEYS)
    files = {"flights.csv": "\n".join([head] + flights(plans)) + "\n"}
    head = "plan,direction,station_m,node_m,sent," + ",".join(STATION_KEYS)
    files["stations.csv"] = "\n".join([head] + stations(plans)) + "\n"
    heard_rows, pass_rows = released(plans)
    head = "plan,at_as,released_m,node_m,own_time_s,since_release_s,received_shift,shift_scale"
    files["released.csv"] = "\n".join([head] + heard_rows) + "\n"
    head = "plan,at_as,released_m,node_m,until_as,own_time_s,since_release_s,closing_speed_m_s"
    files["passes.csv"] = "\n".join([head + ",scale_s,count"] + pass_rows) + "\n"
    files["plans.csv"] = write_plans(plans)
    return files


def main():
    here = Path(__file__).resolve().parent
    check = sys.argv[1:] == ["--check"]
    if sys.argv[1:] and not check:
        sys.exit("usage: make_links.py [--check]")
    different = []
    for name, made in make().items():
        path = here / name
        if not check:
            path.write_text(made, encoding="utf-8")
        elif not path.is_file() or path.read_text(encoding="utf-8") != made:
            different.append(name)
    if different:
        sys.exit("different: " + ", ".join(different))


if __name__ == "__main__":
    main()
