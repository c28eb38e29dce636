"""One semileptonic decay: which particles, which form factors, which couplings."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields

from semitau.core.constants import LIFETIME, MASS, mass
from semitau.core.errors import InputError, Problem

from .form_factor_set import FormFactors, FormFactorSet, form_factors
from .orbital_states import CHARM_STATES, CONTINUA, ORBITAL_STATES, CharmState
from .tensor_form_factors import TENSOR_MODELS

PARENTS = ("B+", "B0")
LEPTONS = ("e", "mu", "tau")
FAMILIES = ("D", "D*", *ORBITAL_STATES)
CHARMS = (*FAMILIES, *CONTINUA)
DEFAULT_SETS: Mapping[str, str] = {"D": "BCL-2021", "Dst": "CLN-2021", "Dss": "IW-1998"}


@dataclass(frozen=True)
class WilsonCoefficients:
    """Couplings beyond the standard model at the b mass scale; the standard model is all zero.

    H = (4 G_F/sqrt(2)) V_cb [(1+VL) O_VL + VR O_VR + SL O_SL + SR O_SR + T O_T], where
    O_VL,VR = (c g^mu P_L,R b)(l g_mu P_L nu), O_SL,SR = (c P_L,R b)(l P_L nu), O_T = (c s^mn P_L b)(l s_mn P_L nu).
    """

    VL: complex = 0.0
    VR: complex = 0.0
    SL: complex = 0.0
    SR: complex = 0.0
    T: complex = 0.0

    def __post_init__(self) -> None:
        for field in fields(self):
            value = getattr(self, field.name)
            if not isinstance(value, int | float | complex) or abs(value) == float("inf") or value != value:
                raise InputError(Problem(f"Wilson coefficient {field.name} must be a finite number", got=repr(value)))
            object.__setattr__(self, field.name, complex(value))

    @classmethod
    def of(cls, given: WilsonCoefficients | Mapping[str, complex] | None) -> WilsonCoefficients:
        """From a mapping of names to values, or itself. InputError for an unknown name."""
        if isinstance(given, WilsonCoefficients):
            return given
        names = [field.name for field in fields(cls)]
        if given is not None and not isinstance(given, Mapping):
            rule, allowed = "Wilson coefficients must be a mapping of names to numbers", ", ".join(names)
            raise InputError(Problem(rule, got=type(given).__name__, wanted=allowed))
        unknown = [name for name in given or () if name not in names]
        if unknown:
            raise InputError(*(Problem("no such Wilson coefficient", got=n, wanted=", ".join(names)) for n in unknown))
        return cls(**dict(given or {}))


def charm_name(parent: str, family: str) -> str:
    """Name of the charmed meson of `family` in the decay of `parent`: ("B0", "D*") gives "D*-"."""
    return family + ("0" if parent == "B+" else "-")


def family_of(charm: str) -> str:
    """Family of a charmed meson: "D*-" gives "D*"."""
    return charm[:-1]


@dataclass(frozen=True)
class Decay:
    """A decay B -> charm lepton nu. Charge conjugation is implied and bars are left out.

    parent, charm : ("B0", "D-"), ("B0", "D*-"), ("B+", "D0"), ("B+", "D*0"), ("B0", "D1(2420)-"), ("B+", "D0*(2300)0")
        and so on, or a continuum, ("B0", "(D* pi)-"), whose charge is that of the whole.
    lepton : "e", "mu" or "tau".
    form_factors : name of a shipped set or a `FormFactorSet`; None takes the default of the transition.
    wilson : couplings beyond the standard model for this lepton, as a mapping or `WilsonCoefficients`.
    tensor : model of the tensor form factors of D and D*, "LO", "EOM" or "HQE"; see `tensor_form_factors`.
    charm_mass : mass of the charmed meson in GeV where it is not the nominal one; None for a broad state or a
        continuum, whose mass has a distribution (`line_shapes.py`).

    InputError lists everything that is wrong. Equal decays compare and hash equal.
    """

    parent: str
    charm: str
    lepton: str
    form_factors: FormFactorSet | str | None = None
    wilson: WilsonCoefficients | Mapping[str, complex] | None = None
    tensor: str = "LO"
    charm_mass: float | None = None

    def __post_init__(self) -> None:
        problems = []
        if self.parent not in PARENTS:
            problems.append(Problem("no such parent", got=repr(self.parent), wanted=", ".join(PARENTS)))
        else:
            charms = [charm_name(self.parent, family) for family in CHARMS]
            if self.charm not in charms:
                problems.append(
                    Problem(f"{self.parent} has no such charmed meson", got=repr(self.charm), wanted=", ".join(charms))
                )
        if self.lepton not in LEPTONS:
            problems.append(Problem("no such lepton", got=repr(self.lepton), wanted=", ".join(LEPTONS)))
        if self.tensor not in TENSOR_MODELS:
            problems.append(Problem("no such tensor model", got=repr(self.tensor), wanted=", ".join(TENSOR_MODELS)))
        if problems:
            raise InputError(*problems)
        object.__setattr__(self, "wilson", WilsonCoefficients.of(self.wilson))
        chosen = DEFAULT_SETS[self.transition] if self.form_factors is None else self.form_factors
        object.__setattr__(self, "form_factors", form_factors(chosen) if isinstance(chosen, str) else chosen)
        _ = self.model  # the set must describe the transition
        state = self.orbital
        if self.charm_mass is not None:
            object.__setattr__(self, "charm_mass", float(self.charm_mass))
        elif state is None or not state.broad:
            object.__setattr__(self, "charm_mass", mass(self.charm))
        self._check_physics()

    def _check_physics(self) -> None:
        problems = []
        if not 0.0 < self.m_charm < self.m_parent - self.m_lepton:
            limit = f"between 0 and {self.m_parent - self.m_lepton:.4f} GeV"
            problems.append(Problem("the charmed meson is too heavy", got=f"{self.m_charm} GeV", wanted=limit))
        if self.tensor == "EOM" and self.couplings.T != 0.0 and self.lepton != "tau":
            problems.append(Problem("the EOM tensor model is singular at small q2", remedy='Take tensor="LO".'))
        if self.tensor == "HQE" and self.orbital is None and self.model.parametrisation != "HQE":
            rule, remedy = "the HQE tensor model needs form factors of that kind", 'Choose a set such as "HQE-2021".'
            problems.append(Problem(rule, got=f"{self.form_factor_set.name}", remedy=remedy))
        if problems:
            raise InputError(*problems)

    def __str__(self) -> str:
        return f"{self.parent} -> {self.charm} {self.lepton} nu"

    @property
    def family(self) -> str:
        """The charmed meson without its charge: "D", "D*", "D1(2420)" ..."""
        return family_of(self.charm)

    @property
    def transition(self) -> str:
        """ "D", "Dst" or "Dss", as in the form-factor sets."""
        return {"D": "D", "D*": "Dst"}.get(self.family, "Dss")

    @property
    def orbital(self) -> CharmState | None:
        """Quantum numbers of a D** or a continuum, None for D and D*."""
        return CHARM_STATES.get(self.family)

    @property
    def form_factor_set(self) -> FormFactorSet:
        """The set that `form_factors` names or is."""
        chosen = self.form_factors
        if not isinstance(chosen, FormFactorSet):
            raise InputError(
                Problem("form_factors must be the name of a set or a FormFactorSet", got=type(chosen).__name__)
            )
        return chosen

    @property
    def model(self) -> FormFactors:
        """The form factors of this transition."""
        return self.form_factor_set[self.transition]

    @property
    def couplings(self) -> WilsonCoefficients:
        return WilsonCoefficients.of(self.wilson)

    @property
    def m_parent(self) -> float:
        """GeV."""
        return MASS[self.parent]

    @property
    def m_charm(self) -> float:
        """GeV; nominal or typical mass of a broad state."""
        if self.charm_mass is not None:
            return self.charm_mass
        return mass(self.charm) if self.orbital is None else self.orbital.mass

    @property
    def m_lepton(self) -> float:
        """GeV."""
        return MASS[self.lepton]

    @property
    def q2_range(self) -> tuple[float, float]:
        """Smallest and largest q2, GeV2; of a broad state that of its lowest mass."""
        state = self.orbital
        lowest = self.m_charm if self.charm_mass is not None or state is None else state.threshold
        return self.m_lepton**2, (self.m_parent - lowest) ** 2

    @property
    def lifetime(self) -> float:
        """Of the parent, ps."""
        return LIFETIME[self.parent]
