"""True decays of double charm against published values, closed forms, quadrature, and four-vector algebra of its own.

Statistical tests allow 5 standard deviations (chance 6e-7 each) or a p-value of 1e-6.
"""

from __future__ import annotations

import os
from functools import lru_cache
from itertools import pairwise

import numpy as np
import pytest
from particle import Particle
from scipy import integrate, stats
from semitau.core.charm_fractions import INCLUSIVE_ELECTRON, LIGHT_DECAYS, TO_LEPTONS
from semitau.core.constants import MASS
from semitau.core.errors import InputError
from semitau.core.streams import stream_key
from semitau.gen import block as row
from semitau.gen.block import LANES, new_block
from semitau.gen.decays.charm_semileptonic import FORM_FACTORS, CharmDecay, muon_over_electron
from semitau.gen.decays.decay import Decay
from semitau.gen.decays.double_charm import DoubleCharmChain, double_charm_chains
from semitau.gen.truth.double_charm_drawing import draw_double_charm
from semitau.gen.truth.double_charm_table import double_charm_table, factorised, helicities

from .blocks import four

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
BLOCKS = 400
LEAST_P = 1e-6


def chain(**kinds: str | None) -> DoubleCharmChain:
    """The first decay chain with these properties."""
    return next(c for c in all_chains() if all(getattr(c, k) == v for k, v in kinds.items()))


@lru_cache
def all_chains() -> tuple[DoubleCharmChain, ...]:
    return double_charm_chains(["B0", "B+"])


ROWS = {
    "D": row.D_PX, "soft": row.SOFT_PX, "tau": row.TAU_PX, "lepton": row.LEPTON_PX, "beside": row.BESIDE_SOFT_PX,
    "kaon": row.KAON_PX, "hadron": row.HADRON_PX,
}  # fmt: skip


@lru_cache(maxsize=8)
def drawn(chosen: DoubleCharmChain, blocks: int = BLOCKS) -> dict[str, np.ndarray]:
    """Particle -> (4, n), and angles (n,)."""
    x, table, stream = new_block(), double_charm_table(chosen), stream_key(SEED, chosen.name)
    parts: dict[str, list[np.ndarray]] = {}
    for k in range(blocks):
        draw_double_charm(x, table, stream, np.uint64(k * LANES))
        for name, first in ROWS.items():
            parts.setdefault(name, []).append(four(x, first))
        for name, first in (("q2", row.Q2), ("cos_v", row.COS_V), ("theta", row.COS_THETA)):
            parts.setdefault(name, []).append(x[first : first + LANES].copy())
    return {name: np.concatenate(values, axis=-1) for name, values in parts.items()}


def mass(p: np.ndarray) -> np.ndarray:
    return np.sqrt(np.maximum(p[3] ** 2 - (p[:3] ** 2).sum(axis=0), 0.0))


def dot(p: np.ndarray, q: np.ndarray) -> np.ndarray:
    return p[3] * q[3] - (p[:3] * q[:3]).sum(axis=0)


def parent(chosen: DoubleCharmChain) -> np.ndarray:
    return np.array([[0.0], [0.0], [0.0], [chosen.m_parent]])


def boosted_to_rest(p: np.ndarray, frame: np.ndarray) -> np.ndarray:
    """p seen from the rest frame of `frame`."""
    m = mass(frame)
    along = (p[:3] * frame[:3]).sum(axis=0)
    energy = (p[3] * frame[3] - along) / m
    return np.concatenate([p[:3] - frame[:3] * (p[3] + energy) / (frame[3] + m), [energy]])


def breakup(m: float | np.ndarray, a: float | np.ndarray, b: float | np.ndarray) -> np.ndarray:
    return np.sqrt(np.maximum((m**2 - (a + b) ** 2) * (m**2 - (a - b) ** 2), 0.0)) / (2 * m)


