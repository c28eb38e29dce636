"""Form factors: limits that have a closed form, published values, covariances, shifts, bad names."""

from __future__ import annotations

import numpy as np
import pytest
from semitau import gen
from semitau.core.constants import MASS
from semitau.core.errors import InputError
from semitau.gen.decays.form_factor_values import PseudoscalarFormFactors, VectorFormFactors

from .reference import load

PUBLISHED = load("decays")
B, D, DST = 5.27972, 1.86966, 2.01027


def q2_at(w: float, m: float) -> np.ndarray:
    return np.array([B * B + m * m - 2 * B * m * w])


def pseudoscalar(name: str, q2: np.ndarray) -> PseudoscalarFormFactors:
    values = gen.form_factors(name)["D"](B, D, q2)
    assert isinstance(values, PseudoscalarFormFactors)
    return values


def vector(name: str, q2: np.ndarray) -> VectorFormFactors:
    values = gen.form_factors(name)["Dst"](B, DST, q2)
    assert isinstance(values, VectorFormFactors)
    return values


def test_shipped_sets() -> None:
    assert {"BCL-2021", "CLN-2012", "CLN-2021", "BGL-2021", "IW-1998"} <= set(gen.form_factor_sets())
    for name in gen.form_factor_sets():
        for member in gen.form_factors(name).members:
            assert member.source, f"{name} {member.transition} has no source"
            assert len(member.names) == len(member.values) == len(member.errors)


@pytest.mark.parametrize("name", ["CLN-2012", "CLN-2021"])
def test_cln_normalisation_and_slope(name: str) -> None:
    """At w = 1: h = h(1), -h'/h = rho2, V and A0 stand to A1 as R1 and R0 (Nucl. Phys. B 530 (1998) 153)."""
    p = gen.form_factors(name)["Dst"].parameters
    r = DST / B
    at = vector(name, q2_at(1.0, DST))
    assert at.A1[0] == pytest.approx(2 * np.sqrt(r) / (1 + r) * p["h(1)"], rel=1e-12)
    for ff, key in ((at.V, "R1(1)"), (at.A0, "R0(1)")):
        assert ff[0] * (1 - q2_at(1.0, DST)[0] / (B + DST) ** 2) / at.A1[0] == pytest.approx(p[key], rel=1e-9)
    step = 1e-5
    h = [vector(name, q2_at(w, DST)).A1[0] / (w + 1) for w in (1.0, 1.0 + step, 1.0 + 2 * step)]
    assert -(-3 * h[0] + 4 * h[1] - h[2]) / (2 * step) / h[0] == pytest.approx(p["rho2"], rel=1e-6)

    p = gen.form_factors(name)["D"].parameters
    scalar = pseudoscalar(name, q2_at(1.0, D)).f_zero[0]
    # S1(1)/V1(1) = 0.981 (Phys. Rev. D 82 (2010) 034027)
    assert scalar == pytest.approx(0.981 * p["V1(1)"] * 2 * np.sqrt(D / B) / (1 + D / B), rel=1e-12)
    f = [pseudoscalar(name, q2_at(w, D)).f_plus[0] for w in (1.0, 1.0 + step, 1.0 + 2 * step)]
    assert -(-3 * f[0] + 4 * f[1] - f[2]) / (2 * step) / f[0] == pytest.approx(p["rho2"], rel=1e-6)


@pytest.mark.parametrize(("w", "m"), [(1.0, DST), (1.17, DST), (1.5, DST)])
def test_longitudinal_combination(w: float, m: float) -> None:
    """F1 from A2 = R2 A1 / (1 - q2/(M+m)^2), R2(w) as in Nucl. Phys. B 530 (1998) 153."""
    q2 = q2_at(w, m)
    values = vector("CLN-2021", q2)
    p = gen.form_factors("CLN-2021")["Dst"].parameters
    R2 = p["R2(1)"] + 0.11 * (w - 1) - 0.06 * (w - 1) ** 2
    A2 = R2 * values.A1 / (1 - q2 / (B + m) ** 2)
    squared = (B * B - m * m - q2) ** 2 - 4 * m * m * q2
    expected = ((B * B - m * m - q2) * (B + m) * values.A1 - squared * A2 / (B + m)) / (2 * m)
    np.testing.assert_allclose(values.F1, expected, rtol=1e-12)


