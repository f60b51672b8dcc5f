"""``samesum watch``: every save is checked, and what changed is said at once."""

from __future__ import annotations

import os
import queue
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

MARSH = (Path(__file__).parents[2] / "sample_rulebooks" / "marsh_example.rulebook").read_text(encoding="utf-8")
PATIENCE = 60.0


class Watched:
    """A running ``samesum watch`` and what it said so far."""

    def __init__(self, file: Path, cache: Path) -> None:
        environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path), "XDG_CACHE_HOME": str(cache)}
        self.process = subprocess.Popen(
            [sys.executable, "-m", "samesum", "watch", str(file)],
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            text=True,
            env=environment,
        )
        self.lines: queue.Queue[str] = queue.Queue()
        threading.Thread(target=self._read, daemon=True).start()

    def _read(self) -> None:
        assert self.process.stdout is not None
        for line in self.process.stdout:
            self.lines.put(line.rstrip("\n"))

    def until(self, text: str) -> list[str]:
        """The lines up to the one that holds ``text``."""
        found: list[str] = []
        end = time.monotonic() + PATIENCE
        while time.monotonic() < end:
            try:
                found.append(self.lines.get(timeout=0.2))
            except queue.Empty:
                assert self.process.poll() is None, found
                continue
            if text in found[-1]:
                return found
        raise AssertionError(f"{text!r} was not said: {found}")


@pytest.fixture
def watched(tmp_path: Path) -> Iterator[Watched]:
    file = tmp_path / "tide.rulebook"
    file.write_text(MARSH, encoding="utf-8")
    running = Watched(file, tmp_path / "cache")
    yield running
    running.process.kill()
    running.process.wait()


def test_each_save_tells_what_changed(watched: Watched, tmp_path: Path) -> None:
    file = tmp_path / "tide.rulebook"
    assert "1 error" in " ".join(watched.until("Watching"))
    closed = MARSH.replace("salinity < 18 [ppt] and soil is one of peaty or organic", "salinity < 18 [ppt]")
    assert closed != MARSH
    file.write_text(closed, encoding="utf-8")
    said = watched.until("routes open to one project")
    assert any("− error · missing-condition" in line for line in said)
    assert any("One project, at least: 0 → " in line for line in said)

    file.write_text(closed.replace("quantity methane", "quantiy methane"), encoding="utf-8")
    said = watched.until("did you mean")
    assert any("cannot be checked" in line for line in said)

    # as many editors do: a new file takes the old one's place
    new = tmp_path / "tide.new"
    new.write_text(closed.replace("open each period", "fixed at validation"), encoding="utf-8")
    os.replace(new, file)
    said = watched.until("routes open to one project")
    assert any("− warning · choice-anew-each-period" in line for line in said)
    assert any(line.strip().startswith("Over the periods: ") for line in said)

    (tmp_path / "tide.review.yaml").write_text("decisions:\n  discount:\n    decision: accepted\n", encoding="utf-8")
    assert any("is accepted" in line for line in watched.until("1 accepted"))

    watched.process.send_signal(signal.SIGINT)
    assert watched.process.wait(PATIENCE) == 0


def test_a_file_that_is_not_there_is_said(tmp_path: Path) -> None:
    running = Watched(tmp_path / "absent.rulebook", tmp_path / "cache")
    assert running.process.wait(PATIENCE) == 2