@pytest.mark.parametrize("chosen", all_chains()[::11], ids=lambda c: c.name)
def test_momenta(chosen: DoubleCharmChain) -> None:
    """Every particle is on its mass shell; what is not there has no momentum; neutrinos take the rest."""
    p = drawn(chosen, 1)
    system = parent(chosen) - p["D"] - p["soft"]
    meson = system - p["kaon"] - p["beside"]
    assert mass(p["D"]) == pytest.approx(chosen.m_ground, abs=1e-6)
    assert mass(p["D"] + p["soft"]) == pytest.approx(chosen.m_charm, abs=1e-6)
    assert mass(meson) == pytest.approx(chosen.m_meson, abs=1e-6)
    assert mass(meson + p["beside"]) == pytest.approx(chosen.m_partner, abs=1e-6)
    assert mass(system) ** 2 == pytest.approx(p["q2"], abs=1e-9)
    assert mass(p["lepton"]) == pytest.approx(chosen.m_visible, abs=1e-4)
    assert mass(p["kaon"]) == pytest.approx(chosen.m_kaon, abs=1e-6)
    assert mass(p["hadron"]) == pytest.approx(MASS[chosen.hadron] if chosen.hadron else 0.0, abs=1e-6)
    assert mass(p["tau"]) == pytest.approx(MASS["tau"] if chosen.tau_to else 0.0, abs=1e-6)
    invisible = meson - p["lepton"] - p["hadron"]
    if chosen.tau_to is None:
        assert dot(invisible, invisible) == pytest.approx(0.0, abs=1e-9)
    else:
        assert dot(meson - p["tau"], meson - p["tau"]) == pytest.approx(0.0, abs=1e-9)
        assert (mass(p["tau"] - p["lepton"]) >= 0.0).all()


@pytest.mark.parametrize(
    ("family", "partner", "codes", "published"),
    [
        ("D", "D_s+", (411, 431), 1.812),
        ("D", "D_s*+", (411, 433), 1.732),
        ("D*", "D_s+", (413, 431), 1.735),
        ("D*", "D_s*+", (413, 433), 1.649),
    ],
)
def test_two_body_momentum(family: str, partner: str, codes: tuple[int, int], published: float) -> None:
    """Closed form with the masses of the `particle` package; particle data tables (from memory, to 1 MeV)."""
    p = drawn(chain(parent="B0", family=family, partner=partner), 1)
    momentum = np.sqrt(((p["D"] + p["soft"])[:3] ** 2).sum(axis=0))
    masses = [Particle.from_pdgid(code).mass / 1e3 for code in (511, *codes)]
    assert momentum == pytest.approx(float(breakup(*masses)), abs=1e-3)
    assert momentum == pytest.approx(published, abs=2e-3)


def test_longitudinal_share_of_two_vectors() -> None:
    """B0 -> D*- D_s*+: 0.52 +- 0.05 (particle data tables, from memory); factorisation: 0.52 to 0.55 in the literature
    (Phys. Rev. D 42 (1990) 3732 and later, from memory). Sampled through the D* -> D pi angle, <cos²> = (1 + 2 F_L)/5.
    """
    chosen = chain(parent="B0", family="D*", partner="D_s*+", soft="charged_pion")
    plus, minus, zero = helicities(chosen)
    assert plus**2 + minus**2 + zero**2 == pytest.approx(1.0)
    assert zero**2 == pytest.approx(0.52, abs=0.05)
    assert minus**2 > 5 * plus**2  # V - A: the D* is left-handed
    square = drawn(chosen)["cos_v"] ** 2
    assert square.mean() == pytest.approx((1 + 2 * zero**2) / 5, abs=5 * square.std() / np.sqrt(square.size))


def test_share_with_a_massless_vector() -> None:
    """At q² -> 0 a vector meson is longitudinal only."""
    assert factorised(Decay("B0", "D*-", "e"), 0.05)[2] ** 2 == pytest.approx(1.0, abs=2e-3)


def test_one_vector_is_longitudinal() -> None:
    """Angular momentum along the flight of D* in B -> D* D_s is 0: cos² for a pion, sin² for a photon."""
    for soft, mean in (("charged_pion", 3 / 5), ("photon", 1 / 5)):
        square = drawn(chain(parent="B0", family="D*", partner="D_s+", soft=soft))["cos_v"] ** 2
        assert square.mean() == pytest.approx(mean, abs=5 * square.std() / np.sqrt(square.size)), soft


def test_three_bodies_leave_the_vector_unpolarised() -> None:
    square = drawn(chain(family="D*", kaon="K+"))["cos_v"] ** 2
    assert square.mean() == pytest.approx(1 / 3, abs=5 * square.std() / np.sqrt(square.size))


