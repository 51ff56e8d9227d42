"""The command line: exit codes, what goes where, help that is there, faults that are explained."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import pytest

from xmatch.catalogs import load_catalogs
from xmatch.cli import COMMANDS, EXIT_FAULT, EXIT_INTERRUPTED
from xmatch.demo.faults import Fault
from xmatch.demo.sky import BUILT_TO_SHOW
from xmatch.resources import fixture_path

TARGET = str(fixture_path("demo/tern-4.toml"))
HERE = "17:38:01.50 -33:48:57.0"

CONFIRMED = {name: str(BUILT_TO_SHOW[name]) for name, catalog in load_catalogs().items() if not catalog.needs_check}
"""What a first look shows: catalogs whose columns nobody has confirmed wait for a check."""


def run(*args: str, **env: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-W", "error", "-m", "xmatch", *args],
        capture_output=True, text=True, env=os.environ | env, timeout=60, check=False,
    )  # fmt: skip


@pytest.mark.parametrize("name", COMMANDS)
def test_every_command_has_help_for_itself_and_its_options(name: str) -> None:
    done = run(name, "--help")
    assert done.returncode == 0
    assert "Usage: blankfield " + name in done.stdout


def test_help_lists_every_command() -> None:
    done = run("--help")
    assert done.returncode == 0
    assert all(name in done.stdout for name in COMMANDS)


def test_an_unknown_command_names_those_there_are() -> None:
    done = run("lok")
    assert done.returncode == 2
    assert "look" in done.stderr


@pytest.mark.parametrize(
    "args",
    [
        ("12 34",),
        ("400.0 -33.8 deg",),
        ("264.5 -93.8 deg",),
        ("nan -33.8 deg",),
        ("25:00:00 -33:48:57",),
        (HERE, "--error", "-1"),
        (HERE, "--error", "nan"),
        (HERE, "--distance", "4..1 kpc"),
        (HERE, "--distance", "4"),
        (HERE, "--dm", "-3"),
        (HERE, "--period", "-5 s"),
        (HERE, "--error-level", "120%"),
        (HERE, "--only", "no-such-catalog"),
        (HERE, "--offline", "--again"),
        (TARGET, "--dm", "10"),
        ("missing.toml",),
    ],
    ids=" ".join,
)
def test_bad_input_is_refused_with_exit_code_2_and_nothing_is_written(tmp_path: Path, args: tuple[str, ...]) -> None:
    store = tmp_path / "refused.sqlite"
    done = run("look", *args, "--store", str(store))
    assert done.returncode == 2, done.stderr
    assert done.stderr.strip()
    assert "Traceback" not in done.stderr
    assert not done.stdout
    assert not store.exists()


def test_an_ambiguous_position_is_echoed_in_both_readings() -> None:
    done = run("look", "12 34")
    assert "hours" in done.stderr and "degrees" in done.stderr


def test_the_position_is_echoed_in_both_notations_before_anything_is_asked(archive: Any) -> None:
    done = run("look", HERE, "--show-requests", BLANKFIELD_ARCHIVES=archive.address)
    assert done.returncode == 0, done.stderr
    first = done.stderr.splitlines()[0]
    assert "17:38:01.50" in first and "264.506250" in first
    assert not archive.requests
    assert "I/355/gaiadr3" in done.stdout
    shown = [block for block in done.stdout.split("\n\n") if block.startswith(("GET ", "POST "))]
    looked = run("look", HERE, "--json", BLANKFIELD_ARCHIVES=archive.address)
    assert looked.returncode == 0, looked.stderr
    asked = [request.body.splitlines()[0] for request in archive.requests if request.body.startswith("-source")]
    told = [line for line in done.stdout.splitlines() if line.startswith("-source")]
    # what is shown is asked first; a survey that gave too few rows is asked once more over a wider cone
    assert sorted(asked[: len(told)]) == sorted(told)
    assert asked[len(told) :] == ["-source=VIII/113/catalog2"]
    assert len(archive.requests) == len(shown) + 1


def test_look_answers_and_a_second_look_needs_no_archive(archive: Any) -> None:
    first = run("look", TARGET, "--json", BLANKFIELD_ARCHIVES=archive.address)
    assert first.returncode == 0, first.stderr
    said = {finding["catalog_id"]: finding["outcome"] for finding in json.loads(first.stdout)["findings"]}
    assert said == CONFIRMED
    asked = len(archive.requests)
    second = run("look", TARGET, BLANKFIELD_ARCHIVES=archive.address)
    assert second.returncode == 0, second.stderr
    assert len(archive.requests) == asked
    assert "Tern-4" in second.stdout.splitlines()[0] + second.stdout.splitlines()[1]
    assert "\x1b" not in second.stdout


def test_the_same_position_on_the_command_line(archive: Any) -> None:
    done = run(
        "look", HERE, "--name", "mine", "--error", "1.8,1.2,20", "--epoch", "2026.4", "--distance", "1.6..4.1 kpc",
        "--dm", "148", "--period", "2711.4 s", "--derivative-limit", "2.4e-12", "--pulse", "2.1 Jy @ 200 MHz for 35 s",
        "--json", BLANKFIELD_ARCHIVES=archive.address,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    answer = json.loads(done.stdout)
    assert answer["target"]["name"] == "mine"
    assert {f["catalog_id"]: f["outcome"] for f in answer["findings"]} == CONFIRMED


def test_the_demo_shows_every_catalog() -> None:
    answer = json.loads(run("demo", "--json").stdout)
    assert {f["catalog_id"]: f["outcome"] for f in answer["findings"]} == {k: str(v) for k, v in BUILT_TO_SHOW.items()}
    assert not answer["remarks"]


def test_catalogs_wait_for_a_check_and_are_unlocked_by_it(archive: Any) -> None:
    done = run("catalogs", "check", "glostar", "nvss", BLANKFIELD_ARCHIVES=archive.address)
    assert done.returncode == 0, done.stderr
    assert [line.split(":")[0] for line in done.stdout.splitlines()] == ["glostar  good", "nvss     good"]
    assert "phot.flux.density;em.radio.3-6GHz is Speak1" in done.stdout
    looked = run(
        "look", TARGET, "--only", "glostar", "--only", "lotss-dr3", "--json", BLANKFIELD_ARCHIVES=archive.address
    )
    answer = json.loads(looked.stdout)
    assert [f["catalog_id"] for f in answer["findings"]] == ["glostar"]
    assert any("1 catalog was not asked" in remark and "lotss-dr3" in remark for remark in answer["remarks"])


def test_a_service_that_drifted_or_fell_silent_is_named_and_exits_with_1(archive: Any) -> None:
    archive.misbehave("VIII/65/nvss", Fault("renamed column", column="S1.4", to="S14"))
    archive.misbehave("II/246/out", Fault("unavailable"))
    done = run("catalogs", "check", "nvss", "2mass-psc", "gaia-dr3", "--json", BLANKFIELD_ARCHIVES=archive.address)
    assert done.returncode == 1
    said = {r["id"]: (r["verdict"], r["detail"]) for r in json.loads(done.stdout)}
    assert said["nvss"] == ("drift", "main: column 'S1.4' is not served; near it: S14, e_S1.4")
    assert said["2mass-psc"][0] == "unanswered"
    assert said["gaia-dr3"][0] == "good"


def test_lists_are_mirrored_and_footprints_too(archive: Any) -> None:
    done = run("catalogs", "mirror", "atnf-psr", "nvss", BLANKFIELD_ARCHIVES=archive.address)
    assert (done.returncode, done.stdout) == (0, "atnf-psr: list: 2500 rows kept\n")
    nothing = run("catalogs", "mirror", "nvss", BLANKFIELD_ARCHIVES=archive.address)
    assert "nothing to fetch" in nothing.stdout
    failed = run("catalogs", "mirror", "galex-guvcat-ais", BLANKFIELD_ARCHIVES=archive.address)
    assert failed.returncode == 1
    assert "galex-guvcat-ais: footprint not kept: HTTP 404" in failed.stdout


def test_a_catalog_of_ones_own(tmp_path: Path) -> None:
    made = run("catalogs", "new", "my-survey", "--folder", str(tmp_path))
    assert made.returncode == 0, made.stderr
    shown = run("catalogs", "--catalog-folder", str(tmp_path), "show", "my-survey")
    assert "waits for a check" in shown.stdout
    again = run("catalogs", "new", "my-survey", "--folder", str(tmp_path))
    assert again.returncode == 2 and "left alone" in again.stderr
    assert run("catalogs", "new", "My Survey").returncode == 2


def test_the_demo_is_whole_and_says_that_it_is_invented() -> None:
    done = run("demo", "--quiet")
    assert done.returncode == 0, done.stderr
    assert "Tern-4" in done.stdout
    assert "invented" in done.stdout
    assert not done.stderr


def test_the_demo_shows_trouble_as_trouble() -> None:
    done = run(
        "demo", "--json", "--trouble", "nvss=html", "--trouble", "vlass-ql1=unavailable", "--trouble", "lpt-cat=html",
        "--trouble", "fermi-4fgl-dr4=closed",
    )  # fmt: skip
    said = {finding["catalog_id"]: finding["outcome"] for finding in json.loads(done.stdout)["findings"]}
    assert (said["nvss"], said["vlass-ql1"]) == ("misread", "unanswered")
    assert (said["lpt-cat"], said["fermi-4fgl-dr4"]) == ("misread", "unanswered")


def test_catalogs_are_listed_and_shown() -> None:
    listed = run("catalogs")
    assert listed.returncode == 0 and all(name in listed.stdout for name in BUILT_TO_SHOW)
    shown = run("catalogs", "show", "2mass-psc")
    assert "2006AJ....131.1163S" in shown.stdout and "1594" in shown.stdout
    assert run("catalogs", "show", "nonsense").returncode == 2
    assert len(json.loads(run("catalogs", "--json").stdout)) == len(BUILT_TO_SHOW)


def test_the_template_is_a_target_file(tmp_path: Path) -> None:
    template = run("target").stdout
    path = tmp_path / "mine.toml"
    path.write_text(template)
    assert run("target", str(path)).returncode == 0


def test_a_store_of_nobody_is_said(tmp_path: Path) -> None:
    path = tmp_path / "other.sqlite"
    path.write_bytes(b"not a store at all" * 100)
    done = run("look", HERE, "--offline", "--store", str(path))
    assert done.returncode == 3
    assert str(path) in done.stderr and "Traceback" not in done.stderr


def test_an_unforeseen_fault_is_explained_without_a_traceback(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    code = (
        "import xmatch.cli, click\n"
        "xmatch.cli.COMMANDS['broken'] = ('broken', 'x')\n"
        "import sys, types\n"
        "m = types.ModuleType('broken')\n"
        "@click.command('broken')\n"
        "def command():\n    raise ZeroDivisionError('boom')\n"
        "m.command = command\n"
        "sys.modules['broken'] = m\n"
        "xmatch.cli.main(['broken'])\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        text=True,
        check=False,
        env=os.environ | {"TMPDIR": str(tmp_path)},
    )
    assert done.returncode == EXIT_FAULT
    assert "Traceback" not in done.stderr
    assert "ZeroDivisionError" in done.stderr
    assert "Traceback" in next(tmp_path.glob("blankfield-fault-*.txt")).read_text()


def started(archive: Any, store: Path) -> subprocess.Popen[str]:
    return subprocess.Popen(
        [sys.executable, "-m", "xmatch", "look", TARGET, "--store", str(store)],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        env=os.environ | {"BLANKFIELD_ARCHIVES": archive.address},
    )  # fmt: skip


def wait_for(condition: Any, seconds: float = 20.0) -> None:
    end = time.monotonic() + seconds
    while not condition():
        assert time.monotonic() < end, "waited in vain"
        os.sched_yield()


def test_ctrl_c_exits_cleanly_with_what_was_learnt(archive: Any, tmp_path: Path) -> None:
    store = tmp_path / "stopped.sqlite"
    archive.misbehave("fermilpsc", Fault("delay", seconds=30.0))
    n_logs = sum(catalog.log is not None and not catalog.needs_check for catalog in load_catalogs().values())
    process = started(archive, store)
    assert process.stderr is not None
    seen = ""
    while seen.count(": whole") < len(CONFIRMED) + n_logs - 1:
        seen += process.stderr.readline()
    process.send_signal(signal.SIGINT)
    _, rest = process.communicate(timeout=15)
    assert process.returncode == EXIT_INTERRUPTED
    assert "kept" in rest and "Traceback" not in rest
    archive.behave()
    answer = json.loads(
        run("look", TARGET, "--json", "--store", str(store), BLANKFIELD_ARCHIVES=archive.address).stdout
    )
    assert answer["n_asked"] == 1
