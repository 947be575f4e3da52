"""The plans, positions and moments: listed, edge, random and grid."""

import math
from fractions import Fraction

from plan import ATTO, C, C2, LONGEST_AS, SMALLEST_RATE, YEAR_S, Plan
from worldline import Worldline


class Generator:
    """SplitMix64, so that the draws do not depend on the version of Python."""

    def __init__(self, seed):
        self.word = seed

    def draw(self):
        mask = (1 << 64) - 1
        self.word = (self.word + 0x9E3779B97F4A7C15) & mask
        z = self.word
        z = ((z ^ (z >> 30)) * 0xBF58476D1CE4E5B9) & mask
        z = ((z ^ (z >> 27)) * 0x94D049BB133111EB) & mask
        return z ^ (z >> 31)

    def below(self, count):
        """A whole number in 0..count; the draw is long enough that its bias is of no interest."""
        wide = 0
        for _ in range(count.bit_length() // 64 + 2):
            wide = wide << 64 | self.draw()
        return wide % count

    def pick(self, things):
        return things[self.below(len(things))]

    def sign(self):
        return self.pick((1.0, -1.0))

    def scaled(self, lowest, highest):
        """A double with a decimal exponent in lowest..highest, through its decimal text.

        Text is rounded correctly everywhere; a power function is not.
        """
        leading, rest = 1 + self.below(9), self.below(10**16)
        return float(f"{leading}.{rest:016d}e{lowest + self.below(highest - lowest)}")


def seconds(text):
    whole = Fraction(text) * ATTO
    assert whole.denominator == 1, text
    return int(whole)


def gees(text):
    """The double nearest to a multiple of standard gravity."""
    return float(Fraction(text) * Fraction("9.80665"))


def node_at_rate(plan, side, rate):
    """The node whose smallest rate in the plan is `rate` or just above, on the given side."""
    peak = plan.highest if side < 0 else -plan.lowest
    if peak == 0:
        return side * 1e19
    position = side * float(min(C2 * (1 - rate) / Fraction(peak), Fraction(10**19)))
    while plan.smallest_rate(position) < rate:
        position = math.nextafter(position, 0.0)
    return position


def edge_nodes(plan):
    nodes = [node_at_rate(plan, side, SMALLEST_RATE) for side in (-1, 1)]
    return nodes + [node_at_rate(plan, side, Fraction(37, 1000)) for side in (-1, 1)]


def around(moment):
    return [moment - 1, moment, moment + 1]


def boundary_moments(plan, every=1):
    ends = [phase[1] for phase in plan.phases]
    return [moment for end in ends[::every] for moment in around(end)]


def turn_moments(plan):
    """Moments about each zero of the acceleration and of the rapidity inside a phase."""
    moments = []
    line = Worldline(plan, 60)
    for index, (start, end, first, last) in enumerate(plan.phases):
        turn = Plan.turn(first, last, Fraction(end - start))
        zeros = [] if turn is None else [start + turn]
        zeros += [zero * ATTO for zero in line.rapidity_zeros(index)]
        for zero in zeros:
            near = math.floor(zero)
            for moment in (near - 1000, near - 1, near, near + 1, near + 1000):
                if 0 <= moment <= plan.end_as:
                    moments.append(moment)
    return moments


class Cases:
    """The groups (plan, kind, positions, moments) in the order in which they are written."""

    def __init__(self):
        self.groups, self.plans = [], {}

    def plan(self, plan):
        assert plan.name not in self.plans, plan.name
        self.plans[plan.name] = plan
        return plan

    def add(self, plan, kind, positions, moments):
        self.plan(plan)
        moments = sorted(set(moments))
        assert all(abs(moment) <= LONGEST_AS for moment in moments), plan.name
        kept = []
        for position in dict.fromkeys(positions):
            assert position == 0.0 or 1e-3 <= abs(position) <= 1e19, (plan.name, position)
            if plan.smallest_rate(position) >= SMALLEST_RATE:
                kept.append(position)
        assert kept, plan.name
        self.groups.append((plan, kind, kept, moments))


def add_listed(cases):
    """Plans an engineer would file."""
    tether = [0.0, 0.001, 1.0, -1.0, 1000.0, -40_000.0, 1e7, -3e11]
    day, year = 86_400 * ATTO, YEAR_S * ATTO
    one = gees("1")
    cases.add(Plan("idle", [(ATTO, 0, 0)]), "listed", tether, [-ATTO, 0, ATTO // 3, 2 * ATTO])
    cases.add(
        Plan("hold_1g_day", [(day, one, one)]), "listed", tether, [-ATTO, 0, ATTO, day // 2, day]
    )
    plan = Plan("hold_1g_year", [(year, one, one)])
    nodes = tether + [-9e15, 9e15, 1e19]
    cases.add(plan, "listed", nodes, [1, year // 3, year - 1, year, 2 * year])
    top, ten, six = gees("0.3"), seconds("600"), seconds("21600")
    cargo = [(ten, 0, top), (six, top, top), (ten, top, 0), (3 * day, 0, 0)]
    cargo += [(ten, 0, -top), (six, -top, -top), (ten, -top, 0)]
    plan = Plan("cargo_03g", cargo)
    moments = [ten // 2, ten, seconds("5000.25"), six + ten, day, plan.end_as - six, plan.end_as]
    cases.add(plan, "listed", tether, moments)
    cases.add(plan.mirrored(), "listed", tether[3:], moments[2:])
    journey = [(year * 21 // 4, one, one), (year * 3 // 2, 0, 0), (year * 21 // 4, -one, -one)]
    plan = Plan("interstellar_1g", journey)
    moments = [year, year * 6, year * 8, plan.end_as - 1, plan.end_as, plan.end_as + year]
    cases.add(plan, "listed", [0.0, 1000.0, -1000.0, 3e12, -9.1e15], moments)
    # The doubles of these accelerations do not cancel: a residual rapidity near 1e-17 of the
    # total is left, and it alone makes the clock offset.
    hour = seconds("3600")
    brakes = [("0.03", 3, "0.09", 1), ("0.05", 3, "0.15", 1), ("0.1", 3, "0.3", 1)]
    brakes += [("0.01", 7, "0.07", 1), ("1.1", 3, "3.3", 1), ("0.7", 5, "3.5", 1)]
    for number_of, (burn, burn_hours, brake, brake_hours) in enumerate(brakes):
        pieces = [(burn_hours * hour, gees(burn), gees(burn))]
        pieces += [(brake_hours * hour, -gees(brake), -gees(brake))]
        plan = Plan(f"brake_hold_{number_of}", pieces)
        moments = [plan.phases[0][1], plan.end_as - 1, plan.end_as, plan.end_as + day]
        cases.add(plan, "listed", [0.0, 450.0, -40_000.0, 2e12], moments)
    for number_of, (burn, brake) in enumerate((("0.1", "0.3"), ("0.06", "0.18"))):
        up, down = gees(burn), -gees(brake)
        pieces = [(3 * hour, 0, up), (3 * hour, up, 0), (hour, 0, down), (hour, down, 0)]
        plan = Plan(f"brake_ramp_{number_of}", pieces)
        moments = [plan.phases[1][1], plan.end_as - 1, plan.end_as, plan.end_as + day]
        cases.add(plan, "listed", [0.0, 450.0, -40_000.0, 2e12], moments)
    steps = [(hour, 0.1, 0.1)] * 10 + [(hour, -0.7, -0.7), (hour, -0.3, -0.3)]
    plan = Plan("brake_in_steps", steps)
    cases.add(plan, "listed", [0.0, 450.0, -2e12], around(plan.end_as) + [11 * hour])
    plan = Plan("thirds", [(hour, 1 / 3, 2 / 3), (hour, -2 / 3, -1 / 3), (1, 0.1, 0.1)])
    cases.add(plan, "listed", [0.0, 450.0, -2e12], around(2 * hour) + around(plan.end_as))


def add_edges(cases):
    """The corners of the domain."""
    shortest = [(1, 1e6, 1e6), (1, -1e6, 1e6), (1, 0, 0), (1, 1e-12, -1e-12), (2, -1e6, 1e6)]
    plan = Plan("attosecond_phases", shortest)
    nodes = edge_nodes(plan) + [0.0, 0.001, 1e10, -89_000_000_000.0]
    cases.add(plan, "edge", nodes, list(range(-1, 8)) + [LONGEST_AS])
    plan = Plan(
        "short_and_long",
        [(1, -0.5, -0.5), (5 * 10**28 + 1, 1e-3, -2e-3), (1, 1e6, 1e6), (10**26 + 7, 2.0, 0)],
    )
    moments = boundary_moments(plan) + [1, 10**28 + 3, plan.end_as + 10**27, -LONGEST_AS]
    cases.add(plan, "edge", edge_nodes(plan) + [0.0], moments)

    ramps = [
        ("zero_on_a_tick", [(3 * ATTO, -1.0, 2.0)]),
        ("zero_between_ticks", [(10**21 + 7, gees("0.3"), -gees("0.7"))]),
        ("zero_in_a_steep_ramp", [(977, 1e6, -9.7e5), (10**22, -9.7e5, -9.7e5)]),
        ("zero_in_a_slow_ramp", [(10**29 - 1, -1e-12, 1.3e-12)]),
        ("zero_after_a_burn", [(10**22, 4.0, 4.0), (10**23 + 1, 4.0, -3.0), (10**22, -3.0, 1e-12)]),
        ("zero_at_high_rapidity", [(78 * 10**22, 1e6, -1e6), (10**22, -1e6, 1e6)]),
        ("there_and_back_in_one_ramp", [(10**27, 7.3, -7.3), (10**27, -7.3, 7.3)]),
        ("rapidity_through_zero", [(10**25, 1.0, 0.7), (4 * 10**25, -0.1, -1.3), (10**25, 2.0, 0)]),
    ]
    for name, pieces in ramps:
        plan = Plan(name, pieces)
        moments = turn_moments(plan) + [plan.end_as - 1, plan.end_as, plan.end_as // 7]
        cases.add(plan, "edge", edge_nodes(plan)[:2] + [0.0, 1.5e6], moments)

    for acceleration in (gees("1"), -gees("1"), 1e6, -1e6, 2.09, 1234.5):
        # One moment for each rapidity of interest; launch values leave the doubles on the way.
        whole = Fraction(C * ATTO) / abs(Fraction(acceleration))
        length = min(math.floor(whole * Fraction(6999, 10)), LONGEST_AS - 10**22)
        plan = Plan(f"rapidity_700_at_{acceleration!r}", [(length, acceleration, acceleration)])
        moments = [math.floor(whole * phi) for phi in (20, 300, 600, 640, 664, 666, 670, 674, 684)]
        moments += [math.floor(whole * phi) for phi in (688, 693, 697)]
        moments += [length - 1, length, length + 10**21]
        moments = [moment for moment in moments if moment <= plan.end_as + 10**21]
        cases.add(plan, "edge", edge_nodes(plan)[:2] + [0.0, -0.001], moments)
    plan = Plan("rapidity_ramp_to_650", [(389_730 * ATTO + 1, 1e-12, 1e6)])
    cases.add(plan, "edge", edge_nodes(plan)[:2] + [1.0], boundary_moments(plan) + [10**23])
    plan = Plan("rapidity_ramp_to_690", [(3 * 10**28 + 9, 0, 13.79), (10**25, 13.79, 0)])
    cases.add(plan, "edge", edge_nodes(plan)[:2] + [1.0], boundary_moments(plan) + [10**28])
    back = [(190_000 * ATTO, 1e6, 1e6), (380_000 * ATTO, -1e6, -1e6), (190_000 * ATTO, 1e6, 1e6)]
    plan = Plan("rapidity_there_and_back", back)
    moments = turn_moments(plan) + boundary_moments(plan) + [10**22, plan.end_as + 10**22]
    cases.add(plan, "edge", edge_nodes(plan)[:2] + [0.0], moments)
    thirds = [(3 * 10**24, 60_000.1, 60_000.1), (10**24, -180_000.3, -180_000.3)]
    plan = Plan("rapidity_600_braked", thirds + [(10**20, 0.3, -0.1)])
    moments = boundary_moments(plan) + [10**24, plan.end_as + 10**23]
    cases.add(plan, "edge", edge_nodes(plan)[:2] + [0.0, 450.0], moments)

    cases.add(
        Plan("faintest_and_longest", [(LONGEST_AS, 1e-12, 1e-12)]),
        "edge",
        [0.0, 0.001, -0.001, 1e19, -1e19],
        [-LONGEST_AS, -1, 0, 1, ATTO + 1, LONGEST_AS - 1, LONGEST_AS],
    )
    plan = Plan("farthest_node", [(10**28 + 1, 0, 0.008987), (10**28, 0.008987, -0.008987)])
    moments = boundary_moments(plan) + turn_moments(plan) + [10**27]
    cases.add(plan, "edge", edge_nodes(plan) + [1e19, -1e19, 0.0], moments)
    jumps = [(10**19 + 3, 1e3, 1e3), (10**20 + 1, -1e3, -1e3), (7, 1e-12, 1e-12), (10**25, 0, 0)]
    jumps += [(10**20 - 1, -999.5, 1e3), (3, 1e3, -1e3), (10**21, 1e-12, 1e6), (10**19, -1e6, 0)]
    plan = Plan("jumps_and_coasts", jumps)
    nodes = edge_nodes(plan) + [0.0, 1e-3, 1e5]
    cases.add(plan, "edge", nodes, boundary_moments(plan) + [10**20, LONGEST_AS])


def random_plan(generator, name, count, most_rapidity):
    """Phases of all shapes, mostly of one scale so that a node near a horizon sees it often."""
    exponent = generator.below(18) - 12
    pieces, last = [], 0.0
    for _ in range(count):
        lowest = exponent if generator.below(10) < 7 else generator.below(18) - 12
        draw = [generator.sign() * generator.scaled(lowest, lowest + 1) for _ in range(2)]
        shape = generator.pick(("hold", "ramp", "joined", "through", "coast", "ramp", "joined"))
        first, then = {
            "hold": (draw[0], draw[0]),
            "ramp": (draw[0], draw[1]),
            "joined": (last, draw[1]),
            "through": (draw[0], math.copysign(draw[1], -draw[0])),
            "coast": (0.0, 0.0),
        }[shape]
        last = then
        peak = max(abs(first), abs(then), 1e-12)
        limit = min(Fraction(LONGEST_AS, 2 * count), most_rapidity * C * ATTO / Fraction(peak))
        shorter = 10 ** generator.pick((0, 0, 0, 0, 1, 1, 2, 3, 6, 10))
        duration = math.floor(limit * (1 + generator.below(10**20)) / 10**20 / shorter) | 1
        pieces.append((duration, first, then))
    return Plan(name, pieces)


def random_node(generator, plan):
    kind = generator.below(4)
    side = int(generator.sign())
    if kind == 0:
        return node_at_rate(plan, side, Fraction(10 + generator.below(90), 10**7))
    if kind == 1:
        return node_at_rate(plan, side, Fraction(1 + generator.below(999), 1000))
    position = side * generator.scaled(-3, 19)
    if plan.smallest_rate(position) < SMALLEST_RATE:
        position = node_at_rate(plan, side, Fraction(1, 10 ** (1 + generator.below(5))))
    return position


def random_moments(generator, plan, count):
    moments = []
    for _ in range(count):
        start, end, _, _ = generator.pick(plan.phases)
        moments.append(start + generator.below(end - start))
    moments.append(generator.pick(around(generator.pick(plan.phases)[1])))
    room = LONGEST_AS - plan.end_as
    moments.append(plan.end_as + generator.below(room) // 10 ** generator.below(12))
    return moments


def add_random(cases, generator):
    for index in range(75):
        count = 1 + generator.below(8)
        most = Fraction(690, count) if index % 15 == 7 else Fraction(25, count)
        plan = random_plan(generator, f"random_{index:02d}", count, most)
        nodes = [random_node(generator, plan) for _ in range(2)]
        moments = random_moments(generator, plan, 3)
        cases.add(plan, "random", nodes + [0.0] * (index % 5 == 0), moments)
    plan = random_plan(generator, "random_200_phases", 200, Fraction(1, 4))
    nodes = [random_node(generator, plan) for _ in range(2)] + [1000.0]
    cases.add(plan, "random", nodes, random_moments(generator, plan, 20))
    pieces, last = [], 0.0
    for _ in range(200):
        first, last = last, generator.sign() * generator.scaled(-1, 1)
        pieces.append((generator.below(10**24) + 1, first, last))
    plan = Plan("random_200_joined_ramps", pieces)
    nodes = [node_at_rate(plan, -1, SMALLEST_RATE), 1000.0, random_node(generator, plan)]
    cases.add(plan, "random", nodes, random_moments(generator, plan, 20))


def add_grid(cases):
    """Decades of acceleration, position and time, both signs, holds and ramps."""
    positions = [sign * float(f"1e{k}") for k in (-3, 2, 6, 10, 15, 19) for sign in (1, -1)]
    for exponent in range(-12, 7, 3):
        for sign in (1, -1):
            top = sign * float(f"1e{exponent}")
            limit = min(math.floor(Fraction(C * ATTO * 30) / abs(Fraction(top))), LONGEST_AS // 3)
            first = top if (exponent + 12) // 3 % 2 == 0 else 0.0
            plan = Plan(f"grid_{top!r}", [(limit, first, top), (limit // 2, top, -top)])
            moments = [limit // 10**k for k in (0, 4, 11)] + [limit * 6 // 5]
            cases.add(plan, "grid", positions, moments)


def horizon_inputs(cases, generator):
    """Plans with positions on, a few doubles from, and well off the nearest position allowed."""
    inputs = []

    def near(plan, peaks):
        positions = []
        for peak in peaks:
            exact = -float(C2 / Fraction(peak))
            if not 1e-3 <= abs(exact) < 1e19:
                continue
            low = high = exact
            positions.append(exact)
            for _ in range(2):
                low, high = math.nextafter(low, 0.0), math.nextafter(high, 2 * high)
                positions += [low, high]
            positions += [exact * 0.5, exact * 1.25, exact * 40.0, -exact]
        positions = [p for p in positions if 1e-3 <= abs(p) <= 1e19]
        inputs.append((plan, list(dict.fromkeys(positions))))

    # c^2 = (2 * 7 * 73 * 293339)^2 has factors that are accelerations in range, with quotients
    # that are doubles: N is exactly zero there.
    for peak in (1022.0, -1022.0, 293_339.0, 14.0, -1.0):
        slow = seconds("1e6") if abs(peak) < 1e3 else seconds("1e4")
        last = [(slow, peak, peak), (slow, 0.0, 0.0)]
        near(cases.plan(Plan(f"horizon_exact_hold_{peak!r}", last)), [peak])
        tent = [(slow + 1, 0.0, peak), (slow + 3, peak, -peak / 3)]
        near(cases.plan(Plan(f"horizon_exact_tent_{peak!r}", tent)), [peak])
        end = [(slow, peak / 2, 0.0), (slow + 1, -peak / 3, peak)]
        near(cases.plan(Plan(f"horizon_exact_end_{peak!r}", end)), [peak])
    for index in range(24):
        count = 1 + generator.below(6)
        plan = None
        while plan is None or max(plan.highest, -plan.lowest) < 0.1:
            plan = random_plan(generator, f"horizon_random_{index:02d}", count, Fraction(20, count))
        cases.plan(plan)
        near(plan, [peak for peak in (plan.highest, plan.lowest) if peak != 0.0])
    steps = [(ATTO, gees(text), gees(text)) for text in ("1", "2", "3")]
    plan = cases.plan(Plan("horizon_1g_steps", steps))
    near(plan, [gees("1"), gees("2"), gees("3")])
    return inputs
