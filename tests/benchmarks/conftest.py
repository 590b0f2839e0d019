"""One table of all timed comparisons at the end of the session."""

import pytest


@pytest.fixture(scope="session", autouse=True)
def one_table():
    yield
    import sys

    timed = sys.modules.get("timed")
    if timed is not None and timed.ROWS:
        print("\n\n" + timed.table())
        timed.write_table()
