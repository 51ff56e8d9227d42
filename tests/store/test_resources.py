"""Files beside the code are found in a checkout and in a wheel, and nowhere else."""

from __future__ import annotations

from pathlib import Path

import pytest

from xmatch import resources
from xmatch.errors import BlankfieldError
from xmatch.resources import db_path, fixture_path


def test_the_contract_and_the_fixtures_are_found() -> None:
    assert db_path("views.sql").is_file()
    assert db_path("README.md").is_file()
    assert fixture_path("demo").is_dir()


def test_a_wheel_holds_them_inside_the_package(tmp_path: Path) -> None:
    package = tmp_path / "site-packages" / "xmatch"
    (package / "_db").mkdir(parents=True)
    (package / "_db" / "views.sql").touch()
    # a folder of the same name that another package left there
    (tmp_path / "site-packages" / "db").mkdir()
    (tmp_path / "site-packages" / "db" / "other.sql").touch()
    assert resources._find("db", "views.sql", package) == package / "_db" / "views.sql"
    with pytest.raises(BlankfieldError, match=r"db/other\.sql is missing .* install blankfield again"):
        resources._find("db", "other.sql", package)
