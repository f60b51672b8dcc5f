"""Waiting for a file to be saved, whichever way an editor saves."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from threading import Event

    from watchfiles import Change


def saves(files: frozenset[Path], folder: Path, stop: Event | None = None) -> Iterator[None]:
    """One item each time one of ``files`` in ``folder`` was written, put in place or taken away. The folder is
    watched, not the file, because many editors write a new file and put it in the old one's place. Ends
    when ``stop`` is set."""
    from watchfiles import watch

    def concerns(_: Change, name: str) -> bool:
        return Path(name) in files

    for _ in watch(folder, watch_filter=concerns, debounce=60, step=15, stop_event=stop, recursive=False):
        yield None