def test_angles_of_two_vectors() -> None:
    """B -> D* D_s*, each to a pseudoscalar and a pion or photon, from the covariant amplitude with four-vectors.

    T = (M+m) A1 e1.e2 - 2 A2/(M+m) (e1.P)(e2.P) + i 2V/(M+m) epsilon(e1, e2, P, p1), with e the momentum of a pion
    made transverse; photons sum over both polarisations. Moments over a grid in the three angles against the sample.
    """
    chosen = chain(parent="B0", family="D*", partner="D_s*+", soft="charged_pion")
    M, m, n = chosen.m_parent, chosen.m_charm, chosen.m_partner
    values = chosen.decay.model(M, m, np.array([n**2]))
    A1, F1, V = (float(getattr(values, name)[0]) for name in ("A1", "F1", "V"))
    k = float(breakup(M, m, n))
    A2 = ((M**2 - m**2 - n**2) * (M + m) * A1 - 2 * m * F1) * (M + m) / (2 * M * k) ** 2  # definition of F1
    P, p1, p2 = np.array([0, 0, 0, M]), np.array([0, 0, -k, np.hypot(k, m)]), np.array([0, 0, k, np.hypot(k, n)])
    metric = np.array([-1.0, -1.0, -1.0, 1.0])

    def lower(a: np.ndarray, b: np.ndarray) -> complex:
        return complex((a * b * metric).sum())

    def amplitude(e1: np.ndarray, e2: np.ndarray) -> complex:
        levi_civita = np.linalg.det(np.array([e1, e2, P, p1]))
        both = (M + m) * A1 * lower(e1, e2) - 2 * A2 / (M + m) * lower(e1, P) * lower(e2, P)
        return both + 2j * V / (M + m) * complex(levi_civita)

    def moved(v: np.ndarray, frame: np.ndarray) -> np.ndarray:
        push = frame[2] / np.sqrt(frame[3] ** 2 - frame[2] ** 2)
        gamma = np.sqrt(1 + push**2)
        return np.array([v[0], v[1], gamma * v[2] + push * v[3], gamma * v[3] + push * v[2]])

    # One pion on each side is a polarisation along its direction; a photon stands for the two directions across.
    nodes, weights = np.polynomial.legendre.leggauss(8)
    moments = {"pion": np.zeros(4), "photon": np.zeros(4)}
    norm = dict.fromkeys(moments, 0.0)
    for c1, w1 in zip(nodes, weights, strict=True):
        for c2, w2 in zip(nodes, weights, strict=True):
            for chi in 2 * np.pi * np.arange(8) / 8 + 0.1:
                s1, s2 = np.sqrt(1 - c1 * c1), np.sqrt(1 - c2 * c2)
                # the D at azimuth -chi and polar angle to its own flight, the D_s at azimuth 0
                d = np.array([s1 * np.cos(chi), -s1 * np.sin(chi), -c1, 0.0])
                a = np.array([s2, 0.0, c2, 0.0])
                across = [np.array([c2, 0.0, -s2, 0.0]), np.array([0.0, 1.0, 0.0, 0.0])]
                observed = np.array(
                    [c1 * c1, s1 * s2 * c1 * c2 * np.cos(chi), (s1 * s2) ** 2 * np.cos(2 * chi), c2 * c2]
                )
                e1 = moved(d, p1)
                for kind, e2s in (("pion", [a]), ("photon", across)):
                    density = w1 * w2 * sum(abs(amplitude(e1, moved(e2, p2))) ** 2 for e2 in e2s)
                    moments[kind] += density * observed
                    norm[kind] += density
    p = drawn(chosen, 1500)
    star, beside = p["D"] + p["soft"], p["beside"]
    partner = parent(chosen) - star
    d = boosted_to_rest(p["D"], star)[:3]
    a = boosted_to_rest(partner - beside, partner)[:3]
    d, a, z = (
        d / np.linalg.norm(d, axis=0),
        a / np.linalg.norm(a, axis=0),
        partner[:3] / np.linalg.norm(partner[:3], axis=0),
    )
    c1, c2 = -(d * z).sum(axis=0), (a * z).sum(axis=0)
    s1s2cos = (d * a).sum(axis=0) + c1 * c2
    s1s2 = np.sqrt((1 - c1**2) * (1 - c2**2))
    sample = np.array([c1**2, c1 * c2 * s1s2cos, 2 * s1s2cos**2 - s1s2**2, c2**2])
    photon = mass(beside) < 0.05
    assert photon.mean() == pytest.approx(0.936, abs=5 * np.sqrt(0.06 / photon.size))
    for kind, mask in (("pion", ~photon), ("photon", photon)):
        expected = moments[kind] / norm[kind]
        error = sample[:, mask].std(axis=1) / np.sqrt(mask.sum())
        pulls = (sample[:, mask].mean(axis=1) - expected) / error
        assert np.abs(pulls).max() < 5.0, (kind, pulls)


