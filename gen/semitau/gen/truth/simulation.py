"""The public door to true decays: unweighted events as awkward records, made by the same kernel as templates are."""

from __future__ import annotations

import awkward as ak
import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.constants import BRANCHING_FRACTION, MASS
from semitau.core.errors import InputError, Problem
from semitau.core.streams import stream_key, uniforms

from .. import block as row
from ..block import LANES, MOST_PHOTONS, new_block
from ..decays.chains import Channel, chains_of
from ..decays.decay import Decay
from . import draw_numbers as draw
from . import neutrinos as nu
from .channel_table import ChannelTable, channel_table
from .decay_angles import to_rest_frame
from .decay_record import PARAMETER, decay_as_data
from .drawing import draw_decays
from .polarimeter import PARTNERS
from .radiation import LEAST_PHOTON, MOST_PHOTON, Radiation, radiate, radiation_of

Floats = npt.NDArray[np.float64]
Words = npt.NDArray[np.int64]

FRAMES = ("B", "Upsilon")

# First of four rows (px, py, pz, E) of every particle that is copied out of a block.
_ROWS = {
    "D": row.D_PX,
    "soft": row.SOFT_PX,
    "pion": row.PION_PX,
    "second_pion": row.PION2_PX,
    "tau": row.TAU_PX,
    "lepton": row.LEPTON_PX,
    "partner_1": row.PARTNER1_PX,
    "partner_2": row.PARTNER2_PX,
    "nu": nu.NU_PX,
    "nu_tau": nu.NU_TAU_PX,
    "nu_lepton": nu.NU_LEPTON_PX,
}


def simulate(
    decay: Decay, n: int, seed: int, tau_to: str = "mu", charm_to: str | None = None, frame: str = "B",
    photons_above: float | None = None,
) -> ak.Array:  # fmt: skip
    """Unweighted events of a decay with every spin correlation.

    decay : what to draw. n : number of events. seed : 0 to 2^64 - 1; event k depends on the seed, the decay, the chain
    and k only, so a longer sample begins with the shorter one.
    tau_to : decay of the tau; not looked at for light leptons. "e", "mu"; "pi"; "rho" (pi- pi0); "a1" (pi- pi- pi+);
        "a1_1prong" (pi- pi0 pi0).
    charm_to : how the charmed meson decays, as "D0 pi+", "D+ pi0", "D+ gamma" (D*+), "D0 pi0", "D0 gamma" (D*0),
        "D*0 pi+", "D0 pi+" and so on (D**, whose D* decays by branching fraction); either charge may be given.
        None draws by branching fraction.
    frame : "B" for the B at rest, "Upsilon" for the rest frame of an Upsilon(4S) that decays to a pair of B mesons.

    photons_above : lowest energy in GeV (rest frame of the W* or tau) of photons that the charged lepton radiates, or
        the pion of tau -> pi nu; None: no photons. Events are the same ones with and without.

    Returns an awkward array of n records. Each field is a record named Momentum4D with px, py, pz, E in GeV:
    B; Dss and pion (D** and continua only: all their particles, and the pion or eta beside the D or D*); second_pion
    (None where there is none); Dst and soft (the D* and its pion or photon); D; tau;
    lepton (charged lepton, or the pion of a tau that has its charge); pi0 (rho), pi_second and pi_odd (a1, the pions of
    the same and of the other charge), pi0_first and pi0_second (a1_1prong); nu (of the B decay); nu_tau and nu_lepton
    (of the tau decay).
    photons, if asked for, is a list of records for each event; `lepton` is what is left after they were radiated.
    Fields that a decay does not have are left out; in a sample that mixes D** -> D* pi and D pi, Dst and soft are None
    where there is no D*. The records carry the decay (see `weights`).

    The D* keeps its spin correlations, also in D* -> D gamma, and so does a D** that decays to one pion; a D* from it
    is aligned as the partial wave asks, averaged over the spin of the D**. Two pions and continua are flat in phase
    space. A narrow D** has its nominal mass, a broad one or a continuum that of its line shape (`charm_mass` of the
    decay fixes it).

    InputError tells what is wrong with the arguments.
    Source: shared amplitudes (`amplitudes.py`), exact conditional sampling (`truth.py`).
    """
    chains = _chosen_chains(decay, n, tau_to, charm_to, frame, photons_above)
    stream = stream_key(seed, "simulate")
    shares = np.cumsum([chain.branching_fraction for chain in chains])
    picks = np.searchsorted(shares / shares[-1], uniforms(stream, 0, n, int(draw.CHAIN)), side="right")
    found = np.zeros((len(_ROWS) + MOST_PHOTONS, 4, n))
    counts = np.zeros(n, dtype=np.int64)
    for number, chain in enumerate(chains):
        radiation = radiation_of(chain, photons_above)
        _collect(channel_table(chain), radiation, stream, picks, number, _FIRST_ROWS, new_block(), found, counts)
    boson = np.zeros((4, n))
    boson[3] = decay.m_parent
    if frame == "Upsilon":
        boson = _flight(decay.m_parent, stream, n)
        _boost(found, boson)
    particles = dict(zip(_ROWS, found, strict=False))
    photons = found[len(_ROWS) :].transpose(2, 0, 1)[np.arange(MOST_PHOTONS) < counts[:, None]]  # (all photons, 4)
    if photons_above is not None:
        _recoil(particles, np.sum(found[len(_ROWS) :], axis=0), boson, decay.lepton == "tau")
    events = _records(decay, chains, picks, boson, particles)
    if photons_above is None:
        return events
    jagged = ak.unflatten(_momentum(photons.T), counts)
    return ak.with_parameter(ak.with_field(events, jagged, "photons"), PARAMETER, decay_as_data(decay))


