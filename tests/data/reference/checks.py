"""Checks from first principles, made before any reference value is written."""

import math
from fractions import Fraction

from mpmath import mp, mpf

from plan import ATTO, C, C2, YEAR_S, Plan
from inputs import gees
from worldline import Worldline, digits_for, number


def close(wanted, got, digits, what, least_scale=0):
    scale = max(abs(wanted), abs(got), least_scale)
    if scale != 0 and abs(wanted - got) > scale * mpf(10) ** -digits:
        raise AssertionError(f"{what}: {mp.nstr(wanted, 30)} against {mp.nstr(got, 30)}")


def check_exponential(line, times):
    """The integrated cosh and sinh agree with those of the exact rapidity."""
    for time in times:
        cosh, sinh = line.hyperbolic(time)
        with mp.workdps(80):
            phi = number(line.plan.rapidities(time)[0])
            close(mp.cosh(phi), cosh, 42, f"{line.plan.name}: cosh of the rapidity")
            # The least scale lets a plan return to a rapidity of exactly zero.
            what = f"{line.plan.name}: sinh of the rapidity"
            close(mp.sinh(phi), sinh, 42, what, mpf(10) ** -60)


def chord(line, position, time, half):
    """c dt and dz of a node between two array times either side of `time`."""
    t_after, _, z_after, _ = line.event(time + half, position)
    t_before, _, z_before, _ = line.event(time - half, position)
    return C * (t_after - t_before), z_after - z_before


def rapidity_of(chord_ct, chord_z):
    return mp.log((chord_ct + chord_z) / (chord_ct - chord_z)) / 2


def interval(chord_ct, chord_z):
    """Proper length in metres of a timelike chord."""
    return mp.sqrt((chord_ct - chord_z) * (chord_ct + chord_z))


def check_felt(plan, position, moment):
    """The felt acceleration is c d(rapidity)/d(proper time) of the node's own worldline."""
    time, index = Fraction(moment, ATTO), plan.phase_at(Fraction(moment, ATTO))
    if index is None or moment == plan.phases[index][0]:
        return 0
    start, end, _, _ = plan.phases[index]
    room = Fraction(min(moment - start, end - moment), ATTO)
    wide, narrow = room / 10**25, room / 10**60
    line = Worldline(plan, digits_for(plan, moment) + 200)
    with mp.workdps(line.digits):
        after = rapidity_of(*chord(line, position, time + wide, narrow))
        before = rapidity_of(*chord(line, position, time - wide, narrow))
        felt = C2 * (after - before) / interval(*chord(line, position, time, wide))
        alpha = plan.acceleration(time)
        wanted = number(alpha / (1 + alpha * Fraction(position) / C2))
        # The scale keeps a coast, and a moment at which the thrust crosses zero, comparable.
        what = f"{plan.name}: felt acceleration at {position!r} m, {moment} as"
        close(wanted, felt, 20, what, mpf(10) ** -40)
    return 1


def check_proper_time(plan, position, moment):
    """The integral of sqrt(dt^2 - dz^2/c^2) along the node's worldline is tau + h phi/c."""
    time = Fraction(moment, ATTO)
    line = Worldline(plan, digits_for(plan, moment) + 120)
    root = Fraction(math.isqrt(6 * 10**159), 10**80)
    bounds = [Fraction(phase[0], ATTO) for phase in plan.phases] + [Fraction(plan.end_as, ATTO)]
    bounds = [bound for bound in bounds if bound < time] + [time]
    with mp.workdps(line.digits):
        total = mpf(0)
        for low, high in zip(bounds, bounds[1:]):
            half, middle = (high - low) / 2, (high + low) / 2
            narrow = half / 10**40
            # Three-point Gauss-Legendre: more than enough, the integrand is smooth in a phase.
            for place, weight in ((-root, 5), (Fraction(0), 8), (root, 5)):
                length = interval(*chord(line, position, middle + place * half, narrow))
                total += weight * number(half) * length / (9 * 2 * C * number(narrow))
        wanted = number(time + Fraction(position) * plan.rapidities(time)[0] / C)
        close(wanted, total, 30, f"{plan.name}: proper time at {position!r} m, {moment} as")
    return 1


def secant(function, low, high):
    """The root of a smooth function of an exact moment."""
    grid = 1 << 1200
    at_low, at_high = function(low), function(high)
    for _ in range(60):
        if at_high == at_low or at_high == 0:
            break
        ratio = at_high / (at_high - at_low)
        with mp.workprec(1200):
            step = Fraction(int(mp.floor(mp.ldexp(ratio, 1200))), grid) * (high - low)
        low, at_low = high, at_high
        high = Fraction(math.floor((high - step) * grid), grid)
        at_high = function(high)
        if abs(high - low) < Fraction(1, 10**90):
            break
    return high


