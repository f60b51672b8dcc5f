"""Waiting for files to be saved, whichever way an editor saves."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from threading import Event

    from watchfiles import Change

Stamps = tuple[tuple[int, int, int] | None, ...]
SLOWEST = 1_000
"""Milliseconds until a save is seen where the system tells nothing of it, as on some network drives."""


def stamps(files: Sequence[Path]) -> Stamps:
    """What tells one state of the files from another: time, size and identity of each, None for one that is not
    there."""
    found: list[tuple[int, int, int] | None] = []
    for file in files:
        try:
            about = file.stat()
        except OSError:
            found.append(None)
        else:
            found.append((about.st_mtime_ns, about.st_size, about.st_ino))
    return tuple(found)


def saves(files: Sequence[Path], folder: Path, since: Stamps, stop: Event | None = None) -> Iterator[None]:
    """One item each time ``files`` in ``folder`` are another than before, beginning with ``since``, so that no save is
    missed while the watch is being set up. The folder is watched, not the files, because many editors write a new
    file and put it in the old one's place. Ends when ``stop`` is set."""
    from watchfiles import watch

    known = set(files)

    def concerns(_: Change, name: str) -> bool:
        return Path(name) in known

    for _ in watch(
        folder,
        watch_filter=concerns,
        debounce=60,
        step=15,
        stop_event=stop,
        recursive=False,
        rust_timeout=SLOWEST,
        yield_on_timeout=True,
    ):
        now = stamps(files)
        if now != since:
            since = now
            yield None
