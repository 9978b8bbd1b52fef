"""The time loop: let REBOUND take one step, look at where everything is, go on. Compiled; arrays in, arrays out.

Everything is measured at the ends of steps and interpolated within them:

* the distance of each pair by the cubic that fits both ends' relative positions and velocities, whenever the pair turns
  from approaching to receding within the step; in momentary mutual Hill radii,
  ((m_i + m_j)/3M)^{1/3} (r_i + r_j)/2, with r the momentary distances from the centre of mass of everything inside (so
  an approach is where the distance is smallest, not where its ratio to a Hill radius that changes along the orbit is);
* osculating semi-major axis and eccentricity of each planet in Jacobi coordinates (in the order of the bodies), at
  every eighth step of a map;
* MEGNO from differences of ln |δ| (``chaos.megno``).

Layout of the small arrays is given by the constants below; ``track`` gives them names.
"""

import math
from typing import Any

import numpy as np
from numba import njit

from stabcheck.chaos.megno import next_sums
from stabcheck.constants import GM_SUN_AU3_D2
from stabcheck.engines.rebound.library import (
    COLLISION_STATUS,
    LAST_STEP_WORD,
    PARTICLE_DOUBLES,
    PARTICLES_WORD,
    STEP_WORD,
    VARIATIONS_WORD,
)
from stabcheck.engines.rebound.memory import call_steps, carray, doubles_at, words_at

# clock: where the draw stands
INTERVAL, INSIDE, NEXT_STEP, MAP_STEPS, ADAPTIVE_STEPS = 0, 1, 2, 3, 4
SUM_Y, SUM_MEAN, MEGNO_TIME, LN_DELTA = 5, 6, 7, 8
LAST_CLOSE = 9
CLOCK_SIZE = 10
# closest: the smallest distance seen
RATIO2, DISTANCE, FIRST_BODY, SECOND_BODY, WHEN = 0, 1, 2, 3, 4
CLOSEST_SIZE = 5
# extremes of a planet
INVERSE_A_LEAST, INVERSE_A_MOST, E2_LEAST, E2_MOST = 0, 1, 2, 3
# limits: what does not change while a stage runs
STEP_D, STEPS_PER_INTERVAL, INTERVAL_D, INTERVALS, HANDOVER2, STOP_APPROACH, STOP_DISTANCE2 = range(7)
EJECTION2, SPEED_WEIGHT, GIVE_UP, QUIET_D = range(7, 11)
LIMITS_SIZE = 11

# why the loop came back
UNDER_WAY, SPAN_DONE, CLOSE_PAIR, UNBOUND, COLLIDED, HIT_STAR, EJECTED, TOO_NEAR, TOO_FAR = range(9)

MEASURE_EVERY = 8
"""Axes, eccentricities and the tangent vector are measured at every eighth step of a map and at every step of an
adaptive method. Pairs are looked at after every step. MEGNO is summed from differences of ln |δ|, which are exact over
any stretch."""

_next_sums: Any = njit(next_sums)


@njit(error_model="numpy")
def closest_within(r0: Any, v0: Any, r1: Any, v1: Any, step: float) -> Any:
    """Find the smallest distance within a step from the cubic through both ends.

    Returns the squared distance and the share of the step at which it is reached. The pair must approach at the start
    and recede at the end, so that the derivative of the squared distance changes sign once at least.
    """
    low, high = 0.0, 1.0
    least = min(_square(r0), _square(r1))
    share = 0.0 if least == _square(r0) else 1.0
    for _ in range(40):  # halves the bracket to 1e-12 of a step
        s = 0.5 * (low + high)
        d2, slope = _cubic(r0, v0, r1, v1, step, s)
        if d2 < least:
            least, share = d2, s
        if slope < 0.0:
            low = s
        else:
            high = s
    return least, share


@njit(error_model="numpy")
def _square(r: Any) -> Any:
    return r[0] * r[0] + r[1] * r[1] + r[2] * r[2]


