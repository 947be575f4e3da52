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
170 plans with 969 phases; 3204 case rows (390 listed, 1295 edge, 927 random, 592 grid), 520 pairs,
539 positions for the horizon (242 of them realisable).
* Positions of 0 and 1 mm to 1e19 m, both signs; abs(alpha) 0 and 1e-12 to 1e6 m/s^2, and down to
  1e-41 beside the zero of a ramp; array times from -1e11 to 1e11 s, most of them odd attoseconds.
* Nodes at N = 1e-6 on either side, and N up to 1e8.
* Rapidities to 699.9, launch values on both sides of the largest double, total rapidities to 2535.
* Brakes that leave 1e-17 to 1e-22 of the total rapidity through accelerations whose doubles do not
  cancel, or exactly none.
* Ramps through zero with moments within 1 as of the zero of alpha and of the rapidity.
* Jumps, coasts, phases of 1 as and of 1e11 s, plans of 200 phases; phase ends exactly and 1 as to
  either side, before the plan and after it.
* Positions at, and up to two doubles from, the one where N vanishes, N = 0 exactly among them;
  zeros at a step of thrust, at a phase end and inside a ramp.

The exact arithmetic is in `plan.py`, the integration in `worldline.py`, the inputs in `inputs.py`,
the checks in `checks.py`.

Sources: Born, Ann. Phys. 335 (1909) 1; Rindler, Am. J. Phys. 34 (1966) 1174; Misner, Thorne &
Wheeler, Gravitation (1973), chapter 6.
"""

import math
import sys
from fractions import Fraction
from pathlib import Path

from mpmath import mp, mpf

# The modules beside this script must not leave compiled copies among the data files.
sys.dont_write_bytecode = True

from checks import check_exponential, check_integrator, check_sample  # noqa: E402
from inputs import Cases, Generator, add_edges, add_grid, add_listed, add_random  # noqa: E402
from inputs import horizon_inputs  # noqa: E402
from plan import ATTO, C, C2, SMALLEST_RATE  # noqa: E402
from worldline import Worldline, digits_for, number  # noqa: E402

LARGEST_DOUBLE = Fraction(sys.float_info.max)


def vanishes(pair):
    """A there-and-back plan can end at exactly zero, which no number of digits would settle."""
    value, scale = pair
    return abs(value) <= scale * mpf(10) ** -70


def same(coarse, fine):
    """Whether two (value, scale) agree to 42 digits, or both values vanish beside their scale."""
    with mp.workdps(60):
        near = [abs(a - b) <= abs(b) * mpf(10) ** -42 for a, b in zip(coarse, fine)]
        return near[1] and (near[0] or (vanishes(coarse) and vanishes(fine)))


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
                agreed &= same(low[0:2], high[0:2]) and same(low[2:4], high[2:4])
                values[position, moment] = high
        if agreed:
            break
        digits += digits // 2
        assert digits < 5_000, plan.name
    check_exponential(fine, [Fraction(moment, ATTO) for moment in moments])
    return values


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
    if room > 1:
        return ["", ""]
    return [forty(mpf(0) if vanishes((value, scale)) else value), forty(scale)]


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


def horizon_rows(inputs):
    yield "plan,position_m,realisable,phase,zero_at_s"
    for plan, positions in inputs:
        for position in positions:
            zero = plan.first_zero(position)
            fields = "1,," if zero is None else f"0,{zero[0]},{forty(zero[1])}"
            yield f"{plan.name},{position!r},{fields}"


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
            print(
                f"{name} differs from what this script makes, first at line {line}.\n"
                "If the change is meant, run this script without --check and commit the file.",
                file=sys.stderr,
            )
    return 1 if different else 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
