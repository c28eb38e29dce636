"""The public door to true decays of double charm: unweighted events as awkward records."""

from __future__ import annotations

import awkward as ak
import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.errors import InputError, Problem
from semitau.core.streams import stream_key

from .. import block as row
from ..block import LANES, new_block
from ..decays.double_charm import DoubleCharmChain
from .double_charm_drawing import draw_double_charm
from .double_charm_table import DoubleCharmTable, double_charm_table

Floats = npt.NDArray[np.float64]

_ROWS = {
    "D": row.D_PX,
    "soft": row.SOFT_PX,
    "beside_soft": row.BESIDE_SOFT_PX,
    "kaon": row.KAON_PX,
    "hadron": row.HADRON_PX,
    "tau": row.TAU_PX,
    "lepton": row.LEPTON_PX,
}
_FIRST_ROWS = np.array(list(_ROWS.values()))


def simulate_double_charm(chain: DoubleCharmChain, n: int, seed: int) -> ak.Array:
    """Unweighted events of one decay chain of double charm, the B at rest.

    chain : one of `double_charm_chains`. n : number of events. seed : 0 to 2^64 - 1; event k depends on the seed, the
    chain and k only, so a longer sample begins with the shorter one.

    Returns an awkward array of n records. Each field is a record named Momentum4D with px, py, pz, E in GeV: B; Dst and
    soft (the D* that is reconstructed, and its pion or photon); D; partner (D_s(*) or second D(*)); kaon; meson (what
    gives the lepton) and beside_soft (what a D_s* or D* partner gave besides); hadron; tau; lepton (the charged lepton
    that is seen); neutrinos (all together). Fields that a chain does not have are left out.

    InputError tells what is wrong with the arguments. Source: `double_charm_drawing.py`.
    """
    problems = []
    if not isinstance(chain, DoubleCharmChain):
        remedy = 'Take one of gen.double_charm_chains(["B0"]).'
        problems.append(Problem("not a chain of double charm", where="chain", got=type(chain).__name__, remedy=remedy))
    if isinstance(n, bool) or not isinstance(n, int | np.integer) or n < 0:
        what = "the number of events must be a whole number"
        problems.append(Problem(what, where="n", got=repr(n), wanted="0 or more"))
    if problems:
        raise InputError(*problems)
    found = np.zeros((len(_ROWS), 4, n))
    stream = stream_key(seed, "simulate double charm", chain.name)
    _collect(double_charm_table(chain), stream, _FIRST_ROWS, new_block(), found)
    return _records(chain, dict(zip(_ROWS, found, strict=True)), n)


@kernel
def _collect(
    table: DoubleCharmTable, stream: np.uint64, first_rows: npt.NDArray[np.int64], x: Floats, found: Floats
) -> None:
    n = found.shape[2]
    for start in range(0, n, LANES):
        stop = min(start + LANES, n)
        draw_double_charm(x, table, stream, np.uint64(start))
        for particle in range(first_rows.size):
            for component in range(4):
                first = first_rows[particle] + component * LANES - start
                for i in range(start, stop):
                    found[particle, component, i] = x[first + i]


def _records(chain: DoubleCharmChain, found: dict[str, Floats], n: int) -> ak.Array:
    boson = np.zeros((4, n))
    boson[3] = chain.m_parent
    star = found["D"] + found["soft"]
    partner = boson - star - found["kaon"]
    meson = partner - found["beside_soft"]
    fields = {"B": boson}
    if chain.vector:
        fields |= {"Dst": star, "soft": found["soft"]}
    fields |= {"D": found["D"], "partner": partner}
    if chain.kaon:
        fields["kaon"] = found["kaon"]
    fields["meson"] = meson
    if chain.partner != chain.meson:
        fields["beside_soft"] = found["beside_soft"]
    if chain.hadron:
        fields["hadron"] = found["hadron"]
    if chain.tau_to:
        fields["tau"] = found["tau"]
    fields |= {"lepton": found["lepton"], "neutrinos": meson - found["hadron"] - found["lepton"]}
    return ak.zip({name: _momentum(values) for name, values in fields.items()}, depth_limit=1)


def _momentum(values: Floats) -> ak.Array:
    px, py, pz, energy = values
    return ak.zip({"px": px, "py": py, "pz": pz, "E": energy}, with_name="Momentum4D")
