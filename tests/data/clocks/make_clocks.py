#!/usr/bin/env python3
# Makes `noise.csv` and `resolve.csv` beside it; needs Python 3.9 or later with mpmath 1.3.0.
# `--check` makes them in memory, compares byte for byte, and leaves with status 1 on a difference.
"""Reference values for the stability of clocks, from their spectra.

`noise.csv`: one row for each kind of noise, bandwidth and averaging time.  The Allan variance is
the integral 2 int S_y(f) sin^4(pi t f)/(pi t f)^2 df over the one-sided spectrum S_y = h f^a, up to
the bandwidth for phase noise and over all frequencies for frequency noise.  The column is the ratio
of the deviation to the one at 1 s, which is what a layout states.  None of the closed laws is used:
with x = pi t f the integral over frequency noise is one number a power, found by quadrature between
the zeros of the sine and an integrated tail; phase noise is integrated the same way up to the
bandwidth.  Phase noise is sharply cut, so `f_h t` are whole numbers, where the terms that the
standard leaves out are smallest; the tolerance column says what is left of them.

`resolve.csv`: shortest averaging time at which a difference reaches k times the deviation of a sum
of laws, found by scanning 40 decades for the first crossing and bisecting it at 50 digits.  Here the
laws are those of IEEE Std 1139, which `noise.csv` confirms.
"""

import sys
from pathlib import Path

from mpmath import euler, inf, log, mp, mpf, nsum, pi, quad, sin, sqrt

mp.dps = 30
HERE = Path(__file__).resolve().parent


def frequency_noise_integral(a):
    """int_0^inf x^(a-2) sin^4 x dx: quadrature over half periods, then a tail by its mean 3/8 and
    the oscillating rest sin^4 x - 3/8 = -cos(2x)/2 + cos(4x)/8, summed over periods."""
    power = a - 2
    head = quad(lambda x: x**power * sin(x) ** 4, [k * pi / 2 for k in range(0, 41)], method="gauss-legendre")
    start = 20 * pi
    mean = mpf(3) / 8 * start ** (power + 1) / -(power + 1)
    rest = nsum(
        lambda k: quad(
            lambda x: x**power * (sin(x) ** 4 - mpf(3) / 8), [start + k * pi, start + (k + 1) * pi],
            method="gauss-legendre",
        ),
        [0, inf],
    )
    return head + mean + rest


def variance(kind, t, bandwidth):
    """Allan variance of S_y = f^a at an averaging time."""
    a = {"white_pm": 2, "flicker_pm": 1, "white_fm": 0, "flicker_fm": -1, "random_walk_fm": -2}[kind]
    # f = x/(pi t): 2 int (x/(pi t))^a sin^4 x / x^2 dx / (pi t)
    scale = 2 / (pi * t) ** (a + 1)
    if a <= 0:
        return scale * INTEGRALS[a]
    top = pi * t * bandwidth
    count = int(round(float(2 * top / pi)))
    assert abs(count * pi / 2 - top) < mpf(10) ** -20, "whole numbers of f_h t"
    zeros = [k * pi / 2 for k in range(count + 1)]
    return scale * quad(lambda x: x ** (a - 2) * sin(x) ** 4, zeros, method="gauss-legendre", maxdegree=4)


INTEGRALS = {a: frequency_noise_integral(a) for a in (0, -1, -2)}


def check_coefficients():
    """The coefficients of table B.2 of IEEE Std 1139-2008 (from memory), against the integrals."""
    for kind, wanted in (
        ("white_fm", mpf(1) / 2),
        ("flicker_fm", 2 * log(2)),
        ("random_walk_fm", 2 * pi**2 / 3),
    ):
        got = variance(kind, mpf(1), None)
        assert abs(got / wanted - 1) < mpf(10) ** -18, (kind, got, wanted)
    got = variance("white_pm", mpf(1), 10) * 4 * pi**2 / 30
    assert abs(got - 1) < mpf(10) ** -15, got
    # 1.039448 at f_h t = 10 where the standard prints 1.038: what is left out dies away.
    got = variance("flicker_pm", mpf(1), 10) * 4 * pi**2 - 3 * log(20 * pi)
    assert abs(got - mpf("1.039448")) < mpf(10) ** -6, got