@pytest.mark.parametrize("partner", ["D0", "D*+"])
def test_flat_dalitz_plot(partner: str) -> None:
    """Flat phase space: the density of a squared pair mass is the length of the Dalitz plot there, in closed form
    (particle data tables, review of kinematics, limits of m23² at fixed m12²)."""
    chosen = chain(family="D*", partner=partner, parent="B0", soft="charged_pion")
    p = drawn(chosen)
    first, kaon = p["D"] + p["soft"], p["kaon"]
    second = parent(chosen) - first - kaon
    bodies = {"first": (first, chosen.m_charm), "second": (second, chosen.m_partner), "kaon": (kaon, chosen.m_kaon)}
    for a, b, c in (("first", "second", "kaon"), ("second", "kaon", "first"), ("first", "kaon", "second")):
        (pa, ma), (pb, mb), (_, mc) = bodies[a], bodies[b], bodies[c]
        edges = np.linspace((ma + mb) ** 2, (chosen.m_parent - mc) ** 2, 26)

        def length(s: float, ma: float = ma, mb: float = mb, mc: float = mc) -> float:
            eb = (s - ma**2 + mb**2) / (2 * np.sqrt(s))
            ec = (chosen.m_parent**2 - s - mc**2) / (2 * np.sqrt(s))
            kb, kc = np.sqrt(max(eb**2 - mb**2, 0.0)), np.sqrt(max(ec**2 - mc**2, 0.0))
            return float(4 * kb * kc)

        expected = np.array([integrate.quad(length, lo, hi)[0] for lo, hi in pairwise(edges)])
        counts = np.histogram(mass(pa + pb) ** 2, edges)[0]
        expected *= counts.sum() / expected.sum()
        assert stats.chisquare(counts, expected).pvalue > LEAST_P, (a, b)


def hadron_tensor_spectrum(meson: str, hadron: str, energies: np.ndarray) -> np.ndarray:
    """d Gamma / dE of a massless lepton in the meson's frame, from form factors and the textbook massless formulas.

    PP: |M|² ~ f+² [2 (P.l)(P.k) - P² (l.k)], P the sum of both hadrons' momenta. PV: helicities as in the particle data
    tables, (1 + c)² |H+|² + (1 - c)² |H-|² + 2 (1 - c²) |H0|², with H- the larger one and c the angle of the positive
    lepton to the W. Integrated over q² by quadrature.
    """
    M, m = MASS[meson], MASS[hadron]
    shape = FORM_FACTORS[meson, hadron]

    def density(q2: float, e: float) -> float:
        k = float(breakup(M, m, np.sqrt(q2)))
        w = np.hypot(k, np.sqrt(q2))
        c = (2 * e - w) / k
        if abs(c) > 1:
            return 0.0
        if hasattr(shape, "alpha"):
            y = q2 / shape.pole**2
            f = 1 / ((1 - y) * (1 - shape.alpha * y))
            # in the meson's frame: p.l = M e, p.k = M (w - e); p' drops out but for P = 2p - q, q.l = q.k = q²/2
            pl, pk = 2 * M * e - q2 / 2, 2 * M * (w - e) - q2 / 2
            square = 2 * M**2 + 2 * m**2 - q2
            return float(f * f * (2 * pl * pk - square * q2 / 2))
        A1 = 1 / (1 - q2 / shape.axial**2)
        A2, V = shape.r_2 * A1, shape.r_V / (1 - q2 / shape.vector**2)
        plus, minus = ((M + m) * A1 - s * 2 * M * k * V / (M + m) for s in (1, -1))
        zero = ((M**2 - m**2 - q2) * (M + m) * A1 - 4 * M**2 * k**2 * A2 / (M + m)) / (2 * m * np.sqrt(q2))
        return float(q2 * ((1 + c) ** 2 * plus**2 + (1 - c) ** 2 * minus**2 + 2 * (1 - c * c) * zero**2))

    # phase space is flat in (q², E)
    q2 = np.linspace(0.0, (M - m) ** 2, 1502)[1:-1]
    return np.array([sum(density(s, e) for s in q2) for e in energies])