_FIRST_ROWS = np.array([*_ROWS.values(), *(row.PHOTON_PX + 4 * LANES * k for k in range(MOST_PHOTONS))], dtype=np.int64)


def _recoil(found: dict[str, Floats], photons: Floats, boson: Floats, has_tau: bool) -> None:
    """What recoils against lepton and photons, in place: one neutrino by what is left, a pair by a boost of its sum."""
    if not has_tau:
        charm = found["D"] + found["soft"] + found["pion"] + found["second_pion"]
        found["nu"][:] = boson - charm - found["lepton"] - photons
        return
    hadrons = found["lepton"] + found["partner_1"] + found["partner_2"]
    after = found["tau"] - hadrons - photons
    if not np.any(found["nu_lepton"]):
        found["nu_tau"][:] = after
        return
    before = found["nu_tau"] + found["nu_lepton"]
    moved = np.any(photons != 0.0, axis=0)
    back = np.concatenate([-after[:3], after[3:]])
    for name in ("nu_tau", "nu_lepton"):
        boosted = to_rest_frame(to_rest_frame(found[name][:, moved], before[:, moved]), back[:, moved])
        found[name][:, moved] = boosted


def _chosen_chains(
    decay: Decay, n: int, tau_to: str, charm_to: str | None, frame: str, photons_above: float | None
) -> list[Channel]:
    """The chains to draw from; InputError lists all that is wrong."""
    if not isinstance(decay, Decay):
        raise InputError(
            Problem(
                "not a decay",
                where="decay",
                got=type(decay).__name__,
                remedy='Make one: gen.Decay("B0", "D*-", "tau").',
            )
        )
    problems = []
    if isinstance(n, bool) or not isinstance(n, int | np.integer) or n < 0:
        problems.append(
            Problem("the number of events must be a whole number", where="n", got=repr(n), wanted="0 or more")
        )
    taus = tuple(BRANCHING_FRACTION["tau"])
    if decay.lepton == "tau" and tau_to not in taus:
        problems.append(
            Problem("no such tau decay", where="tau_to", got=repr(tau_to), wanted=", ".join(map(repr, taus)))
        )
    if frame not in FRAMES:
        problems.append(Problem("no such frame", where="frame", got=repr(frame), wanted=", ".join(map(repr, FRAMES))))
    if photons_above is not None and not (
        isinstance(photons_above, float | int) and LEAST_PHOTON <= photons_above <= MOST_PHOTON
    ):
        wanted = f"{LEAST_PHOTON:g} to {MOST_PHOTON:g} GeV, or None"
        problems.append(Problem("no such energy", where="photons_above", got=repr(photons_above), wanted=wanted))
    chains = list(chains_of(decay, taus[:1]))
    names = list(dict.fromkeys(map(_charm_decay, chains)))
    if charm_to is not None and _uncharged(charm_to) not in map(_uncharged, names):
        wanted = ", ".join(map(repr, names)) if any(names) else f"None: the {decay.charm} is followed no further"
        problems.append(
            Problem(f"{decay.charm} has no such decay", where="charm_to", got=repr(charm_to), wanted=wanted)
        )
    if problems:
        raise InputError(*problems)
    if decay.lepton == "tau":
        chains = list(chains_of(decay, (tau_to,)))
    return [c for c in chains if charm_to is None or _uncharged(_charm_decay(c)) == _uncharged(charm_to)]


def _charm_decay(chain: Channel) -> str:
    """First decay of the charmed meson with positive charges, e.g. "D0 pi+"; "" for a D."""
    if chain.bachelor != "none":
        return f"{chain.vector or chain.ground} {chain.light_mesons}"
    return f"{chain.ground} {_SOFT[chain.soft]}" if chain.vector else ""


_SOFT = {"charged_pion": "pi+", "neutral_pion": "pi0", "photon": "gamma"}


