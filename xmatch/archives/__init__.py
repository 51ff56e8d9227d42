"""Asking archives and judging what they answer. Absence of an answer is never a non-detection.

:mod:`~xmatch.archives.fleet` is the door: :func:`~xmatch.archives.fleet.ask` puts one question,
:func:`~xmatch.archives.fleet.ask_all` puts many at once, and both bring back a judged
:class:`~xmatch.records.Reply`. Behind it, one adapter per protocol builds the request, one transport
sends it, and one reader judges the raw bytes before any convenience class sees them.
"""
