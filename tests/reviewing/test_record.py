"""The review record: read with every mistake told, edited without disturbing it, written whole or not at all."""

from __future__ import annotations

import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
import yaml
from hypothesis import example, given
from hypothesis import strategies as st

from samesum.reviewing.record import VERDICTS, parse_record, standings
from samesum.reviewing.record_text import quoted, with_decision
from samesum.reviewing.whole_file import write_whole

WRITTEN = """\
# What the committee decided in spring.
decisions:
  # the easy one
  soil_carbon:
    decision: accepted      # unanimous
    reason: >-
      Both options are unbiased,
      and the choice is made once.
    by: A. Okafor
    when: 2026-03-04
    says: da1e68fe2da17165

  "methane/2":   # clause 7.4
    decision: to be closed
    reason: "the verifier says \\"no\\": # really"
# the end
"""


def test_a_record_is_read() -> None:
    record, problems = parse_record(WRITTEN, "a.review.yaml")
    assert problems == ()
    first, second = record.decisions
    assert (first.place, first.verdict, first.by, first.when) == ("soil_carbon", "accepted", "A. Okafor", "2026-03-04")
    assert first.reason == "Both options are unbiased, and the choice is made once."
    assert (second.place, second.verdict, second.reason) == (
        "methane/2",
        "to be closed",
        'the verifier says "no": # really',
    )


@pytest.mark.parametrize(
    ("text", "says", "place"),
    [
        ("decisions:\n  a:\n    decison: open\n", "`decison` is no field", (3, 5)),
        ("decisions:\n  a:\n    decision: acepted\n", "`acepted` is no decision", (3, 15)),
        ("decisions:\n  a:\n    reason: x\n", "the decision on `a` is missing", (2, 3)),
        ("decisions:\n  a: accepted\n", "has no fields", (2, 6)),
        ("decisions:\n  - a\n", "the id of a branch point is expected", (2, 3)),
        ("verdicts:\n  a:\n    decision: open\n", "`verdicts` is not known here", (1, 1)),
        ("decisions:\n  a:\n    decision: open\n    when: 4 March\n", "`4 March` is no date", (4, 11)),
        ("decisions:\n  a:\n    decision: open\n    reason: [x]\n", "is a text, not a list", (4, 13)),
        ("decisions:\n  a:\n    decision: open\n  a:\n    decision: open\n", "stands here a second time", (4, 3)),
        ("just words\n", "this is no review record", (1, 1)),
    ],
)
def test_every_mistake_is_told_with_its_place(text: str, says: str, place: tuple[int, int]) -> None:
    _, problems = parse_record(text, "a.review.yaml")
    assert len(problems) == 1
    assert says in problems[0].says
    assert (problems[0].span.line, problems[0].span.column) == place


def test_a_decision_is_in_force_as_long_as_the_text_is_the_same() -> None:
    record, _ = parse_record(WRITTEN, "a.review.yaml")
    now = standings(record, {"soil_carbon": "da1e68fe2da17165", "methane/2": "0"})
    assert [each.stale for each in now.values()] == ["", ""]
    assert now["soil_carbon"].accepted and not now["methane/2"].accepted
    later = standings(record, {"soil_carbon": "0000000000000000"})
    assert [each.stale for each in later.values()] == ["changed", "gone"]
    assert not later["soil_carbon"].accepted


def test_editing_changes_one_field_and_leaves_the_rest_as_it_is() -> None:
    edited, problems = with_decision(WRITTEN, "a", "methane/2", {"decision": "open", "by": "B. Duarte"})
    assert problems == ()
    old = '    decision: to be closed\n    reason: "the verifier says \\"no\\": # really"\n'
    new = '    decision: open\n    reason: "the verifier says \\"no\\": # really"\n    by: B. Duarte\n'
    assert edited == WRITTEN.replace(old, new)


def test_a_new_place_comes_after_the_last_and_before_what_follows() -> None:
    edited, problems = with_decision(WRITTEN, "a", "buffer", {"decision": "open"})
    assert problems == ()
    assert edited == WRITTEN.replace("# the end\n", "  buffer:\n    decision: open\n# the end\n")


