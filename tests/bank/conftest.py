"""Banks made by hand."""

import shutil
import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).resolve().parent))

import bank_samples  # noqa: E402

from curvebank.bank.reader import Bank  # noqa: E402
from curvebank.bank.store import Store  # noqa: E402


@pytest.fixture(scope="session")
def empty_bank(tmp_path_factory):
    """An empty bank to copy: making one takes longer than most tests."""
    path = tmp_path_factory.mktemp("empty") / "bank.db"
    Store.create(path).close()
    return path


@pytest.fixture
def path(tmp_path):
    """Where the test's bank is."""
    return tmp_path / "bank.db"


@pytest.fixture
def store(path, empty_bank):
    """An empty bank, open for writing."""
    shutil.copy(empty_bank, path)
    with Store.open(path) as opened:
        yield opened


@pytest.fixture
def released(store, path):
    """A bank whose one pump is released, open for reading."""
    bank_samples.save(store, bank_samples.digitised(findings=[bank_samples.finding()]), release=True)
    with Bank(path) as bank:
        yield bank


@pytest.fixture
def pump(released):
    """The released pump."""
    return released.pump(bank_samples.KEY)
