"""Puts the newer SQLite in place of the one that came with Python, where it is installed."""

import sys

# SQLite 3.7.0 to 3.51.2 can lose a committed transaction when a WAL is reset (sqlite.org/wal.html#walresetbug).
SAFE_SQLITE = (3, 51, 3)


def use_newer_sqlite() -> tuple[int, ...]:
    """Swap the module before anybody imports it; return the version in use."""
    try:
        import pysqlite3
    except ImportError:
        import sqlite3

        return sqlite3.sqlite_version_info
    sys.modules["sqlite3"] = pysqlite3
    sys.modules["sqlite3.dbapi2"] = pysqlite3.dbapi2
    return pysqlite3.sqlite_version_info
