"""The store: one file that remembers what was asked, what was answered and what was concluded.

>>> with open_store("mine.sqlite") as store:  # doctest: +SKIP
...     store.frame("SELECT catalog_id, outcome FROM current_finding WHERE target_name = :name", {"name": "Tern-4"})
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from contextlib import closing, contextmanager
from datetime import UTC, datetime
from pathlib import Path
from types import TracebackType
from typing import TYPE_CHECKING, Any

import numpy as np
from sqlalchemy import Connection, Engine, func, select, update
from sqlalchemy import text as text_of_sql

from xmatch.assumptions import Assumptions
from xmatch.errors import StoreError
from xmatch.records import Band, Floats, Look, Pointings, ReplyStatus, Rows, Search, Target, Waveband
from xmatch.store import concluding, lists, near, reading, schema, writing
from xmatch.store.border import bound, integer, json_text, text, utc_text
from xmatch.store.lists import Checked, ListCopy
from xmatch.store.near import Dialect, Near, Pairs
from xmatch.store.opening import connect
from xmatch.store.place import locate, shown
from xmatch.store.schema_lists import CheckVerdict
from xmatch.store.translating import WRITE, translated

if TYPE_CHECKING:
    import pandas as pd

    from xmatch.records import Reply

WAIT_S = 30.0
"""How long another writer may keep us waiting (our choice; one search is written in well under a second)."""


def open_store(where: str | Path | None = None, *, read_only: bool = False, wait_s: float = WAIT_S) -> Store:
    """Open a store; make it, and its folder, where there is none.

    Parameters
    ----------
    where : str or Path, optional
        A path, ``sqlite:///path`` or ``postgresql+psycopg://user@host/database``. By default the environment variable ``BLANKFIELD_STORE``, else
        ``blankfield.sqlite`` in the user's data folder.
    read_only : bool
        Never write and never make.
    wait_s : float
        How long to wait for another writer, in seconds.

    Raises
    ------
    ConfigurationError
        A URL of another kind, or the driver of PostgreSQL is not installed.
    StoreVersionError
        A store of another schema version; it is left alone.
    StoreBusyError
        Another process kept it locked.
    StoreError
        Not a store, not readable, not writable, or not there and ``read_only``.
    """
    place = locate(where)
    if isinstance(place, Path):
        engine, remarks = connect(place, read_only=read_only, wait_s=wait_s)
    else:
        from xmatch.store import postgres

        engine, remarks = postgres.connect(place, read_only=read_only, wait_s=wait_s)
    return Store(engine, place, remarks, read_only=read_only)


class Store:
    """An open store. Use :func:`open_store`, best in a ``with`` statement; one thread writes.

    Every method that writes commits whole or not at all, and raises :class:`~xmatch.errors.StoreError` (locked:
    :class:`~xmatch.errors.StoreBusyError`) with nothing changed.

    Attributes
    ----------
    place : Path or str
        The file, or the URL of the PostgreSQL database.
    """

    def __init__(
        self, engine: Engine, place: Path | str, remarks: Sequence[str] = (), *, read_only: bool = False
    ) -> None:
        self.place = place
        self.read_only = read_only
        self._engine: Engine | None = engine
        self._remarks = list(remarks)
        self._origins: near.Origins = {}
        # which state of each catalog file this process works with
        self._catalog_keys: dict[tuple[str, str], int] = {}

    def __enter__(self) -> Store:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, fault: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close every connection; a second time does nothing."""
        if self._engine is not None:
            self._engine.dispose()
            self._engine = None

    @property
    def name(self) -> str:
        """Where it is, for people: without a password."""
        return str(self.place) if isinstance(self.place, Path) else shown(self.place)

    @property
    def path(self) -> Path:
        """The file.

        Raises
        ------
        StoreError
            The store is a PostgreSQL database.
        """
        if not isinstance(self.place, Path):
            raise StoreError(f"{self.name} is a database on a server; only a file has a path")
        return self.place

    @property
    def url(self) -> str:
        """The store as a SQLAlchemy URL, with its password if it has one."""
        return f"sqlite:///{self.place}" if isinstance(self.place, Path) else self.place

    @property
    def remarks(self) -> tuple[str, ...]:
        """What the user should know of this store: where it lies, what in it could not be used."""
        return tuple(self._remarks)

    # --- writing -----------------------------------------------------------------------------------
    def put_target(self, target: Target) -> int:
        """Return the key of a target. The same content has the same key; any change is a new version."""
        with self._writing() as connection:
            return writing.put_target(connection, target, _now())

    def put_catalog(
        self,
        catalog_id: str,
        release: str,
        title: str,
        waveband: Waveband,
        fingerprint: str,
        bands: Sequence[Band],
    ) -> int:
        """Return the key of one state of a catalog file; later searches of that release refer to it.

        Parameters
        ----------
        catalog_id, release, title, waveband
            As in the catalog file.
        fingerprint : str
            SHA-256 of the file's bytes.
        bands : sequence of Band
            Its bands; the rows of a search may hold no others.
        """
        with self._writing() as connection:
            key = writing.put_catalog(connection, catalog_id, release, title, waveband, fingerprint, bands, _now())
        self._catalog_keys[catalog_id, release] = key
        return key

    def begin_run(self, target_id: int, version: str, options: Mapping[str, object] | None = None) -> int:
        """Note that a look at a target begins; return its key."""
        with self._writing() as connection:
            return writing.insert_one(
                connection,
                schema.run,
                target_id=integer(target_id, "target_id"),
                version=text(version),
                options=json_text(options or {}),
                started_at=_now(),
            )

    def finish_run(self, run_id: int) -> None:
        """Note that a look ended."""
        run = schema.run
        with self._writing() as connection:
            done = connection.execute(
                update(run).where(run.c.run_id == integer(run_id, "run_id")).values(finished_at=_now())
            )
            if done.rowcount != 1:
                raise StoreError(f"the store knows no run {run_id}; begin_run comes first")

    def put_search(
        self,
        run_id: int,
        target_id: int,
        reply: Reply,
        rows: Rows | None,
        pointings: tuple[Pointings, Floats] | None = None,
    ) -> Search:
        """Keep one question, its judged reply and its rows: all of it or nothing.

        Parameters
        ----------
        run_id, target_id : int
            From :meth:`begin_run` and :meth:`put_target`.
        reply : Reply
            The reply. A whole one needs its rows, even when there are none.
        rows : Rows or None
            The rows as the door let them in; None for a reply that must not be read.
        pointings : tuple of Pointings and ndarray, optional
            For the reply of an observation log: its entries, and the angle of each axis from the target in arcmin.

        Raises
        ------
        RangeError
            A row without a position, arrays of unequal length.
        """
        place = (reply.question.catalog_id, reply.question.release)
        with self._writing() as connection:
            key = self._catalog_keys.get(place) or writing.catalog_key_of(connection, *place)
            search = writing.put_search(connection, run_id, target_id, key, reply, rows)
            if pointings is not None:
                lists.put_pointings(connection, search.search_id, *pointings)
            return search

    def put_list(self, reply: Reply, rows: Rows) -> int:
        """Keep one whole list as it was received, with its rows: all of it or nothing; return its key."""
        with self._writing() as connection:
            return lists.put_list(connection, reply, rows)

    def put_footprint(
        self, catalog_id: str, release: str, address: str, asked_at: str, sha256: str, sky_fraction: float, body: bytes
    ) -> int:
        """Keep one footprint file; return its key."""
        with self._writing() as connection:
            return lists.put_footprint(connection, catalog_id, release, address, asked_at, sha256, sky_fraction, body)

    def put_check(
        self,
        catalog_id: str,
        release: str,
        fingerprint: str,
        verdict: CheckVerdict,
        detail: str,
        resolved: Mapping[str, str],
        found: Mapping[str, object],
    ) -> int:
        """Keep what a check of a catalog found; return its key."""
        with self._writing() as connection:
            return lists.put_check(
                connection, catalog_id, release, fingerprint, _now(), verdict, detail, resolved, found
            )

    def put_assumptions(self, assumptions: Assumptions) -> str:
        """Keep a set of assumptions; return its content hash."""
        with self._writing() as connection:
            writing.put_assumptions(connection, assumptions.digest, assumptions.as_dict())
        return assumptions.digest

    def put_answer(self, run_id: int, target_id: int, look: Look) -> None:
        """Keep what one look concluded: all of it or nothing, once per run.

        Raises
        ------
        RangeError
            A number that is infinite, or missing where there must be one.
        """
        with self._writing() as connection:
            concluding.put_answer(connection, run_id, target_id, look, _now())

    # --- reading -----------------------------------------------------------------------------------
    def same_answer(self, target_id: int, look: Look) -> int | None:
        """Return the run that already holds this answer as the target's latest, None where there is none."""
        with self._reading() as connection:
            return concluding.same_answer(connection, target_id, look)

    def find_target(self, target: Target) -> int | None:
        """Return the key of the latest target at the same position, None where there is none. Nothing is written.

        Its searches are those of this target: what is known of an object does not change the sky.
        """
        with self._reading() as connection:
            return reading.find_target(connection, target)

    def current_searches(self, target_id: int) -> list[Search]:
        """Return the latest whole searches at the position of a target, oldest first.

        One for each catalog, release, table, centre and radius; versions of the target at the same position
        share them. The caller compares centre, radius and age with what it needs.
        """
        with self._reading() as connection:
            return reading.current_searches(connection, target_id)

    def last_attempts(self, target_id: int) -> list[Search]:
        """Return the latest search of any status for each catalog, release and table, oldest first."""
        with self._reading() as connection:
            return reading.last_attempts(connection, target_id)

    def latest_list(self, catalog_id: str, release: str, table_name: str) -> ListCopy | None:
        """Return the newest copy of a whole list, None where there is none."""
        with self._reading() as connection:
            return lists.latest_list(connection, catalog_id, release, table_name)

    def footprints(self) -> dict[tuple[str, str], bytes]:
        """Return the newest footprint file of each catalog id and address."""
        with self._reading() as connection:
            return lists.footprints(connection)

    def pointings_of(self, search_id: int) -> Pointings:
        """Return the pointings that one search of an observation log brought."""
        with self._reading() as connection:
            return lists.pointings_of(connection, search_id)

    def latest_checks(self) -> dict[str, Checked]:
        """Return the latest check of each catalog id that was answered."""
        with self._reading() as connection:
            return lists.latest_checks(connection)

    def rows_of(self, search_ids: Sequence[int], bands: Sequence[Band], *, raw: bool = False) -> Rows:
        """Return the rows of some searches of one catalog, in the order of the searches and the replies.

        Parameters
        ----------
        search_ids : sequence of int
            Which searches.
        bands : sequence of Band
            Which bands; each gets arrays of full length, ``nan`` where the catalog gives nothing. Values that were
            stored in another unit or magnitude system are not handed out; :attr:`remarks` says so.
        raw : bool
            Also return the rows as served.

        Raises
        ------
        StoreError
            A search is unknown, or does not have exactly the rows it should have.
        """
        with self._reading() as connection:
            rows, remarks = reading.rows_of(connection, search_ids, bands, raw=raw)
        self._remarks.extend(remark for remark in remarks if remark not in self._remarks)
        return rows

    def near(
        self, ra_deg: float, dec_deg: float, radius_arcsec: float | Mapping[str, float], *, history: bool = False
    ) -> list[Near]:
        """Return the stored rows of any catalog within a radius of a position, nearest first.

        Parameters
        ----------
        ra_deg, dec_deg : float
            ICRS degrees.
        radius_arcsec : float or mapping of str to float
            One radius for all, or the radius of each catalog wanted by its id; 0 to 648000 arcsec.
        history : bool
            Also the listings of earlier searches; by default each source of a table is there once, from the
            latest search that found it.

        Raises
        ------
        RangeError
            A position or a radius that is none.

        Notes
        -----
        No row does not mean an empty sky: the store holds what was asked for.
        """
        with self._driver_cursor() as (cursor, dialect):
            return near.near(cursor, dialect, self._origins, ra_deg, dec_deg, radius_arcsec, history=history)

    def near_many(self, ra_deg: Floats, dec_deg: Floats, radius_arcsec: Floats | float) -> Pairs:
        """Return which stored rows lie near which of many positions, every listing, in the order of the positions.

        Parameters
        ----------
        ra_deg, dec_deg : array of float, shape (n,)
            ICRS degrees.
        radius_arcsec : float or array of float, shape (n,)
            Radius of each, 0 to 648000 arcsec.

        Raises
        ------
        RangeError
            A position or a radius that is none.
        """
        with self._driver_cursor() as (cursor, dialect):
            return near.near_many(cursor, dialect, ra_deg, dec_deg, np.asarray(radius_arcsec, dtype=np.float64))

    def frame(self, sql: str, params: Mapping[str, object] | Sequence[object] | None = None) -> pd.DataFrame:
        """Return the answer to a SELECT as a pandas table, for work of one's own. Nothing can be changed by it.

        Parameters
        ----------
        sql : str
            One statement, with ``:name`` or ``?`` for parameters. Tables and views are told in ``db/README.md``.
        params : mapping or sequence, optional
            Values of the parameters.

        Returns
        -------
        pandas.DataFrame
            Whole numbers as nullable 64-bit integers, never through floats; text as strings; NULL as missing.
        """
        values: Any = ()
        if isinstance(params, Mapping):
            values = {name: bound(value) for name, value in params.items()}
        elif params is not None:
            values = tuple(bound(value) for value in params)
        with self._reading() as connection:
            if connection.dialect.name == "postgresql":
                from xmatch.store.asking_postgres import marks

                connection.exec_driver_sql("SET TRANSACTION READ ONLY")
                return reading.frame(connection, marks(sql), values)
            connection.exec_driver_sql("PRAGMA query_only = ON")
            try:
                return reading.frame(connection, sql, values)
            finally:
                connection.exec_driver_sql("PRAGMA query_only = OFF")

    def status(self) -> dict[str, object]:
        """Return where the store is and how much it holds."""
        counted = (schema.target, schema.run, schema.search, schema.row, schema.finding, schema.flux_limit)
        search = schema.search
        with self._reading() as connection:
            counts = [connection.execute(select(func.count()).select_from(table)).scalar_one() for table in counted]
            whole = select(func.count()).where(search.c.status == ReplyStatus.WHOLE.value)
            return {
                "store": self.name,
                "schema_version": schema.SCHEMA_VERSION,
                "size_bytes": self._size(connection),
                "targets": counts[0],
                "runs": counts[1],
                "searches": counts[2],
                "whole_searches": connection.execute(whole).scalar_one(),
                "rows": counts[3],
                "findings": counts[4],
                "limits": counts[5],
                "last_asked_at": connection.execute(select(func.max(search.c.asked_at))).scalar_one(),
            }

    def _size(self, connection: Connection) -> int:
        if isinstance(self.place, Path):
            return self.place.stat().st_size
        return int(connection.execute(text_of_sql("SELECT pg_database_size(current_database())")).scalar_one())

    # --- connections -------------------------------------------------------------------------------
    @contextmanager
    def _writing(self) -> Iterator[Connection]:
        if self.read_only:
            raise StoreError(f"{self.name} was opened read-only; open it without read_only to write")
        engine = self._open_engine().execution_options(**{WRITE: True})
        with translated(self.place), engine.begin() as connection:
            yield connection

    @contextmanager
    def writing(self) -> Iterator[Connection]:
        """A SQLAlchemy connection inside one transaction, for work of the room's own."""
        with self._writing() as connection:
            yield connection

    @contextmanager
    def reading(self) -> Iterator[Connection]:
        """A SQLAlchemy connection for questions of the room's own; what it raises is translated."""
        with self._reading() as connection:
            yield connection

    @contextmanager
    def _reading(self) -> Iterator[Connection]:
        with translated(self.place), self._open_engine().connect() as connection:
            yield connection

    @contextmanager
    def _driver_cursor(self) -> Iterator[tuple[Any, Dialect]]:
        """The driver's own cursor, for statements where a layer in between would cost as much as the answer."""
        engine = self._open_engine()
        with translated(self.place), closing(engine.raw_connection()) as pooled, closing(pooled.cursor()) as cursor:
            yield cursor, near.DIALECTS[engine.dialect.name]

    def _open_engine(self) -> Engine:
        if self._engine is None:
            raise StoreError(f"{self.name} was closed; open it again")
        return self._engine


def _now() -> str:
    return utc_text(datetime.now(UTC).replace(microsecond=0))
