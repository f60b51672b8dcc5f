"""One reader for all tests of this room: it remembers blocks, as an editor's does."""

from __future__ import annotations

from pathlib import Path

import pytest

from samesum.reading.read import Reader, make_reader


@pytest.fixture(scope="session")
def reader(tmp_path_factory: pytest.TempPathFactory) -> Reader:
    return make_reader(tmp_path_factory.mktemp("cache"))


@pytest.fixture(scope="session")
def samples() -> list[Path]:
    return sorted((Path(__file__).parents[2] / "sample_rulebooks").glob("*.rulebook"))
