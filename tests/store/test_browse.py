"""The store in a real browser: it loads, a study runs, a write is refused, and nobody else can reach it.

Chromium is that of the system (Debian: chromium or chromium-headless-shell). Where there is none the tests of the browser
fail, unless ``BLANKFIELD_TEST_WITHOUT_BROWSER=1`` says that this machine has none.
"""

from __future__ import annotations

import os
import re
import shutil
import signal
import socket
import subprocess
import sys
import urllib.error
import urllib.request
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner
from nine import make_store

from xmatch.cli.browse import command
from xmatch.errors import ConfigurationError, StoreError
from xmatch.store import browsing, schema
from xmatch.store.contract import contract
from xmatch.store.studies import studies

WITHOUT = "BLANKFIELD_TEST_WITHOUT_BROWSER"
BROWSERS = ("chromium", "chromium-headless-shell", "chromium-browser", "google-chrome")
WITHOUT_BROWSER = os.environ.get(WITHOUT) == "1"


@dataclass
class Site:
    address: str
    port: int
    path: Path


@pytest.fixture(scope="module")
def site(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Site]:
    """A demo store, shown by the command in a process of its own."""
    path = tmp_path_factory.mktemp("browse") / "demo.sqlite"
    make_store(path)
    top = str(Path(__file__).parent.parent.parent)
    log = path.with_name("log")
    said = log.open("wb")
    process = subprocess.Popen(
        [sys.executable, "-u", "-m", "xmatch", "browse", "--port", "0", "--store", str(path)],
        stdout=subprocess.PIPE, stderr=said, text=True, env=os.environ | {"PYTHONPATH": top},
    )  # fmt: skip
    try:
        assert process.stdout is not None
        told = process.stdout.readline()
        found = re.search(r"http://127\.0\.0\.1:(\d+)/", told)
        assert found, told + log.read_text()
        yield Site(found[0], int(found[1]), path)
        # Ctrl-C ends it without a complaint
        process.send_signal(signal.SIGINT)
        process.communicate(timeout=20)
        # a question with a mistake in it is answered in the page, without a trace here
        assert "Traceback" not in log.read_text()
        assert process.returncode in (0, 130)
    finally:
        process.kill()
        process.wait()
        said.close()


@pytest.fixture
def page(site: Site) -> Iterator[Any]:
    found = next((named for named in map(shutil.which, BROWSERS) if named), None)
    if found is None:
        if WITHOUT_BROWSER:
            pytest.skip(f"no Chromium on this machine, and {WITHOUT}=1")
        pytest.fail(f"no Chromium: install the system's package, or set {WITHOUT}=1")
    from playwright.sync_api import sync_playwright

    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=found, args=["--no-sandbox", "--disable-gpu"])
        opened = browser.new_page()
        # whatever the page asks for must come from this machine
        asked: list[str] = []
        opened.on("request", lambda request: asked.append(request.url))
        opened.goto(site.address)
        yield opened
        assert all(url.startswith((site.address, "data:")) for url in asked), asked
        browser.close()


def get(url: str, **headers: str) -> tuple[int, str]:
    try:
        with urllib.request.urlopen(urllib.request.Request(url, headers=headers), timeout=20) as reply:
            return reply.status, reply.read().decode()
    except urllib.error.HTTPError as fault:
        with fault:
            return fault.code, fault.read().decode()


def test_the_page_loads_a_study_runs_and_a_write_is_refused(site: Site, page: Any) -> None:
    assert "blankfield" in page.title()
    page.get_by_role("link", name="demo", exact=True).first.click()
    page.wait_for_url("**/demo")
    # every study is there under its title
    body = page.inner_text("body")
    assert all(one.title in body for one in studies().values())
    page.get_by_role("link", name="Luminosity limits at one distance").click()
    page.wait_for_url("**/luminosity-at-distance")
    # a form that is left empty takes the default: 5 kpc
    cells = page.locator("table.rows-and-columns tbody tr")
    assert cells.count() == 12
    xray = page.locator("tr", has_text="0.2-2.3 keV").inner_text()
    assert "8.645" in xray and "e+32" in xray
    assert "Isotropic luminosity at that distance. [erg s-1]" in page.inner_text("body")
    page.fill("input[name=distance_kpc]", "10")
    page.get_by_role("button", name="Run SQL").click()
    page.wait_for_url("**distance_kpc=10*")
    # twice as far, four times as luminous
    assert "3.458" in page.locator("tr", has_text="0.2-2.3 keV").inner_text()
    page.goto(f"{site.address}demo?sql=" + "DELETE+FROM+standing")
    assert "must be a SELECT" in page.inner_text("body")
    page.goto(f"{site.address}demo/standing")
    assert page.locator("table.rows-and-columns tbody tr").count() == 4


