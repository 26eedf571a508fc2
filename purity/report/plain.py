"""Plain tables of words: what the smaller commands print."""

from __future__ import annotations

from collections.abc import Sequence
from io import StringIO

from rich.console import Console
from rich.table import Table
from rich.text import Text


def table(titles: Sequence[str], rows: Sequence[Sequence[str]], *, width: int = 80) -> str:
    """Return rows under their titles; the last column takes the room that is left and wraps.

    Parameters
    ----------
    titles : sequence of str
    rows : sequence of sequences of str
    width : int

    Returns
    -------
    str
        Lines without trailing blanks, ended by a line feed.
    """
    out = StringIO()
    console = Console(
        file=out,
        width=width,
        color_system=None,
        force_terminal=False,
        markup=False,
        highlight=False,
        emoji=False,
    )
    grid = Table(box=None, expand=True, pad_edge=False, padding=(0, 2, 0, 0))
    for position, title in enumerate(titles):
        grid.add_column(title, ratio=1 if position == len(titles) - 1 else None)
    for row in rows:
        grid.add_row(*map(Text, row))
    console.print(grid)
    return "\n".join(line.rstrip() for line in out.getvalue().splitlines()) + "\n"
