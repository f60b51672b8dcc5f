"""``samesum register --decide``: one decision of the review body, written beside the rulebook."""

from __future__ import annotations

import argparse
from collections.abc import Mapping
from datetime import date
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import shared

if TYPE_CHECKING:
    from samesum.reading.read import Reading
    from samesum.reviewing.places import Place


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
    known = _known_place(arguments.file, place)
    if known is None:
        return shared.UNUSABLE
    says = known.fingerprint
    fields = {"decision": verdict, "reason": arguments.reason, "by": arguments.by, "when": when, "says": says}
    return _write(arguments.file, known, fields)


def _is_day(text: str) -> bool:
    try:
        return date.fromisoformat(text).isoformat() == text
    except ValueError:
        return False


def _known_place(file: Path, place: str) -> Place | None:
    """The place as it is now; None when there is no such place, or nothing to decide there, which is then said."""
    from samesum.graph import build
    from samesum.reading.read import read_file
    from samesum.reading.words import nearest
    from samesum.reviewing.places import Source, places_of

    reading = read_file(file)
    if reading.model is None or any(problem.kind != "unit" for problem in reading.problems):
        shared.report(reading.problems)
        return None
    known = places_of(build(reading.model), Source.of(reading.text))
    if place not in known:
        close = nearest(place, known)
        hint = f"did you mean `{close}`?" if close else "`samesum register FILE --all` lists the ids"
        shared.refuse(f"{file}: there is no branch point or name `{place}`; {hint}")
        return None
    return known[place] if _can_be_decided(file, place, known, reading) else None


def _can_be_decided(file: Path, place: str, places: Mapping[str, Place], reading: Reading) -> bool:
    """Whether a decision there has an effect; says so where it has none. Somebody decides there, or the register has a
    row for it, or `check` has a finding on it; on the result there may be findings that need projects. What was decided
    before may be decided otherwise."""
    from samesum.reading.words import nearest
    from samesum.reviewing.record import read_record

    result = reading.model.result if reading.model is not None else None
    if places[place].kind != "declared" or (result is not None and result.name == place):
        return True
    if any(each.place == place for each in read_record(file)[0].decisions) or _has_findings(file, place, reading):
        return True
    close = nearest(place, [id for id, each in places.items() if each.kind != "declared"])
    hint = f"did you mean `{close}`?" if close else "`samesum register FILE --all` lists the places that can be decided"
    shared.refuse(f"{file}: `{place}` leaves nothing to anybody and has no finding, so nothing is to decide; {hint}")
    return False


def _has_findings(file: Path, place: str, reading: Reading) -> bool:
    """Whether `check` has a finding on a place; taken to be so where its rules cannot be read."""
    from samesum.examine import examine_reading
    from samesum.judging.rulebooks_rules import RulesFor
    from samesum.reading.read import default_cache_folder, make_reader

    chosen = RulesFor(make_reader(default_cache_folder())).rulebook(file)
    judged = examine_reading(reading, rules=chosen.rules).judged
    if chosen.problems or judged is None:
        return True
    told = {each.branch_point for each in judged.findings} | {each.branch_point for each in judged.doubts}
    return place in told


def _write(file: Path, place: Place, fields: dict[str, str]) -> int:
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
        text, problems = with_decision(text, str(path), place.id, fields)
    if problems:
        shared.report(problems)
        return shared.UNUSABLE
    mark = b"\xef\xbb\xbf" if raw.startswith(b"\xef\xbb\xbf") else b""
    try:
        write_whole(path, mark + text.encode())
    except OSError as error:
        return shared.refuse(f"{path} cannot be written: {error.strerror or 'unknown reason'}")
    shown = "its findings in `samesum check` say so, the register has no row for it"
    where = f"; {shown}" if place.kind == "declared" else ""
    shared.write_line(f"{path}: {place.id} is now `{fields['decision']}`{where}")
    return 0