@njit(error_model="numpy")
def _cubic(r0: Any, v0: Any, r1: Any, v1: Any, step: float, s: float) -> Any:
    h00, h10 = (1.0 + 2.0 * s) * (1.0 - s) ** 2, s * (1.0 - s) ** 2
    h01, h11 = s * s * (3.0 - 2.0 * s), s * s * (s - 1.0)
    g00, g10 = 6.0 * s * (s - 1.0), (1.0 - s) * (1.0 - 3.0 * s)
    g11 = s * (3.0 * s - 2.0)
    d2 = 0.0
    slope = 0.0
    for axis in range(3):
        r = h00 * r0[axis] + h10 * step * v0[axis] + h01 * r1[axis] + h11 * step * v1[axis]
        rate = g00 * r0[axis] + g10 * step * v0[axis] - g00 * r1[axis] + g11 * step * v1[axis]
        d2 += r * r
        slope += r * rate
    return d2, slope


@njit(error_model="numpy")
def _pair_closest(before: Any, now: Any, i: int, j: int, step: float) -> Any:
    r0, v0 = before[j, 0:3] - before[i, 0:3], before[j, 3:6] - before[i, 3:6]
    r1, v1 = now[j, 0:3] - now[i, 0:3], now[j, 3:6] - now[i, 3:6]
    return closest_within(r0, v0, r1, v1, step)


@njit(error_model="numpy")
def jacobi_elements(now: Any, mass: Any, radii: Any, elements: Any) -> None:
    """Write each planet's distance to ``radii`` and (1/a, e²) to ``elements`` (planet, 2); changes nothing else."""
    inside = mass[0]
    cx, cy, cz, cu, cv, cw = now[0, 0], now[0, 1], now[0, 2], now[0, 3], now[0, 4], now[0, 5]
    for k in range(1, mass.shape[0]):
        x, y, z = now[k, 0] - cx, now[k, 1] - cy, now[k, 2] - cz
        u, v, w = now[k, 3] - cu, now[k, 4] - cv, now[k, 5] - cw
        total = inside + mass[k]
        inverse_mu = 1.0 / (GM_SUN_AU3_D2 * total)
        r2 = x * x + y * y + z * z
        v2 = u * u + v * v + w * w
        rv = x * u + y * v + z * w
        r = math.sqrt(r2)
        inverse_a = 2.0 / r - v2 * inverse_mu
        radii[k] = r
        elements[k - 1, 0] = inverse_a
        elements[k - 1, 1] = max(
            1.0 - (r2 * v2 - rv * rv) * inverse_a * inverse_mu, 0.0
        )  # rounding below 0 at e ~ 1e-8
        share = mass[k] / total
        cx, cy, cz = cx + share * x, cy + share * y, cz + share * z
        cu, cv, cw = cu + share * u, cv + share * v, cw + share * w
        inside = total


@njit(error_model="numpy")
def mean_longitudes(now: Any, mass: Any, basis: Any, out: Any) -> None:
    """Write the mean longitude of each planet's osculating Jacobi orbit to ``out`` (planet,); NaN where it is unbound.

    Longitudes are counted in the plane of the first two rows of ``basis`` (3, 3), which is the invariable plane: in the
    plane of the sky an edge-on orbit would flip between direct and retrograde.
    """
    inside = mass[0]
    c = now[0, 0:6].copy()
    d = c.copy()
    turned = c.copy()
    for k in range(1, mass.shape[0]):
        total = inside + mass[k]
        for axis in range(6):
            d[axis] = now[k, axis] - c[axis]
            c[axis] += (mass[k] / total) * d[axis]
        for axis in range(3):
            turned[axis] = basis[axis, 0] * d[0] + basis[axis, 1] * d[1] + basis[axis, 2] * d[2]
            turned[3 + axis] = basis[axis, 0] * d[3] + basis[axis, 1] * d[4] + basis[axis, 2] * d[5]
        out[k - 1] = _mean_longitude(turned, GM_SUN_AU3_D2 * total)
        inside = total