def noise_rows():
    yield "kind,bandwidth_hz,averaging_s,deviation_over_that_at_1_s,tolerance"
    for kind in ("white_fm", "flicker_fm", "random_walk_fm"):
        for t in ("0.01", "3", "3600", "1e6"):
            ratio = sqrt(variance(kind, mpf(t), None) / variance(kind, mpf(1), None))
            yield f"{kind},1,{t},{mp.nstr(ratio, 20)},4e-16"
    for kind, tolerance in (("white_pm", "4e-16"), ("flicker_pm", None)):
        for bandwidth, t in ((10, 2), (10, 10), (100, 3)):
            ratio = sqrt(variance(kind, mpf(t), bandwidth) / variance(kind, mpf(1), bandwidth))
            # The left-out terms fall with the square of f_h t; the largest is at 1 s.
            allowed = tolerance or ("5e-5" if bandwidth == 10 else "5e-7")
            yield f"{kind},{bandwidth},{t},{mp.nstr(ratio, 20)},{allowed}"


def bracket(x):
    return 3 * euler - log(2) + 3 * log(x)


CLOCKS = {
    # white_pm, flicker_pm, white_fm, flicker_fm, random_walk_fm, bandwidth, drift
    "lattice": ("0", "0", "6e-17", "2e-18", "0", "10", "0"),
    "maser": ("1.2e-13", "0", "6e-14", "4e-16", "1e-20", "1", "2.3e-21"),
    "crystal": ("4e-13", "2e-13", "0", "1e-13", "3e-15", "10", "3.5e-16"),
    "phase": ("0", "3e-16", "0", "0", "0", "0.5", "0"),
    "walker": ("1e-15", "5e-16", "2e-17", "0", "1e-20", "100", "1e-24"),
}

PAIRS = [
    # first, second, link, rate difference, k
    ("lattice", "lattice", "0", "1e-16", "1"),
    ("lattice", "lattice", "3e-17", "-9.741243e-14", "1"),
    ("lattice", "lattice", "3e-17", "3e-18", "1"),
    ("lattice", "lattice", "3e-17", "2.8284271247461905e-18", "1"),
    ("lattice", "lattice", "1e-12", "2.83e-18", "1"),
    ("lattice", "maser", "2e-14", "1.35e-13", "2"),
    ("lattice", "maser", "2e-14", "4.1e-16", "1"),
    ("lattice", "maser", "2e-14", "4.0001e-16", "1"),
    ("maser", "crystal", "0", "1e-12", "1"),
    ("maser", "crystal", "0", "1e-13", "1"),
    ("crystal", "crystal", "0", "2e-13", "1"),
    ("phase", "phase", "0", "1e-20", "3"),
    ("phase", "phase", "0", "1e-13", "1"),
    ("walker", "phase", "1e-15", "1e-18", "1"),
    ("walker", "walker", "0", "1e-18", "2"),
    ("walker", "walker", "0", "3e-19", "1"),
    ("walker", "walker", "0", "2e-19", "1"),
]


def total(first, second, link, t):
    value = mpf(float(link)) ** 2 / t**2
    for name in (first, second):
        wpm, fpm, wfm, ffm, rwfm, bandwidth, drift = (mpf(float(x)) for x in CLOCKS[name])
        value += wpm**2 / t**2 + wfm**2 / t + ffm**2 + rwfm**2 * t + drift**2 * t**2 / 2
        if fpm:
            held = lambda x: max(bracket(x), mpf(3))
            value += fpm**2 / t**2 * held(2 * pi * bandwidth * t) / held(2 * pi * bandwidth)
    return value


def resolve_rows():
    mp.dps = 50
    fields = "white_pm,flicker_pm,white_fm,flicker_fm,random_walk_fm,bandwidth_hz,drift_per_s"
    heads = [f"{end}_{field}" for end in ("first", "second") for field in fields.split(",")]
    yield ",".join(heads + ["link", "rate_difference", "k", "averaging_s"])
    for first, second, link, difference, k in PAIRS:
        target = (mpf(float(difference)) / mpf(float(k))) ** 2
        over = lambda u: total(first, second, link, mpf(10) ** u) - target
        found = ""
        steps = [mpf(n) / 10 - 20 for n in range(0, 401)]
        for low, high in zip(steps, steps[1:]):
            if over(low) > 0 >= over(high):
                for _ in range(110):
                    middle = (low + high) / 2
                    low, high = (middle, high) if over(middle) > 0 else (low, middle)
                found = mp.nstr(mpf(10) ** high, 20)
                break
        yield ",".join([*CLOCKS[first], *CLOCKS[second], link, difference, k, found])


def main():
    check_coefficients()
    wrong = False
    for name, rows in (("noise.csv", noise_rows), ("resolve.csv", resolve_rows)):
        text = "".join(f"{row}\n" for row in rows())
        path = HERE / name
        if "--check" in sys.argv[1:]:
            if not path.exists() or path.read_bytes() != text.encode():
                print(f"{path}: differs from what this script makes", file=sys.stderr)
                wrong = True
        else:
            path.write_text(text, encoding="utf-8", newline="\n")
    sys.exit(wrong)


main()
