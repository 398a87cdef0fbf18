"""Composing on all cores gives what composing one by one in plain Jinja2 gives, in the same order."""

import os
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from service.editions.many import AHEAD, CHUNK, Composers
from service.editions.render import Renderer
from service.errors import UnsafeText
from tests.bench import compose as bench


def message(week: int, reader: bench.Reader) -> bytes:
    """Top-level, so that another process finds it."""
    if reader.number < 0:
        raise UnsafeText("refused", [("note", "none", "why")])
    return bench.composed(week, reader)


def process(_shared: None, _item: int) -> int:
    return os.getpid()


def test_two_processes_give_what_one_gives_and_what_plain_jinja_gives() -> None:
    readers = bench.readers()[: 3 * CHUNK + 7]
    plain = Renderer(keep=0)
    expected = [bench.mailed(plain.render(bench.view_of(20, reader)), 20, reader) for reader in readers]
    for processes in (1, 2):
        with Composers(message, 20, processes) as composers:
            assert list(composers.each(readers)) == expected
            assert list(composers.each([])) == []


def test_only_a_few_chunks_are_taken_ahead() -> None:
    taken = 0

    def counted() -> Iterator[bench.Reader]:
        nonlocal taken
        for reader in bench.readers()[: 20 * CHUNK]:
            taken += 1
            yield reader

    with Composers(message, 20, 2) as composers:
        made = composers.each(counted())
        next(made)
        assert taken == 2 * AHEAD * CHUNK
        assert sum(1 for _ in made) == 20 * CHUNK - 1


@pytest.mark.parametrize("processes", [1, 2])
def test_an_error_comes_back_whole(processes: int) -> None:
    bad = bench.readers()[0]._replace(number=-1)
    with Composers(message, 20, processes) as composers, pytest.raises(UnsafeText) as caught:
        list(composers.each([bad]))
    assert caught.value.marks == (("note", "none", "why"),)


def test_processes_end_with_a_caller_that_is_killed() -> None:
    """Each holds the pipe that its caller was given, so that its end is seen when the last of them is gone."""
    program = (
        "import os, signal\n"
        "from service.editions.many import Composers\n"
        "from tests.service.editions.test_many import process\n"
        "with Composers(process, None, 2) as composers:\n"
        "    print(len({*composers.each(range(1000))} - {os.getpid()}), flush=True)\n"
        "    os.kill(os.getpid(), signal.SIGKILL)\n"
    )
    environment = os.environ | {"PYTHONPATH": str(Path(__file__).parents[3])}
    done = subprocess.run([sys.executable, "-c", program], env=environment, capture_output=True, text=True, timeout=60)
    assert int(done.stdout) >= 1
