"""``samesum register --decide``: one decision of the review body, written beside the rulebook."""

from __future__ import annotations

import argparse
from datetime import date
from pathlib import Path

from samesum.cli import shared


def decide(arguments: argparse.Namespace) -> int:
    """Writes the decision; the rest of the record stays as it is."""
    from samesum.reading.words import listing, nearest
    from samesum.reviewing.record import VERDICTS

    place, verdict = arguments.decide
    verdict = " ".join(verdict.replace("-", " ").replace("_", " ").split())
    if verdict not in VERDICTS:
        close = nearest(verdict, VERDICTS)
        hint = f"did you mean `{close}`?" if close else f"a decision is {listing(VERDICTS)}"
        return shared.refuse(f"`{verdict}` is no decision; {hint}")
    if not arguments.by or not arguments.reason:
        return shared.refuse("a decision needs --reason WHY and --by NAME")
    when = arguments.on or date.today().isoformat()
    if not _is_day(when):
        return shared.refuse(f"`{when}` is no date; write it as 2026-05-31")
    fingerprint = _fingerprint(arguments.file, place)
    if fingerprint is None:
        return shared.UNUSABLE
    fields = {"decision": verdict, "reason": arguments.reason, "by": arguments.by, "when": when, "says": fingerprint}
    return _write(arguments.file, place, fields)


def _is_day(text: str) -> bool:
    try:
        return date.fromisoformat(text).isoformat() == text
    except ValueError:
        return False


def _fingerprint(file: Path, place: str) -> str | None:
    """What the place says now; None when there is no such place, which is then said."""
    from samesum.graph import build
    from samesum.reading.read import read_file
    from samesum.reading.words import nearest
    from samesum.reviewing.places import fingerprints

    reading = read_file(file)
    if reading.model is None or any(problem.kind != "unit" for problem in reading.problems):
        shared.report(reading.problems)
        return None
    known = fingerprints(build(reading.model), reading.text)
    if place not in known:
        close = nearest(place, known)
        hint = f"did you mean `{close}`?" if close else "`samesum register FILE --all` lists the ids"
        shared.refuse(f"{file}: there is no branch point or name `{place}`; {hint}")
        return None
    return known[place]


def _write(file: Path, place: str, fields: dict[str, str]) -> int:
    from samesum.reviewing.record import parse_record, record_path
    from samesum.reviewing.record_text import with_decision
    from samesum.reviewing.whole_file import write_whole

    path = record_path(file)
    try:
        raw = path.read_bytes() if path.exists() else b""
        text = raw.decode("utf-8-sig")
    except OSError as error:
        return shared.refuse(f"{path} cannot be read: {error.strerror or 'unknown reason'}")
    except UnicodeDecodeError:
        return shared.refuse(f"{path} is not UTF-8 text; save it as UTF-8 in your editor")
    _, problems = parse_record(text, str(path))
    if not problems:
        text, problems = with_decision(text, str(path), place, fields)
    if problems:
        shared.report(problems)
        return shared.UNUSABLE
    mark = b"\xef\xbb\xbf" if raw.startswith(b"\xef\xbb\xbf") else b""
    try:
        write_whole(path, mark + text.encode())
    except OSError as error:
        return shared.refuse(f"{path} cannot be written: {error.strerror or 'unknown reason'}")
    shared.write_line(f"{path}: {place} is now `{fields['decision']}`")
    return 0