def test_bcl_constraint() -> None:
    """f_plus(0) = f_zero(0), exact; the cubic term of f_plus makes it analytic at threshold: df/dz = 0 at z = -1."""
    values = pseudoscalar("BCL-2021", np.zeros(1))
    assert values.f_plus[0] == pytest.approx(values.f_zero[0], rel=1e-12)
    step = 1e-7
    near = [pseudoscalar("BCL-2021", np.array([(B + D) ** 2 - s])).f_plus[0] for s in (0.0, step, 4 * step)]
    # sqrt(threshold - q2) grows by 1:2, so a linear term in z would show as equal steps.
    assert abs(near[1] - near[0]) < 0.35 * abs(near[2] - near[1])


@pytest.mark.parametrize(("name", "sigmas"), [("BCL-2021", 2.0), ("BGL-2021", 0.5)])
@pytest.mark.parametrize("w", [1.00, 1.08, 1.16])
def test_pseudoscalar_against_lattice(w: float, name: str, sigmas: float) -> None:
    """BGL-2021 is the fit to these very points; BCL-2021 averages them with other data."""
    values = pseudoscalar(name, q2_at(w, D))
    for key, found in (("f_plus", values.f_plus), ("f_zero", values.f_zero)):
        known = PUBLISHED[f"{key}_w{w:.2f}"]
        assert found[0] == pytest.approx(known.value, abs=sigmas * known.error)


def test_bgl_constraints() -> None:
    """F1 = (M - m) f at zero recoil, exact; h_A1(1) as published; A0 = A3 at q2 = 0 within lattice errors (13%)."""
    at = vector("BGL-2021", q2_at(1.0, DST))
    assert at.F1[0] == pytest.approx((B - DST) * (B + DST) * at.A1[0], rel=1e-9)
    known = PUBLISHED["h_A1_BGL-2021"]
    assert (B + DST) * at.A1[0] / (2 * np.sqrt(B * DST)) == pytest.approx(known.value, abs=known.error / 5)
    at = vector("BGL-2021", np.zeros(1))
    assert at.A0[0] == pytest.approx(at.F1[0] / (B * B - DST * DST), rel=0.13)
    d = pseudoscalar("BGL-2021", np.zeros(1))
    assert d.f_plus[0] == pytest.approx(d.f_zero[0], rel=0.01)


def test_bgl_outer_functions_and_poles() -> None:
    """One coefficient against the formula of Phys. Rev. D 56 (1997) 6895 written out in q2 and t+-, not in w."""
    M, m = MASS["B0"], MASS["D*+"]
    r, q2 = m / M, 6.0
    t_plus, t_minus = (M + m) ** 2, (M - m) ** 2

    def z_of(t: float) -> float:
        a, b = np.sqrt(t_plus - t), np.sqrt(t_plus - t_minus)
        return float((a - b) / (a + b))

    z = z_of(q2)
    d = (1 + r) * (1 - z) + 2 * np.sqrt(r) * (1 + z)
    product = np.prod([abs((z - z_of(p * p)) / (1 - z * z_of(p * p))) for p in (6.329, 6.920, 7.020)])
    outer = 16 * r**2 * np.sqrt(2.6 / (3 * np.pi * 5.131e-4)) * (1 + z) ** 2 / np.sqrt(1 - z) / d**4
    member = gen.form_factors("BGL-2021")["Dst"]
    only = member.shifted({name: (1.0 if name == "g_1" else 0.0) - v for name, v in member.parameters.items()})
    values = only(M, m, np.array([q2]))
    assert isinstance(values, VectorFormFactors)
    assert 2 * values.V[0] / (M + m) == pytest.approx(z / (product * outer), rel=1e-10)
    assert values.A1[0] == values.A0[0] == values.F1[0] == 0.0


