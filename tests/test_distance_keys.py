"""Every form in which a target file may give a distance."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from xmatch import distance_keys, electron_density
from xmatch.errors import ConfigurationError, InputError, RangeError, TargetError
from xmatch.flux.distance import quantiles_of
from xmatch.records import Distance
from xmatch.target import build_target, read_target, write_target

HEAD = "[position]\nra_deg = 10.5\ndec_deg = -20.25\nerror_arcsec = 2.0\n[dispersion]\ndm_pc_cm3 = 100.0\n[distance]\n"


def reading(tmp_path: Path, text: str) -> Distance:
    path = tmp_path / "mine.toml"
    path.write_text(HEAD + text, encoding="utf-8")
    found = read_target(path).distance
    assert found is not None
    return found


def at(distance: Distance, *q: float) -> list[float]:
    return [float(v) for v in quantiles_of(distance, "log-uniform", np.array(q))]


@pytest.mark.parametrize(
    "text",
    [
        "low = '1.6 kpc'\nhigh = '4.1 kpc'\nprior = 'volume'\norigin = 'a \"paper\"'",
        "value = '5.0 kpc'\nplus = '1.2 kpc'\nminus = '0.8 kpc'",
        "parallax_mas = -0.2\nparallax_error_mas = 0.3\nzero_point_mas = -0.03\nscale_kpc = 0.8",
        "redshift = 0.03\nredshift_error = 0.001\ncosmology = 'Planck15'",
        "redshift = 0.03\nprior = 'uniform'",
        "quantiles_pc = [100.0, 200.0, 250.0, 900.0]\norigin = 'x'",
    ],
)
def test_every_form_is_written_so_that_it_reads_the_same(tmp_path: Path, text: str) -> None:
    found = reading(tmp_path, text)
    target = read_target(tmp_path / "mine.toml")
    (tmp_path / "again.toml").write_text(write_target(target), encoding="utf-8")
    again = read_target(tmp_path / "again.toml").distance
    assert again is not None
    assert (again.low_pc, again.high_pc, again.prior, again.quantiles_pc) == (
        found.low_pc, found.high_pc, found.prior, found.quantiles_pc,
    )  # fmt: skip
    assert (again.redshift, again.redshift_error, again.cosmology) == (
        found.redshift, found.redshift_error, found.cosmology,
    )  # fmt: skip


def test_errors_hold_what_they_say(tmp_path: Path) -> None:
    found = reading(tmp_path, "value = '5.0 kpc'\nplus = '1.2 kpc'\nminus = '0.8 kpc'")
    assert at(found, 0.1586553, 0.5, 0.8413447) == pytest.approx([4200.0, 5000.0, 6200.0], rel=1e-3)


def test_samples_stand_beside_the_file(tmp_path: Path) -> None:
    draws = np.random.default_rng(3).lognormal(np.log(2.0), 0.2, 4000)
    (tmp_path / "post.txt").write_text("# kpc\n" + "\n".join(map(str, draws)), encoding="utf-8")
    found = reading(tmp_path, "samples = 'post.txt'\nsamples_unit = 'kpc'")
    assert at(found, 0.16, 0.5, 0.84) == pytest.approx(1e3 * np.quantile(draws, [0.16, 0.5, 0.84]), rel=2e-3)


def test_the_command_line_takes_errors_and_light_years() -> None:
    def median(text: str) -> float:
        found = build_target("10.5 -20.25 deg", distance=text).distance
        assert found is not None
        return at(found, 0.5)[0]

    assert median("18000 +2000 -1500 ly") == pytest.approx(18000 * 0.306601, rel=1e-3)
    assert median("5.0 +1.2 -0.8 kpc") == pytest.approx(5000.0, rel=1e-6)
    assert median("5000..13000 ly") == pytest.approx(np.sqrt(5000 * 13000) * 0.306601, rel=1e-4)


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("value = '5.0 kpc'", "needs low and high"),
        ("low = '1 kpc'\nhigh = '2 kpc'\nredshift = 0.1", "exactly one"),
        ("low = '1 kpc'\nhigh = '2 kpc'\nprior = 'flat'", "log-uniform"),
        ("value = '5 kpc'\nplus = '1 kpc'\nminus = '5 kpc'", "smaller than the value"),
        ("value = '5'\nplus = '1 kpc'\nminus = '2 kpc'", "unit"),
        ("parallax_mas = 1.0\nparallax_error_mas = 0.0", "above 0"),
        ("samples = 'nowhere.txt'\nsamples_unit = 'kpc'", "cannot be read"),
        ("quantiles_pc = [3.0, 2.0, 1.0]", "fall"),
        ("quantiles_pc = 'many'", "list"),
        ("models = ['Best']", "NE2001"),
        ("redshift = -0.1", "redshift"),
        ("redshift = 0.1\ncosmology = 'flat'", "Planck18"),
    ],
)
def test_what_is_no_distance_is_refused(tmp_path: Path, text: str, says: str) -> None:
    with pytest.raises(InputError, match=says):
        reading(tmp_path, text)


def test_a_sample_that_is_no_number_is_named(tmp_path: Path) -> None:
    (tmp_path / "post.txt").write_text("1.0\n2.o\n", encoding="utf-8")
    with pytest.raises(TargetError, match="line 2"):
        reading(tmp_path, "samples = 'post.txt'\nsamples_unit = 'kpc'")


def test_models_side_by_side(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(distance_keys, "distances_pc", lambda l, b, dm, models: [4000.0, 6000.0])  # noqa: E741
    found = reading(tmp_path, "models = ['NE2001', 'NE2025']\nmodel_scatter_ln = 0.1")
    low, middle, high = at(found, 0.16, 0.5, 0.84)
    assert 3500.0 < low < 4100.0 < middle < 5900.0 < high < 6700.0
    for word in ("NE2001 4.00 kpc", "NE2025 6.00 kpc", "DM 100"):
        assert word in found.origin


def test_models_need_a_dispersion_measure(tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    path.write_text(HEAD.replace("[dispersion]\ndm_pc_cm3 = 100.0\n", "") + "models = ['NE2001']", encoding="utf-8")
    with pytest.raises(TargetError, match="dm_pc_cm3"):
        read_target(path)


@pytest.mark.parametrize(
    ("worker", "says", "kind"),
    [
        ('import json; print(json.dumps({"missing": True}))', "pip install", ConfigurationError),
        ('import json; print(json.dumps({"kpc": 25.0, "beyond": True}))', "exceeds", RangeError),
        ("raise SystemExit(3)", "failed", ConfigurationError),
        ("import time; time.sleep(60)", "no answer", ConfigurationError),
    ],
)
def test_a_model_that_cannot_answer_says_so(
    monkeypatch: pytest.MonkeyPatch, worker: str, says: str, kind: type[Exception]
) -> None:
    monkeypatch.setattr(electron_density, "WORKER", worker)
    monkeypatch.setattr(electron_density, "LONGEST_S", 1.0 if "time" in worker else 30.0)
    with pytest.raises(kind, match=says):
        electron_density.distance_pc(22.0, -2.0, 100.0, "NE2001")


def test_wrong_questions_start_no_process() -> None:
    with pytest.raises(RangeError, match="NE2025"):
        electron_density.distance_pc(22.0, -2.0, 100.0, "other")
    with pytest.raises(RangeError, match="above 0"):
        electron_density.distance_pc(22.0, -2.0, -1.0, "NE2001")
