"""The words that a study file may use: particles, observables, laws; with the labels that pictures show."""

from __future__ import annotations

from typing import Literal, NamedTuple, get_args


class ObservableName(NamedTuple):
    """How an observable is written on an axis: `label`, `unit`; `dimension` is a key of `units.UNITS`."""

    label: str
    unit: str
    dimension: str


OBSERVABLES: dict[str, ObservableName] = {
    "mm2": ObservableName("missing mass squared", "GeV²", "energy squared"),
    "q2": ObservableName("q²", "GeV²", "energy squared"),
    "el": ObservableName("lepton energy in the B frame", "GeV", "energy"),
    "p_lepton": ObservableName("lepton momentum", "GeV", "energy"),
    "p_charm": ObservableName("D(*) momentum", "GeV", "energy"),
    "e_res": ObservableName("residual energy", "GeV", "energy"),
    "delta_m": ObservableName("D* − D mass difference", "GeV", "energy"),
}

Parent = Literal["B+", "B0"]
Lepton = Literal["e", "mu", "tau"]
LightLepton = Literal["e", "mu"]
# What a category may have: leptons, or a pion or three that stand for a tau.
SeenLepton = Literal["e", "mu", "pi", "3pi"]
# Decays of the tau, as in [[mode]].
TauDecay = Literal["e", "mu", "pi", "rho", "a1", "a1_1prong"]
# Charm families: hadrons without their charge, as in [[mode]]; the charge follows from the parent. In brackets systems
# of a D or D* and light mesons without a resonance, whose charge is that of the whole.
CharmFamily = Literal[
    "D", "D*", "D1(2420)", "D2*(2460)", "D0*(2300)", "D1'(2430)",
    "(D pi)", "(D* pi)", "(D pi pi)", "(D* pi pi)", "(D eta)", "(D* eta)",
]  # fmt: skip
# Charm hadrons that are reconstructed, as in [[category]].
CharmHadron = Literal["D0", "D+", "D*0", "D*+"]
SoftKind = Literal["charged", "neutral", "photon"]
RatioName = Literal["R_D", "R_Dst"]
# Real and imaginary parts of Wilson coefficients, as parameters of templates.
CoefficientName = Literal["VL", "VR", "SL", "SR", "T", "Im_VL", "Im_VR", "Im_SL", "Im_SR", "Im_T"]

PARENTS: tuple[str, ...] = get_args(Parent)
LEPTONS: tuple[str, ...] = get_args(Lepton)
SEEN_LEPTONS: tuple[str, ...] = get_args(SeenLepton)
PION_DECAYS: tuple[str, ...] = get_args(TauDecay)[2:]
RATIOS: tuple[str, ...] = get_args(RatioName)
COEFFICIENTS: tuple[str, ...] = get_args(CoefficientName)
CHARM_FAMILIES: tuple[str, ...] = get_args(CharmFamily)
CHARM_HADRONS: tuple[str, ...] = get_args(CharmHadron)

EXCITED_CHARM = tuple(name for name in CHARM_FAMILIES if name not in ("D", "D*"))
# Which form factors ([form_factors] D, Dst, Dss) describe a family.
FORM_FACTORS_OF = {"D": "D", "D*": "Dst"} | dict.fromkeys(EXCITED_CHARM, "Dss")
# The charm family that a ratio counts.
CHARM_OF_RATIO = {"R_D": "D", "R_Dst": "D*"}

# Parts of category names and labels: D0_e is "D⁰ e".
CHARM_IDENTIFIER = {"D0": "D0", "D+": "Dp", "D*0": "Dst0", "D*+": "Dstp"}
CHARM_LABEL = {"D0": "D⁰", "D+": "D⁺", "D*0": "D*⁰", "D*+": "D*⁺"}
LEPTON_LABEL = {"e": "e", "mu": "μ", "tau": "τ", "pi": "π", "3pi": "3π"}