@njit(error_model="numpy")
def _mean_longitude(d: Any, mu: float) -> Any:
    """λ = true longitude − (f − M), the true longitude counted as Ω + (ω + f) and continuous through i = 0."""
    hx, hy, hz = d[1] * d[5] - d[2] * d[4], d[2] * d[3] - d[0] * d[5], d[0] * d[4] - d[1] * d[3]
    h2 = hx * hx + hy * hy + hz * hz
    r = math.sqrt(d[0] * d[0] + d[1] * d[1] + d[2] * d[2])
    rv = d[0] * d[3] + d[1] * d[4] + d[2] * d[5]
    inverse_a = 2.0 / r - (d[3] * d[3] + d[4] * d[4] + d[5] * d[5]) / mu
    if not inverse_a > 0.0:
        return math.nan
    e_cos_e = 1.0 - r * inverse_a
    e_sin_e = rv * math.sqrt(inverse_a / mu)
    e2 = e_cos_e * e_cos_e + e_sin_e * e_sin_e
    root = math.sqrt(max(1.0 - e2, 0.0))
    # f − E from E's half-angle form, without ω: tan((f − E)/2) = e sin E / (1 + √(1−e²) − e cos E)
    f_minus_m = 2.0 * math.atan2(e_sin_e, 1.0 + root - e_cos_e) + e_sin_e
    h = math.sqrt(h2)
    upright = h + abs(hz)
    turn = 1.0 if hz >= 0.0 else -1.0  # retrograde to the reference plane: count the other way from the same node
    # rotate the position into the reference plane about the line of nodes
    px = d[0] - hx * d[2] / upright * turn
    py = d[1] - hy * d[2] / upright * turn
    return turn * math.atan2(py, px) - f_minus_m


@njit(error_model="numpy")
def energy(now: Any, mass: Any, relativity_strength: float) -> Any:
    """Total energy, with the relativistic potential −(A/2) m_star² m / r² if ``relativity_strength`` is A (0: none)."""
    total = 0.0
    for i in range(mass.shape[0]):
        total += 0.5 * mass[i] * (now[i, 3] ** 2 + now[i, 4] ** 2 + now[i, 5] ** 2)
        for j in range(i):
            d2 = (now[i, 0] - now[j, 0]) ** 2 + (now[i, 1] - now[j, 1]) ** 2 + (now[i, 2] - now[j, 2]) ** 2
            total -= GM_SUN_AU3_D2 * mass[i] * mass[j] / math.sqrt(d2)
            if j == 0:
                total -= 0.5 * relativity_strength * mass[0] * mass[0] * mass[i] / d2
    return total


@njit(error_model="numpy")
def _unbound(now: Any, mass: Any, body: int) -> Any:
    """Has this body enough energy to leave the centre of mass of all the others?"""
    rest = 0.0
    d = now[body, 0:6].copy()
    for k in range(mass.shape[0]):
        if k != body:
            rest += mass[k]
    for k in range(mass.shape[0]):
        if k != body:
            for axis in range(6):
                d[axis] -= mass[k] / rest * now[k, axis]
    distance = math.sqrt(d[0] ** 2 + d[1] ** 2 + d[2] ** 2)
    return 0.5 * (d[3] ** 2 + d[4] ** 2 + d[5] ** 2) > GM_SUN_AU3_D2 * (rest + mass[body]) / distance


@njit(error_model="numpy")
def _length(tangent: Any, bodies: int, speed_weight: float) -> Any:
    """ln |δ|, velocities weighted with the inner period over 2π so that both halves count alike."""
    square = 0.0
    for k in range(bodies):
        square += tangent[k, 0] ** 2 + tangent[k, 1] ** 2 + tangent[k, 2] ** 2
        square += speed_weight * (tangent[k, 3] ** 2 + tangent[k, 4] ** 2 + tangent[k, 5] ** 2)
    return 0.5 * math.log(square)


