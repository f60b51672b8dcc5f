"""A rulebook's text as it was: ``REV:FILE`` by git, beside plain files."""

from __future__ import annotations

import subprocess
from dataclasses import dataclass
from pathlib import Path


@dataclass(frozen=True, slots=True)
class Former:
    """A text by git. ``says`` is what is wrong when there is no text; ``absent`` when the file is not in that
    revision."""

    text: str | None
    says: str = ""
    absent: bool = False


def is_revision(name: str) -> bool:
    """Whether a name means a file in a revision: it has a colon, and no file of that whole name is there."""
    revision, colon, file = name.partition(":")
    return bool(colon and revision and file) and not Path(name).exists()


def former_text(revision: str, file: Path) -> Former:
    """The text of ``file`` in a revision. Asks git where the file is (or would be), not where the user stands."""
    if revision.startswith("-"):
        return Former(None, f"`{revision}` is no revision of git")
    folder = next((each for each in file.resolve().parents if each.is_dir()), Path.cwd())
    try:
        inner = file.resolve().relative_to(folder).as_posix()
    except ValueError:
        return Former(None, f"{file} cannot be found in git")
    try:
        ran = subprocess.run(
            ["git", "cat-file", "blob", f"{revision}:./{inner}"],
            cwd=folder,
            capture_output=True,
            timeout=60,
            check=False,
        )
        if ran.returncode == 0:
            return Former(ran.stdout.decode("utf-8"))
        known = subprocess.run(
            ["git", "rev-parse", "--verify", "--quiet", f"{revision}^{{commit}}"],
            cwd=folder,
            capture_output=True,
            timeout=60,
            check=False,
        )
    except FileNotFoundError:
        return Former(None, "git is not installed, and a revision can only be read with it")
    except subprocess.TimeoutExpired:
        return Former(None, "git does not answer")
    except OSError as error:
        return Former(None, f"git cannot be run: {error.strerror or 'unknown reason'}")
    except UnicodeDecodeError:
        return Former(None, f"{file} was not UTF-8 text in {revision}")
    if known.returncode == 0 or (revision == "HEAD" and b"not a git repository" not in ran.stderr):
        # without any commit yet, HEAD names nothing, and every file is new
        return Former(None, f"{file} is not in {revision}", absent=True)
    inside = b"not a git repository" in ran.stderr
    return Former(None, f"{folder} is in no git repository" if inside else f"git knows no revision `{revision}`")
