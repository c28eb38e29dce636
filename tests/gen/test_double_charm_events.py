"""Records of true double charm: who is there, momentum balance, reproducibility, messages."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest
from particle import Particle
from semitau import gen
from semitau.core.errors import InputError


def chain(name: str) -> gen.DoubleCharmChain:
    return next(c for c in gen.double_charm_chains(["B0"]) if c.name == name)


TAU = "B0 -> D*+ D_s*+, D*+ -> D0 charged_pion, D_s*+ -> D_s+ neutral, D_s+ -> tau, tau -> mu"
KAON = "B0 -> D+ D0 K+, D0 -> K*+ e"


def total(events: ak.Array, *names: str) -> np.ndarray:
    return np.array([sum(ak.to_numpy(events[name][part]) for name in names) for part in ("px", "py", "pz", "E")])


def mass(events: ak.Array, *names: str) -> np.ndarray:
    px, py, pz, e = total(events, *names)
    return np.sqrt(np.maximum(e**2 - px**2 - py**2 - pz**2, 0.0))


def test_fields_and_balance() -> None:
    """Masses of the `particle` package; what the B gives adds up to the B."""
    events = gen.simulate_double_charm(chain(TAU), 1000, seed=5)
    assert events.fields == ["B", "Dst", "soft", "D", "partner", "meson", "beside_soft", "tau", "lepton", "neutrinos"]
    rest = total(events, "B") - total(events, "D", "soft", "beside_soft", "lepton", "neutrinos")
    assert rest == pytest.approx(0.0, abs=1e-9)
    for name, code in (("Dst", 413), ("D", 421), ("partner", 433), ("meson", 431), ("tau", 15), ("lepton", 13)):
        assert mass(events, name) == pytest.approx(Particle.from_pdgid(code).mass / 1e3, abs=1e-3), name
    assert (mass(events, "neutrinos") > 0.0).all()

    events = gen.simulate_double_charm(chain(KAON), 1000, seed=5)
    assert events.fields == ["B", "D", "partner", "kaon", "meson", "hadron", "lepton", "neutrinos"]
    assert mass(events, "hadron") == pytest.approx(Particle.from_pdgid(323).mass / 1e3, abs=1e-3)
    assert mass(events, "D", "kaon", "hadron", "lepton", "neutrinos") == pytest.approx(mass(events, "B"), abs=1e-9)
    assert mass(events, "neutrinos") == pytest.approx(0.0, abs=1e-4)


def test_a_longer_sample_begins_with_the_shorter_one() -> None:
    short, long = (gen.simulate_double_charm(chain(KAON), n, seed=9) for n in (300, 700))
    assert ak.all(long.lepton.E[:300] == short.lepton.E)
    assert len(gen.simulate_double_charm(chain(KAON), 0, seed=9)) == 0
    assert not ak.any(gen.simulate_double_charm(chain(KAON), 300, seed=10).lepton.E == short.lepton.E)


def test_messages() -> None:
    with pytest.raises(InputError, match="not a chain of double charm"):
        gen.simulate_double_charm("B0", 10, seed=1)  # type: ignore[arg-type]
    with pytest.raises(InputError, match="whole number"):
        gen.simulate_double_charm(chain(KAON), -1, seed=1)
