"""The artificial study, importable by worker processes too, and a watch that listens."""

import sys
from pathlib import Path

import pytest

HERE = str(Path(__file__).parent)
if HERE not in sys.path:
    sys.path.insert(0, HERE)


class Listener:
    """Keeps what was said; raises KeyboardInterrupt once `stop_after` chunks are done."""

    def __init__(self, stop_after=None):
        self.notes, self.stages, self.done, self.stop_after = [], [], 0, stop_after

    def note(self, text):
        self.notes.append(text)

    def stage(self, name, total=None):
        self.stages.append((name, total))

    def advance(self, steps=1):
        self.done += steps
        if self.done == self.stop_after:
            raise KeyboardInterrupt


@pytest.fixture
def listener():
    return Listener


@pytest.fixture
def artificial():
    """Makes the artificial study; see artificial.py."""
    from artificial import artificial

    return artificial


@pytest.fixture(scope="session")
def undisturbed():
    """The findings of the artificial study, run in memory without a stop."""
    from artificial import artificial

    from farhold.study.campaign import run_campaign

    return run_campaign(artificial())
