"""What is being done, on standard error while it is a terminal."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager


@contextmanager
def shown() -> Iterator[Callable[[str], None]]:
    """A function to call with each step; silent where nobody watches."""
    if not sys.stderr.isatty():
        yield lambda _: None
        return
    from rich.console import Console

    with Console(stderr=True).status("reading") as status:
        yield lambda text: status.update(f"{text} (Ctrl-C stops and keeps the best so far)")