def test_tables_tell_their_columns_and_units(site: Site, page: Any) -> None:
    page.goto(f"{site.address}demo/current_limit")
    body = page.inner_text("body")
    assert contract()["current_limit"].meaning in body
    assert "Limit on the flux of the band, or nu F_nu; as observed. [erg s-1 cm-2]" in body


@pytest.mark.parametrize("name", sorted(studies()))
def test_every_study_runs_with_its_form_left_empty(site: Site, name: str) -> None:
    code, text = get(f"{site.address}demo/{name}.json?_shape=objects&catalog=2mass-psc")
    assert code == 200, text
    assert '"ok": true' in text


@pytest.mark.parametrize(
    "sql", ["INSERT INTO assumptions VALUES ('a', 'b')", "DROP TABLE run", "PRAGMA query_only = OFF", "ATTACH 'x' AS y",
            "WITH a AS (SELECT 1) DELETE FROM standing"],
)  # fmt: skip
def test_nothing_can_be_changed(site: Site, sql: str) -> None:
    before = site.path.read_bytes()
    code, _ = get(f"{site.address}demo.json?sql={urllib.request.quote(sql)}")  # type: ignore[attr-defined]
    assert code in (400, 403)
    assert site.path.read_bytes() == before
    assert get(f"{site.address}demo.db")[0] == 403


def test_it_is_reachable_from_this_machine_only(site: Site) -> None:
    listening = [
        line.split()[1]
        for table in (Path("/proc/net/tcp"), Path("/proc/net/tcp6"))
        if table.exists()
        for line in table.read_text().splitlines()[1:]
        if line.split()[1].endswith(f":{site.port:04X}") and line.split()[3] == "0A"
    ]
    assert listening == [f"0100007F:{site.port:04X}"]
    # another address, also of this machine, finds nobody
    with pytest.raises(ConnectionRefusedError), socket.create_connection(("127.0.0.2", site.port), timeout=5):
        pass


@pytest.mark.parametrize("host", ["archive.example", "archive.example:80", "127.0.0.1.archive.example", "", "[::1"])
def test_a_request_under_another_name_is_turned_away(site: Site, host: str) -> None:
    code, text = get(site.address, Host=host)
    assert code in (400, 403) and "Tern-4" not in text
    assert get(site.address, Host=f"localhost:{site.port}")[0] == 200


def test_functions_work_in_the_page(site: Site) -> None:
    sql = "SELECT separation_arcsec(0,0,0,1) AS a, days_between(now_utc(), now_utc()) AS d"
    code, text = get(f"{site.address}demo.json?_shape=array&sql={urllib.request.quote(sql)}")  # type: ignore[attr-defined]
    assert (code, text.strip()) == (200, '[{"a": 3600.0, "d": 0.0}]')


# --- without a server ----------------------------------------------------------------------------
def test_what_cannot_be_shown_is_said(tmp_path: Path) -> None:
    done = CliRunner().invoke(command, ["--store", str(tmp_path / "none.sqlite"), "--port", "0"])
    assert isinstance(done.exception, StoreError) and "no store at" in str(done.exception)
    done = CliRunner().invoke(command, ["--store", "postgresql://u:hunter2@h/db", "--port", "0"])
    assert isinstance(done.exception, ConfigurationError) and "store copy" in str(done.exception)
    assert "hunter2" not in str(done.exception)


def test_a_port_that_is_taken_is_named() -> None:
    with browsing.bound_socket(0) as taken:
        port = taken.getsockname()[1]
        with pytest.raises(ConfigurationError, match=f"port {port} cannot be used"):
            browsing.bound_socket(port)


def test_the_contract_is_told_for_every_table() -> None:
    told = contract()
    assert set(schema.metadata.tables) < set(told)
    assert told["search"].columns["radius_arcsec"] == ("arcsec", "Radius of the cone.")
    for name, one in told.items():
        assert one.meaning.endswith("."), name


@pytest.mark.parametrize(
    ("headers", "here"),
    [([(b"host", b"127.0.0.1:8742")], True), ([(b"host", b"LOCALHOST")], True), ([], False),
     ([(b"host", b"localhost"), (b"host", b"archive.example")], False), ([(b"host", b"localhost@archive.example")], False)],
)  # fmt: skip
def test_who_is_here(headers: list[tuple[bytes, bytes]], here: bool) -> None:
    assert browsing._is_here({"headers": headers}) is here
