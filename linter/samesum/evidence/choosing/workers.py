"""Blocks of work on several cores, their answers in the order of the blocks.

By forked processes, which start at once with everything that was prepared and share no interpreter. Where processes
cannot be forked, one core does it all.
"""

from __future__ import annotations

import multiprocessing
import sys
from collections.abc import Callable, Iterator, Sequence
from multiprocessing.connection import Connection
from typing import TypeVar

Part = TypeVar("Part")
Answer = TypeVar("Answer")


def worked(parts: Sequence[Part], work: Callable[[Part], Answer], jobs: int) -> Iterator[tuple[Part, Answer]]:
    """Each part with its answer, in the order of the parts. What ``work`` raises is raised here."""
    jobs = min(jobs, len(parts))
    if jobs < 2 or sys.platform != "linux":
        for part in parts:
            yield part, work(part)
        return
    context = multiprocessing.get_context("fork")
    ends: list[Connection] = []
    processes = []
    try:
        for number in range(jobs):
            mine, theirs = context.Pipe(duplex=False)
            process = context.Process(target=_share, args=(parts[number::jobs], work, theirs), daemon=True)
            process.start()
            theirs.close()
            ends.append(mine)
            processes.append(process)
        for number, part in enumerate(parts):
            try:
                good, answer = ends[number % jobs].recv()
            except EOFError:
                raise OSError("a process that worked on projects was ended from outside") from None
            if not good:
                raise answer
            yield part, answer
    finally:
        for end in ends:
            end.close()
        for process in processes:
            process.terminate()
            process.join()


def _share(parts: Sequence[Part], work: Callable[[Part], Answer], end: Connection) -> None:
    """One process's parts; its answers, or what it ran into, go to the parent."""
    try:
        for part in parts:
            try:
                answer: tuple[bool, object] = (True, work(part))
            except (ArithmeticError, LookupError, RuntimeError, TypeError, ValueError, OSError) as error:
                answer = (False, error)
            end.send(answer)
    except (BrokenPipeError, KeyboardInterrupt):
        return
