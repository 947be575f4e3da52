#!/usr/bin/env python3
"""Makes the small recordings beside it, independently of the program.

Every number is a rational function of the inputs (rates are alpha h / c^2, offsets are
sums of h dphi / c, phi is an integral of straight lines), so all of them are computed as
exact fractions and rounded once. CRC-32 is zlib's, SHA-256 is hashlib's.

    python3 make_tiny.py            writes tiny.jsonl and standing.jsonl
    python3 make_tiny.py --check    says whether they are what it would write
"""

import hashlib
import json
import pathlib
import sys
import zlib
from fractions import Fraction

C = 299_792_458
G0 = Fraction("9.80665")
FORMAT = "clockspar.recording/1"
PROGRAM = "clockspar 0.1.0"
HERE = pathlib.Path(__file__).parent


def double(value):
    """The double nearest to a fraction, as a fraction."""
    return Fraction(float(value))


def decimal(value):
    """A fraction of seconds as an exact decimal."""
    count = value * 10**18
    assert count.denominator == 1
    sign, count = ("-" if count < 0 else ""), abs(int(count))
    whole, part = divmod(count, 10**18)
    text = f"{part:018d}".rstrip("0")
    return sign + str(whole) + ("." + text if text else "")


class Course:
    """Acceleration as pieces (start, end, slope and value of the line at its origin)."""

    def __init__(self, filed):
        self.filed = filed
        self.pieces = list(filed)

    def acceleration(self, at):
        for start, end, line in self.pieces:
            if start <= at < end:
                return line(at)
        return Fraction(0)

    def phi(self, at):
        total = Fraction(0)
        for start, end, line in self.pieces:
            if start < at:
                stop = min(end, at)
                total += (line(start) + line(stop)) / 2 * (stop - start)
        return total / C

    def cut(self, at):
        self.pieces = [(s, min(e, at), line) for s, e, line in self.pieces if s < at]

    def hold(self, at, value):
        self.cut(at)
        self.pieces.append((at, Fraction(10**11), lambda _, v=value: v))

    def ramp(self, at, to, length):
        begin = double(self.acceleration(at))
        self.cut(at)
        self.pieces.append((at, at + length, ramp(at, length, begin, to)))
        self.pieces.append((at + length, Fraction(10**11), lambda _, v=to: v))

    def plan(self, at):
        self.cut(at)
        self.pieces += [(max(s, at), e, line) for s, e, line in self.filed if e > at]


def ramp(origin, length, begin, to):
    return lambda at: begin + (to - begin) * (at - origin) / length


class Standing:
    """Constant gravity with a gradient."""

    def __init__(self, gravity, gradient):
        self.gravity, self.gradient = gravity, gradient

    def acceleration(self, _):
        return self.gravity

    def excess(self, h):
        return (self.gravity * h - self.gradient * h * h / 2) / (C * C)


class Recording:
    """Lines in the making."""

    def __init__(self):
        self.lines = []
        self.frames = self.events = 0
        self.last = None

    def put(self, body):
        text = json.dumps(body, separators=(",", ":"), ensure_ascii=False)
        # Moments are exact decimals, which json would write as texts.
        for marked in ("\"<", ">\""):
            text = text.replace(marked, "")
        body = text[:-1].encode()
        self.lines.append(body + b',"crc32":"%08x"}\n' % zlib.crc32(body))

    def event(self, kind, at, **keys):
        self.put({"event": kind, "at_s": f"<{decimal(at)}>", **keys})
        self.events += 1
        self.last = at

    def frame(self, at, acceleration, rapidity, rates, offsets):
        def rounded(values):
            return [None if value is None else float(value) for value in values]

        self.put({
            "frame": self.frames,
            "at_s": f"<{decimal(at)}>",
            "reference_acceleration_m_s2": float(acceleration),
            "rapidity": None if rapidity is None else float(rapidity),
            "rate_minus_one": rounded(rates),
            "clock_offset_s": rounded(offsets),
        })
        self.frames += 1
        self.last = at

    def opening(self, name, layout, start, every, nodes):
        self.put({
            "opening": FORMAT,
            "program": PROGRAM,
            "model": 1,
            "layout": name,
            "layout_text": layout,
            "layout_sha256": hashlib.sha256(layout.encode()).hexdigest(),
            "files": [],
            "seed": None,
            "from_s": f"<{decimal(start)}>",
            "every_s": f"<{decimal(every)}>",
            "nodes": nodes,
            "columns": ["rate_minus_one", "clock_offset_s"],
        })

    def closing(self):
        self.put({
            "closing": FORMAT,
            "frames": self.frames,
            "events": self.events,
            "last_at_s": f"<{decimal(self.last)}>",
            "sha256": hashlib.sha256(b"".join(self.lines)).hexdigest(),
        })
        return b"".join(self.lines)


