"""What can go wrong on the way to an archive, in our own words."""

from __future__ import annotations

from datetime import UTC, datetime
from email.utils import parsedate_to_datetime

import requests

from xmatch.archives.wire import reason_of
from xmatch.errors import ArchiveError, MisreadError, UnansweredError


class AgainError(Exception):
    """A fault that may pass: try again, after ``retry_after_s`` when the archive named a time."""

    def __init__(self, fault: ArchiveError, retry_after_s: float | None = None) -> None:
        super().__init__(str(fault))
        self.fault = fault
        self.retry_after_s = retry_after_s


def retry_after_s(header: str | None, now: datetime) -> float | None:
    """Read a Retry-After header, in seconds or as an HTTP date (RFC 9110, section 10.2.3).

    Parameters
    ----------
    header : str or None
        The header's value.
    now : datetime
        The present, time-zone aware.

    Returns
    -------
    float or None
        Seconds to wait, never negative; None when there is no header or it cannot be read.
    """
    if header is None:
        return None
    text = header.strip()
    if text.isascii() and text.isdigit():
        return float(text)
    try:
        when = parsedate_to_datetime(text)
    except (TypeError, ValueError):
        return None
    if when.tzinfo is None:
        when = when.replace(tzinfo=UTC)
    return max(0.0, (when - now).total_seconds())


def busy(http_status: int, asked: float | None) -> AgainError:
    """The fault behind a 429 or 503, with the time the archive named."""
    what = "too many requests" if http_status == 429 else "service unavailable"
    when = "; it named no time" if asked is None else f"; it asks to wait {asked:g} s"
    fault = UnansweredError(
        f"HTTP {http_status}, {what}{when}; ask again later",
        retry_after_s=asked,
        http_status=http_status,
    )
    return AgainError(fault, asked)


def fault_of(
    fault: requests.RequestException, got: int, status: int | None, connect_s: float, read_s: float
) -> ArchiveError | AgainError:
    """Turn a fault of the client library into one of ours, or into a reason to try again."""
    reason = reason_of(fault)
    if isinstance(fault, requests.exceptions.SSLError):
        return UnansweredError(
            f"the connection is not secure: {reason}; check the certificates of this machine", at_host=True
        )
    if isinstance(fault, requests.exceptions.ProxyError):
        return UnansweredError(
            f"the proxy did not connect: {reason}; check HTTP_PROXY, HTTPS_PROXY and NO_PROXY", at_host=True
        )
    if isinstance(fault, requests.exceptions.ContentDecodingError):
        return MisreadError(f"the answer cannot be decompressed: {reason}; ask again later")
    if status is not None and isinstance(fault, requests.exceptions.ConnectionError) and _is_timeout(fault):
        return AgainError(
            UnansweredError(
                f"the answer stalled for {read_s:g} s after {got} bytes; ask again later", http_status=status
            )
        )
    if status is not None:
        return AgainError(MisreadError(f"the answer was cut after {got} bytes: {reason}; ask again"))
    if isinstance(fault, requests.exceptions.ConnectTimeout):
        return AgainError(UnansweredError(f"no connection within {connect_s:g} s; ask again later", at_host=True))
    if isinstance(fault, requests.exceptions.ReadTimeout):
        return AgainError(UnansweredError(f"time-out: connected, but nothing came for {read_s:g} s; ask again later"))
    if isinstance(fault, requests.exceptions.ConnectionError):
        return AgainError(
            UnansweredError(
                f"no connection: {reason}; check the network, or ask again later", at_host=_never_connected(fault)
            )
        )
    return UnansweredError(f"the question could not be sent: {reason}; check the address in the catalog file")


def _never_connected(fault: requests.RequestException) -> bool:
    """Whether no connection came about: the host's affair, whatever was asked."""
    inner = fault.args[0] if fault.args else None
    reason = getattr(inner, "reason", inner)
    return type(reason).__name__ in ("NewConnectionError", "NameResolutionError", "ConnectTimeoutError")


def _is_timeout(fault: requests.RequestException) -> bool:
    return any("ReadTimeout" in type(argument).__name__ for argument in fault.args)