@pytest.mark.parametrize(("meson", "hadron"), [("D0", "K+"), ("D+", "K*0"), ("D_s+", "eta"), ("D_s+", "phi")])
def test_lepton_spectrum_of_charm(meson: str, hadron: str) -> None:
    chosen = chain(meson=meson, hadron=hadron, lepton="e")
    p = drawn(chosen)
    frame = parent(chosen) - p["D"] - p["soft"] - p["kaon"] - p["beside"]
    energy = boosted_to_rest(p["lepton"], frame)[3]
    M, m = MASS[meson], MASS[hadron]
    edges = np.linspace(0.0, (M**2 - m**2) / (2 * M), 31)
    fine = (edges[:-1, None] + (np.arange(6) + 0.5) / 6 * (edges[1] - edges[0])).ravel()
    expected = hadron_tensor_spectrum(meson, hadron, fine).reshape(-1, 6).sum(axis=1)
    counts = np.histogram(energy, edges)[0]
    expected *= counts.sum() / expected.sum()
    full = expected > 50  # near the end points the electron mass and the grid show
    assert counts[~full].sum() < 0.02 * counts.sum()
    assert stats.chisquare(counts[full], expected[full] * counts[full].sum() / expected[full].sum()).pvalue > LEAST_P


@pytest.mark.parametrize(
    ("meson", "hadron", "published", "error"),
    [("D0", "K+", 0.975, 0.003), ("D_s+", "phi", 0.944, 0.01), ("D+", "K*0", 0.94, 0.01)],
)
def test_muon_over_electron(meson: str, hadron: str, published: float, error: float) -> None:
    """Standard-model predictions quoted with the measurements of lepton universality in charm (from memory)."""
    assert muon_over_electron(meson, hadron) == pytest.approx(published, abs=error)


@pytest.mark.parametrize("meson", ["D_s+", "D0", "D+"])
def test_exclusive_decays_make_most_of_the_inclusive_rate(meson: str) -> None:
    """Inclusive branching fractions of charm to electrons, particle data tables (from memory)."""
    total = sum(fraction.value for name, fraction in TO_LEPTONS[meson].items() if name[0] not in ("tau", "mu"))
    assert 0.85 < total / INCLUSIVE_ELECTRON[meson].value < 1.0


def test_tau_of_a_strange_meson_is_polarised() -> None:
    """Helicity +1/2 for a tau-: d Gamma ~ y² [(3 - 2y) - cos alpha (2y - 1)], so <cos alpha> = -1/9 for electrons, and
    <cos alpha> at y > 0.8 from the same closed form (Michel spectrum)."""
    chosen = chain(source="tau", tau_to="e", partner="D_s*+")
    p = drawn(chosen, 800)
    meson = parent(chosen) - p["D"] - p["soft"] - p["beside"]
    lepton, flight = boosted_to_rest(p["lepton"], p["tau"]), boosted_to_rest(p["tau"], meson)
    # a boost from the meson's frame along the flight of the tau keeps that axis: compare energies, which need no axes
    y = 2 * lepton[3] / MASS["tau"]
    gamma, push = flight[3] / MASS["tau"], np.sqrt((flight[3] / MASS["tau"]) ** 2 - 1)
    cosine = (boosted_to_rest(p["lepton"], meson)[3] - gamma * lepton[3]) / (push * lepton[3])
    assert cosine.mean() == pytest.approx(-1 / 9, abs=5 * cosine.std() / np.sqrt(cosine.size))
    hard = y > 0.8
    upper = (
        integrate.quad(lambda v: v * v * (2 * v - 1), 0.8, 1)[0]
        / integrate.quad(lambda v: v * v * (3 - 2 * v), 0.8, 1)[0]
    )
    assert cosine[hard].mean() == pytest.approx(-upper / 3, abs=5 * cosine[hard].std() / np.sqrt(hard.sum()))


