"""Weights that turn events of one decay into another with other form factors or couplings, from the momenta alone."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import product

import awkward as ak
import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.constants import MASS
from semitau.core.errors import InputError, Problem

from ..decays.amplitudes import helicity_amplitudes
from ..decays.decay import Decay
from ..decays.line_shapes import has_line_shape, mass_density
from .charm_spin import ISOTROPIC, CharmSpin, spin_of_orbital, spin_of_vector
from .decay_angles import DecayAngles, decay_angles, invariant_mass
from .decay_record import decay_of
from .polarimeter import PARTNERS, polarimeter
from .spin_algebra import both_waves, chain_density
from .tau_decay import emission

Floats = npt.NDArray[np.float64]


def weights(events: ak.Array, decay: Decay, *, drawn_from: Decay | None = None) -> Floats:
    """|M|² of `decay` over |M|² of the decay that the events were drawn from, for each event.

    events : records as `simulate` returns them, in any frame, of any number and order.
    decay : same particles as the events, other form factors or Wilson coefficients.
    drawn_from : what the events were drawn from; needed only if the records do not say so.

    Returns (n,) float64, not normalised: the mean over unweighted events is Γ(decay) / Γ(drawn from). The spin of D*,
    D** and tau counts: the tau decay is integrated over its neutrinos, photons over helicities, a D* from a D**
    over its decay.
    InputError if the events do not fit. Source: `amplitudes.py` and `spin_algebra.py`, as in the sampling.
    """
    if not isinstance(events, ak.Array):
        raise InputError(Problem("not an array of events", where="events", got=type(events).__name__))
    if not isinstance(decay, Decay):
        raise InputError(Problem("not a decay", where="decay", got=type(decay).__name__, wanted="gen.Decay"))
    source = drawn_from if drawn_from is not None else decay_of(events)
    if source is None:
        raise InputError(
            Problem(
                "the events do not say which decay they were drawn from",
                where="events",
                remedy="Pass drawn_from=..., or weight the records before you take fields out of them or join samples.",
            )
        )
    for name in ("parent", "charm", "lepton", "charm_mass"):
        old, new = getattr(source, name), getattr(decay, name)
        if old != new:
            raise InputError(
                Problem(f"events cannot be weighted to another {name}", where="decay", got=repr(new), wanted=repr(old))
            )
    has_vector, has_tau, orbital = source.family == "D*", source.lepton == "tau", source.orbital
    charm_field = "D" if source.family == "D" else "Dst" if has_vector else "Dss"
    looked_at = (["soft"] if has_vector else []) + (["D"] if has_vector or orbital is not None else [])
    needed = ["B", charm_field, "lepton", *looked_at, *(["tau"] if has_tau else [])]
    missing = [name for name in needed if name not in events.fields]
    if missing:
        raise InputError(
            Problem("fields are missing", where="events", got=", ".join(events.fields), wanted=", ".join(needed))
        )

    if any(ak.any(ak.is_none(events[name].E)) for name in needed):
        remedy = "Drop them with ak.drop_none."
        raise InputError(Problem("some records are missing", where="events", remedy=remedy))

    daughter = _daughter(events) if has_vector or orbital is not None else None
    tau, visible = (_momentum(events, "tau"), _visible(events)) if has_tau else (None, None)
    angles = decay_angles(
        _momentum(events, "B"),
        _momentum(events, charm_field),
        tau if tau is not None else _with_photons(events),
        daughter,
        visible,
    )
    power = _analysing_power(events, angles) if has_tau else np.zeros(angles.q2.size)
    masses = invariant_mass(_momentum(events, "Dss")) if has_line_shape(source) else None
    spins = list(_charm_spins(events, source))
    old, new = (_densities(model, angles, power, spins, masses) for model in (source, decay))
    ratio: Floats = new / old
    return ratio


_PHOTON_BELOW = 0.05
"""GeV: between the photon, massless up to rounding, and the pions."""


def _daughter(events: ak.Array) -> Floats:
    """(4, n): the D of a D*; of a D** its D*, or its D where there is no D*."""
    if "Dss" not in events.fields or "Dst" not in events.fields:
        return _momentum(events, "D")
    direct = ak.to_numpy(ak.is_none(events.Dst.E))
    parts = ("px", "py", "pz", "E")
    vector = np.stack([ak.to_numpy(ak.fill_none(events.Dst[part], 0.0)) for part in parts])
    return np.where(direct, _momentum(events, "D"), vector)


def _charm_spins(events: ak.Array, source: Decay) -> Iterator[tuple[CharmSpin, npt.NDArray[np.bool_]]]:
    """How the charmed meson of the B decay decayed, each with which events did so."""
    every = np.ones(len(events), dtype=bool)
    if source.family == "D*":
        photon = invariant_mass(_momentum(events, "soft")) < _PHOTON_BELOW
        yield from ((spin_of_vector(is_photon), photon == is_photon) for is_photon in (False, True))
    elif source.orbital is None:
        yield ISOTROPIC, every
    else:
        vector, pair = (_has(events, name) for name in ("Dst", "second_pion"))
        for to_vector, two_pions in product((False, True), repeat=2):
            yield (
                spin_of_orbital(source.orbital, to_vector, two_pions),
                (vector == to_vector) & (pair == two_pions),
            )


def _has(events: ak.Array, name: str) -> npt.NDArray[np.bool_]:
    if name not in events.fields:
        return np.zeros(len(events), dtype=bool)
    return ~np.asarray(ak.to_numpy(ak.is_none(events[name].E)))


def _momentum(events: ak.Array, name: str) -> Floats:
    """(4, n) px, py, pz, E."""
    return np.stack([ak.to_numpy(events[name][part], allow_missing=False) for part in ("px", "py", "pz", "E")])


def _with_photons(events: ak.Array) -> Floats:
    """(4, n): the charged lepton before it radiated, which the angles of the decay belong to."""
    lepton = _momentum(events, "lepton")
    if "photons" not in events.fields:
        return lepton
    total: Floats = np.stack([ak.to_numpy(ak.sum(events.photons[part], axis=1)) for part in ("px", "py", "pz", "E")])
    return lepton + total


def _visible(events: ak.Array) -> Floats:
    """What analyses the spin of the tau: the lepton, or the polarimeter of its pions."""
    found = next((names for names in PARTNERS.values() if set(names) <= set(events.fields)), ())
    pions = [_with_photons(events), *(_momentum(events, name) for name in found)]
    if found == PARTNERS["a1_1prong"]:
        pions = [*pions[1:], pions[0]]
    return polarimeter(_momentum(events, "tau"), tuple(pions))


def _analysing_power(events: ak.Array, angles: DecayAngles) -> Floats:
    """Coefficient of n.P in the tau decay, relative to the part without P."""
    if "nu_lepton" not in events.fields:
        return np.ones(angles.q2.size)
    typical = np.median(invariant_mass(_momentum(events, "lepton"))) if angles.q2.size else 0.0
    mass = MASS["e"] if typical < 0.5 * MASS["mu"] else MASS["mu"]
    # rounding may put an energy below the mass
    _, even, odd = emission(np.maximum(angles.visible_energy, mass), mass)
    return np.asarray(-odd / even)


def _densities(
    decay: Decay,
    angles: DecayAngles,
    power: Floats,
    spins: list[tuple[CharmSpin, npt.NDArray[np.bool_]]],
    masses: Floats | None,
) -> Floats:
    """spins : of the charmed meson, with the events that have each. masses : (n,) GeV of the charm, where a line shape
    gives it; its density is then part of the result."""
    given = vars(helicity_amplitudes(decay, angles.q2, masses)).values()
    amplitudes = np.stack(list(given), dtype=np.complex128)
    if masses is not None:
        amplitudes = amplitudes * np.sqrt(mass_density(decay, masses))
    values = np.stack(
        [
            decay.m_lepton / np.sqrt(angles.q2),
            angles.cos_theta,
            angles.cos_v,
            angles.cos_chi,
            angles.sin_chi,
            power * angles.visible_x,
            power * angles.visible_y,
            power * angles.visible_z,
        ]
    )
    result = np.empty(angles.q2.size)
    for spin, where in spins:
        _fill_densities(values, amplitudes, spin, np.flatnonzero(where), result)
    return result


@kernel
def _fill_densities(
    values: Floats,
    amplitudes: npt.NDArray[np.complex128],
    spin: CharmSpin,
    events: npt.NDArray[np.int64],
    result: Floats,
) -> None:
    for i in events:
        v, a = values[:, i], amplitudes[:, i]
        result[i] = chain_density(
            v[0], spin, v[1], v[2], v[3], v[4], v[5], v[6], v[7],
            (a[0], a[1], a[2], a[3], a[4], a[5], a[6], a[7]), both_waves,
        )  # fmt: skip
