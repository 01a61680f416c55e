"""Bring the database up to date and do nothing else, once, before processes that serve or work.

Run as ``python -m service.migrate``. Whatever else opens the database does it too; where many
processes start together, one that ends before them keeps them from waiting for each other.
"""

from __future__ import annotations

import sys
from contextlib import closing

from service import journal
from service.errors import SpanwrightError
from service.settings import settings_here
from service.store import schema
from service.store.session import open_store


def main() -> None:
    """Migrate; exit status 1 with the reason in words if that cannot be done."""
    try:
        settings = settings_here()
        journal.set_up(settings)
        with closing(open_store(settings)):
            sys.stdout.write(
                f"The database is at revision {schema.scripts().get_current_head()}.\n"
            )
    except SpanwrightError as error:
        raise SystemExit(f"The database was not brought up to date: {error}") from error


if __name__ == "__main__":
    main()