TINY = """\
name = "Tiny line"
reference = "hub"

[[node]]
name = "tip"
position = "120 m"
[[node]]
name = "hub"
[[node]]
name = "tail é"
position = "-5 km"
[[node]]
name = "pod"
position = "-15200.5 m"

[[phase]]
ramp = ["0 g0", "0.02 g0"]
for = "10 min"
[[phase]]
hold = "0.02 g0"
for = "12 h"

[[note]]
at = "30 min"
text = "tether \\"paid out\\""
"""


def tiny():
    full = double(Fraction("0.02") * G0)
    course = Course([
        (Fraction(0), Fraction(600), ramp(Fraction(0), Fraction(600), Fraction(0), full)),
        (Fraction(600), Fraction(600 + 43_200), lambda _: full),
    ])
    names = ["tip", "hub", "tail é", "pod"]
    places = [Fraction(120), Fraction(0), Fraction(-5000), Fraction("-15200.5")]
    released = [False] * 4
    # Clock offsets gathered up to `since`, times c.
    gathered, since = [Fraction(0)] * 4, Fraction(0)

    out = Recording()
    out.opening("Tiny line", TINY, Fraction(0), Fraction(300), names)

    def gather(at):
        nonlocal since
        gain = course.phi(at) - course.phi(since)
        for row, place in enumerate(places):
            gathered[row] += place * gain
        since = at

    def move(at):
        places[2] = double(Fraction("-5200.1"))
        out.event("move", at, node="tail é", position_m=float(places[2]))

    def release(at):
        released[3] = True
        out.event("release", at, node="pod")

    def hold(at):
        course.hold(at, double(Fraction("0.3")))
        out.event("hold", at, acceleration_m_s2=0.3)

    def first_ramp(at):
        course.ramp(at, double(Fraction("0.1")), Fraction(60))
        out.event("ramp", at, to_m_s2=0.1, for_s="<60>")

    def second_ramp(at):
        course.ramp(at, double(Fraction("-0.05")), Fraction("600.5"))
        out.event("ramp", at, to_m_s2=-0.05, for_s="<600.5>")

    def plan(at):
        course.plan(at)
        out.event("plan", at)

    events = {
        Fraction(450): [first_ramp],
        Fraction("500.000000000000000001"): [plan],
        Fraction(900): [move],
        Fraction(1500): [hold],
        Fraction(1800): [lambda at: out.event("note", at, text='tether "paid out"')],
        Fraction(2100): [second_ramp],
        Fraction(2400): [lambda at: out.event("fail", at, between=["hub", "tail é"]), release],
        Fraction(2700): [plan],
        Fraction(3000): [lambda at: out.event("mend", at, between=["tail é", "hub"])],
    }
    frames = [Fraction(300 * count) for count in range(13)]
    for at in sorted({*events, *frames}):
        gather(at)
        for act in events.get(at, []):
            act(at)
        if at in frames:
            acceleration = course.acceleration(at)
            out.frame(
                at,
                acceleration,
                course.phi(at),
                [None if released[r] else acceleration * places[r] / (C * C) for r in range(4)],
                [None if released[r] else gathered[r] / C for r in range(4)],
            )
    return out.closing()


STANDING = """\
name = "Tower"
reference = "foot"

[[node]]
name = "deck"
position = "450 m"
[[node]]
name = "foot"

[standing]
gravity = "9.8012 m/s^2"
gradient = "3.086e-6 /s^2"
"""


def standing():
    course = Standing(double(Fraction("9.8012")), double(Fraction("3.086e-6")))
    places = [Fraction(450), Fraction(0)]
    gathered, since = [Fraction(0)] * 2, Fraction(0)
    out = Recording()
    out.opening("Tower", STANDING, Fraction("-0.5"), Fraction("43200.25"), ["deck", "foot"])
    for count in range(4):
        at = Fraction("-0.5") + count * Fraction("43200.25")
        for row, place in enumerate(places):
            gathered[row] += course.excess(place) * (at - since)
        since = at
        if count == 2:
            places[0] = Fraction("449.75")
            out.event("move", at, node="deck", position_m=449.75)
        rates = [course.excess(place) for place in places]
        out.frame(at, course.gravity, None, rates, gathered)
    return out.closing()


def main():
    made = {"tiny.jsonl": tiny(), "standing.jsonl": standing()}
    for name, content in made.items():
        path = HERE / name
        if "--check" in sys.argv[1:]:
            if path.read_bytes() != content:
                sys.exit(f"{name} is not what this script makes")
        else:
            path.write_bytes(content)


if __name__ == "__main__":
    main()
