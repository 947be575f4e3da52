#!/usr/bin/env python3
"""Quantities and durations with their exact values, for tests/model/layout_read.rs.

Number times unit factor is formed as a fraction of whole numbers; the division that makes
the nearest double of it rounds once, ties to even (Python language reference, float of a
fractions.Fraction). Durations stay whole numbers of attoseconds.

    python3 tests/data/make_quantities.py            writes tests/data/quantities.csv
    python3 tests/data/make_quantities.py --check    compares it and ends with 1 if it differs
"""

import random
import struct
import sys
from fractions import Fraction as F
from pathlib import Path

C = 299_792_458
G0 = F("9.80665")
YEAR = 31_557_600
UNITS = {
    "Length": {"nm": F("1e-9"), "um": F("1e-6"), "mm": F("1e-3"), "cm": F("1e-2"), "m": F(1),
               "km": F(1000), "au": F(149_597_870_700), "ly": F(C * YEAR)},
    "Time": {"as": F("1e-18"), "fs": F("1e-15"), "ps": F("1e-12"), "ns": F("1e-9"),
             "us": F("1e-6"), "ms": F("1e-3"), "s": F(1), "min": F(60), "h": F(3600),
             "d": F(86_400), "a": F(YEAR)},
    "Frequency": {"Hz": F(1), "kHz": F(10) ** 3, "MHz": F(10) ** 6, "GHz": F(10) ** 9,
                  "THz": F(10) ** 12},
    "Mass": {"g": F("1e-3"), "kg": F(1), "t": F(1000)},
    "Force": {"N": F(1), "kN": F(1000), "MN": F(10) ** 6},
    "Speed": {"m/s": F(1), "km/s": F(1000)},
    "Acceleration": {"m/s^2": F(1), "g0": G0, "mg0": G0 / 1000, "ug0": G0 / 10**6},
    "LinearDensity": {"g/m": F("1e-3"), "kg/m": F(1)},
    "Temperature": {"K": F(1)},
    "PerTemperature": {"/K": F(1)},
    "PerTimeSquared": {"/s^2": F(1)},
    "PerTime": {"/s": F(1), "/d": F(1, 86_400), "/a": F(1, YEAR)},
}
LISTED = ["0", "-0", "1", "0.1", "0.02", "-1.2", "3", "4.7", "1e-20", "9007199254740993",
          "0.30000000000000004", "2.2250738585072014e-308", "1e-330", "4.9e-324", "1e290",
          "123456789.987654321", "-5e3", "+7.25", "1_000.000_1", "000012", "1.",
          "0.333333333333333333333333333333333333333333"]


def nearest_double(value):
    try:
        return (value.numerator / value.denominator) + 0.0
    except OverflowError:
        return None


def number(pick):
    digits = "".join(pick.choice("0123456789") for _ in range(pick.randint(1, 25)))
    point = pick.randint(0, len(digits))
    text = (digits[:point] or "0") + "." + (digits[point:] or "0")
    if pick.random() < 0.5:
        text += f"e{pick.randint(-40, 40)}"
    return pick.choice(["", "-"]) + text


def table():
    pick = random.Random(20_240_617)
    lines = ["text,dimension,bits,attoseconds"]
    for dimension, units in UNITS.items():
        for unit, factor in [("", F(1)), *units.items()]:
            for text in LISTED + [number(pick) for _ in range(20)]:
                exact = F(text.replace("_", "")) * factor
                value = nearest_double(exact)
                bits = "overflow" if value is None else struct.pack(">d", value).hex()
                count = ""
                if dimension == "Time":
                    attoseconds = exact * 10**18
                    whole = attoseconds.denominator == 1 and abs(exact) <= 10**11
                    count = str(attoseconds.numerator) if whole else "none"
                blank = pick.choice(["", " ", "  "])
                lines.append(f"{text}{blank}{unit},{dimension},{bits},{count}")
    return "\n".join(lines) + "\n"


def main():
    path = Path(__file__).with_name("quantities.csv")
    if "--check" not in sys.argv[1:]:
        path.write_text(table(), encoding="utf-8")
    elif path.read_text(encoding="utf-8") != table():
        sys.exit(f"{path} differs from what {Path(__file__).name} makes")


main()
