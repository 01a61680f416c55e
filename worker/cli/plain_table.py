"""A table as every command draws it."""

from __future__ import annotations

from rich.box import SIMPLE_HEAD
from rich.table import Table


def plain_table(title: str) -> Table:
    """A table with a rule below its head and nothing else."""
    return Table(
        title=title,
        title_justify="left",
        title_style="bold",
        caption_justify="left",
        box=SIMPLE_HEAD,
        pad_edge=False,
    )