def test_end_points() -> None:
    """Largest lepton energy in the B frame, and limits of (p_B - p_D* - p_l)², from two-body kinematics alone."""
    for kinds in ({"source": "mu"}, {"source": "tau", "tau_to": "e"}, {"source": "phi", "lepton": "e"}):
        chosen = chain(parent="B0", family="D*", partner="D_s+", **kinds)
        p = drawn(chosen)
        star = p["D"] + p["soft"]
        missing = parent(chosen) - star - p["lepton"]
        mm2 = dot(missing, missing)
        m, other = chosen.m_meson, MASS[chosen.hadron] if chosen.hadron else 0.0
        own = (m**2 + chosen.m_visible**2 - other**2) / (2 * m)
        k = float(breakup(chosen.m_parent, chosen.m_charm, m))
        most = (np.hypot(k, m) * own + k * np.sqrt(own**2 - chosen.m_visible**2)) / m
        assert p["lepton"][3].max() < most + 1e-6
        assert p["lepton"][3].max() > 0.93 * most
        if chosen.source == "mu":
            assert mm2 == pytest.approx(0.0, abs=1e-9)
        else:
            assert mm2.min() > other**2 - 1e-6
            assert mm2.max() < (m - chosen.m_visible) ** 2
            assert mm2.max() > 0.9 * (m - chosen.m_visible) ** 2


def test_numbers_of_leptons() -> None:
    """Branching fractions of the chains against products by hand (constants of this project)."""
    found = sum(c.branching_fraction for c in all_chains() if (c.parent, c.family, c.partner) == ("B0", "D*", "D_s+"))
    electron = sum(f.value for (name,), f in TO_LEPTONS["D_s+"].items() if name not in ("tau", "mu"))
    muon = sum(
        f.value * muon_over_electron("D_s+", name)
        for (name,), f in TO_LEPTONS["D_s+"].items()
        if name not in ("tau", "mu")
    )
    leptonic = TO_LEPTONS["D_s+"][("mu",)].value + TO_LEPTONS["D_s+"][("tau",)].value * (0.1782 + 0.1739)
    assert found == pytest.approx(8.0e-3 * (electron + muon + leptonic), rel=1e-12)


def test_names_are_unique_and_charges_balance() -> None:
    """B+ has charge 1, B0 none; the conjugate D(*) of a B0 is negative."""
    names = [c.name for c in all_chains()]
    assert len(set(names)) == len(names)
    for c in all_chains():
        first = -1 if (c.vector or c.ground).endswith("+") else 0
        beside = sum(1 for name in (c.partner, c.kaon) if name.endswith("+"))
        assert first + beside == (1 if c.parent == "B+" else 0), c.name


def test_light_decays_are_possible() -> None:
    for name, modes in LIGHT_DECAYS.items():
        assert sum(share for share, _ in modes) == pytest.approx(1.0, abs=0.011), name
        for _, daughters in modes:
            assert sum(MASS[d] for d in daughters) < MASS[name] or len(daughters) == 1, name


def test_unknown_names() -> None:
    with pytest.raises(InputError, match="no such companion"):
        double_charm_chains(["B0"], beside=["D_s2"])
    with pytest.raises(InputError, match="no such charmed meson"):
        double_charm_chains(["B0"], ["D**"])


def test_charm_lepton_is_softer_than_phase_space() -> None:
    """c -> s l+ nu: the positive lepton goes against the W's spin, so its mean energy is below the neutrino's."""
    chosen = CharmDecay("D0", "K*+", "e")
    p = drawn(chain(meson="D0", hadron="K*+", lepton="e"))
    c = chain(meson="D0", hadron="K*+", lepton="e")
    frame = parent(c) - p["D"] - p["soft"] - p["kaon"] - p["beside"]
    lepton = boosted_to_rest(p["lepton"], frame)
    neutrino = boosted_to_rest(frame - p["lepton"] - p["hadron"], frame)
    assert chosen.m_meson == pytest.approx(mass(frame), abs=1e-6)
    assert lepton[3].mean() < 0.97 * neutrino[3].mean()
