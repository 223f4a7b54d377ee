"""Killed in mid-save, and many writers at once: nothing acknowledged is lost, nothing is saved twice, nothing is half there."""

import json
import random
import sqlite3
import subprocess
import sys
import threading
import time
from pathlib import Path

import bank_samples as make
import pytest

from curvebank.bank.reader import Bank
from curvebank.bank.store import Store
from curvebank.bank.verify import verify

HERE = str(Path(make.__file__).parent)

DIE_AT = """
import os, signal, sys
sys.path[:0] = {paths!r}
import bank_samples as make
from curvebank.bank.store import Store
store = Store.open({path!r})
seen = 0
def watch(sql):
    global seen
    seen += 1
    if seen == {step}:
        os.kill(os.getpid(), signal.SIGKILL)
store.connection.set_trace_callback(watch)
print(make.save(store, save_key="the one", release=True), flush=True)
print(seen, flush=True)
"""

SAVE_ON = """
import sys
sys.path[:0] = {paths!r}
import bank_samples as make
from curvebank.bank.store import Store
store = Store.open({path!r})
made = make.digitised()
for i in range(10_000):
    key, number = make.save(store, made, save_key=f"{name}-{{i}}", release=True)
    print(f"{name}-{{i}}", number, flush=True)
"""


def run(code, **more):
    """A fresh process."""
    return subprocess.Popen([sys.executable, "-c", code.format(paths=[HERE, *sys.path], **more)], stdout=subprocess.PIPE, text=True)


@pytest.fixture(scope="module")
def steps():
    """How many SQL statements one save with release runs, counted once."""
    return {}


@pytest.mark.parametrize("share", [0.02, 0.3, 0.6, 0.9, 0.99])
def test_killed_at_a_statement_nothing_is_half_saved(store, path, share, steps):
    """SIGKILL before a statement of the transaction; the retry with the same key saves exactly once."""
    store.close()
    if not steps:
        probe = path.with_name("probe.db")
        Store.create(probe).close()
        out = run(DIE_AT, path=str(probe), step=-1).communicate()[0].splitlines()
        steps["n"] = int(out[1])
        assert steps["n"] > 40
    done = run(DIE_AT, path=str(path), step=max(2, int(share * steps["n"])))
    assert done.communicate()[0] == "" and done.returncode == -9
    report = verify(path)
    assert report.ok and report.counts["revision"] == 0 and report.counts["curve"] == 0 and report.counts["blob"] == 0
    with Store.open(path) as again:
        assert make.save(again, save_key="the one", release=True) == (make.KEY, 1)
        assert make.save(again, save_key="the one", release=True) == (make.KEY, 1)
    assert verify(path).counts["revision"] == 1


def test_killed_at_random_no_acknowledged_save_is_lost(store, path):
    """Six kills of a process that saves as fast as it can; every printed save is there, each save key once."""
    store.close()
    rng = random.Random(5)
    acknowledged = []
    for name in "abcdef":
        process = run(SAVE_ON, path=str(path), name=name)
        assert process.stdout.readline()
        time.sleep(rng.uniform(0.0, 0.15))
        process.kill()
        acknowledged += [line.split()[0] for line in process.communicate()[0].splitlines() if line.endswith(tuple("0123456789"))]
    assert verify(path).ok
    raw = sqlite3.connect(path)
    kept = [key for (key,) in raw.execute("SELECT save_key FROM revision")]
    raw.close()
    assert len(kept) == len(set(kept)) and set(acknowledged) <= set(kept) and acknowledged


def test_many_writers_and_readers(store, path):
    """Four writers and four readers in threads: all saves kept, no lock error, no torn read."""
    make.save(store, release=True)
    store.close()
    saved, errors, reads = [], [], []
    stop = threading.Event()

    def write(name):
        try:
            with Store.open(path) as mine:
                for i in range(6):
                    saved.append(
                        mine.save(make.digitised(), make.RECIPE, make.SHEET, who=name, why="t", save_key=f"{name}{i}", release=i % 2 == 0)
                    )
        except BaseException as error:  # noqa: BLE001 - told to the test below
            errors.append(error)

    def read():
        try:
            while not stop.is_set():
                with Bank(path) as bank:
                    pump = bank.pump(make.KEY)
                    reads.append(len(pump.curves))
                    assert pump.head(50.0, 320.0) == pytest.approx(43.75)
        except BaseException as error:  # noqa: BLE001
            errors.append(error)

    writers = [threading.Thread(target=write, args=(f"w{i}",)) for i in range(4)]
    readers = [threading.Thread(target=read) for _ in range(4)]
    for thread in writers + readers:
        thread.start()
    for thread in writers:
        thread.join()
    stop.set()
    for thread in readers:
        thread.join()
    assert errors == [] and set(reads) == {5}
    assert sorted(number for _, number in saved) == list(range(2, 26))
    report = verify(path)
    assert report.ok and report.counts["revision"] == 25
    assert json.dumps(report.faults) == "[]"