@njit(error_model="numpy")
def _look_at_planets(elements: Any, extremes: Any, departure: Any, axis_limits: Any, ordered: Any, now_d: float) -> Any:
    """Update extremes and the first departure; say whether an extreme moved."""
    moved = False
    departed = False
    for k in range(elements.shape[0]):
        inverse_a, e2 = elements[k, 0], elements[k, 1]
        if inverse_a < extremes[k, INVERSE_A_LEAST]:
            extremes[k, INVERSE_A_LEAST] = inverse_a
            moved = True
        if inverse_a > extremes[k, INVERSE_A_MOST]:
            extremes[k, INVERSE_A_MOST] = inverse_a
            moved = True
        if e2 < extremes[k, E2_LEAST]:
            extremes[k, E2_LEAST] = e2
        if e2 > extremes[k, E2_MOST]:
            extremes[k, E2_MOST] = e2
            moved = True
        if inverse_a < axis_limits[k, 0] or inverse_a > axis_limits[k, 1]:
            departed = True
        if k > 0 and ordered[k - 1] and inverse_a > elements[k - 1, 0]:
            departed = True
    if departed and math.isnan(departure[0]):
        departure[0] = now_d
    return moved


@njit(error_model="numpy")
def _zones(
    mass: Any,
    extremes: Any,
    pair_scale: Any,
    touch: Any,
    limits: Any,
    closest: Any,
    adaptive: bool,
    zones: Any,
    pairs: Any,
) -> int:
    """Work out how near a pair must be to matter; write ``zones`` and ``pairs`` and say how many pairs there are.

    The smallest distance that matters is the closest so far, the hand-over or the touch. A pair further away than that
    plus what both can move in one step at their fastest need not be looked at (upper triangle of ``zones``, squared);
    one that does not turn within the step matters only within the hand-over and the touch (lower triangle). A pair
    whose orbits leave more room than that between the outer one's periastron and the inner one's apastron is left out
    altogether, until an orbit changes. Row 0 holds the star's touch. An adaptive method takes steps of any length: look
    at all.
    """
    count = 0
    for j in range(1, mass.shape[0]):
        reach_j, fastest_j = _reach(mass, extremes, j)
        nearest_j = _nearest(extremes, j)
        near = 2.0 * touch[0, j] + 2.0 * fastest_j * limits[STEP_D]
        zones[0, j] = math.inf if touch[0, j] > 0.0 and (adaptive or not nearest_j > near) else 0.0
        for i in range(1, j):
            reach_i, fastest_i = _reach(mass, extremes, i)
            nearest_i = _nearest(extremes, i)
            hill = math.sqrt(pair_scale[i, j] * max(closest[RATIO2], limits[HANDOVER2]))
            least = max(
                hill * (reach_i + reach_j) if pair_scale[i, j] > 0.0 else 0.0, touch[i, j], limits[STOP_APPROACH]
            )
            zones[i, j] = math.inf if adaptive else (1.1 * least + (fastest_i + fastest_j) * limits[STEP_D]) ** 2
            urgent = max(math.sqrt(pair_scale[i, j] * limits[HANDOVER2]) * (reach_i + reach_j), touch[i, j])
            zones[j, i] = math.inf if adaptive else (1.1 * max(urgent, limits[STOP_APPROACH])) ** 2
            room = max(0.9 * nearest_j - reach_i, 0.9 * nearest_i - reach_j)
            if adaptive or not room > 1.1 * least:
                pairs[count, 0], pairs[count, 1] = i, j
                count += 1
    return count


@njit(error_model="numpy")
def _reach(mass: Any, extremes: Any, body: int) -> Any:
    """Largest distance and speed on the widest and fastest orbit seen so far, a tenth added; infinite if unbound."""
    e = math.sqrt(extremes[body - 1, E2_MOST])
    if not extremes[body - 1, INVERSE_A_LEAST] > 0.0 or not e < 1.0:
        return math.inf, math.inf
    inside = 0.0
    for k in range(body + 1):
        inside += mass[k]
    fastest = math.sqrt(GM_SUN_AU3_D2 * inside * extremes[body - 1, INVERSE_A_MOST] * (1.0 + e) / (1.0 - e))
    return 1.1 * (1.0 + e) / extremes[body - 1, INVERSE_A_LEAST], 1.1 * fastest


