"""The hooks for pre-commit, tried with the real tool on a repository made for it."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
import yaml

TOP = Path(__file__).parents[2]
MARSH = (TOP / "sample_rulebooks" / "marsh_example.rulebook").read_text(encoding="utf-8")
REPAIRED = (TOP / "sample_rulebooks" / "waste_heat_repaired.rulebook").read_text(encoding="utf-8")
MANIFEST = TOP / ".pre-commit-hooks.yaml"


class Repository:
    """A repository of rulebooks that uses our hooks."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder / "standards"
        self.folder.mkdir()
        # `samesum` as an installed one is found: a program on the PATH
        bin_folder = folder / "bin"
        bin_folder.mkdir()
        program = bin_folder / "samesum"
        program.write_text(f'#!/bin/sh\nexec "{sys.executable}" -m samesum "$@"\n', encoding="utf-8")
        program.chmod(0o755)
        names = {"GIT_AUTHOR_NAME": "A", "GIT_AUTHOR_EMAIL": "a@a.example", "GIT_COMMITTER_NAME": "A"}
        self.environment = {
            **{name: value for name, value in os.environ.items() if not name.startswith("GIT_")},
            **names,
            "GIT_COMMITTER_EMAIL": "a@a.example",
            "GIT_CONFIG_GLOBAL": os.devnull,
            "HOME": str(folder),
            "PATH": os.pathsep.join((str(bin_folder), os.environ["PATH"])),
            "PRE_COMMIT_HOME": str(folder / "pre-commit"),
            "PYTHONPATH": os.pathsep.join(sys.path),
            "XDG_CACHE_HOME": str(folder / "cache"),
        }
        self.run("git", "init", "-q")

    def run(self, *words: str) -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            words, cwd=self.folder, env=self.environment, capture_output=True, text=True, timeout=300, check=False
        )

    def write(self, name: str, text: str) -> None:
        (self.folder / name).write_text(text, encoding="utf-8")
        self.run("git", "add", name)

    def commit(self, *skip: str) -> subprocess.CompletedProcess[str]:
        return self.run("git", "commit", "-m", "a draft", *skip)


def hooks() -> list[dict[str, Any]]:
    found: list[dict[str, Any]] = yaml.safe_load(MANIFEST.read_text(encoding="utf-8"))
    return found


def configuration() -> str:
    """Our hooks as they stand, but run where they are installed: building an environment would ask the network."""
    local = [{**hook, "language": "system"} for hook in hooks()]
    return yaml.safe_dump({"repos": [{"repo": "local", "hooks": local}]})


@pytest.fixture
def repository(tmp_path: Path) -> Repository:
    made = Repository(tmp_path)
    made.write(".pre-commit-config.yaml", configuration())
    assert made.run(sys.executable, "-m", "pre_commit", "install").returncode == 0
    return made


def test_the_tool_takes_our_list_of_hooks(tmp_path: Path) -> None:
    words = [sys.executable, "-m", "pre_commit", "validate-manifest", str(MANIFEST)]
    environment = {**os.environ, "PRE_COMMIT_HOME": str(tmp_path)}
    assert subprocess.run(words, env=environment, capture_output=True, timeout=60, check=False).returncode == 0
    assert [hook["id"] for hook in hooks()] == ["samesum-check", "samesum-check-no-worse"]
    assert all(hook["language"] == "python" for hook in hooks()), "it brings its own environment along"


def test_a_clean_rulebook_goes_in_and_one_that_got_worse_does_not(repository: Repository) -> None:
    repository.write("heat.rulebook", REPAIRED)
    first = repository.commit()
    assert first.returncode == 0, first.stdout + first.stderr
    worse = REPAIRED + (
        "\nquantity unused [t], clause 99\n    choice by developer\n"
        "        option low\n            = 1 [t]\n        option high\n            = 2 [t]\n"
    )
    repository.write("heat.rulebook", worse)
    second = repository.commit()
    assert second.returncode == 1
    assert "! unused (clause 99): new: a choice by the developer" in second.stdout + second.stderr
    assert repository.run("git", "log", "--oneline").stdout.count("\n") == 1


def test_findings_stop_a_commit_and_other_files_are_none_of_its_business(repository: Repository) -> None:
    repository.write("notes.txt", "nothing")
    assert repository.commit().returncode == 0
    repository.write("tide.rulebook", MARSH)
    stopped = repository.commit()
    assert stopped.returncode == 1
    assert "missing-condition" in stopped.stdout + stopped.stderr


def test_a_draft_that_was_bad_already_may_stay_so_but_get_no_worse(repository: Repository) -> None:
    only_worse = yaml.safe_load(configuration())
    only_worse["repos"][0]["hooks"] = only_worse["repos"][0]["hooks"][1:]
    repository.write(".pre-commit-config.yaml", yaml.safe_dump(only_worse))
    repository.write("tide.rulebook", MARSH)
    assert repository.commit().returncode == 0
    finer = MARSH.replace("error 35 %", "error 30 %")
    repository.write("tide.rulebook", finer)
    assert repository.commit().returncode == 0
    looser = finer.replace("5 % to 20 %", "5 % to 30 %")
    repository.write("tide.rulebook", looser)
    assert repository.commit().returncode == 1
    only_worse["repos"][0]["hooks"][0]["args"] = ["--allow", "discount"]
    repository.write(".pre-commit-config.yaml", yaml.safe_dump(only_worse))
    allowed = repository.commit()
    assert allowed.returncode == 0, allowed.stdout + allowed.stderr
