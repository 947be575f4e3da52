"""The work of `large_lines.rs` and `recordings.rs` as a straightforward script would do it: plain Python, its own
csv module, doubles throughout. Prints the seconds of processor time the work took, without the
start of the interpreter.

    straightforward.py survey FILE
    straightforward.py pairs NODES
    straightforward.py history FILE
    straightforward.py open RECORDING
    straightforward.py seek RECORDING SECOND
"""

import csv
import json
import math
import sys
import time
import zlib

C = 299792458.0


def survey(name):
    nodes = {}
    with open(name, newline="") as file:
        for row in csv.DictReader(file):
            node = row["name"]
            if node in nodes:
                raise ValueError(node)
            mass, clock = row.get("mass", "0 kg").split()[0], row.get("clock")
            nodes[node] = (float(row["position_m"]), float(row["u_position_m"]), float(mass), clock)
    return sorted(nodes.items(), key=lambda item: -item[1][0])


def pairs(count):
    count = int(count)
    acceleration, rapidity = 2.941995, 2.17e-4
    nodes = [(f"n{k + 1}", -4.0 * (k + 1)) for k in range(count)]
    with open("/dev/null", "w") as out:
        for here, position in nodes:
            rate = 1.0 + acceleration * position / C**2
            for there, other in nodes:
                if there != here:
                    apart = other - position
                    offset = apart * rapidity / C
                    difference = acceleration * apart / (C**2 * rate)
                    out.write(f"7200,{here},{there},{offset!r},{difference!r}\n")


def history(name):
    """Rapidity, launch time and launch position at every point, by Simpson's rule."""
    with open(name, newline="") as file:
        points = [(float(a), float(b)) for a, b in list(csv.reader(file))[1:]]
    rapidity = time_s = position_m = 0.0
    until = []
    for (start, first), (end, last) in zip(points, points[1:]):
        until.append((rapidity, time_s, position_m))
        length = end - start
        middle = rapidity + (3.0 * first + last) / 8.0 * length / C
        after = rapidity + (first + last) / 2.0 * length / C
        cosh = math.cosh(rapidity) + 4.0 * math.cosh(middle) + math.cosh(after)
        sinh = math.sinh(rapidity) + 4.0 * math.sinh(middle) + math.sinh(after)
        time_s += length * cosh / 6.0
        position_m += C * length * sinh / 6.0
        rapidity = after
    return until


def lines(name):
    """The lines of a recording, each with its CRC checked."""
    with open(name, "rb") as file:
        for line in file:
            body, crc = line[:-21], line[-11:-3]
            if zlib.crc32(body) != int(crc, 16):
                raise ValueError(name)
            yield json.loads(line)


def open_recording(name):
    return next(lines(name))


def seek(name, second):
    return next(line for line in lines(name) if line.get("at_s") == float(second))


def main():
    work, *arguments = sys.argv[1:]
    works = {"survey": survey, "pairs": pairs, "history": history}
    works |= {"open": open_recording, "seek": seek}
    begun = time.process_time()
    works[work](*arguments)
    print(time.process_time() - begun)


main()
