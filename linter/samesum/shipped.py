"""Where the folders that come with samesum are: ``grammar`` and ``rules``."""

from __future__ import annotations

from pathlib import Path


def shipped_folder(name: str) -> Path:
    """The folder ``name`` inside the installed package, else at the top of the checkout.

    Raises FileNotFoundError when neither is there, which means a broken installation.
    """
    inside = Path(__file__).parent / name
    if inside.is_dir():
        return inside
    checkout = Path(__file__).parents[2] / name
    if checkout.is_dir():
        return checkout
    raise FileNotFoundError(f"samesum's own folder {name!r} is missing: install samesum again")