def _uncharged(name: str) -> str:
    return " ".join(name.replace("-", "+").split())


@kernel
def _collect(
    table: ChannelTable, radiation: Radiation, stream: np.uint64, picks: Words, number: int, first_rows: Words,
    x: Floats, found: Floats, counts: Words,
) -> None:  # fmt: skip
    """Draw the events whose pick is `number`; four-momenta into found (particles, 4, n), numbers of photons in counts.

    The last particles are the photons; rows of an event that has fewer stay zero.
    """
    others = first_rows.size - MOST_PHOTONS
    n = picks.size
    for start in range(0, n, LANES):
        stop = min(start + LANES, n)
        if not np.any(picks[start:stop] == number):
            continue
        draw_decays(x, table, stream, np.uint64(start))
        nu.fill_neutrinos(x, table, stream, np.uint64(start))
        if radiation.on == 1:
            radiate(x, radiation, stream, np.uint64(start))
            for i in range(start, stop):
                if picks[i] == number:
                    counts[i] = np.int64(x[row.PHOTONS + i - start])
        for particle in range(first_rows.size):
            for component in range(4):
                first = first_rows[particle] + component * LANES - start
                for i in range(start, stop):
                    if picks[i] == number and particle < others + counts[i]:
                        found[particle, component, i] = x[first + i]


def _flight(mass: float, stream: np.uint64, n: int) -> Floats:
    """(4, n) momenta of B mesons from an Upsilon(4S) at rest made by colliding beams along z: density 1 - cos²."""
    momentum = np.sqrt(MASS["Y(4S)"] ** 2 / 4.0 - mass**2)
    cosines = [2.0 * uniforms(stream, 0, n, int(k)) - 1.0 for k in (draw.FLIGHT_1, draw.FLIGHT_2, draw.FLIGHT_3)]
    cosine = np.median(np.reshape(cosines, (3, n)), axis=0)
    sine = np.sqrt((1.0 - cosine) * (1.0 + cosine))
    azimuth = 2.0 * np.pi * uniforms(stream, 0, n, int(draw.FLIGHT_AZIMUTH))
    direction = np.stack([sine * np.cos(azimuth), sine * np.sin(azimuth), cosine])
    return np.concatenate([momentum * direction, np.full((1, n), MASS["Y(4S)"] / 2.0)])


def _boost(found: Floats, frame: Floats) -> None:
    """Boost vectors (particles, 4, n) from the rest frame of `frame` (4, n) to where it has that momentum, in place."""
    mass = np.sqrt(frame[3] ** 2 - np.sum(frame[:3] ** 2, axis=0))
    velocity, gamma = frame[:3] / mass, frame[3] / mass  # gamma beta, gamma
    along = np.einsum("kn,pkn->pn", velocity, found[:, :3])
    energy = found[:, 3].copy()
    found[:, 3] = gamma * energy + along
    found[:, :3] += (along / (gamma + 1.0) + energy)[:, None, :] * velocity


def _records(decay: Decay, chains: list[Channel], picks: Words, boson: Floats, found: dict[str, Floats]) -> ak.Array:
    has_vector = np.array([bool(chain.vector) for chain in chains])
    fields = {"B": _momentum(boson)}
    if decay.orbital is not None:
        # SOFT rows are zero where there is no D*.
        has_second = np.array([chain.second != "none" for chain in chains])
        fields["Dss"] = _momentum(found["D"] + found["soft"] + found["pion"] + found["second_pion"])
        fields["pion"] = _momentum(found["pion"])
        if has_second.any():
            second = _momentum(found["second_pion"])
            fields["second_pion"] = second if has_second.all() else ak.mask(second, has_second[picks])
    if has_vector.any():
        fields["Dst"], fields["soft"] = _momentum(found["D"] + found["soft"]), _momentum(found["soft"])
        if not has_vector.all():
            fields["Dst"], fields["soft"] = (ak.mask(fields[name], has_vector[picks]) for name in ("Dst", "soft"))
    fields["D"] = _momentum(found["D"])
    names = ["tau", "lepton", "nu", "nu_tau"] if decay.lepton == "tau" else ["lepton", "nu"]
    if decay.lepton == "tau" and chains[0].tau_to in ("e", "mu"):
        names.append("nu_lepton")
    fields |= {name: _momentum(found[name]) for name in names}
    for name, partner in zip(PARTNERS.get(str(chains[0].tau_to), ()), ("partner_1", "partner_2"), strict=False):
        fields[name] = _momentum(found[partner])
    return ak.with_parameter(ak.zip(fields, depth_limit=1), PARAMETER, decay_as_data(decay))


def _momentum(values: Floats) -> ak.Array:
    px, py, pz, energy = values
    return ak.zip({"px": px, "py": py, "pz": pz, "E": energy}, with_name="Momentum4D")