@pytest.mark.parametrize("name", [n for n in gen.form_factor_sets() if "Dst" in gen.form_factors(n).transitions])
def test_isospin(name: str) -> None:
    """Charged and neutral modes differ by phase space only, well below 1%."""
    rates = [gen.observables(gen.Decay(p, c, "e", name)).rate for p, c in (("B0", "D*-"), ("B+", "D*0"))]
    assert rates[1] / rates[0] == pytest.approx(1.0, abs=0.005)


@pytest.mark.parametrize("name", gen.form_factor_sets())
def test_covariance(name: str) -> None:
    for member in gen.form_factors(name).members:
        covariance, directions = member.covariance, member.directions
        np.testing.assert_allclose(np.sqrt(np.diag(covariance)), member.errors, rtol=1e-12)
        assert np.all(np.linalg.eigvalsh(np.array(member.correlation)) > 0)
        # What makes directions right: together they are the covariance.
        np.testing.assert_allclose(directions.T @ directions, covariance, rtol=1e-9, atol=1e-15)


def test_uncorrelated_parameter_is_a_direction() -> None:
    member = gen.form_factors("CLN-2021")["Dst"]
    index = member.names.index("R0(1)")
    alone = [d for d in member.directions if np.count_nonzero(d) == 1 and d[index] != 0]
    assert len(alone) == 1
    assert alone[0][index] == pytest.approx(0.07)


def test_shifts() -> None:
    chosen = gen.form_factors("CLN-2021")
    moved = chosen.shifted({"R0(1)": +0.07})
    assert moved["Dst"].parameters["R0(1)"] == pytest.approx(chosen["Dst"].parameters["R0(1)"] + 0.07)
    assert moved["D"] == chosen["D"]
    assert moved != chosen
    both = chosen.shifted({"rho2": 0.01}, transition="D")
    assert both["D"].parameters["rho2"] == pytest.approx(chosen["D"].parameters["rho2"] + 0.01)
    assert both["Dst"] == chosen["Dst"]
    first = chosen.along(0, 2.0, transition="Dst")
    np.testing.assert_allclose(
        np.array(first["Dst"].values) - chosen["Dst"].values, 2.0 * chosen["Dst"].directions[0], atol=1e-12
    )
    assert gen.form_factors("BCL-2021").along(0, 1.0).along(0, -1.0)["D"].values == pytest.approx(
        gen.form_factors("BCL-2021")["D"].values
    )


def test_bad_names() -> None:
    with pytest.raises(InputError, match=r"no such form-factor set .*CLN-2020.*BCL-2021"):
        gen.form_factors("CLN-2020")
    with pytest.raises(InputError, match=r"no such parameter .*R9.*R0\(1\)"):
        gen.form_factors("CLN-2021").shifted({"R9": 1.0}, transition="Dst")
    with pytest.raises(InputError, match=r"several transitions .*Say which one"):
        gen.form_factors("CLN-2021").shifted({"rho2": 0.1})
    with pytest.raises(InputError, match=r"no such parameter .*x1.*a0"):
        gen.form_factors("BCL-2021").shifted({"x1": 0.1})
    with pytest.raises(InputError, match=r"no such direction .*got 7, allowed 0 to 4"):
        gen.form_factors("BCL-2021").along(7, 1.0)
    with pytest.raises(InputError, match=r"BCL-2021 does not describe B -> D\* .*Sets that do: .*CLN-2021"):
        gen.form_factors("BCL-2021")["Dst"]
    with pytest.raises(InputError, match="universal functions"):
        gen.form_factors("IW-1998")["Dss"](B, 2.42, np.ones(1))