@njit(error_model="numpy")
def _nearest(extremes: Any, body: int) -> Any:
    """Smallest periastron distance of the smallest and most eccentric orbit seen so far."""
    return (1.0 - math.sqrt(extremes[body - 1, E2_MOST])) / extremes[body - 1, INVERSE_A_MOST]


@njit(error_model="numpy")
def _copy(particles: Any, state: Any) -> None:
    """Write positions and velocities to ``state``; spelled out, because a loop over six is not unrolled."""
    for body in range(state.shape[0]):
        state[body, 0] = particles[body, 0]
        state[body, 1] = particles[body, 1]
        state[body, 2] = particles[body, 2]
        state[body, 3] = particles[body, 3]
        state[body, 4] = particles[body, 4]
        state[body, 5] = particles[body, 5]


@njit(error_model="numpy")
def _receding(state: Any, i: int, j: int) -> Any:
    total = 0.0
    for axis in range(3):
        total += (state[j, axis] - state[i, axis]) * (state[j, 3 + axis] - state[i, 3 + axis])
    return total


@njit(error_model="numpy")
def _never_nearer(before: Any, now: Any, i: int, j: int, step: float) -> float:
    """Give the square of a distance that the cubic of `closest_within` does not fall below: cheap, and close to it.

    A cubic lies within the hull of its four control points r0, r0 + v0 h/3, r1 − v1 h/3, r1, so its projection on any
    direction is at least the smallest of theirs. The direction is that of the two inner ones together.
    """
    n2 = n_r0 = n_p0 = n_p1 = n_r1 = 0.0
    for axis in range(3):
        r0, r1 = before[j, axis] - before[i, axis], now[j, axis] - now[i, axis]
        p0 = r0 + (before[j, 3 + axis] - before[i, 3 + axis]) * (step / 3.0)
        p1 = r1 - (now[j, 3 + axis] - now[i, 3 + axis]) * (step / 3.0)
        n = p0 + p1
        n2 += n * n
        n_r0, n_p0, n_p1, n_r1 = n_r0 + n * r0, n_p0 + n * p0, n_p1 + n * p1, n_r1 + n * r1
    least = min(min(n_r0, n_p0), min(n_p1, n_r1))
    return 0.999999 * least * least / n2 if least > 0.0 else 0.0  # less than by rounding could be said too much


@njit(error_model="numpy")
def _look_at_pair(
    before: Any,
    now: Any,
    i: int,
    j: int,
    d2: float,
    radii: Any,
    scale: float,
    touch: float,
    limits: Any,
    closest: Any,
    t: float,
    step: float,
) -> int:
    """Update the closest approach of one pair over the last step; say why to stop, if so."""
    when = t
    turned = _receding(before, i, j) < 0.0 and _receding(now, i, j) >= 0.0
    hill2 = scale * (radii[i] + radii[j]) ** 2
    if turned:
        matters2 = max(limits[HANDOVER2], closest[RATIO2] if scale > 0.0 else 0.0) * hill2
        if _never_nearer(before, now, i, j, step) > max(matters2, touch * touch, limits[STOP_APPROACH] ** 2):
            return UNDER_WAY
        d2, share = _pair_closest(before, now, i, j, step)
        when = t - (1.0 - share) * step
    code = UNDER_WAY
    if touch > 0.0 and d2 <= touch * touch:
        code = COLLIDED
    elif d2 < limits[STOP_APPROACH] ** 2:
        code = TOO_NEAR
    elif d2 < limits[HANDOVER2] * hill2:
        code = CLOSE_PAIR
    if scale > 0.0 and (turned or code != UNDER_WAY) and d2 < closest[RATIO2] * hill2:
        closest[RATIO2], closest[DISTANCE], closest[WHEN] = d2 / hill2, math.sqrt(d2), when
        closest[FIRST_BODY], closest[SECOND_BODY] = i, j
    return code


