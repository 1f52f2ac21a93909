"""Progress: nothing before the delay, plain lines after it, seconds when asked."""

import io
import time

import pytest

from farhold.interfaces.cli.options import Manner
from farhold.interfaces.cli.progress import BarWatch, LineWatch, watching
from farhold.watch import SILENT, Watch


class Terminal(io.StringIO):
    def isatty(self):
        return True


@pytest.fixture
def make(monkeypatch):
    monkeypatch.setenv("TERM", "xterm")
    made = []

    def build(kind, **options):
        stream = Terminal() if kind is BarWatch else io.StringIO()
        watch = kind(stream, **options)
        made.append(watch)
        return watch, stream

    yield build
    for watch in made:
        watch.close()


def test_short_work_says_nothing(make):
    watch, stream = make(LineWatch)
    watch.stage("pairing", 976)
    watch.advance(976)
    watch.close()
    assert stream.getvalue() == ""


def test_long_work_says_the_stage_after_the_delay(make):
    watch, stream = make(LineWatch, delay_s=0.01)
    watch.stage("pairing", 976)
    time.sleep(0.1)
    watch.stage("flying")
    assert stream.getvalue() == "pairing (976)\nflying\n"


def test_note_is_said_at_once(make):
    watch, stream = make(LineWatch)
    watch.note("compiling \x1b[31mkernels")
    assert stream.getvalue() == "compiling \\x1b[31mkernels\n"


def test_verbose_says_every_stage_with_its_seconds(make):
    watch, stream = make(LineWatch, verbose=True)
    watch.stage("pairing")
    watch.close()
    assert stream.getvalue().startswith("pairing: 0.")
    assert stream.getvalue().endswith(" s\n")


def test_bar_is_drawn_with_the_stage_and_taken_away(make):
    watch, stream = make(BarWatch, delay_s=60.0)
    watch.stage("[red]pairing[/red]", 10)
    watch.show()
    watch.advance(4)
    watch.close()
    assert "[red]pairing[/red]" in stream.getvalue()


def test_quiet_is_silent():
    with watching(Manner(quiet=True)) as watch:
        assert watch is SILENT


def test_watches_keep_the_protocol(make):
    assert isinstance(make(LineWatch)[0], Watch)
