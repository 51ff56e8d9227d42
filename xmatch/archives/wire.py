"""What lies under the transport: sockets that a watch can cut, and requests sent elsewhere for the demo."""

from __future__ import annotations

import contextlib
import ipaddress
import socket
import threading
from types import TracebackType
from typing import Any
from urllib.parse import urlsplit, urlunsplit

import requests
from requests.adapters import HTTPAdapter
from urllib3.connection import HTTPConnection, HTTPSConnection
from urllib3.connectionpool import HTTPConnectionPool, HTTPSConnectionPool

_thread = threading.local()


class Watch:
    """Cuts the calling thread's socket after some seconds, from a thread of its own.

    Used as a context manager around one exchange. ``fired`` says whether it had to cut.
    """

    def __init__(self, seconds: float) -> None:
        self.fired = False
        self._lock = threading.Lock()
        self._socket: socket.socket | None = None
        self._timer = threading.Timer(seconds, self.cut)
        self._timer.daemon = True

    def __enter__(self) -> Watch:
        _thread.watch = self
        self._timer.start()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, fault: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._timer.cancel()
        _thread.watch = None
        with self._lock:
            self._socket = None

    def over(self, sock: socket.socket | None) -> None:
        """Watch over a socket; one that comes too late is cut at once."""
        with self._lock:
            self._socket = sock
            fired = self.fired
        if fired:
            self.cut()

    def cut(self) -> None:
        """Shut the socket down, so that the thread that reads it wakes up."""
        with self._lock:
            self.fired = True
            if self._socket is not None:
                # the plain method, for a TLS socket too: its own would drop state that the reader still uses
                with contextlib.suppress(OSError):
                    socket.socket.shutdown(self._socket, socket.SHUT_RDWR)


class _Watched:
    """Tells the thread's watch about the socket as soon as a request is on its way."""

    sock: Any

    def request(self, *args: Any, **kwargs: Any) -> None:
        super().request(*args, **kwargs)  # type: ignore[misc]
        watch: Watch | None = getattr(_thread, "watch", None)
        if watch is not None:
            watch.over(self.sock)


class _WatchedHTTP(_Watched, HTTPConnection):
    pass


class _WatchedHTTPS(_Watched, HTTPSConnection):
    pass


class _PoolHTTP(HTTPConnectionPool):
    ConnectionCls = _WatchedHTTP


class _PoolHTTPS(HTTPSConnectionPool):
    ConnectionCls = _WatchedHTTPS


_POOLS = {"http": _PoolHTTP, "https": _PoolHTTPS}


class ArchiveAdapter(HTTPAdapter):
    """Sends over watched connections, and to ``addresses`` instead of the archive where one is set."""

    def __init__(self, addresses: str | None) -> None:
        self.addresses = addresses
        super().__init__()

    def init_poolmanager(self, *args: Any, **kwargs: Any) -> None:
        super().init_poolmanager(*args, **kwargs)
        self.poolmanager.pool_classes_by_scheme = _POOLS

    def proxy_manager_for(self, proxy: str, **kwargs: Any) -> Any:
        manager = super().proxy_manager_for(proxy, **kwargs)
        if not proxy.lower().startswith("socks"):  # a SOCKS proxy needs connections of its own
            manager.pool_classes_by_scheme = _POOLS
        return manager

    def send(
        self,
        request: requests.PreparedRequest,
        stream: bool = False,
        timeout: Any = None,
        verify: Any = True,
        cert: Any = None,
        proxies: Any = None,
    ) -> requests.Response:
        if self.addresses is None:
            return super().send(request, stream, timeout, verify, cert, proxies)
        sent = request.copy()
        sent.url = instead_of(request.url or "", self.addresses)
        if is_loopback(urlsplit(self.addresses).hostname):
            proxies = {}
        response = super().send(sent, stream, timeout, verify, cert, proxies)
        # a redirect is relative to the archive's own address and must come through here again
        response.url, response.request = request.url or "", request
        return response


def instead_of(address: str, addresses: str) -> str:
    """Return the address under ``addresses`` that stands for an archive's own: host and path move into the path."""
    parts = urlsplit(address)
    return f"{addresses}/{parts.netloc}{urlunsplit(('', '', parts.path, parts.query, ''))}"


def is_loopback(host: str | None) -> bool:
    """Whether a host is this machine."""
    if host is None:
        return False
    if host == "localhost":
        return True
    try:
        return ipaddress.ip_address(host).is_loopback
    except ValueError:
        return False


def reason_of(fault: BaseException) -> str:
    """The innermost reason of a nested network fault, in a few words."""
    seen: set[int] = set()
    inner: BaseException = fault
    while id(inner) not in seen:
        seen.add(id(inner))
        nested = [getattr(inner, "reason", None), *inner.args, inner.__cause__, inner.__context__]
        inner = next((n for n in nested if isinstance(n, BaseException) and id(n) not in seen), inner)
    if isinstance(inner, socket.gaierror):
        return "the host name cannot be resolved"
    if isinstance(inner, OSError) and inner.strerror:
        return inner.strerror
    text = str(inner).split("\n")[0].strip()
    return text[:200] or type(inner).__name__
