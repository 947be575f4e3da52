#!/usr/bin/env python3
# This script makes every CSV file beside it and needs Python 3.9 or later with mpmath 1.3.0.
# Run `python3 tests/data/history/make_history.py` to write the files again, and with `--check`
# to make them in memory only, compare them byte for byte with the committed files, and leave
# with status 1 if any differs.
"""Logged histories of thrust, and what clocks on the line show under them.

A history is a table of points of array time and acceleration, straight between them, zero before
the first and from the last on; two points at one time are a jump.  The histories here are made
from seeds:

* `bench`: 5000 points every tenth of a second or so, noise about 0.2 m/s^2.
* `uneven`: 1500 points at odd attoseconds, from 1 us to days apart, both signs, jumps, coasts.
* `strong`: 800 points up to 1e6 m/s^2 over years, to rapidities beyond 300.
* `brake`: 1200 points that are mirrored about the middle and end with a rapidity that is nothing
  beside what was gained, but for one point.
* `late`: a short history whose first point stands long after array time zero.

`cases.csv` holds what holds at a moment: at points, one attosecond to either side, between them,
before the first and after the last.  Method, digits and sources are those of the reference beside
it, `tests/data/reference/make_reference.py`: rational arithmetic for everything that is rational,
a Taylor integration of the worldline in fixed-point integers for launch time and position.
"""

import io
import random
import sys
from fractions import Fraction
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE.parent / "reference"))

from mpmath import mp, mpf  # noqa: E402

from plan import ATTO, C, C2, Plan  # noqa: E402
from worldline import Worldline  # noqa: E402

LARGEST_DOUBLE = Fraction(sys.float_info.max)


def uniform(source, low, high):
    return low + (high - low) * source.random()


def rounded(value, digits=6):
    """A double with few digits, as a logger writes it."""
    return float(f"{value:.{digits}g}")


def bench(source):
    points, time = [], 0
    for _ in range(5_000):
        points.append((time, rounded(0.2 + 0.05 * uniform(source, -1, 1))))
        time += 100_000_000_000_000_000 + source.getrandbits(40)
    return points


def uneven(source):
    points, time = [], 0
    while len(points) < 1500:
        kind = source.getrandbits(4)
        if kind == 0 and points:
            points.append((time, 0.0))
            time += source.getrandbits(68)
            points.append((time, 0.0))
            continue
        size = 10 ** uniform(source, -6, 1)
        points.append((time, rounded(size * (1 if source.getrandbits(1) else -1), 9)))
        if kind == 1:
            points.append((time, rounded(uniform(source, -3, 3), 17)))
        time += 1 + source.getrandbits(40 + source.getrandbits(5))
    return points


def strong(source):
    points, time, level = [], 0, 1e3
    for _ in range(800):
        level = min(max(abs(level) * 10 ** uniform(source, -0.5, 0.5), 1.0), 1e6)
        points.append((time, rounded(level if source.getrandbits(3) else -level, 12)))
        time += 1 + source.getrandbits(74)
    return points


def brake(source):
    times, levels, time = [], [], 0
    for _ in range(600):
        times.append(time)
        levels.append(rounded(uniform(source, 0.5, 30), 14))
        time += 1 + source.getrandbits(62)
    points = list(zip(times, levels))
    end = 2 * time
    points += [(end - at, -level) for at, level in reversed(points)]
    # One point is off by the last bits of its double, so that a little remains.
    at, level = points[900]
    points[900] = (at, level * (1 + 2.0**-50))
    return points


def late(source):
    time = 123_456_789 * ATTO + 1
    points = []
    for _ in range(5):
        points.append((time, rounded(uniform(source, -9, 9), 17)))
        time += 3600 * ATTO
    return points


HISTORIES = {"bench": bench, "uneven": uneven, "strong": strong, "brake": brake, "late": late}


def plan_of(name, points):
    pieces = []
    if points[0][0] > 0:
        pieces.append((points[0][0], 0.0, 0.0))
    for (start, first), (end, last) in zip(points, points[1:]):
        if end > start:
            pieces.append((end - start, first, last))
    return Plan(name, pieces)


def decimal(fraction):
    """40 significant digits, or `0`."""
    if fraction == 0:
        return "0"
    with mp.workdps(60):
        return mp.nstr(mpf(fraction.numerator) / fraction.denominator, 40, strip_zeros=True)


