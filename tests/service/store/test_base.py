"""The two kinds of transaction and the lock on arrivals, on both stores, between real processes."""

import multiprocessing
import os
import signal
from contextlib import closing
from multiprocessing.connection import Connection as Pipe

import pytest

from service.errors import StoreBusy, StoreDown
from service.store import network
from service.store.base import Store
from tests.builders import FOUNDED, a_district

FORK = multiprocessing.get_context("forkserver")


def hold_arrivals(url: str, pipe: Pipe) -> None:
    with Store.open(url).arrivals():
        pipe.send("held")
        pipe.recv()


def test_one_process_at_a_time_takes_rows_in(store: Store, store_url: str) -> None:
    ours, theirs = FORK.Pipe()
    other = FORK.Process(target=hold_arrivals, args=(store_url, theirs), daemon=True)
    other.start()
    assert ours.recv() == "held"
    with closing(Store.open(store_url, busy_s=1)) as impatient:
        with pytest.raises(StoreBusy), impatient.arrivals():
            pass
        os.kill(other.pid or 0, signal.SIGKILL)
        other.join()
        with impatient.arrivals():
            pass  # the lock went with the process that held it


def test_what_fails_inside_a_transaction_is_not_kept(store: Store) -> None:
    with pytest.raises(ZeroDivisionError), store.writing() as c:
        network.save_district(c, a_district(), FOUNDED) / 0
    with store.reading() as c:
        assert network.districts(c, FOUNDED) == []


def test_a_reader_sees_one_moment(store: Store) -> None:
    with store.reading() as c:
        assert network.districts(c, FOUNDED) == []
        with store.writing() as other:
            network.save_district(other, a_district(), FOUNDED)
        assert network.districts(c, FOUNDED) == []
    with store.reading() as c:
        assert network.districts(c, FOUNDED) == [a_district()]


@pytest.mark.parametrize("url", ["nonsense", "postgresql://nobody@127.0.0.1:1/none"])
def test_a_store_that_can_not_be_reached_says_so(url: str) -> None:
    with pytest.raises(StoreDown), closing(Store.open(url)) as store, store.reading():
        pass
