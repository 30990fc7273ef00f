"""How far long work is, on a terminal; in a pipe nothing."""

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path


@contextmanager
def progress(count: int, doing: str) -> Iterator[Callable[[Path], None]]:
    """Show how far the work is, on a terminal; in a pipe nothing."""
    if not sys.stderr.isatty():
        yield lambda _: None
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeElapsedColumn

    columns = TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn()
    with Progress(
        *columns, TimeElapsedColumn(), console=Console(stderr=True), transient=True
    ) as shown:
        # One logbook has no steps to count, so that its bar only shows that work goes on.
        bar = shown.add_task(doing, total=count if count > 1 else None)

        def tell(path: Path) -> None:
            shown.update(bar, advance=1, description=path.name)

        yield tell