@njit(error_model="numpy")
def _any_inside(before: Any, now: Any, zones: Any, pairs: Any, count: int) -> Any:
    """Is there a pair worth a closer look? Few arguments: handing an array to a function that is not inlined costs."""
    for pair in range(count):
        i, j = pairs[pair, 0], pairs[pair, 1]
        dx, dy, dz = now[j, 0] - now[i, 0], now[j, 1] - now[i, 1], now[j, 2] - now[i, 2]
        d2 = dx * dx + dy * dy + dz * dz
        if d2 > zones[i, j]:
            continue
        if d2 <= zones[j, i] or (_receding(now, i, j) >= 0.0 and _receding(before, i, j) < 0.0):
            return True
    return False


@njit(error_model="numpy")
def _look_at_pairs(
    before: Any,
    now: Any,
    mass: Any,
    zones: Any,
    pair_scale: Any,
    touch: Any,
    limits: Any,
    closest: Any,
    radii: Any,
    elements: Any,
    event: Any,
    t: float,
    step: float,
) -> int:
    """Look at every pair that is inside its zone; say why to stop, if so, and write the bodies to ``event``.

    A pair that is merely close must not hide one that touches in the same step.
    """
    fresh = False
    found = UNDER_WAY
    for j in range(2, mass.shape[0]):
        x, y, z = now[j, 0], now[j, 1], now[j, 2]
        for i in range(1, j):
            dx, dy, dz = x - now[i, 0], y - now[i, 1], z - now[i, 2]
            d2 = dx * dx + dy * dy + dz * dz
            if d2 > zones[i, j]:
                continue
            if d2 > zones[j, i] and not (_receding(now, i, j) >= 0.0 and _receding(before, i, j) < 0.0):
                continue
            if not fresh:
                jacobi_elements(now, mass, radii, elements)
                fresh = True
            code = _look_at_pair(before, now, i, j, d2, radii, pair_scale[i, j], touch[i, j], limits, closest, t, step)
            if code != UNDER_WAY:
                found = code
                event[0], event[1] = i, j
            if code != UNDER_WAY and code != CLOSE_PAIR:
                return code
    return found


@njit(error_model="numpy")
def _note_distances(now: Any, mass: Any, pair_scale: Any, closest: Any, radii: Any, elements: Any, t: float) -> None:
    """Let the distances of this moment count for the closest approach, for spans too short for a pair to turn."""
    jacobi_elements(now, mass, radii, elements)
    for j in range(2, mass.shape[0]):
        for i in range(1, j):
            d2 = (now[j, 0] - now[i, 0]) ** 2 + (now[j, 1] - now[i, 1]) ** 2 + (now[j, 2] - now[i, 2]) ** 2
            hill2 = pair_scale[i, j] * (radii[i] + radii[j]) ** 2
            if pair_scale[i, j] > 0.0 and d2 < closest[RATIO2] * hill2:
                closest[RATIO2], closest[DISTANCE], closest[WHEN] = d2 / hill2, math.sqrt(d2), t
                closest[FIRST_BODY], closest[SECOND_BODY] = i, j


@njit(error_model="numpy")
def _touches_star(before: Any, now: Any, body: int, touch: float, step: float) -> Any:
    """Did this body touch the star within the last step?"""
    d2 = 0.0
    for axis in range(3):
        d2 += (now[body, axis] - now[0, axis]) ** 2
    if _receding(before, 0, body) < 0.0 and _receding(now, 0, body) >= 0.0:
        d2, _ = _pair_closest(before, now, 0, body, step)
    return d2 <= touch * touch


@njit(error_model="numpy")
def _nearest_touch(now: Any, touch: Any, event: Any) -> int:
    """Say which bodies REBOUND found in collision: of those that can touch, the pair nearest to touching."""
    nearest = math.inf
    for j in range(1, now.shape[0]):
        for i in range(j):
            gap = math.sqrt(_square(now[j, 0:3] - now[i, 0:3])) - touch[i, j]
            if touch[i, j] > 0.0 and gap < nearest:
                nearest = gap
                event[0], event[1] = i, j
    return HIT_STAR if event[0] == 0.0 else COLLIDED