def check_rigidity(plan, position, other, moment):
    """The distance to another node, in the instantaneous rest frame of the first, is constant."""
    time, index = Fraction(moment, ATTO), plan.phase_at(Fraction(moment, ATTO))
    start, end, _, _ = plan.phases[index]
    room = Fraction(min(moment - start, end - moment), ATTO)
    line = Worldline(plan, digits_for(plan, moment) + 200)
    with mp.workdps(line.digits):
        run_ct, run_z = chord(line, position, time, room / 10**60)
        t, _, z, _ = line.event(time, position)

        def lag(when):
            t_other, _, z_other, _ = line.event(when, other)
            return run_ct * C * (t_other - t) - run_z * (z_other - z)

        # Start the search well away from the array time it must come back to.
        when = secant(lag, time + room / 1000, time + room / 1300)
        t_other, _, z_other, _ = line.event(when, other)
        away, later = z_other - z, C * (t_other - t)
        distance = mp.sqrt((away - later) * (away + later))
        wanted = number(abs(Fraction(other) - Fraction(position)))
        close(wanted, distance, 30, f"{plan.name}: rest-frame distance")
    return 1


def check_redshift(plan, position, moment):
    """Rays sent to the reference under one hold arrive 1/N times as far apart as they were sent.

    This is the wavelength ratio, so that a node on the aft side under forward thrust has a positive
    redshift; the frequency ratio is N.
    """
    time = Fraction(moment, ATTO)
    line = Worldline(plan, digits_for(plan, plan.end_as) + 200)
    side = 1 if position < 0 else -1
    with mp.workdps(line.digits):

        def null_coordinate(when, place):
            t, _, z, _ = line.event(when, place)
            return C * t - side * z

        def received(sent):
            sent_coordinate = null_coordinate(sent, position)
            guess = Fraction(abs(position)) / C
            return secant(
                lambda when: null_coordinate(when, 0.0) - sent_coordinate,
                sent + guess,
                sent + guess * 5 / 4,
            )

        narrow = Fraction(1, 10**30)
        heard = received(time + narrow) - received(time - narrow)
        sent = interval(*chord(line, position, time, narrow)) / C
        rate = 1 + plan.acceleration(time) * Fraction(position) / C2
        close(number(1 / rate), number(heard) / sent, 30, f"{plan.name}: redshift by null rays")
    return 1


def check_integrator():
    """The worldline agrees with mpmath's quadrature, erfi and the hyperbola of a hold."""
    second = ATTO
    ramp = Plan("ramp", [(300_000 * second, -900.0, 2_500.0)])
    end = Fraction(300_000)
    t, _, z, _ = Worldline(ramp, 90).event(end)
    with mp.workdps(60):
        first, slope = mpf(-900), mpf(3400) / 300_000

        def phi(s):
            return (first * s + slope * s * s / 2) / C

        close(mp.quad(lambda s: mp.cosh(phi(s)), [0, 300_000]), t, 45, "quadrature of a ramp, t")
        close(C * mp.quad(lambda s: mp.sinh(phi(s)), [0, 300_000]), z, 45, "quadrature, z")
    steep = Plan("steep", [(390_000 * second, 0.0, 1e6)])
    end = Fraction(390_000)
    t, _, z, _ = Worldline(steep, 800).event(end)
    with mp.workdps(700):
        width = mp.sqrt(mpf(1e6) / 390_000 / (2 * C))
        plus = mp.erfi(width * 390_000) * mp.sqrt(mp.pi) / (2 * width)
        minus = mp.erf(width * 390_000) * mp.sqrt(mp.pi) / (2 * width)
        close((plus + minus) / 2, t, 60, "error function of a ramp, t")
        close(C * (plus - minus) / 2, z, 60, "error function of a ramp, z")
    hold = Plan("hold", [(200_000 * second, -1e6, -1e6)])
    t, _, z, _ = Worldline(hold, 800).event(Fraction(200_000))
    with mp.workdps(700):
        phi_end = -mpf(1e6) * 200_000 / C
        close(-C * mp.sinh(phi_end) / mpf(1e6), t, 60, "hyperbola of a hold, t")
        close(-C2 * 2 * mp.sinh(phi_end / 2) ** 2 / mpf(1e6), z, 60, "hyperbola of a hold, z")


def check_sample(groups):
    """The checks from first principles, on nodes and moments spread over all plans."""
    done = {"felt": 0, "proper time": 0, "rigidity": 0, "redshift": 0}
    for count, (plan, _, positions, moments) in enumerate(groups):
        inside = [m for m in moments if plan.phase_at(Fraction(m, ATTO)) is not None and m > 0]
        inside = [m for m in inside if m not in {phase[0] for phase in plan.phases}]
        if not inside or len(plan.phases) > 20:
            continue
        moment = inside[count % len(inside)]
        position = positions[count % len(positions)]
        done["felt"] += check_felt(plan, position, moment)
        if plan.max_rapidity > 100:
            continue
        if count % 2 == 0:
            done["proper time"] += check_proper_time(plan, position, moment)
        other = positions[(count + 1) % len(positions)]
        if count % 4 == 1 and other != position:
            done["rigidity"] += check_rigidity(plan, position, other, moment)
    one = gees("1")
    year = Plan("year", [(YEAR_S * ATTO, one, one)])
    for position in (-1e15, -4e15, 1e15, 4e15):
        done["redshift"] += check_redshift(year, position, YEAR_S * ATTO // 5)
        done["redshift"] += check_redshift(year.mirrored(), -position, YEAR_S * ATTO // 5)
    assert min(done.values()) >= 8, done
    return done
