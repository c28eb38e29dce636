"""The branching fractions that decay chains are made with: those of the tables, or others given instead of them.

A fraction is named by the particle that decays and by the final state in words: "tau" to "mu", "D*+" to "D0 pi+",
"D1(2420)" to "D pi pi", "pi pi" to "pi+ pi-", "B+" to "D* l" (one light lepton, mean of e and mu) or "D D_s+" (no
charge for the first D), "D_s+" to "tau" or "phi e". Neutrinos and charge conjugates are left out.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property
from types import MappingProxyType

from semitau.core.charm_fractions import STRANGE_VECTOR_PHOTON, TO_LEPTONS, TO_TWO_CHARMED, Fraction
from semitau.core.constants import BRANCHING_FRACTION, LIFETIME

from .decay import CHARMS, PARENTS
from .orbital_states import CHARM_STATES, ORBITAL_STATES, PION_PAIR_ERROR, PION_PAIR_SHARES, CharmState

LIGHT = " l"
"""Behind a charmed meson: with one light lepton, mean of e and mu."""

VECTOR_DECAYS = {
    "D*+": {"D0 pi+": ("D0", "charged_pion"), "D+ pi0": ("D+", "neutral_pion"), "D+ gamma": ("D+", "photon")},
    "D*0": {"D0 pi0": ("D0", "neutral_pion"), "D0 gamma": ("D0", "photon")},
}
"""Species of the D* -> final state -> (species of the D, kind of soft particle)."""

PION_PAIR = "pi pi"
"""Stands where a particle does: two pions beside a D or D*, by their charges."""

PION_PAIRS = {
    "pi+ pi-": ("charged", "charged"),
    "pi+ pi0": ("charged", "neutral"),
    "pi0 pi0": ("neutral", "neutral"),
}
"""Final state -> kinds of both pions."""

COMPLETE = ("D*+", "D*0", "D_s*+", "D1(2420)", "D2*(2460)", "D1'(2430)", PION_PAIR)
"""Particles whose decays sum to one."""

_ORBITAL_DECAYS = {  # by parity and angular momentum; the D0* has D pi alone
    "D1(2420)": ("D* pi", "D pi pi"),
    "D2*(2460)": ("D* pi", "D pi", "D pi pi"),
    "D1'(2430)": ("D* pi", "D pi pi"),
}


def _orbital(family: str) -> dict[str, Fraction]:
    state = ORBITAL_STATES[family]
    total = 1.0 + state.to_two_pions
    shares = {"D* pi": state.to_vector, "D pi": 1.0 - state.to_vector, "D pi pi": state.to_two_pions}
    return {name: Fraction(shares[name] / total, 0.0) for name in _ORBITAL_DECAYS[family]}


def _semileptonic(parent: str) -> dict[str, Fraction | None]:
    lifetime = LIFETIME[parent] / LIFETIME["B+"]
    found: dict[str, Fraction | None] = {}
    for family in CHARMS:
        state = CHARM_STATES.get(family)
        light = None if state is None else state.light_branching_fraction * (1.0 + state.to_two_pions) * lifetime
        found[family + LIGHT] = None if light is None else Fraction(light, 0.0)
    return found


def _words(product: tuple[str, ...]) -> str:
    """Final state of a charm decay: "tau", "mu", or a hadron and the electron."""
    return product[0] if product[0] in ("tau", "mu") else f"{product[0]} e"


TABLES: Mapping[str, Mapping[str, Fraction | None]] = MappingProxyType(
    {
        **{p: {**_semileptonic(p), **{" ".join(k): v for k, v in TO_TWO_CHARMED[p].items()}} for p in PARENTS},
        **{family: _orbital(family) for family in _ORBITAL_DECAYS},
        **{name: {k: Fraction(v, 0.0) for k, v in BRANCHING_FRACTION[name].items()} for name in ("D*+", "D*0")},
        "D_s*+": {
            "D_s+ gamma": STRANGE_VECTOR_PHOTON,
            "D_s+ pi0": Fraction(1.0 - STRANGE_VECTOR_PHOTON.value, STRANGE_VECTOR_PHOTON.error),
        },
        PION_PAIR: {
            name: Fraction(PION_PAIR_SHARES[kinds], PION_PAIR_ERROR if name == "pi+ pi-" else 0.0)
            for name, kinds in PION_PAIRS.items()
        },
        "tau": {k: Fraction(v, 0.0) for k, v in BRANCHING_FRACTION["tau"].items()},
        **{meson: {_words(k): v for k, v in row.items()} for meson, row in TO_LEPTONS.items()},
    }
)
"""Particle -> final state -> fraction, error 0 where the tables have none; None: computed from the form factors."""


@dataclass(frozen=True)
class BranchingFractions:
    """Fractions of the tables but for those given.

    given : particle -> final state -> fraction, names as in TABLES.
    ratios : charmed meson -> branching fraction with a tau over that with a light lepton, for D** and continua.
    """

    given: Mapping[str, Mapping[str, Fraction]] = field(default_factory=dict)
    ratios: Mapping[str, Fraction] = field(default_factory=dict)

    def one(self, particle: str, final: str) -> Fraction | None:
        """The fraction given, else that of the tables; None where that is computed."""
        return self.given.get(particle, {}).get(final, TABLES[particle][final])

    def value(self, particle: str, final: str) -> float:
        """The value of a fraction that is not computed."""
        found = self.one(particle, final)
        return 0.0 if found is None else found.value

    def relative_error(self, particle: str, final: str, given: float | None = None) -> float:
        """`given`, or the error of a fraction over its value; 0 if there is none."""
        found = self.one(particle, final)
        if given is not None:
            return given
        return found.error / found.value if found is not None and found.value > 0.0 else 0.0

    def moved(self, particle: str, final: str, value: float) -> BranchingFractions:
        """With another value of one fraction; the other decays take up the difference in proportion if they all sum to
        one."""
        new = {**self.given.get(particle, {}), final: Fraction(value, 0.0)}
        if particle in COMPLETE:
            rest = (1.0 - value) / (1.0 - self.value(particle, final))
            for other in TABLES[particle]:
                if other != final:
                    new[other] = Fraction(self.value(particle, other) * rest, 0.0)
        return BranchingFractions({**self.given, particle: new}, self.ratios)

    @cached_property
    def vector_decays(self) -> dict[str, tuple[tuple[str, str, float], ...]]:
        """Species of the D* -> (species of the D, kind of soft particle, branching fraction)."""
        return {
            vector: tuple((*products, self.value(vector, final)) for final, products in finals.items())
            for vector, finals in VECTOR_DECAYS.items()
        }

    @cached_property
    def pion_pairs(self) -> tuple[tuple[str, str, float], ...]:
        """Kinds of two pions beside a D or D*, share."""
        return tuple((*kinds, self.value(PION_PAIR, final)) for final, kinds in PION_PAIRS.items())

    def state(self, family: str) -> CharmState:
        """A D** or continuum with the shares of its decays; its whole rate as in the tables."""
        known = CHARM_STATES[family]
        if family not in self.given:
            return known
        one_pion = self.value(family, "D* pi")
        other = self.value(family, "D pi") if "D pi" in TABLES[family] else 0.0
        both = one_pion + other
        to_two_pions = self.value(family, "D pi pi") / both
        light = known.light_branching_fraction * (1.0 + known.to_two_pions) / (1.0 + to_two_pions)
        return replace(known, to_vector=one_pion / both, to_two_pions=to_two_pions, light_branching_fraction=light)

    def semileptonic(self, parent: str, family: str) -> float | None:
        """Fraction of B -> X_c l nu with one light lepton, if it is given for this parent."""
        found = self.given.get(parent, {}).get(family + LIGHT)
        return None if found is None else found.value

    def to_two_charmed(self, parent: str) -> dict[tuple[str, ...], Fraction]:
        """As core.charm_fractions.TO_TWO_CHARMED of this parent."""
        return {key: self.one(parent, " ".join(key)) or known for key, known in TO_TWO_CHARMED[parent].items()}

    def to_leptons(self, meson: str) -> dict[tuple[str, ...], Fraction]:
        """As core.charm_fractions.TO_LEPTONS of this meson."""
        return {key: self.one(meson, _words(key)) or known for key, known in TO_LEPTONS[meson].items()}


FROM_TABLES = BranchingFractions()
"""Nothing given."""
