"""The store: every question ever asked, every answer, and what was concluded, in one SQLite file.

:func:`xmatch.store.store.open_store` is the door. Searches are append-only: one is written whole or not
at all, and never changed; "current" is a view. The tables are a public contract, told column by column
in ``db/README.md``.
"""