@njit(error_model="numpy")
def _any_out(now: Any, elements: Any, far2: float, unbound: bool) -> Any:
    """Is there a body worth a look around: this far away, or (where that matters) on an open orbit?"""
    for k in range(elements.shape[0]):
        if now[k + 1, 0] ** 2 + now[k + 1, 1] ** 2 + now[k + 1, 2] ** 2 > far2:
            return True
        if unbound and not elements[k, 0] > 0.0:
            return True
    return False


@njit(error_model="numpy")
def _at_star(before: Any, now: Any, zones: Any, touch: Any, step: float) -> Any:
    """Which of the bodies that can come near the star has touched it within the last step? 0 if none."""
    for body in range(1, now.shape[0]):
        if zones[0, body] > 0.0 and _touches_star(before, now, body, touch[0, body], step):
            return body
    return 0


@njit(error_model="numpy")
def _look_around(now: Any, mass: Any, elements: Any, limits: Any, event: Any) -> int:
    """Has a body gone too far, or left, or (under a map that hands over) opened its orbit?"""
    for body in range(1, mass.shape[0]):
        far2 = now[body, 0] ** 2 + now[body, 1] ** 2 + now[body, 2] ** 2
        event[0], event[1] = body, 0
        if far2 > limits[STOP_DISTANCE2]:
            return TOO_FAR
        if far2 > limits[EJECTION2] and _unbound(now, mass, body):
            return EJECTED
        if limits[GIVE_UP] > 0.0 and not elements[body - 1, 0] > 0.0:
            return UNBOUND
    return UNDER_WAY


