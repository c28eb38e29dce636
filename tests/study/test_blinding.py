"""Hidden ratios: the offset, what is withheld, and how a study is opened. A leak is looked for in every file."""

from __future__ import annotations

import hashlib
import hmac
import json
from pathlib import Path

import numpy as np
import pytest
from semitau.core.errors import InputError, RunError
from semitau.core.template_file import read_templates, write_templates
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.study.blinding.cover import Cover, cover, provenance
from semitau.study.blinding.finality import declare_final, unblind
from semitau.study.command_line import main
from semitau.study.graph.template_digest import templates_digest
from semitau.study.parts.signal_share import signal_shares
from semitau.study.results import Results, read_results
from semitau.study.run.study_run import run_study

from .conftest import WriteStudy

PASSPHRASE = "seven grey herons at dusk"
BLIND = {"[toys]": '[blinding]\nkind = "offset"\nwidth = 30.0\n\n[toys]'}


@pytest.fixture(autouse=True)
def known(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("SEMITAU_PASSPHRASE", PASSPHRASE)


def by_hand(ratio: str, study: str) -> float:
    """-1 to 1, from the standard library alone: scrypt (RFC 7914), HMAC (RFC 2104), SHA-256."""
    key = hashlib.scrypt(PASSPHRASE.encode(), salt=f"semitau blinding\n{study}".encode(), n=16384, r=8, p=1)
    return 2 * int(hmac.new(key, f"ratio {ratio}".encode(), "sha256").hexdigest(), 16) / 2**256 - 1


def test_the_offset_is_the_keyed_hash() -> None:
    for kind, expected in (
        ("offset", 0.3 + 0.7 * by_hand("R_D", "one")),
        ("factor", 0.3 * 1.7 ** by_hand("R_D", "one")),
    ):
        assert cover(kind, 0.7, "one", PASSPHRASE).hidden("R_D", 0.3) == pytest.approx(expected, rel=1e-12)


def test_offsets_are_spread_over_the_whole_width() -> None:
    """400 passphrases, Kolmogorov test against the uniform distribution; no randomness, so it cannot fail by chance."""
    from scipy.stats import kstest

    rng = np.random.default_rng(1)
    covers = [Cover("offset", 1.0, "", rng.bytes(64)) for _ in range(400)]
    for name in ("R_D", "R_Dst"):
        assert kstest([one.hidden(name, 0.0) for one in covers], "uniform", args=(-1, 2)).pvalue > 0.001
    both = np.array([[one.hidden(name, 0.0) for name in ("R_D", "R_Dst")] for one in covers])
    assert abs(np.corrcoef(both.T)[0, 1]) < 0.2


def test_nothing_secret_in_its_words() -> None:
    one = cover("offset", 0.7, "one", PASSPHRASE)
    assert "key" not in repr(one)
    assert len(one.fingerprint) == 16
    assert one.fingerprint == cover("factor", 0.1, "one", PASSPHRASE).fingerprint
    assert one.fingerprint != cover("offset", 0.7, "another", PASSPHRASE).fingerprint
    with pytest.raises(InputError, match=r"too short \(got 5 letters, allowed 12 or more"):
        cover("offset", 0.7, "one", "short")


@pytest.fixture
def blind_study(mini: WriteStudy) -> tuple[Path, Results]:
    """A quick study of pseudo-data with hidden ratios, run."""
    path = mini(BLIND)
    return path, run_study(path, workers=2).results


def numbers(document: object) -> list[float]:
    if isinstance(document, dict):
        return [n for value in document.values() for n in numbers(value)]
    if isinstance(document, list):
        return [n for value in document for n in numbers(value)]
    return [float(document)] if isinstance(document, int | float) and not isinstance(document, bool) else []


def test_a_hidden_study_from_end_to_end(blind_study: tuple[Path, Results], capsys: pytest.CaptureFixture[str]) -> None:
    """Hidden values are true ones plus the offset; true ones stand nowhere; opened after a declaration only."""
    path, results = blind_study
    folder = Path("out")
    templates = read_templates(folder / "templates.root")
    model = Model(templates)
    true = maximise(model, model.data(templates))
    for ratio in results.ratios:
        offset = 30.0 * by_hand(ratio.name, results.study.name)
        assert ratio.value == pytest.approx(true.value(ratio.name) + offset, abs=1e-6)
        assert ratio.error == pytest.approx(true.error(ratio.name), rel=1e-6)
        assert ratio.pull is None
    # Everywhere: the true value, the signal's fitted counts.
    document = json.loads((folder / "results.json").read_text())
    found = np.array(numbers(document))
    for ratio in results.ratios:
        assert not np.any(np.abs(found - true.value(ratio.name)) < 1e-6 * true.error(ratio.name)), "a true ratio"
        assert not np.any(np.abs(found - 30.0 * by_hand(ratio.name, results.study.name)) < 1e-9), "an offset"
    assert PASSPHRASE not in (folder / "results.json").read_text() + (folder / "report.html").read_text()
    # No picture of where the signal is.
    shares = signal_shares(model)
    assert not [p for p in results.projections if p.region]
    for projection in results.projections:
        assert not {part.component for part in projection.components} & {"D_tau", "Dst_tau"}
        category = next(c for c in templates.categories if c.name == projection.category)
        axis = [o.name for o in category.observables].index(projection.observable)
        assert set(projection.edges) <= set(category.observables[axis].edges)
    assert results.quality is not None
    for bin_ in results.quality.worst:
        assert bin_.expected > 0
    assert max(share.max() for share in shares.values()) > 0.02
    # The commands on the template file.
    for command in ("extract", "profile", "budget"):
        assert (
            main([command, "out/templates.root", "--json", *(["--points", "5"] if command == "profile" else [])]) == 0
        )
        printed = json.loads(capsys.readouterr().out)
        assert printed["blinding"]["kind"] == "offset"
        shown = np.array(numbers(printed))
        for ratio in results.ratios:
            assert np.any(np.abs(shown - ratio.value) < 1e-5)
            assert not np.any(np.abs(shown - true.value(ratio.name)) < 1e-6 * true.error(ratio.name))
    assert main(["extract", "out/templates.root", "--fix", "R_D=0.3"]) == 2
    assert "a hidden ratio cannot be held, bounded, constrained or followed" in capsys.readouterr().err
    assert main(["extract", "out/templates.root", "--expected", "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["blinding"] is None

    with pytest.raises(InputError, match=r"never declared final.*semitau final"):
        unblind(path, "A. Nalyst")
    with pytest.raises(InputError, match="nobody is named"):
        declare_final(path, " ")
    declaration = declare_final(path, "A. Nalyst")
    assert declaration["study"] == hashlib.sha256(path.read_bytes()).hexdigest()
    run, record = unblind(path, "B. Oss", workers=2)
    for ratio in run.results.ratios:
        assert ratio.value == pytest.approx(true.value(ratio.name), abs=1e-9)
        assert ratio.pull is not None
    assert run.results.blinding is None
    assert run.folder.path == Path("out/unblinded")
    kept = json.loads(Path("out/unblinding.json").read_text())["unblindings"]
    assert [(entry["by"], entry["declared"]) for entry in kept] == [("B. Oss", declaration["when"])]
    assert record["templates"] == templates_digest(templates)
    # The hidden results are still hidden.
    assert read_results(folder / "results.json") == results


def test_unblinding_is_refused_after_changes(
    blind_study: tuple[Path, Results], monkeypatch: pytest.MonkeyPatch
) -> None:
    path, _ = blind_study
    monkeypatch.setenv("SEMITAU_PASSPHRASE", "another one altogether")
    with pytest.raises(InputError, match="the run had another passphrase"):
        declare_final(path, "A. Nalyst")
    monkeypatch.setenv("SEMITAU_PASSPHRASE", PASSPHRASE)
    declare_final(path, "A. Nalyst")
    text, templates = path.read_text(), read_templates("out/templates.root")

    path.write_text(text + "\n# a remark\n")
    with pytest.raises(InputError, match="the study file has changed since it was declared final"):
        unblind(path, "B. Oss")
    path.write_text(text)

    monkeypatch.setenv("SEMITAU_PASSPHRASE", "another one altogether")
    with pytest.raises(InputError, match="the passphrase is another one"):
        unblind(path, "B. Oss")
    monkeypatch.setenv("SEMITAU_PASSPHRASE", PASSPHRASE)

    counts = {name: values + (name == "D0_e") for name, values in templates.data.items()}
    write_templates(templates.with_data(counts), Path("out/templates.root"))
    with pytest.raises(InputError, match="the data have changed"):
        unblind(path, "B. Oss")
    write_templates(_nudged(templates), Path("out/templates.root"))
    with pytest.raises(InputError, match="the templates have changed"):
        unblind(path, "B. Oss")
    assert not Path("out/unblinding.json").exists()
    assert not Path("out/unblinded").exists()


def _nudged(templates: TemplateSet) -> TemplateSet:
    from dataclasses import replace

    key = next(iter(templates.templates))
    template = templates.templates[key]
    changed = replace(template, nominal=template.nominal * (1 + 1e-12))
    return replace(templates, templates={**templates.templates, key: changed})


def test_a_narrow_cover_is_refused(mini: WriteStudy) -> None:
    path = mini({"[toys]": '[blinding]\nkind = "factor"\nwidth = 0.001\n\n[toys]'})
    with pytest.raises(RunError, match=r"not wide against the error .*5 errors"):
        run_study(path, workers=2)
    assert not Path("out/results.json").exists()


def test_no_passphrase(
    template_file: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    from dataclasses import replace

    monkeypatch.delenv("SEMITAU_PASSPHRASE")
    templates = read_templates(template_file)
    kept = {**templates.provenance, "blinding": provenance("offset", 1.0, "x")}
    write_templates(replace(templates, provenance=kept), tmp_path / "t.root")
    assert main(["extract", str(tmp_path / "t.root")]) == 2
    caught = capsys.readouterr()
    assert caught.out == ""
    assert "there is no passphrase. Set the environment variable SEMITAU_PASSPHRASE" in caught.err


def test_studies_that_hide_nothing(mini: WriteStudy) -> None:
    with pytest.raises(InputError, match="this study hides nothing"):
        declare_final(mini(), "A. Nalyst")
    with pytest.raises(InputError, match=r"has not been run.*semitau study"):
        declare_final(mini(BLIND), "A. Nalyst")


def test_factor_moves_curves_without_stretching(templates: TemplateSet) -> None:
    """A stretched curve beside the true error would tell the factor."""
    from semitau.fit.uncertainty.curves import profile

    model = Model(templates)
    curve = profile(model, model.data(templates), "R_D")
    shown = cover("factor", 2.0, "one", PASSPHRASE).curve(curve)
    assert shown.value == pytest.approx(curve.value * 3.0 ** by_hand("R_D", "one"))
    assert shown.high - shown.low == pytest.approx(curve.high - curve.low)
    np.testing.assert_allclose(np.diff(shown.points), np.diff(curve.points))