def test_what_cannot_be_edited_is_left_alone() -> None:
    text = "decisions: {a: {decision: open}}\n"
    assert with_decision(text, "a", "a", {"decision": "accepted"})[0] == text
    edited, problems = with_decision(WRITTEN, "a", "soil_carbon", {"reason": "shorter"})
    assert edited == WRITTEN and "cannot be edited" in problems[0].says


def test_windows_line_ends_stay() -> None:
    text = WRITTEN.replace("\n", "\r\n")
    edited, _ = with_decision(text, "a", "buffer", {"decision": "open"})
    assert edited.count("\n") == edited.count("\r\n")
    assert edited.startswith(text[: text.index("# the end")])


texts = st.text(st.characters(exclude_categories=("Cs",)), max_size=30)
ids = st.from_regex(r"[^\W\d_]\w{0,8}(/[^\W\d_]\w{0,4})?", fullmatch=True)
remarks = st.sampled_from(["", "# a remark", "   # moved in", "\n"])


@given(
    st.lists(st.tuples(ids, st.sampled_from(VERDICTS), texts, remarks), max_size=4, unique_by=lambda each: each[0]),
    ids,
    st.sampled_from(VERDICTS),
    texts,
)
@example([], "no", "open", "\x85\u2028\ufeff \x00 = '\"")
@example([("a", "open", "x", "")], "a", "accepted", "\U000e0001 - [x]: #")
def test_any_text_goes_in_and_comes_out_and_remarks_stay(
    held: list[tuple[str, str, str, str]], place: str, verdict: str, reason: str
) -> None:
    text = "decisions:\n" if held else ""
    for id, decided, why, remark in held:
        text += f"{remark}\n  {quoted(id)}:\n    decision: {decided}\n    reason: {quoted(why)}\n"
    edited, problems = with_decision(text, "a", place, {"decision": verdict, "reason": reason})
    assert problems == ()
    expected = {id: {"decision": decided, "reason": why} for id, decided, why, _ in held}
    expected[place] = {"decision": verdict, "reason": reason}
    assert yaml.load(edited, Loader=yaml.BaseLoader) == {"decisions": expected}  # a reader that is not ours
    for line in text.splitlines():
        if line.lstrip().startswith("#"):
            assert line in edited.splitlines()


WRITER = """
import sys
from pathlib import Path
from samesum.reviewing.whole_file import write_whole
path = Path(sys.argv[1])
print("ready", flush=True)
while True:
    for letter in b"ab":
        write_whole(path, bytes([letter]) * 3_000_000)
"""


def test_a_kill_at_any_moment_leaves_one_file_whole(tmp_path: Path) -> None:
    path = tmp_path / "x.review.yaml"
    path.write_bytes(b"a" * 3_000_000)
    chance = random.Random(7)
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    kept = set()
    for _ in range(12):
        with subprocess.Popen(
            [sys.executable, "-c", WRITER, str(path)], stdout=subprocess.PIPE, env=environment
        ) as process:
            assert process.stdout is not None and process.stdout.readline() == b"ready\n"
            time.sleep(chance.uniform(0, 0.08))
            process.send_signal(signal.SIGKILL)
        found = path.read_bytes()
        assert len(found) == 3_000_000 and len(set(found)) == 1
        kept.add(found[:1])
    assert kept <= {b"a", b"b"}


def test_writing_keeps_permissions_and_follows_links(tmp_path: Path) -> None:
    real = tmp_path / "real.yaml"
    real.write_text("old")
    real.chmod(0o640)
    link = tmp_path / "link.yaml"
    link.symlink_to(real)
    write_whole(link, b"new")
    assert link.is_symlink() and real.read_text() == "new"
    assert real.stat().st_mode & 0o777 == 0o640
    assert [each.name for each in sorted(tmp_path.iterdir())] == ["link.yaml", "real.yaml"]


def test_a_failed_write_leaves_nothing_behind(tmp_path: Path) -> None:
    folder = tmp_path / "there.yaml"
    folder.mkdir()
    with pytest.raises(OSError):
        write_whole(folder, b"new")
    assert list(tmp_path.iterdir()) == [folder]