@njit(cache=True, nogil=True, error_model="numpy")
def advance(
    steps_address: int,
    simulation: int,
    adaptive: bool,
    most_steps: int,
    mass: Any,
    pair_scale: Any,
    touch: Any,
    axis_limits: Any,
    ordered: Any,
    limits: Any,
    basis: Any,
    state: Any,
    clock: Any,
    extremes: Any,
    closest: Any,
    departure: Any,
    longitudes: Any,
    ln_deltas: Any,
    megnos: Any,
    event: Any,
) -> int:
    """Take at most ``most_steps`` steps and look after each.

    Parameters
    ----------
    steps_address, simulation : int
        Addresses of REBOUND's ``reb_simulation_steps`` and of a simulation that stands at ``state``.
    adaptive : bool
        The integrator chooses its step; otherwise ``limits[STEP_D]`` is fixed.
    mass : (body,) array
    pair_scale, touch : (body, body) array
        Square of the Hill coefficient over (r_i + r_j)², 0 for pairs that are not watched; sum of physical radii.
    axis_limits : (planet, 2) array
        Least and largest 1/a before a planet counts as departed.
    ordered : (planet - 1,) array
        1 where the order of neighbours is watched.
    basis : (3, 3) array
        Rows: two axes of the invariable plane and its normal.
    limits, clock, closest : arrays
        Laid out by this module's constants.
    state, extremes, departure, longitudes, ln_deltas, megnos, event : arrays
        Changed in place, like ``clock`` and ``closest``; nothing else is.

    Returns
    -------
    int
        One of this module's codes; ``UNDER_WAY`` if ``most_steps`` were taken, or at a sample if no pair was close for
        ``limits[QUIET_D]``.
    """
    bodies = mass.shape[0]
    head = carray(doubles_at(simulation), 16)
    words = carray(words_at(simulation), 32)
    particles = carray(doubles_at(words[PARTICLES_WORD]), (bodies, PARTICLE_DOUBLES))
    follow_tangent = words[VARIATIONS_WORD] != 0
    tangent = particles
    ln_before = 0.0
    if follow_tangent:
        tangent = carray(doubles_at(words[VARIATIONS_WORD]), (bodies, PARTICLE_DOUBLES))
        ln_before = _length(tangent, bodies, limits[SPEED_WEIGHT])
    radii = state[:, 0].copy()
    elements = extremes[:, 0:2].copy()
    zones = pair_scale.copy()
    t = clock[INTERVAL] * limits[INTERVAL_D] + clock[INSIDE] * (1.0 if adaptive else limits[STEP_D])
    _note_distances(state, mass, pair_scale, closest, radii, elements, t)
    pairs = np.zeros((bodies * bodies, 2), dtype=np.int64)
    count = _zones(mass, extremes, pair_scale, touch, limits, closest, adaptive, zones, pairs)
    far2 = min(limits[STOP_DISTANCE2], limits[EJECTION2])
    since_measured = 0.0
    star_near = np.any(zones[0] > 0.0)
    for taken in range(most_steps):
        step = limits[STEP_D]
        if adaptive:
            kept = clock[NEXT_STEP]
            remaining = limits[INTERVAL_D] - clock[INSIDE]
            head[STEP_WORD] = min(kept, remaining)
            call_steps(steps_address, simulation, 1)
            step = head[LAST_STEP_WORD]
            clock[ADAPTIVE_STEPS] += 1.0
            clock[INSIDE] += step
            clock[NEXT_STEP] = kept if step == remaining and kept > remaining else head[STEP_WORD]
            sampled = step == remaining
            measured, halted = True, False
            t = clock[INTERVAL] * limits[INTERVAL_D] + clock[INSIDE]
        else:
            halted = call_steps(steps_address, simulation, 1) == COLLISION_STATUS
            clock[MAP_STEPS] += 1.0
            clock[INSIDE] += 1.0
            sampled = clock[INSIDE] == limits[STEPS_PER_INTERVAL]
            # also at the last step: the next block takes the tangent's length anew
            measured = sampled or int(clock[INSIDE]) % MEASURE_EVERY == 0 or taken == most_steps - 1
            t = clock[INTERVAL] * limits[INTERVAL_D] + clock[INSIDE] * step
        since_measured += step
        known = closest[RATIO2]
        code = UNDER_WAY
        if _any_inside(state, particles, zones, pairs, count):
            code = _look_at_pairs(
                state, particles, mass, zones, pair_scale, touch, limits, closest, radii, elements, event, t, step
            )
            if code == CLOSE_PAIR:
                clock[LAST_CLOSE] = t
                if limits[GIVE_UP] == 0.0:
                    code = UNDER_WAY
        if halted:
            code = _nearest_touch(particles, touch, event)
        if star_near and code == UNDER_WAY:
            body = _at_star(state, particles, zones, touch, step)
            if body > 0:
                event[0], event[1] = 0, body
                code = HIT_STAR
        _copy(particles, state)
        if measured or code != UNDER_WAY:
            if follow_tangent:
                ln_now = _length(tangent, bodies, limits[SPEED_WEIGHT])
                clock[SUM_Y], clock[SUM_MEAN] = _next_sums(
                    clock[SUM_Y], clock[SUM_MEAN], clock[MEGNO_TIME], since_measured, ln_now - ln_before
                )
                clock[LN_DELTA] += ln_now - ln_before
                clock[MEGNO_TIME] += since_measured
                ln_before = ln_now
            since_measured = 0.0
            jacobi_elements(particles, mass, radii, elements)
            moved = _look_at_planets(elements, extremes, departure, axis_limits, ordered, t)
            if code == UNDER_WAY and _any_out(particles, elements, far2, limits[GIVE_UP] > 0.0):
                code = _look_around(particles, mass, elements, limits, event)
            if (moved or closest[RATIO2] < known) and not adaptive:
                count = _zones(mass, extremes, pair_scale, touch, limits, closest, adaptive, zones, pairs)
                star_near = np.any(zones[0] > 0.0)
        if code != UNDER_WAY:
            return code
        if sampled:
            clock[INTERVAL] += 1.0
            clock[INSIDE] = 0.0
            sample = int(clock[INTERVAL])
            mean_longitudes(particles, mass, basis, longitudes[sample])
            if follow_tangent:
                ln_deltas[sample] = clock[LN_DELTA]
                megnos[sample] = clock[SUM_MEAN] / clock[MEGNO_TIME]
            if clock[INTERVAL] == limits[INTERVALS]:
                _note_distances(state, mass, pair_scale, closest, radii, elements, t)
                return SPAN_DONE
            if t - clock[LAST_CLOSE] >= limits[QUIET_D]:
                return UNDER_WAY
    return UNDER_WAY
