"""Decay of a polarised tau into two or three pions and a neutrino, with every spin correlation.

|M|² ~ Pi.(p - m s) with the real light-like vector Pi = 2 Re[(N.J) J*] - (J.J*) N + i eps(N, J, ., J*), N the neutrino
and J the hadronic current. So the decay is 1 + h.P, where the polarimeter vector h is the direction of Pi in the tau
rest frame: a state that is known in full analyses the spin with power one, in any hadronic decay.

In the rest frame of the pions, J = a + i b without time component; with the unit vector u of the neutrino

    |M|² ~ |J|² + (m² - Q²)/Q² [(a.u)² + (b.u)²] - 2 u.(a x b),
    Pi   ~ (|J|² - 2 u.(a x b), |J|² u - 2 (a.u) a - 2 (b.u) b - 2 a x b).

Drawn in this order: Q² from an alias table; for three pions the place in the Dalitz plot, by rejection under a bound;
u as a mixture of an isotropic part and one with cos² about a or b, then u or -u by their odds; the direction of h
isotropic, then h or -h by the odds of 1 +- h.P; the azimuth about h. Everything else follows from these.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel
from semitau.core.elementary import sincos_turns
from semitau.core.streams import event_key, uniform

from .. import block as row
from ..block import LANES
from . import draw_numbers as draw
from .alias import draw_position
from .hadronic_currents import LINE_INTERVALS, NEUTRAL_PION, PION, TAU_MASS, HadronTable, pion_form_factor

Floats = npt.NDArray[np.float64]

_ABOVE = 1.0 + 1e-9
_FIRST_TRY = np.uint64(draw.DALITZ_FIRST)
_ONE, _TWO, _THREE = np.uint64(1), np.uint64(2), np.uint64(3)

# Pions in their rest frame, in the plane z = 0, and the parts of the current there; set for each event.
_MASS2 = row.SCRATCH_10
_Q1_X, _Q1_Y, _E1 = row.SCRATCH_11, row.SCRATCH_12, row.SCRATCH_13
_Q2_X, _Q2_Y, _E2 = row.SCRATCH_14, row.SCRATCH_15, row.SCRATCH_16
_A_X, _A_Y, _B_X, _B_Y = row.SCRATCH_17, row.SCRATCH_18, row.SCRATCH_19, row.SCRATCH_20


@kernel
def draw_hadrons(x: Floats, table: HadronTable, stream: np.uint64, first_event: np.uint64) -> None:
    """Momenta of the pions in the tau rest frame, on the axes x', y', z': into the LEPTON and PARTNER rows.

    Reads the polarisation rows; fills VISIBLE_X, _Y, _Z with the polarimeter vector and VISIBLE_E with the energy of
    the first pion. Rows SCRATCH_10 to _20 are overwritten.
    """
    _draw_masses(x, table.line, table.low, table.span, stream, first_event)
    if table.pions == 3:
        _draw_dalitz(x, table, stream, first_event)
    else:
        _two_pions(x)
    _turn_to_tau_frame(x, table, stream, first_event)


@kernel
def _draw_masses(x: Floats, line: Floats, low: float, span: float, stream: np.uint64, first_event: np.uint64) -> None:
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        position = draw_position(
            line,
            uniform(key, draw.VISIBLE_INTERVAL),
            uniform(key, draw.VISIBLE_INSIDE),
            uniform(key, draw.VISIBLE_SIDE),
        )
        x[row.VISIBLE_E + i] = position
        # off the very threshold, where no place in a Dalitz plot could be found
        x[_MASS2 + i] = max(low + span * (position * (1.0 / LINE_INTERVALS)), low * _ABOVE)


@kernel
def _two_pions(x: Floats) -> None:
    """J along q1 - q2 = 2 q1, along x."""
    for i in range(LANES):
        s = x[_MASS2 + i]
        momentum2 = (s - (PION + NEUTRAL_PION) ** 2) * (s - (PION - NEUTRAL_PION) ** 2)
        momentum = 0.5 * np.sqrt(max(momentum2, 1e-12) / s)
        x[_Q1_X + i], x[_Q1_Y + i], x[_Q2_X + i], x[_Q2_Y + i] = momentum, 0.0, -momentum, 0.0
        x[_E1 + i] = np.sqrt(momentum * momentum + PION * PION)
        x[_E2 + i] = np.sqrt(momentum * momentum + NEUTRAL_PION * NEUTRAL_PION)
        x[_A_X + i], x[_A_Y + i], x[_B_X + i], x[_B_Y + i] = 1.0, 0.0, 0.0, 0.0


@kernel
def _draw_dalitz(x: Floats, table: HadronTable, stream: np.uint64, first_event: np.uint64) -> None:
    """Place in the Dalitz plot, momenta and current. q1 and q2 are those of the first two rows."""
    like, unlike, odd = table.like, table.unlike, table.odd
    least = (like + unlike) ** 2
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        mass2 = x[_MASS2 + i]
        root = np.sqrt(mass2)
        span = max((root - like) ** 2 - least, 0.0)
        bound = table.bounds[int(x[row.VISIBLE_E + i])]
        attempt = _FIRST_TRY
        while True:
            s1, s2 = least + span * uniform(key, attempt), least + span * uniform(key, attempt + _ONE)
            e1, e2 = (mass2 + like**2 - s1) / (2.0 * root), (mass2 + like**2 - s2) / (2.0 * root)
            square1, square2 = e1 * e1 - like**2, e2 * e2 - like**2
            dot = 0.5 * ((root - e1 - e2) ** 2 - unlike**2 - square1 - square2)
            across = square1 * square2 - dot * dot
            if across > 0.0 and square1 > 0.0:
                p1 = np.sqrt(square1)
                q2_x, q2_y = dot / p1, np.sqrt(across) / p1
                f1, f2 = pion_form_factor(s1), pion_form_factor(s2)
                # J = F(s2) (q1 - q3) + F(s1) (q2 - q3) = q1 (2 F(s2) + F(s1)) + q2 (F(s2) + 2 F(s1))
                with_q1, with_q2 = 2.0 * f2 + f1, f2 + 2.0 * f1
                jx, jy = p1 * with_q1 + q2_x * with_q2, q2_y * with_q2
                a_x, a_y, b_x, b_y = jx.real, jy.real, jx.imag, jy.imag
                if uniform(key, attempt + _TWO) * bound < a_x * a_x + a_y * a_y + b_x * b_x + b_y * b_y:
                    break
            attempt += _THREE
        first_x, first_y, first_e = (-p1 - q2_x, -q2_y, root - e1 - e2) if odd == 0 else (p1, 0.0, e1)
        second_x, second_y, second_e = (p1, 0.0, e1) if odd == 0 else (q2_x, q2_y, e2)
        x[_Q1_X + i], x[_Q1_Y + i], x[_E1 + i] = first_x, first_y, first_e
        x[_Q2_X + i], x[_Q2_Y + i], x[_E2 + i] = second_x, second_y, second_e
        x[_A_X + i], x[_A_Y + i], x[_B_X + i], x[_B_Y + i] = a_x, a_y, b_x, b_y


@inlined
def _across(nx: float, ny: float, nz: float) -> tuple[float, float, float, float, float, float]:
    """Two unit vectors that make a right-handed frame with the unit vector n (J. Comput. Graph. Tech. 6 (2017) 1)."""
    sign = 1.0 if nz >= 0.0 else -1.0
    a = -1.0 / (sign + nz)
    b = nx * ny * a
    return 1.0 + sign * nx * nx * a, sign * b, -sign * nx, b, sign + ny * ny * a, -ny


@kernel
def _turn_to_tau_frame(x: Floats, table: HadronTable, stream: np.uint64, first_event: np.uint64) -> None:
    """The neutrino's direction, Pi, the polarimeter vector, and the pions turned so that it points there."""
    first_mass, second_mass, third_mass = table.first_mass, table.second_mass, table.third_mass
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        mass2 = x[_MASS2 + i]
        root = np.sqrt(mass2)
        excess = (TAU_MASS * TAU_MASS - mass2) / mass2
        ax, ay, bx, by = x[_A_X + i], x[_A_Y + i], x[_B_X + i], x[_B_Y + i]
        a2, b2 = ax * ax + ay * ay, bx * bx + by * by
        cross = ax * by - ay * bx

        # the neutrino: isotropic, or with the density of cos² about a or b
        u = uniform(key, draw.HADRON_TERM) * (a2 + b2) * (3.0 + excess)
        peaked, about_a = u >= 3.0 * (a2 + b2), u < 3.0 * (a2 + b2) + excess * a2
        c1, c2, c3 = (
            2.0 * uniform(key, draw.HADRON_1) - 1.0,
            2.0 * uniform(key, draw.HADRON_2) - 1.0,
            2.0 * uniform(key, draw.HADRON_3) - 1.0,
        )
        largest = c1 if abs(c1) > abs(c2) else c2
        largest = c3 if abs(c3) > abs(largest) else largest
        c = largest if peaked else c1
        s = np.sqrt((1.0 - c) * (1.0 + c))
        sine, cosine = sincos_turns(uniform(key, draw.HADRON_AZIMUTH))
        axis_x, axis_y = (ax, ay) if about_a else (bx, by)
        size = np.sqrt(axis_x * axis_x + axis_y * axis_y)
        axis_x, axis_y = (axis_x / size, axis_y / size) if size > 0.0 else (1.0, 0.0)
        ux, uy, uz = c * axis_x - s * cosine * axis_y, c * axis_y + s * cosine * axis_x, s * sine
        along_a, along_b = ax * ux + ay * uy, bx * ux + by * uy
        even = a2 + b2 + excess * (along_a * along_a + along_b * along_b)
        sign = 1.0 if 2.0 * even * uniform(key, draw.HADRON_SIGN) < even - 2.0 * uz * cross else -1.0
        ux, uy, uz, along_a, along_b = sign * ux, sign * uy, sign * uz, sign * along_a, sign * along_b

        # Pi, and everything boosted to the tau rest frame, where the pions fly along -u
        gamma = (TAU_MASS * TAU_MASS + mass2) / (2.0 * TAU_MASS * root)
        gamma_beta = (TAU_MASS * TAU_MASS - mass2) / (2.0 * TAU_MASS * root)
        px = (a2 + b2) * ux - 2.0 * (along_a * ax + along_b * bx)
        py = (a2 + b2) * uy - 2.0 * (along_a * ay + along_b * by)
        pz = (a2 + b2) * uz - 2.0 * cross
        time = a2 + b2 - 2.0 * uz * cross
        push = (gamma - 1.0) * (px * ux + py * uy + pz * uz) - gamma_beta * time
        px, py, pz = px + push * ux, py + push * uy, pz + push * uz
        size = np.sqrt(px * px + py * py + pz * pz)
        hx, hy, hz = px / size, py / size, pz / size

        # direction of h on the axes of the tau, and its azimuth
        nz = 2.0 * uniform(key, draw.VISIBLE_COS) - 1.0
        sine, cosine = sincos_turns(uniform(key, draw.VISIBLE_AZIMUTH))
        s = np.sqrt((1.0 - nz) * (1.0 + nz))
        nx, ny = s * cosine, s * sine
        projection = nx * x[row.POLARISATION_X + i] + ny * x[row.POLARISATION_Y + i] + nz * x[row.POLARISATION_Z + i]
        sign = 1.0 if 2.0 * uniform(key, draw.VISIBLE_FLIP) < 1.0 + projection else -1.0
        nx, ny, nz = sign * nx, sign * ny, sign * nz
        x[row.VISIBLE_X + i], x[row.VISIBLE_Y + i], x[row.VISIBLE_Z + i] = nx, ny, nz
        fx, fy, fz, gx, gy, gz = _across(hx, hy, hz)
        kx, ky, kz, lx, ly, lz = _across(nx, ny, nz)
        sine, cosine = sincos_turns(uniform(key, draw.HADRON_TURN))
        kx, ky, kz, lx, ly, lz = (
            cosine * kx + sine * lx, cosine * ky + sine * ly, cosine * kz + sine * lz,
            cosine * lx - sine * kx, cosine * ly - sine * ky, cosine * lz - sine * kz,
        )  # fmt: skip

        # the pions: boosted, then turned with h
        q1_x, q1_y, e1, q2_x, q2_y, e2 = (
            x[_Q1_X + i], x[_Q1_Y + i], x[_E1 + i], x[_Q2_X + i], x[_Q2_Y + i], x[_E2 + i],
        )  # fmt: skip
        push = (gamma - 1.0) * (q1_x * ux + q1_y * uy) - gamma_beta * e1
        vx, vy, vz = q1_x + push * ux, q1_y + push * uy, push * uz
        h, f, g = vx * hx + vy * hy + vz * hz, vx * fx + vy * fy + vz * fz, vx * gx + vy * gy + vz * gz
        x[row.LEPTON_PX + i] = h * nx + f * kx + g * lx
        x[row.LEPTON_PY + i] = h * ny + f * ky + g * ly
        x[row.LEPTON_PZ + i] = h * nz + f * kz + g * lz
        x[row.LEPTON_E + i] = np.sqrt(h * h + f * f + g * g + first_mass * first_mass)
        push = (gamma - 1.0) * (q2_x * ux + q2_y * uy) - gamma_beta * e2
        vx, vy, vz = q2_x + push * ux, q2_y + push * uy, push * uz
        h, f, g = vx * hx + vy * hy + vz * hz, vx * fx + vy * fy + vz * fz, vx * gx + vy * gy + vz * gz
        x[row.PARTNER1_PX + i] = h * nx + f * kx + g * lx
        x[row.PARTNER1_PY + i] = h * ny + f * ky + g * ly
        x[row.PARTNER1_PZ + i] = h * nz + f * kz + g * lz
        x[row.PARTNER1_E + i] = np.sqrt(h * h + f * f + g * g + second_mass * second_mass)
        q3_x, q3_y = -q1_x - q2_x, -q1_y - q2_y
        push = (gamma - 1.0) * (q3_x * ux + q3_y * uy) - gamma_beta * (root - e1 - e2)
        vx, vy, vz = q3_x + push * ux, q3_y + push * uy, push * uz
        h, f, g = vx * hx + vy * hy + vz * hz, vx * fx + vy * fy + vz * fz, vx * gx + vy * gy + vz * gz
        x[row.PARTNER2_PX + i] = h * nx + f * kx + g * lx
        x[row.PARTNER2_PY + i] = h * ny + f * ky + g * ly
        x[row.PARTNER2_PZ + i] = h * nz + f * kz + g * lz
        x[row.PARTNER2_E + i] = np.sqrt(h * h + f * f + g * g + third_mass * third_mass)
    if third_mass == 0.0:
        for i in range(LANES):
            x[row.PARTNER2_PX + i] = x[row.PARTNER2_PY + i] = x[row.PARTNER2_PZ + i] = x[row.PARTNER2_E + i] = 0.0
    for i in range(LANES):
        x[row.VISIBLE_E + i] = x[row.LEPTON_E + i]