def seconds(count):
    whole, part = divmod(count, ATTO)
    return f"{whole}.{part:018d}".rstrip("0").rstrip(".") if part else str(whole)


def moments_of(source, points, count):
    end = points[-1][0]
    moments = [-1, 0, 1, points[0][0], end - 1, end, end + 1, 2 * end]
    for _ in range(count):
        place = source.getrandbits(32) % len(points)
        kind = source.getrandbits(2)
        at = points[place][0]
        if kind == 3:
            at += source.getrandbits(120) % max(points[min(place + 1, len(points) - 1)][0] - at, 1)
        moments.append(at + (0, 1, -1, 0)[kind])
    return sorted(set(moments))


def positions_of(source, plan):
    found = [0.0]
    while len(found) < 3:
        size = 10 ** uniform(source, -3, 12)
        position = size if source.getrandbits(1) else -size
        if plan.smallest_rate(position) >= Fraction(1, 10**6):
            found.append(position)
    return found


COLUMNS = (
    "history,at_as,position_m,acceleration_m_s2,rapidity,total_rapidity,rate_minus_one,"
    "felt_acceleration_m_s2,redshift,clock_offset_s,proper_time_s,launch_time_s,"
    "launch_time_scale_s,launch_position_m,launch_position_scale_m"
)


def launch_of(worldlines, time):
    """t, z, cosh, sinh and the integral of abs(sinh), by two precisions that agree."""
    runs = []
    for worldline in worldlines:
        _, plus, minus, sum_plus, sum_minus, sum_abs = worldline.state(time)
        one = 1 << worldline.bits
        values = (
            Fraction(sum_plus + sum_minus, 2 * one),
            Fraction(C * (sum_plus - sum_minus), 2 * one),
            Fraction(plus + minus, 2 * one),
            Fraction(plus - minus, 2 * one),
            Fraction(C * sum_abs, one),
        )
        runs.append(values)
    # A sum that nearly cancels agrees beside its terms, which is what the scales stand for.
    scales = (runs[0][2], C * runs[0][2], runs[0][2], runs[0][2], C * runs[0][2])
    for low, high, scale in zip(*runs, scales):
        assert abs(low - high) <= (abs(high) + scale * Fraction(1, 10**6)) * Fraction(1, 10**40)
    return runs[1]


def cases_of(name, points):
    plan = plan_of(name, points)
    source = random.Random(f"cases {name}")
    digits = 60 + int(0.9 * float(plan.max_rapidity)) + 30
    worldlines = [Worldline(plan, digits), Worldline(plan, digits + 40)]
    lines = []
    for at in moments_of(source, points, 60):
        time = Fraction(at, ATTO)
        acceleration = plan.acceleration(time)
        rapidity, total = plan.rapidities(time)
        t, z, cosh, sinh, swept = launch_of(worldlines, time)
        for position in positions_of(source, plan):
            h = Fraction(position)
            drive = acceleration * h / C2
            offset = h * rapidity / C
            row = [
                acceleration,
                rapidity,
                total,
                drive,
                acceleration / (1 + drive),
                -drive / (1 + drive),
                offset,
                time + offset,
                t + h * sinh / C,
                abs(t) + abs(h * sinh) / C,
                z + h * cosh,
                abs(swept) + abs(h) * cosh,
            ]
            assert all(abs(value) < LARGEST_DOUBLE for value in row)
            lines.append(",".join([name, str(at), repr(position)] + [decimal(v) for v in row]))
    return lines


def files():
    made, cases = {}, [COLUMNS]
    for name, make in HISTORIES.items():
        points = make(random.Random(f"history {name}"))
        out = io.StringIO()
        out.write("at_s,acceleration_m_s2\n")
        for at, level in points:
            out.write(f"{seconds(at)},{level!r}\n")
        made[f"{name}.csv"] = out.getvalue()
        cases += cases_of(name, points)
    made["cases.csv"] = "\n".join(cases) + "\n"
    return made


def main():
    check = "--check" in sys.argv[1:]
    bad = 0
    for name, text in files().items():
        path = HERE / name
        if not check:
            path.write_text(text)
        elif not path.exists() or path.read_text() != text:
            print(f"{path} is not what this script makes", file=sys.stderr)
            bad = 1
    print("the histories are " + ("different" if bad else "as made" if check else "made"))
    sys.exit(bad)


main()
