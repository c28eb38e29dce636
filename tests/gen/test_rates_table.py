"""Form-factor errors of rates: closed forms where a parameter scales the rate, random sampling of the covariance."""

from __future__ import annotations

import os

import numpy as np
import pytest
from semitau import gen
from semitau.core.errors import InputError
from semitau.gen.decays.form_factor_set import FormFactorSet
from semitau.gen.decays.rates_table import rates_table

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))


def test_every_mode_once() -> None:
    table = rates_table(["D", "D*", "D1(2420)"])
    assert len(table.modes) == 3 * 2 * 3
    assert len(table.ratios) == 3 * 3
    for row in table.modes:
        assert row.values == gen.observables(row.decay)
    *single, _, _, _ = table.ratios
    for ratio in single:
        assert ratio.value == gen.ratio(ratio.parent, ratio.charm)
        assert ratio.error > 0
    for ratio in table.ratios[6:]:
        assert ratio.parent == "mean"
        pair = [one.value for one in single if one.charm[:-1] == ratio.charm]
        assert ratio.value == pytest.approx(sum(pair) / 2, rel=1e-14)
        # Both parents have the same form factors, so the errors add up linearly.
        errors = [one.error for one in single if one.charm[:-1] == ratio.charm]
        assert ratio.error == pytest.approx(sum(errors) / 2, rel=1e-3)
    for spectrum in table.spectra:
        inside = spectrum.rate[1:-1]
        np.testing.assert_array_equal(inside, gen.differential_rate(spectrum.decay, spectrum.q2[1:-1]))
        assert np.all(spectrum.error[1:-1] > 0)


def test_normalisation_has_a_closed_form() -> None:
    """Only h(1) uncertain: the rate goes with its square, nothing else moves."""
    member = gen.form_factors("CLN-2021")["Dst"]
    errors = tuple(0.01 if name == "h(1)" else 0.0 for name in member.names)
    identity = tuple(tuple(float(i == j) for j in range(len(errors))) for i in range(len(errors)))
    alone = FormFactorSet("test", (type(member)("Dst", "CLN", member.names, member.values, errors, identity, "test"),))
    table = rates_table(["D*"], parents=["B0"], leptons=["tau"], form_factors={"Dst": alone})
    (row,), (ratio,) = table.modes, table.ratios
    h = member.parameters["h(1)"]
    assert row.errors.rate / row.values.rate == pytest.approx(2 * 0.01 / h, rel=1e-9)
    assert row.errors.tau_polarisation == pytest.approx(0.0, abs=1e-12)
    assert ratio.error == pytest.approx(0.0, abs=1e-12)
    spectrum = table.spectra[0]
    np.testing.assert_allclose(spectrum.error, 2 * 0.01 / h * spectrum.rate, rtol=1e-9)


@pytest.mark.parametrize(("family", "name", "key"), [("D", "BCL-2021", "D"), ("D*", "CLN-2021", "Dst")])
def test_against_sampling(family: str, name: str, key: str) -> None:
    """Spread of R over draws from the covariance.

    2000 draws: the spread is known to 1.6%. A tolerance of 8% (five sigma, and up to 1% of non-linearity) fails by
    chance about once in 10^5.
    """
    chosen = gen.form_factors(name)
    member = chosen[key]
    (row,) = rates_table([family], parents=["B0"], leptons=["tau"], form_factors={key: name}).ratios
    rng = np.random.default_rng(SEED)
    draws = rng.multivariate_normal(member.values, member.covariance, size=2000) - member.values
    shifts = (chosen.shifted(dict(zip(member.names, draw, strict=True)), transition=key) for draw in draws)
    spread = np.std([gen.ratio("B0", row.charm, shifted) for shifted in shifts])
    assert row.error == pytest.approx(spread, rel=0.08)


def test_shared_parameters_correlate_the_ratios() -> None:
    """R(D) and R(D*) from one heavy-quark expansion, against 1000 draws from the covariance: errors and correlation.

    Five sigma: 1/sqrt(2000) = 2.2% on an error, (1 - rho^2)/sqrt(1000) = 0.03 on the correlation, and 0.03 for what is
    not linear; fails by chance about once in 10^6.
    """
    name = "HQE-2021"
    chosen = gen.form_factors(name)
    table = rates_table(["D", "D*"], parents=["B0"], form_factors={"D": name, "Dst": name})
    member = chosen["D"]
    rng = np.random.default_rng(SEED)
    draws = rng.multivariate_normal(member.values, member.covariance, size=1000) - member.values
    varied = (chosen.shifted(dict(zip(member.names, draw.tolist(), strict=True))) for draw in draws)
    found = np.array([[gen.ratio("B0", charm, one) for charm in ("D-", "D*-")] for one in varied])
    assert [ratio.error for ratio in table.ratios] == pytest.approx(found.std(axis=0), rel=0.15)
    assert table.correlation[0, 1] == pytest.approx(np.corrcoef(found.T)[0, 1], abs=0.2)
    # Different sets know nothing of each other; both parents have the same parameters.
    apart = rates_table(["D", "D*"])
    assert apart.correlation[0, 2] == 0.0
    assert apart.correlation[0, 1] == pytest.approx(1.0, abs=1e-3)


def test_bad_names() -> None:
    with pytest.raises(InputError, match="no such charmed meson"):
        rates_table(["Dx"])
