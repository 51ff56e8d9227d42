"""Every exception of blankfield, in one tree.

::

    BlankfieldError                    exit 1   anything we foresaw
    ├── InputError                     exit 2   what the user gave cannot be used; nothing was changed
    │   ├── PositionError                       a sky position or its error
    │   ├── TargetError                         a target file or target option
    │   ├── FactError                           a catalog or class file
    │   ├── RangeError                          a number outside a formula's validity
    │   └── ConfigurationError                  an option or environment variable
    ├── StoreError                     exit 3   the store cannot be opened, read or written
    │   ├── StoreVersionError                   made by another schema version
    │   └── StoreBusyError                      another writer held it too long
    ├── ArchiveError                   exit 4   one question to one archive went wrong
    │   ├── UnansweredError                     no usable answer came: time-out, refusal, 5xx, 429, 403
    │   ├── MisreadError                        an answer came that must not be read as data
    │   └── TruncatedError                      the answer is cut by a row or size limit
    └── InterruptedLook                exit 130 the user stopped it; what was learnt is kept

A message has three parts: the value seen, what is allowed, what to do.
An archive that fails never raises out of a look: it becomes an outcome. The
archive errors travel only inside :mod:`xmatch.archives`.
"""

from __future__ import annotations


class BlankfieldError(Exception):
    """Anything that blankfield foresaw and can explain."""

    exit_code = 1


class InputError(BlankfieldError):
    """Something the user gave cannot be used; nothing was changed."""

    exit_code = 2


class PositionError(InputError):
    """A sky position or its error cannot be read without guessing, or is out of range."""


class TargetError(InputError):
    """A target file or a target option is incomplete, unknown or contradictory."""


class FactError(InputError):
    """A catalog or class file breaks the rules of its format."""


class RangeError(InputError):
    """A number lies outside the range in which a formula holds."""


class ConfigurationError(InputError):
    """An option or environment variable cannot be used."""


class StoreError(BlankfieldError):
    """The store cannot be opened, read or written."""

    exit_code = 3


class StoreVersionError(StoreError):
    """The store was made by another version of the schema."""


class StoreBusyError(StoreError):
    """Another process kept the store locked longer than we wait."""


class ArchiveError(BlankfieldError):
    """One question to one archive went wrong."""

    exit_code = 4


class UnansweredError(ArchiveError):
    """No usable answer came: time-out, refused connection, HTTP 5xx, 429 or 403.

    Parameters
    ----------
    message : str
        What was seen.
    retry_after_s : float or None
        Seconds the archive asked us to wait, when it said so.
    http_status : int or None
        HTTP status, when a status line came at all.
    at_host : bool
        Whether the host itself cannot be reached, whatever it is asked.
    """

    def __init__(
        self,
        message: str,
        *,
        retry_after_s: float | None = None,
        http_status: int | None = None,
        at_host: bool = False,
    ) -> None:
        super().__init__(message)
        self.retry_after_s = retry_after_s
        self.http_status = http_status
        self.at_host = at_host


class MisreadError(ArchiveError):
    """An answer came that must not be read as data: an error page, a cut stream, a changed column."""


class TruncatedError(ArchiveError):
    """The answer is cut by a row limit or a size limit."""


class InterruptedLook(BlankfieldError):
    """The user stopped a look; every search that was complete is in the store."""

    exit_code = 130
