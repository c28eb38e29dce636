"""The charmed meson that is reconstructed at the end of a decay chain, whatever the kind of the chain."""

from __future__ import annotations

from semitau.core.constants import MASS

SOFT_MASS = {"none": 0.0, "charged_pion": MASS["pi+"], "neutral_pion": MASS["pi0"], "photon": 0.0}


class SeenCharm:
    """Base of the decay chains, which say what the D is and whether it comes from a D*.

    vector : species of the D*, "D*+" or "D*0"; "" if there is none.
    soft : particle of the D* decay: "none", "charged_pion", "neutral_pion" or "photon".
    ground : species of the D at the end, "D0" or "D+".
    """

    vector: str
    soft: str
    ground: str

    @property
    def m_vector(self) -> float:
        """GeV; 0 if there is no D*."""
        return MASS[self.vector] if self.vector else 0.0

    @property
    def m_ground(self) -> float:
        """GeV."""
        return MASS[self.ground]

    @property
    def m_soft(self) -> float:
        """GeV."""
        return SOFT_MASS[self.soft]
